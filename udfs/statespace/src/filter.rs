//! The augmented Kalman filter: one pass forward through a series, or through several side by side.
//!
//! The `d` diffuse elements (non-stationary start values and constant driver coefficients) are treated as
//! regression coefficients: Rosenberg (1973), *Annals of Economic and Social Measurement* 2; de Jong (1991),
//! *Annals of Statistics* 19, 1073-1083; DK 5.7. The ordinary filter runs on `d + 1` columns, the data and the response
//! to each element, and the rows are reduced orthogonally ([`crate::reduction`]). The covariance starts at
//! a multiple of I on the diffuse states ([`crate::System::start_scale`]), which changes nothing in the results but
//! keeps `F` positive when the irregular variance is zero and lets `P` settle within a few steps. Once the rows determine the
//! diffuse states, `collapse` takes their columns out.
//!
//! **Missing points** have weight zero: gain and inverse of `F` are zero there, and every formula goes on as it stands.
//!
//! **Settled.** When no element of `P` has moved by more than rounding, relative to the variances beside it, it is frozen and with it
//! `F` and the gain (DK 4.3.4), until a gap. A lane freezes on its own and does not wait for, or depend on, its neighbours; the work is
//! saved once all lanes are frozen.

mod collapse;
mod end;
mod pass;

pub(crate) use end::End;
pub(crate) use pass::{Keep, Pass};

use crate::data::Data;
use crate::dynamics::{Dynamics, add_column, packed_at};
use crate::lanes::{Mask, Real};

/// Why a likelihood could not be evaluated.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum FilterError {
    /// The data do not determine this diffuse element.
    Undetermined(usize),
    /// The innovation variance is not positive at this point.
    NotPositive(usize),
}

/// Relative change of `P` below which it counts as settled.
const SETTLED: f64 = 4.0 * f64::EPSILON;

/// Runs the filter over `data`; what each lane reached, or why it did not, stands in `pass`.
///
/// The log-likelihood is the diffuse one with `-(n - d)/2 log 2 pi`, n = observed points, d = diffuse elements
/// with identity on them in the state basis:
/// `l = -1/2 [(n - d) log 2 pi + sum log F_t + 2 sum log |R_ii| + rss]`.
#[inline(always)]
pub(crate) fn run<V: Real>(dynamics: &Dynamics<V>, data: &Data<V>, keep: Keep, pass: &mut Pass<V>) {
    run_from(dynamics, data, Start::Scale(dynamics.start_scale), keep, pass);
}

/// [`run`] from a state that is known up to its covariance: the prediction `a` of the first point and its packed covariance `p`. Nothing is
/// diffuse then: the system must have no diffuse states and the data no constant drivers.
pub(crate) fn resume<V: Real>(
    dynamics: &Dynamics<V>,
    data: &Data<V>,
    (a, p): (&[V], &[V]),
    keep: Keep,
    pass: &mut Pass<V>,
) {
    run_from(dynamics, data, Start::At(a, p), keep, pass);
}

/// What the filter starts from.
#[derive(Debug, Clone, Copy)]
pub(crate) enum Start<'a, V> {
    /// The start of the system, with this variance on its diffuse states. Any changes nothing but rounding.
    Scale(V),
    /// A prediction and its covariance.
    At(&'a [V], &'a [V]),
}

/// [`run`] and [`resume`].
#[inline(always)]
pub(crate) fn run_from<V: Real>(
    dynamics: &Dynamics<V>,
    data: &Data<V>,
    start: Start<'_, V>,
    keep: Keep,
    pass: &mut Pass<V>,
) {
    pass.prepare(dynamics, data, keep);
    match start {
        Start::Scale(scale) => dynamics.start_covariance(scale, &mut pass.p),
        Start::At(a, p) => {
            debug_assert_eq!(pass.elements, 0);
            pass.a.copy_from_slice(a);
            pass.p.copy_from_slice(p);
        }
    }
    let mut width = pass.elements + 1;
    for (j, &state) in dynamics.diffuse.iter().enumerate() {
        pass.a[state * width + 1 + j] = V::splat(1.0);
    }
    let may_settle = dynamics.driver_loads.is_empty();
    let mut settled = Mask::NONE;
    // Lanes whose F of the step before may be compared with.
    let mut comparable = Mask::NONE;
    let (mut f, mut previous_f) = (V::splat(1.0), V::zero());
    let (mut inverse, mut weight) = (V::zero(), V::zero());
    // log F is summed as the log of a product that is kept in range: one logarithm per several points.
    let (mut log_f, mut product) = (V::zero(), V::splat(1.0));
    for t in 0..pass.n {
        let alive = data.alive(t);
        let seen = data.seen[t];
        settled &= seen | !alive;
        let steady = may_settle && (settled | !alive).is_all::<V>();
        innovation(dynamics, data, t, width, pass);
        if !steady {
            predicted_variance(dynamics, data, t, pass);
            f = dynamics.h;
            for (state, load) in dynamics.loads(&data.drifting, t) {
                f += load * pass.pz[state];
            }
            let sound = f.above(V::zero()) & V::splat(f64::MAX).above(f);
            if !(sound | !seen).is_all::<V>() {
                pass.fail(seen & !sound, FilterError::NotPositive(t));
            }
            inverse = V::splat(1.0) / f;
            if !seen.is_all::<V>() {
                inverse = V::select(seen, inverse, V::zero());
            }
            weight = inverse.sqrt();
            for (gain, pz) in pass.gain.iter_mut().zip(&pass.pz) {
                *gain = *pz * inverse;
            }
            pass.keep_covariance(keep);
        }
        let (f_here, inverse_here, weight_here) = if seen.is_all::<V>() {
            (f, inverse, weight)
        } else {
            (
                V::select(seen, f, V::splat(1.0)),
                V::select(seen, inverse, V::zero()),
                V::select(seen, weight, V::zero()),
            )
        };
        product *= f_here;
        let beyond = product.above(V::splat(1e100)) | V::splat(1e-100).above(product);
        if !beyond.is_none() {
            log_f += V::select(beyond, product.in_lanes(beyond, f64::ln), V::zero());
            product = V::select(beyond, V::splat(1.0), product);
        }
        pass.keep_point(t, width, keep, (f, inverse_here, settled & seen));
        if keep >= Keep::Ends {
            let ending = alive & !data.alive(t + 1);
            if !ending.is_none() {
                pass.keep_ends(ending, width, f_here);
            }
        }
        let Pass { a, row, gain, .. } = &mut *pass;
        for (gain, columns) in gain.iter().zip(a.chunks_exact_mut(width)) {
            for (v, r) in columns.iter_mut().zip(row.iter()) {
                *v += *gain * *r;
            }
        }
        pass.reduction.push(&pass.row[..width], weight_here);
        dynamics.forward(&mut pass.a[..pass.m * width], width, &mut pass.spare);
        if !steady {
            let Pass { p, next, gain, pz, spare, m, .. } = &mut *pass;
            dynamics.predict(p, gain, pz, next, spare);
            if may_settle {
                let close = seen & comparable & !(f - previous_f).abs().above(f.times(SETTLED)) & !settled;
                if !close.is_none() {
                    settled |= unchanged(p, next, *m, close);
                }
            }
            pass.freeze(settled, alive);
            previous_f = f;
            comparable = seen;
        }
        if pass.reduction.at_block_end() {
            let ready = pass.may_collapse(t, data);
            if !ready.is_none() {
                settled &= !ready;
                comparable &= !ready;
                if pass.collapse(t + 1, ready) {
                    width = 1 + pass.elements - pass.states;
                }
            }
        }
    }
    log_f += product.in_lanes(Mask::all::<V>(), f64::ln);
    pass.finish(log_f);
}

/// Writes the innovation's data path and its response to the elements into `pass.row`.
#[inline(always)]
fn innovation<V: Real>(dynamics: &Dynamics<V>, data: &Data<V>, t: usize, width: usize, pass: &mut Pass<V>) {
    let Pass { a, row, .. } = pass;
    let row = &mut row[..width];
    row.fill(V::zero());
    row[0] = data.observed[t];
    for (state, load) in dynamics.loads(&data.drifting, t) {
        for (r, v) in row.iter_mut().zip(&a[state * width..(state + 1) * width]) {
            *r -= load * *v;
        }
    }
    let first = width - data.drivers.len();
    for (r, x) in row[first..].iter_mut().zip(&data.drivers) {
        *r -= x[t];
    }
}

/// Writes `P Z'` into `pass.pz`.
#[inline(always)]
fn predicted_variance<V: Real>(dynamics: &Dynamics<V>, data: &Data<V>, t: usize, pass: &mut Pass<V>) {
    let Pass { p, pz, .. } = pass;
    pz.fill(V::zero());
    for (state, load) in dynamics.loads(&data.drifting, t) {
        add_column(p, state, load, pz);
    }
}

/// Lanes of `among` in which no element of a packed covariance moved by more than rounding, relative to the variances beside it.
#[inline(always)]
pub(crate) fn unchanged<V: Real>(before: &[V], after: &[V], m: usize, among: Mask) -> Mask {
    let tolerance = V::splat(SETTLED * SETTLED);
    let mut same = among;
    for i in 0..m {
        for j in 0..=i {
            let moved = after[packed_at(i, j)] - before[packed_at(i, j)];
            let size = (after[packed_at(i, i)] * after[packed_at(j, j)]).abs();
            same &= !(moved * moved).above(tolerance * size);
        }
        if same.is_none() {
            return same;
        }
    }
    same
}

#[cfg(test)]
mod tests;
