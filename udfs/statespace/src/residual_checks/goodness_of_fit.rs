//! How good a fit is as a whole: R-squared against a random walk, and information criteria.
//!
//! For a series with a trend the usual R-squared is close to 1 whatever the model. Harvey (1989, 5.5)
//! compares the one-step errors with those of a random walk with drift instead, or with those of one whose
//! drift depends on the season: 0 = no better than that, below 0 = worse. (Equation numbers of H here
//! are quoted from memory.)
//!
//! Both compare sums: SSE over the n - d one-step errors, and the squared first differences around their
//! mean (or seasonal means). The two walks are structural models themselves, and their one-step errors, in
//! units of the variance of a step, have exactly those sums of squares: that is why unequal numbers of
//! terms are right here, and why every diffuse element (a driver, say) flatters the fit a little, as
//! in any regression.

/// SSE, the sum of squared one-step errors in units of the steady state: pev sum v_t^2 / F_t.
///
/// `errors`: one-step errors v_t (not standardised); `variances`: their variances F_t, same points. Points
/// without an error (missing, or a diffuse step) are NaN in either and are skipped.
///
/// The plain sum of v_t^2 would be ruled by the first few errors, made while the level is hardly known, and
/// by those after gaps: there F_t is large for reasons that say nothing about the model. So each squared
/// error is taken relative to its F_t and the sum is put back on the scale of pev, the prediction error
/// variance once the start has worn off (H 5.5). A drifting driver has no steady state and a gap may stand
/// near the end, so pev is the median of F_t over the last third of the errors (the lower one of an even
/// number): the limit of F_t where there is one, a typical F_t where there is none.
///
/// The unit is that of the model scale, squared. NaN without any error.
pub fn sum_of_squared_errors(errors: &[f64], variances: &[f64]) -> f64 {
    let pairs = || {
        let all = errors.iter().zip(variances).map(|(&v, &f)| (v, f));
        all.filter(|&(v, f)| v.is_finite() && f.is_finite() && f > 0.0)
    };
    let (count, squares) = pairs().fold((0_usize, 0.0), |(n, sum), (v, f)| (n + 1, sum + v * v / f));
    if count == 0 {
        return f64::NAN;
    }
    let mut late: Vec<f64> = pairs().skip(2 * count / 3).map(|(_, f)| f).collect();
    let middle = (late.len() - 1) / 2;
    let (_, pev, _) = late.select_nth_unstable_by(middle, f64::total_cmp);
    *pev * squares
}

/// R-squared against a random walk with drift, R_D^2 = 1 - SSE / sum (Delta y_t - mean Delta y)^2:
/// H (5.5.14).
///
/// `observed`: the series on the model scale (after a transform), NaN = missing. `sse`: of
/// [`sum_of_squared_errors`], same unit squared.
///
/// Only differences between neighbouring grid points that are both observed count. Where gaps leave fewer
/// of them than a complete series of as many observations would have, their sum is scaled up to the same
/// degrees of freedom. NaN where fewer than two differences are left, or where they are all the same.
pub fn r_squared_drift(observed: &[f64], sse: f64) -> f64 {
    r_squared_season(observed, sse, 1)
}

/// R-squared against a random walk whose drift depends on the season, R_S^2 = 1 - SSE / sum (Delta y_t - mean
/// Delta y in the season of t)^2: H (5.5.17).
///
/// `period` in steps; a fractional one is the caller's to round, since a season has to return to the same
/// grid points here. The rest is as in [`r_squared_drift`], with one mean for each season that has a
/// difference: NaN unless some season has two.
pub fn r_squared_season(observed: &[f64], sse: f64, period: usize) -> f64 {
    if period == 0 || !sse.is_finite() {
        return f64::NAN;
    }
    let observations = observed.iter().filter(|y| y.is_finite()).count();
    let largest = observed.iter().filter(|y| y.is_finite()).fold(0.0_f64, |m, y| m.max(y.abs()));
    let (mut squares, mut differences, mut means) = (0.0, 0_usize, 0_usize);
    for season in 0..period.min(observed.len()) {
        let of_season = || differences_of_season(observed, season, period);
        let (count, sum) = of_season().fold((0_usize, 0.0), |(n, sum), d| (n + 1, sum + d));
        let mean = sum / count as f64;
        squares += of_season().map(|d| (d - mean).powi(2)).sum::<f64>();
        differences += count;
        means += usize::from(count > 0);
    }
    // Differences of values carry the rounding of the values: a spread no larger than that is none.
    let rounding = differences as f64 * (4.0 * f64::EPSILON * largest).powi(2);
    if differences <= means || squares <= rounding {
        return f64::NAN;
    }
    let complete = (observations - 1 - means) as f64 / (differences - means) as f64;
    1.0 - sse / (squares * complete)
}

/// The differences y_{t+1} - y_t between observed neighbours with t = `season` modulo `period`.
fn differences_of_season(observed: &[f64], season: usize, period: usize) -> impl Iterator<Item = f64> + '_ {
    let steps = observed.iter().zip(observed.iter().skip(1)).map(|(before, after)| after - before);
    steps.skip(season).step_by(period).filter(|d| d.is_finite())
}

/// Akaike's criterion -2 l + 2 (w + d): DK 7.4; CK ch. 2.
///
/// `log_likelihood` l: the diffuse one with -(n - d)/2 log 2 pi; `estimated` w: estimated parameters, those
/// found at zero included; `diffuse` d: diffuse elements. It compares structures with the same diffuse
/// elements only: l depends on their basis and on the scale of the drivers. CK divide it by n.
pub fn aic(log_likelihood: f64, estimated: usize, diffuse: usize) -> f64 {
    -2.0 * log_likelihood + 2.0 * (estimated + diffuse) as f64
}

/// Schwarz's criterion -2 l + (w + d) log n with n observed points: DK 7.4. Otherwise as [`aic`].
pub fn bic(log_likelihood: f64, estimated: usize, diffuse: usize, observations: usize) -> f64 {
    -2.0 * log_likelihood + (estimated + diffuse) as f64 * (observations as f64).ln()
}
