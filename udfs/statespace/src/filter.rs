//! The augmented Kalman filter: one pass forward through a series.
//!
//! The `d` diffuse elements (non-stationary start values and constant driver coefficients) are treated as
//! regression coefficients: Rosenberg (1973), *Annals of Economic and Social Measurement* 2; de Jong (1991),
//! *Annals of Statistics* 19, 1073-1083; DK 5.7. The ordinary filter runs on `d + 1` columns, the data and the response
//! to each element, and the rows are reduced orthogonally ([`crate::reduction`]). The covariance starts at
//! a multiple of I on the diffuse states ([`System::start_scale`]), which changes nothing in the results but
//! keeps `F` positive when the irregular variance is zero and lets `P` settle within a few steps. Once the rows determine the
//! diffuse states, `collapse` takes their columns out.

mod collapse;

use crate::buffer::refill;
use crate::reduction::Reduction;
use crate::system::System;

/// One series on the model scale, as the filter reads it.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Data<'a> {
    /// Observations, NaN = missing, length n.
    pub(crate) observed: &'a [f64],
    /// Constant-coefficient drivers, each at least n long.
    pub(crate) drivers: &'a [Vec<f64>],
    /// Drivers that load on states, each at least n long.
    pub(crate) drifting: &'a [Vec<f64>],
}

/// How much of the pass is kept.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd)]
pub(crate) enum Keep {
    /// Nothing: the likelihood only.
    Likelihood,
    /// Gains and innovations: what the score needs.
    Gains,
    /// Also the predicted covariance of each step.
    Covariances,
    /// Also the predicted columns: what state smoothing needs.
    Everything,
}

/// Why a likelihood could not be evaluated.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum FilterError {
    /// The data do not determine this diffuse element.
    Undetermined(usize),
    /// The innovation variance is not positive at this point.
    NotPositive(usize),
}

/// Buffers and results of one pass; reused from pass to pass without allocation.
#[derive(Debug, Clone, Default)]
pub(crate) struct Pass {
    pub(crate) n: usize,
    pub(crate) m: usize,
    /// Diffuse elements d.
    pub(crate) elements: usize,
    /// First point whose columns no longer hold the diffuse states; n + 1 when they were never taken in.
    pub(crate) collapsed_at: usize,
    /// `m x (diffuse states)`: what each unit of their posterior moves in the predicted state at that point.
    pub(crate) bridge: Vec<f64>,
    /// Set when a series turned out too nearly singular for it: columns then stay open.
    pub(crate) keep_open: bool,
    /// Observed points.
    pub(crate) observed: usize,
    pub(crate) log_likelihood: f64,
    /// Innovation variance per point; NaN where missing.
    pub(crate) f: Vec<f64>,
    /// `n x (d + 1)`: the innovation's data path and its response to each element still open. Where the point is missing,
    /// the same with zero in place of the observation.
    pub(crate) rows: Vec<f64>,
    /// `n x m`: `P_t Z' / F_t`.
    pub(crate) gains: Vec<f64>,
    /// `n x m x m` predicted covariances (from [`Keep::Covariances`]).
    pub(crate) covariances: Vec<f64>,
    /// `n x m x (d + 1)` predicted columns ([`Keep::Everything`]); at each point, `m` rows of [`Pass::width`].
    pub(crate) columns: Vec<f64>,
    /// Columns after the last point: prediction of n + 1.
    pub(crate) a: Vec<f64>,
    /// Covariance after the last point: prediction of n + 1.
    pub(crate) p: Vec<f64>,
    pub(crate) reduction: Reduction,
    pz: Vec<f64>,
    row: Vec<f64>,
    before: Vec<f64>,
}

/// Relative change of `P` below which it counts as settled.
const SETTLED: f64 = 4.0 * f64::EPSILON;

/// Runs the filter over `data`.
///
/// The log-likelihood is the diffuse one with `-(n - d)/2 log 2 pi`, n = observed points, d = diffuse elements
/// with identity on them in the state basis:
/// `l = -1/2 [(n - d) log 2 pi + sum log F_t + 2 sum log |R_ii| + rss]`.
pub(crate) fn run(system: &System, data: Data<'_>, keep: Keep, pass: &mut Pass) -> Result<(), FilterError> {
    run_from(system, data, Start::Scale(system.start_scale()), keep, pass)
}

/// [`run`] from a state that is known up to its covariance: the prediction `a` of the first point and its covariance `p`. Nothing is diffuse then:
/// the system must have no diffuse states and the data no constant drivers.
pub(crate) fn resume(
    system: &System,
    data: Data<'_>,
    (a, p): (&[f64], &[f64]),
    keep: Keep,
    pass: &mut Pass,
) -> Result<(), FilterError> {
    run_from(system, data, Start::At(a, p), keep, pass)
}

/// What the filter starts from.
#[derive(Debug, Clone, Copy)]
enum Start<'a> {
    /// The start of the system, with this variance on its diffuse states. Any changes nothing but rounding.
    Scale(f64),
    /// A prediction and its covariance.
    At(&'a [f64], &'a [f64]),
}

/// [`run`] and [`resume`].
fn run_from(
    system: &System,
    data: Data<'_>,
    start: Start<'_>,
    keep: Keep,
    pass: &mut Pass,
) -> Result<(), FilterError> {
    let (n, m) = (data.observed.len(), system.states);
    let d = system.diffuse.len() + data.drivers.len();
    let stride = d + 1;
    let mut width = stride;
    pass.prepare(n, m, d, keep);
    match start {
        Start::Scale(scale) => system.start_covariance(scale, &mut pass.p),
        Start::At(a, p) => {
            debug_assert_eq!(d, 0);
            pass.a.copy_from_slice(a);
            pass.p.copy_from_slice(p);
        }
    }
    for (j, &state) in system.diffuse.iter().enumerate() {
        pass.a[state * width + 1 + j] = 1.0;
    }
    let steady_possible = system.driver_loads.is_empty();
    let mut settled = false;
    // log F is summed as the log of a product that is kept in range: one logarithm per several points.
    let (mut log_f, mut product) = (0.0, 1.0_f64);
    let mut previous_f = f64::NAN;
    for t in 0..n {
        let y = data.observed[t];
        let Pass { a, p, pz, row, before, .. } = pass;
        row.truncate(width);
        row.fill(0.0);
        system.for_loads(data.drifting, t, |state, load| {
            for (r, v) in row.iter_mut().zip(&a[state * width..(state + 1) * width]) {
                *r -= load * v;
            }
        });
        let missing = y.is_nan();
        if !missing {
            row[0] += y;
        }
        for (k, x) in data.drivers.iter().enumerate() {
            row[width - data.drivers.len() + k] -= x[t];
        }
        let f = if settled && !missing {
            previous_f
        } else {
            pz.fill(0.0);
            system.for_loads(data.drifting, t, |state, load| {
                for (r, v) in pz.iter_mut().zip(&p[state * m..(state + 1) * m]) {
                    *r += load * v;
                }
            });
            let mut f = system.h;
            system.for_loads(data.drifting, t, |state, load| f += load * pz[state]);
            f
        };
        if keep >= Keep::Covariances {
            pass.covariances[t * m * m..(t + 1) * m * m].copy_from_slice(p);
        }
        if keep == Keep::Everything {
            pass.columns[t * m * stride..][..m * width].copy_from_slice(&a[..m * width]);
        }
        if missing {
            if keep >= Keep::Gains {
                pass.f[t] = f64::NAN;
                pass.rows[t * stride..][..width].copy_from_slice(row);
                pass.gains[t * m..(t + 1) * m].fill(0.0);
            }
            settled = false;
        } else {
            if !(f > 0.0 && f.is_finite()) {
                return Err(FilterError::NotPositive(t));
            }
            pass.observed += 1;
            product *= f;
            if !(1e-100..1e100).contains(&product) {
                log_f += product.ln();
                product = 1.0;
            }
            let inverse = 1.0 / f;
            for (state, &g) in pz.iter().enumerate() {
                if g != 0.0 {
                    let gain = g * inverse;
                    for (v, r) in a[state * width..(state + 1) * width].iter_mut().zip(row.iter()) {
                        *v += gain * r;
                    }
                }
            }
            pass.reduction.push(row, inverse.sqrt());
            if keep >= Keep::Gains {
                pass.f[t] = f;
                pass.rows[t * stride..][..width].copy_from_slice(row);
                for (k, g) in pass.gains[t * m..(t + 1) * m].iter_mut().zip(pz.iter()) {
                    *k = g * inverse;
                }
            }
            if !settled {
                if steady_possible {
                    before.copy_from_slice(p);
                }
                for (state, &g) in pz.iter().enumerate() {
                    let gain = g * inverse;
                    for (v, r) in p[state * m..(state + 1) * m].iter_mut().zip(pz.iter()) {
                        *v -= gain * r;
                    }
                }
            }
        }
        system.forward(&mut a[..m * width], width);
        if !settled {
            system.propagate(p);
            system.disturb(p);
            if steady_possible && !missing && (f - previous_f).abs() <= SETTLED * f {
                settled = unchanged(before, p, m);
            }
        }
        previous_f = if missing { f64::NAN } else { f };
        let states = system.diffuse.len();
        if !missing && width == stride && pass.may_collapse(t, states) {
            width = stride - states;
            pass.collapse(t + 1, states);
            (settled, previous_f) = (false, f64::NAN);
        }
    }
    log_f += product.ln();
    pass.reduction.finish().map_err(FilterError::Undetermined)?;
    let free = pass.observed as f64 - d as f64;
    pass.log_likelihood = -0.5
        * (free * std::f64::consts::TAU.ln()
            + log_f
            + 2.0 * pass.reduction.log_diagonal()
            + pass.reduction.rss());
    if pass.log_likelihood.is_finite() { Ok(()) } else { Err(FilterError::NotPositive(n)) }
}

/// True when no element of `P` moved by more than rounding, relative to the variances beside it.
fn unchanged(before: &[f64], after: &[f64], m: usize) -> bool {
    (0..m).all(|i| {
        (0..=i).all(|j| {
            let size = (after[i * m + i] * after[j * m + j]).sqrt();
            (after[i * m + j] - before[i * m + j]).abs() <= SETTLED * size
        })
    })
}

impl Pass {
    /// Width of the row and of the columns at `t`: the data and the elements still open.
    #[inline]
    pub(crate) fn width(&self, t: usize) -> usize {
        1 + self.elements - if t >= self.collapsed_at { self.reduction.eliminated() } else { 0 }
    }

    /// The kept row at `t`.
    #[inline]
    pub(crate) fn row(&self, t: usize) -> &[f64] {
        &self.rows[t * (self.elements + 1)..][..self.width(t)]
    }

    /// The predicted columns of one state at `t`.
    #[inline]
    pub(crate) fn state_columns(&self, t: usize, state: usize) -> &[f64] {
        let width = self.width(t);
        &self.columns[t * self.m * (self.elements + 1) + state * width..][..width]
    }

    /// Position of a constant driver's column after the last point.
    pub(crate) fn driver_column(&self, driver: usize, drivers: usize) -> usize {
        self.width(self.n) - drivers + driver
    }

    fn prepare(&mut self, n: usize, m: usize, d: usize, keep: Keep) {
        let width = d + 1;
        (self.n, self.m, self.elements, self.observed) = (n, m, d, 0);
        self.collapsed_at = n + 1;
        refill(&mut self.a, m * width);
        refill(&mut self.p, m * m);
        refill(&mut self.pz, m);
        refill(&mut self.row, width);
        refill(&mut self.before, m * m);
        refill(&mut self.bridge, m * d);
        // The kept steps are overwritten in full by the pass: only their length matters.
        if keep >= Keep::Gains {
            self.f.resize(n, 0.0);
            self.rows.resize(n * width, 0.0);
            self.gains.resize(n * m, 0.0);
        }
        if keep >= Keep::Covariances {
            self.covariances.resize(n * m * m, 0.0);
        }
        if keep == Keep::Everything {
            self.columns.resize(n * m * width, 0.0);
        }
        self.reduction.reset(d);
    }
}

#[cfg(test)]
mod tests;
