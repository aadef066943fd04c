//! What a fit answers with: plain vectors on the grid of the series, in the units stated on each field.

/// One component along the grid: its smoothed value and the standard error of that value.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct State {
    /// Estimate at each grid point.
    pub value: Vec<f64>,
    /// Standard error at each grid point, same unit as `value`.
    pub std_error: Vec<f64>,
}

/// Smoothed components of one series; every vector has one element per grid point of the history.
///
/// Units: without a transform all are in the data's unit and add up (slope: per step). With `log` and `log1p`
/// level, fitted, lower and upper are in the data's unit, slope is growth per step (0.01 = 1 %), the rest are factors
/// (1.12 = 12 % up) that multiply up (log1p: of one plus the value). With Box-Cox level, fitted, lower and upper are in the
/// data's unit, the rest on the transformed scale, where they add up.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Components {
    /// Level of the trend, present whenever the structure has a trend.
    pub level: Option<State>,
    /// Slope of the trend per step, where there is one.
    pub slope: Option<State>,
    /// Sum of all seasonal patterns.
    pub seasonal: Option<State>,
    /// Stochastic cycle.
    pub cycle: Option<State>,
    /// Stationary autoregression.
    pub autoregression: Option<State>,
    /// Effect of each driver, constant ones first, then drifting ones.
    pub effects: Vec<State>,
    /// Coefficient of each driver at each point (same order as `effects`), model scale.
    pub coefficients: Vec<State>,
    /// Observed minus fitted (log: observed over fitted); NaN where missing.
    pub irregular: Vec<f64>,
    /// The smoothed signal: what the series would show without its irregular.
    pub fitted: Vec<f64>,
    /// Interval of the signal at the coverage asked for.
    pub lower: Vec<f64>,
    /// Upper end of that interval.
    pub upper: Vec<f64>,
    /// Auxiliary residual of the observation as a t-value (outlier); NaN where undefined.
    pub outlier_t: Vec<f64>,
    /// Auxiliary residual of the level's disturbance as a t-value (shift between this point and the next,
    /// reported at the first point that shows it); NaN where undefined.
    pub shift_t: Vec<f64>,
}

/// Forecast of one series; every vector has `horizon` elements.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Forecast {
    /// Expected value on the data's scale (corrected for the transform).
    pub expected: Vec<f64>,
    /// Standard deviation of the observation to come, data's scale.
    pub std_error: Vec<f64>,
    /// Lower end of the prediction interval (exact quantile of the transformed Gaussian).
    pub lower: Vec<f64>,
    /// Upper end of the prediction interval.
    pub upper: Vec<f64>,
    /// Expected sum of steps 1..=step.
    pub total_expected: Vec<f64>,
    /// Lower end of that sum's interval, from the joint covariance of the steps.
    pub total_lower: Vec<f64>,
    /// Upper end of that sum's interval.
    pub total_upper: Vec<f64>,
    /// The components' own forecasts (`irregular`, `fitted`, `lower`, `upper`, residuals are left empty).
    pub parts: Components,
}

/// One parameter of a fit.
#[derive(Debug, Clone, PartialEq)]
pub struct Parameter {
    /// Its name in `known`: `irregular`, `level`, `slope`, `season`, `<driver>`, `slope_damping`, ...
    pub name: String,
    /// Value; variances in squared model-scale units (data's unit squared, or log units squared). NaN for a damping or
    /// period whose component has no variance and so shapes nothing.
    pub value: f64,
    /// Standard error of the value; NaN where it was given, sits at zero, or is not determined.
    pub std_error: f64,
    /// True when it was given by the request and not estimated.
    pub known: bool,
}

/// How well a fit describes its series.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Diagnostics {
    /// Diffuse log-likelihood with -(n - d)/2 log 2 pi, of the transformed data (no Jacobian).
    pub log_likelihood: f64,
    /// -2 l + 2 (w + d): DK 7.4.
    pub aic: f64,
    /// -2 l + (w + d) log n.
    pub bic: f64,
    /// Observed points.
    pub n: usize,
    /// Missing points on the grid between first and last observation.
    pub missing: usize,
    /// Diffuse elements d.
    pub diffuse: usize,
    /// Estimated parameters w.
    pub estimated: usize,
    /// The optimiser met its stopping rule.
    pub converged: bool,
    /// Likelihood evaluations spent.
    pub evaluations: usize,
    /// Ljung-Box statistic of the standardised one-step errors over `q_lags` lags.
    pub q: f64,
    /// Lags in `q`.
    pub q_lags: usize,
    /// Its p-value.
    pub q_p: f64,
    /// Heteroskedasticity: squared errors of the last third over the first third.
    pub h: f64,
    /// Its two-sided p-value.
    pub h_p: f64,
    /// Skewness of the standardised errors.
    pub skewness: f64,
    /// Two-sided p-value of the skewness against 0.
    pub skewness_p: f64,
    /// Kurtosis (3 = normal).
    pub kurtosis: f64,
    /// Two-sided p-value of the kurtosis against 3.
    pub kurtosis_p: f64,
    /// Bowman-Shenton statistic of normality.
    pub normality: f64,
    /// Its p-value.
    pub normality_p: f64,
    /// 1 - SSE / SSE of a random walk with drift (model scale).
    pub r_squared: f64,
    /// 1 - SSE / SSE of a seasonal random walk with drift; NaN without a season.
    pub r_squared_season: f64,
}
