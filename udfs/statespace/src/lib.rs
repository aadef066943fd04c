//! Structural time series models as pure numbers.
//!
//! A series goes in as a slice of `f64` (NaN = missing) on an even grid, and out come level, slope,
//! season, driver effects, forecasts and checks, each with its uncertainty. This crate knows nothing of
//! Arrow, SQL, files or clocks.
//!
//! The way through the crate follows the job:
//!
//! 1. [`Request`] says what is wanted; `choose` checks it and settles what was left to decide.
//! 2. [`structure`] turns the settled [`structure::Structure`] into a [`system::System`]
//!    (`y_t = Z_t a_t + e_t`, `a_{t+1} = T a_t + n_t`), one component a file; [`Op`] is a block of `T`.
//!    [`GeneralForm`] makes one from matrices instead.
//! 3. `filter` runs it forward with the diffuse elements as extra columns, which `collapse` once the data tell
//!    them apart, `smoother` backward.
//! 4. `estimate` climbs the likelihood with the `score` and the average information.
//! 5. [`fit`] ties these together; a [`Fit`] answers with [`Components`], [`Forecast`], [`Diagnostics`].
//!
//! Sources, cited on the functions as DK, H and CK: Durbin & Koopman (2012), *Time Series Analysis by
//! State Space Methods*, 2nd ed.; Harvey (1989), *Forecasting, Structural Time Series Models and the
//! Kalman Filter*; Commandeur & Koopman (2007), *An Introduction to State Space Time Series Analysis*.

mod backward;
mod box_cox;
mod buffer;
pub mod calendar;
mod choose;
mod components;
mod data;
mod derivatives;
mod dynamics;
mod error;
mod estimate;
mod evaluation;
mod filter;
mod fit;
mod forecast;
mod general;
mod information;
mod instructions;
mod kernel;
mod lanes;
mod likelihood;
mod many;
mod normal_law;
mod objective;
mod one_step;
pub mod quantile;
mod reduction;
mod request;
pub mod residual_checks;
mod results;
mod scaling;
mod score;
mod smoother;
mod standing;
mod starts;
pub mod structure;
mod system;
mod totals;
mod transform;

pub use choose::check;
pub use components::LONGEST_HORIZON;
pub use error::{BadRequest, Trouble};
pub use evaluation::{Evaluation, EvaluationError};
pub use fit::{Fit, fit};
pub use general::{GeneralFit, GeneralForm, MOST_STATES};
pub use instructions::Instructions;
pub use likelihood::{Likelihood, Likelihoods};
pub use many::fit_many;
pub use objective::Workspace;
pub use one_step::OneStep;
pub use request::{Request, SeasonRequest, Series, TransformRequest};
pub use results::{Components, Diagnostics, Forecast, Parameter, State};
pub use standing::{LastPoint, Standing};
pub use system::{Op, ProperStart, SharedNoise, System};
pub use transform::Transform;
