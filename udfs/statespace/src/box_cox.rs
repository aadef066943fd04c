//! The power of a Box-Cox transform by maximum likelihood.
//!
//! Box & Cox (1964), *JRSS B* 26, 211-252, eqs. (8)-(9): the likelihood of `(y^lambda - 1) / (lambda g^(lambda - 1))`, `g` the geometric
//! mean, is comparable between powers. With `d` diffuse elements it is a likelihood of `n - d` contrasts, whose scale goes in as the power `n - d`.
//! The structure is settled before and stays; the maximum over powers from 0 to 1 is found by golden section (Kiefer 1953,
//! *Proc. AMS* 4), each point being the maximum over all other parameters.

use crate::choose::Choice;
use crate::error::Trouble;
use crate::fit;
use crate::objective::Workspace;
use crate::request::{Request, Series};
use crate::transform::Transform;

/// Width of the bracket that is left.
const NEAR: f64 = 5e-3;

/// The power between 0 and 1 that makes the series likeliest.
///
/// # Errors
/// As [`crate::fit()`], where no power gives a fit.
pub(crate) fn power(
    series: &Series,
    request: &Request,
    choice: &Choice,
    workspace: &mut Workspace,
) -> Result<f64, Trouble> {
    let logs: Vec<f64> = series.observed.iter().filter(|v| !v.is_nan()).map(|v| v.ln()).collect();
    let mean_log = logs.iter().sum::<f64>() / logs.len() as f64;
    let mut trouble = None;
    let mut profile = |power: f64| -> f64 {
        let choice = Choice { transform: Transform::BoxCox(power), ..choice.clone() };
        match fit::fit_as(series, request, &choice, workspace) {
            Ok(fit) => {
                let found = fit.diagnostics();
                found.log_likelihood + (found.n as f64 - found.diffuse as f64) * (power - 1.0) * mean_log
            }
            Err(error) => {
                trouble = Some(error);
                f64::NEG_INFINITY
            }
        }
    };
    let ratio = 0.5 * (5.0_f64.sqrt() - 1.0);
    let (mut low, mut high) = (0.0, 1.0);
    let ends = [(0.0, profile(0.0)), (1.0, profile(1.0))];
    let (mut a, mut b) = (high - ratio * (high - low), low + ratio * (high - low));
    let (mut at_a, mut at_b) = (profile(a), profile(b));
    while high - low > NEAR {
        if at_a >= at_b {
            (high, b, at_b) = (b, a, at_a);
            a = high - ratio * (high - low);
            at_a = profile(a);
        } else {
            (low, a, at_a) = (a, b, at_b);
            b = low + ratio * (high - low);
            at_b = profile(b);
        }
    }
    let inside = if at_a >= at_b { (a, at_a) } else { (b, at_b) };
    // The ends are powers of their own, the logarithm and no transform: they win where they are as good.
    let (power, best) = ends.into_iter().fold(inside, |best, end| if end.1 >= best.1 { end } else { best });
    match trouble {
        Some(trouble) if best == f64::NEG_INFINITY => Err(trouble),
        _ => Ok(power),
    }
}
