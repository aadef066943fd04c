//! Any linear Gaussian system with one observation per step, given as matrices.
//!
//! `y_t = d + Z_t a_t + e_t`, `e_t ~ N(0, h)`; `a_{t+1} = c + T a_t + R n_t`, `n_t ~ N(0, Q)`; `a_1 ~ N(a1, P1)`, diffuse where `P1` is
//! absent (DK eqs. 3.1, 4.1 and 5.1). A `NULL` in `Z` is the value of a driver, a `NULL` on the diagonal of `h` or `Q` a variance to
//! estimate, a `NULL` on the diagonal of `P1` a state with a diffuse start. The path that the constants `a1`, `c` and `d` make on their own is taken
//! off the observations and put back, so that filter, smoother, score and estimation are those of the named structures.

mod assembly;
mod check;

use crate::error::Trouble;
use crate::estimate;
use crate::evaluation::{Evaluation, EvaluationError};
use crate::fit::{ROUNDING, examine, fill_drivers, reproduces};
use crate::objective::{Objective, Workspace};
use crate::quantile::normal_quantile;
use crate::request::{Request, Series};
use crate::results::{Parameter, State};
use crate::scaling::power_of_two;
use crate::smoother::Functional;

/// Most states of a system given as matrices.
pub const MOST_STATES: usize = 64;

/// The matrices; `None` stands for NULL. `m` states, `g` disturbances.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct GeneralForm {
    /// `Z`, length m; each `None` is the value of the next driver.
    pub z: Vec<Option<f64>>,
    /// `T`, m x m row-major.
    pub t: Vec<f64>,
    /// `R`, m x g row-major.
    pub r: Vec<f64>,
    /// Irregular variance; `None` = estimated.
    pub h: Option<f64>,
    /// `Q`, g x g row-major; `None` on the diagonal = estimated.
    pub q: Vec<Option<f64>>,
    /// `a1`, length m, or empty for zeros.
    pub a1: Vec<f64>,
    /// `P1`, m x m row-major; `None` on the diagonal = diffuse; empty = all of it diffuse.
    pub p1: Vec<Option<f64>>,
    /// `c`, length m, or empty for zeros.
    pub c: Vec<f64>,
    /// `d`.
    pub d: f64,
    /// Names of the drivers that stand in `Z`, in order.
    pub drivers: Vec<String>,
}

/// What a general system says about one series. Vectors have one element per grid point.
#[derive(Debug, Clone, PartialEq)]
pub struct GeneralFit {
    /// Smoothed states, in their order.
    pub states: Vec<State>,
    /// Smoothed signal `d + Z_t a_t`.
    pub fitted: Vec<f64>,
    /// Its interval at the coverage asked for.
    pub lower: Vec<f64>,
    /// Upper end of that interval.
    pub upper: Vec<f64>,
    /// Observed less fitted; NaN where missing.
    pub irregular: Vec<f64>,
    /// Variances: `h`, then the diagonal of `Q` as `q_1`, `q_2` …
    pub variances: Vec<Parameter>,
    /// Diffuse log-likelihood with `-(n - d)/2 log 2 pi`, identity on the diffuse states.
    pub log_likelihood: f64,
    /// Observed points.
    pub n: usize,
    /// Diffuse states.
    pub diffuse: usize,
    /// The estimation met its stopping rule.
    pub converged: bool,
    /// Likelihood evaluations that took.
    pub evaluations: usize,
}

impl GeneralForm {
    /// Number of states m.
    pub fn states(&self) -> usize {
        self.z.len()
    }

    /// Number of disturbances g.
    pub fn disturbances(&self) -> usize {
        if self.r.is_empty() { 0 } else { self.r.len() / self.states().max(1) }
    }

    /// Diffuse states, ascending.
    fn diffuse(&self) -> Vec<usize> {
        let m = self.states();
        (0..m).filter(|&i| self.p1.is_empty() || self.p1[i * m + i].is_none()).collect()
    }

    /// Fits one series: estimates the variances left open, then smooths. `series.drifting_drivers` holds the drivers that stand in `Z`;
    /// observations may end in missing points, whose states are forecasts then. `coverage`, between 0 and 1 (0.9 = 90 %), is the probability
    /// with which the interval from [`GeneralFit::lower`] to [`GeneralFit::upper`] holds the signal.
    ///
    /// # Errors
    /// [`Trouble`] says what is wrong with the series, or why the system cannot be fitted to it. The form must have passed
    /// [`Self::check`].
    pub fn fit(
        &self,
        series: &Series,
        coverage: f64,
        workspace: &mut Workspace,
    ) -> Result<GeneralFit, Trouble> {
        let open = usize::from(self.h.is_none()) + self.q.iter().filter(|q| q.is_none()).count();
        match examine(&series.observed) {
            // A system that is known in full has something to say about a constant too.
            Err(Trouble::Constant { .. }) if open == 0 => {}
            other => other?,
        }
        let request = Request { drifting_drivers: self.drivers.clone(), ..Request::default() };
        let (filled, unknown) = fill_drivers(series, &request, &series.observed)?;
        let seen = filled.observed.iter().filter(|v| !v.is_nan()).count();
        let needed = self.diffuse().len() + open + usize::from(open > 0);
        if seen < needed {
            return Err(Trouble::TooShort { needed, got: seen });
        }
        let (path, offsets) = self.path_of_constants(&filled);
        if offsets.iter().any(|offset| !offset.is_finite()) {
            return Err(Trouble::Numerical {
                what: "what a1, c and d make on their own leaves the range of double precision along the series: t grows too fast",
            });
        }
        let rest: Vec<f64> = filled.observed.iter().zip(&offsets).map(|(y, o)| y - o).collect();
        let squares = rest.iter().filter(|v| !v.is_nan()).map(|v| v * v).sum::<f64>();
        let unit = power_of_two((squares / seen as f64).sqrt());
        let (model, known) = self.model(unit);
        let working = Series { observed: rest.iter().map(|v| v / unit).collect(), ..filled };
        let trouble = |error| self.trouble_of(error);
        let mut objective = Objective::new(model.clone(), &working, workspace);
        let estimate = estimate::maximise(&mut objective, &known, &working.observed).map_err(trouble)?;
        let evaluation = Evaluation::new(model, &estimate.values, working).map_err(trouble)?;
        let largest = series.observed.iter().filter(|v| !v.is_nan()).fold(0.0_f64, |a, v| a.max(v.abs()));
        if open > 0 && reproduces(&evaluation, ROUNDING * largest, unit) {
            return Err(Trouble::ExactFit);
        }
        Ok(self.answer(
            &evaluation,
            &estimate,
            &known,
            (&path, &offsets),
            (unit, coverage),
            (series, &unknown),
        ))
    }

    /// States and signal along the grid that `a1`, `c` and `d` make without any disturbance.
    fn path_of_constants(&self, series: &Series) -> (Vec<Vec<f64>>, Vec<f64>) {
        let (m, n) = (self.states(), series.observed.len());
        let diffuse = self.diffuse();
        let mut state: Vec<f64> = (0..m)
            .map(|i| if diffuse.contains(&i) { 0.0 } else { self.a1.get(i).copied().unwrap_or(0.0) })
            .collect();
        let (mut path, mut offsets) = (Vec::with_capacity(n), Vec::with_capacity(n));
        for t in 0..n {
            let mut drivers = series.drifting_drivers.iter();
            let mut signal = self.d;
            for (z, a) in self.z.iter().zip(&state) {
                signal += z.unwrap_or_else(|| drivers.next().map_or(0.0, |x| x[t])) * a;
            }
            offsets.push(signal);
            path.push(state.clone());
            state = (0..m)
                .map(|i| {
                    let moved: f64 = (0..m).map(|j| self.t[i * m + j] * state[j]).sum();
                    moved + self.c.get(i).copied().unwrap_or(0.0)
                })
                .collect();
        }
        (path, offsets)
    }

    fn answer(
        &self,
        evaluation: &Evaluation,
        estimate: &estimate::Estimate,
        known: &[Option<f64>],
        (path, offsets): (&[Vec<f64>], &[f64]),
        (unit, coverage): (f64, f64),
        (series, unknown): (&Series, &[bool]),
    ) -> GeneralFit {
        let (m, n) = (self.states(), series.observed.len());
        let mut functionals: Vec<Functional> = (0..m).map(|i| Functional::States(vec![(i, 1.0)])).collect();
        functionals.push(Functional::Signal);
        let mut smoothed = evaluation.smooth(&functionals).functionals;
        let signal = smoothed.pop().unwrap_or_default();
        let states = smoothed
            .into_iter()
            .enumerate()
            .map(|(i, s)| State {
                value: s.mean.iter().zip(path).map(|(x, constants)| x * unit + constants[i]).collect(),
                std_error: s.variance.iter().map(|v| v.sqrt() * unit).collect(),
            })
            .collect();
        let z = normal_quantile(0.5 + 0.5 * coverage);
        let at = |t: usize, sign: f64| {
            let value = signal.mean[t] * unit + offsets[t] + sign * z * signal.variance[t].sqrt() * unit;
            if unknown[t] { f64::NAN } else { value }
        };
        let end = |sign: f64| (0..n).map(|t| at(t, sign)).collect::<Vec<f64>>();
        let fitted = end(0.0);
        let mut variances = Vec::new();
        for (i, spec) in evaluation.model().parameters().iter().enumerate() {
            variances.push(Parameter {
                name: spec.name.clone(),
                value: estimate.values[i] * unit * unit,
                std_error: estimate.std_errors[i] * unit * unit,
                known: known[i].is_some(),
            });
        }
        let g = self.disturbances();
        for j in 0..g {
            let name = format!("q_{}", j + 1);
            if !variances.iter().any(|v| v.name == name) {
                let value = self.q[j * g + j].unwrap_or(f64::NAN);
                variances.push(Parameter { name, value, std_error: f64::NAN, known: true });
            }
        }
        variances.sort_by_key(|v| v.name.strip_prefix("q_").and_then(|j| j.parse::<usize>().ok()));
        let (seen, diffuse) = (evaluation.observed(), evaluation.diffuse_elements());
        GeneralFit {
            irregular: series.observed.iter().zip(&fitted).map(|(y, f)| y - f).collect(),
            states,
            lower: end(-1.0),
            upper: end(1.0),
            fitted,
            variances,
            log_likelihood: evaluation.log_likelihood() - (seen as f64 - diffuse as f64) * unit.ln(),
            n: seen,
            diffuse,
            converged: estimate.converged,
            evaluations: estimate.evaluations,
        }
    }

    fn trouble_of(&self, error: EvaluationError) -> Trouble {
        match error {
            EvaluationError::Undetermined(element) => {
                Trouble::UndeterminedState { state: self.diffuse().get(element).map_or(element, |i| i + 1) }
            }
            EvaluationError::ExactFit => Trouble::ExactFit,
            EvaluationError::NotPositive | EvaluationError::NotStationary => Trouble::Numerical {
                what: "the likelihood cannot be evaluated: a prediction has no variance (h and q zero where nothing else is left), or values leave the range of double precision",
            },
        }
    }
}
