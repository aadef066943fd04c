//! Where estimation starts: a coarse grid of signal-to-noise ratios, each at its own best overall scale.
//!
//! Multiplying all variances by `s` changes the likelihood in closed form: it is best at `s = rss / (n - d)` (the concentrated
//! likelihood, DK 2.10.2). So every point of the grid costs one evaluation without derivatives and stands for a
//! whole ray. The best points become starts: one where all parameters are variances, more where a cycle or an
//! autoregression makes several optima likely.

use crate::estimate::{Answer, EXACT, Question};
use crate::evaluation::EvaluationError;
use crate::objective::{Objective, Workspace};
use crate::request::Series;
use crate::structure::{Link, Model, Role};

/// Ratios to the irregular: irregular, level, slope, season, driver.
const RATIOS: [[f64; 5]; 6] = [
    [1.0, 0.1, 1e-3, 1e-3, 1e-3],
    [1.0, 1.0, 1e-2, 1e-2, 1e-2],
    [1.0, 0.01, 1e-4, 1e-4, 1e-4],
    [0.05, 1.0, 0.1, 0.05, 1e-2],
    [1.0, 1e-3, 0.01, 1e-3, 1e-3],
    [0.1, 0.3, 1e-4, 0.3, 1e-3],
];

/// One point of the grid.
#[derive(Debug, Clone)]
struct Point {
    values: Vec<f64>,
    /// Which combination of shapes it has.
    shape: usize,
    /// At the best scale; minus infinity where it could not be evaluated.
    log_likelihood: f64,
}

/// The grid of starts, evaluated point by point.
#[derive(Debug, Clone)]
pub(crate) struct Starts {
    points: Vec<Point>,
    /// Point that is asked about.
    at: usize,
    /// The open variances, to be brought to their best scale; empty where known ones fix the scale.
    scaled: Vec<usize>,
    /// Mean square of the series' first differences.
    pub(crate) scale: f64,
    /// How many starts are worth a climb.
    most: usize,
    several_shapes: bool,
    trouble: EvaluationError,
}

impl Starts {
    /// The grid of a model for a series.
    pub(crate) fn new(model: &Model, known: &[Option<f64>], observed: &[f64]) -> Self {
        let scale = difference_variance(observed);
        let shapes = shape_grid(model);
        let rescale = !known.iter().flatten().any(|v| *v > 0.0) || only_shapes_known(model, known);
        let open = |&i: &usize| known[i].is_none() && is_variance(model, i);
        let points = RATIOS
            .iter()
            .flat_map(|ratios| shapes.iter().enumerate().map(move |(shape, values)| (ratios, shape, values)))
            .map(|(ratios, shape, values)| Point {
                values: point(model, known, *ratios, scale, values),
                shape,
                log_likelihood: f64::NEG_INFINITY,
            })
            .collect();
        // A cycle or an autoregression has optima of its own for each period and sign; a damped slope seldom has.
        let several = model
            .parameters()
            .iter()
            .any(|p| matches!(p.role, Role::Cycle | Role::Autoregression | Role::General));
        Self {
            points,
            at: 0,
            scale,
            scaled: if rescale { (0..known.len()).filter(open).collect() } else { Vec::new() },
            most: if several { 4 } else { 1 },
            several_shapes: shapes.len() > 1,
            trouble: EvaluationError::NotPositive,
        }
    }

    /// The points of the grid.
    pub(crate) fn grid(&self) -> impl Iterator<Item = &[f64]> {
        self.points.iter().map(|point| point.values.as_slice())
    }

    /// True when no point has been evaluated.
    pub(crate) fn untouched(&self) -> bool {
        self.at == 0
    }

    /// The next point to be evaluated.
    pub(crate) fn ask(&self) -> Option<Question<'_>> {
        self.points.get(self.at).map(|point| Question { values: &point.values, derivatives: false })
    }

    /// Takes the likelihood at that point.
    pub(crate) fn tell(&mut self, answer: Result<Answer<'_>, EvaluationError>) {
        let Some(point) = self.points.get_mut(self.at) else { return };
        self.at += 1;
        let answer = match answer {
            Ok(answer) => answer,
            Err(error) => {
                self.trouble = error;
                return;
            }
        };
        if answer.rss <= answer.degrees * EXACT {
            self.trouble = EvaluationError::ExactFit;
            self.points.clear();
            return;
        }
        point.log_likelihood = answer.log_likelihood;
        if !self.scaled.is_empty() && answer.rss > 0.0 && answer.degrees > 0.0 {
            let s = answer.rss / answer.degrees;
            point.log_likelihood -= 0.5 * (answer.degrees * s.ln() + answer.rss / s - answer.rss);
            for &i in &self.scaled {
                point.values[i] *= s;
            }
        }
    }

    /// Starts in order of promise, natural units.
    ///
    /// # Errors
    /// When no point of the grid could be evaluated, or the series is fitted exactly; the last reason.
    pub(crate) fn best(&mut self) -> Result<Vec<Vec<f64>>, EvaluationError> {
        self.points.retain(|point| point.log_likelihood > f64::NEG_INFINITY);
        self.points.sort_by(|a, b| b.log_likelihood.total_cmp(&a.log_likelihood));
        let mut starts: Vec<Vec<f64>> = Vec::new();
        let mut taken: Vec<usize> = Vec::new();
        for point in &self.points {
            // With shapes, starts of different shape: optima lie apart in period and damping.
            if self.several_shapes && taken.contains(&point.shape) {
                continue;
            }
            taken.push(point.shape);
            starts.push(point.values.clone());
            if starts.len() == self.most {
                break;
            }
        }
        if starts.is_empty() { Err(self.trouble) } else { Ok(starts) }
    }
}

/// True when the model, with an irregular and nothing that drifts, reproduces the series to rounding. `rounding`: size of an error
/// of the data's own last digits.
pub(crate) fn is_exact(model: &Model, series: &Series, rounding: f64, workspace: &mut Workspace) -> bool {
    let values: Vec<f64> = model
        .parameters()
        .iter()
        .map(|spec| match (spec.link, spec.role) {
            (_, Role::Irregular) => 1.0,
            (Link::Between { low, high }, _) => 0.5 * (low + high),
            _ => 0.0,
        })
        .collect();
    let mut objective = Objective::new(model.clone(), series, workspace);
    let limit = EXACT.max(rounding * rounding);
    objective
        .answer(Question { values: &values, derivatives: false })
        .is_ok_and(|answer| answer.degrees > 0.0 && answer.rss <= answer.degrees * limit)
}

fn is_variance(model: &Model, i: usize) -> bool {
    model.parameters()[i].link == Link::Variance
}

fn only_shapes_known(model: &Model, known: &[Option<f64>]) -> bool {
    known.iter().enumerate().all(|(i, k)| !is_variance(model, i) || k.is_none_or(|v| v == 0.0))
}

/// Parameter values of one grid point.
fn point(model: &Model, known: &[Option<f64>], ratios: [f64; 5], scale: f64, shape: &[f64]) -> Vec<f64> {
    let mut shapes = shape.iter();
    model
        .parameters()
        .iter()
        .enumerate()
        .map(|(i, spec)| {
            let given = known[i];
            let value = match (spec.link, spec.role) {
                (Link::Variance, role) => {
                    scale
                        * match role {
                            Role::Irregular => ratios[0],
                            Role::Level => ratios[1],
                            Role::Slope => ratios[2],
                            Role::Season => ratios[3],
                            Role::Driver(_) => ratios[4],
                            Role::General => general_ratio(model, i, ratios),
                            Role::Cycle | Role::Autoregression => 0.5,
                        }
                }
                _ => shapes.next().copied().unwrap_or(0.0),
            };
            given.unwrap_or(value)
        })
        .collect()
}

/// Ratio of a disturbance of a system given as matrices: a level's, taken to the size that it has on the observation; a slope's where it
/// does not reach the observation at once.
fn general_ratio(model: &Model, parameter: usize, ratios: [f64; 5]) -> f64 {
    let assembly = &model.assembly;
    let loads =
        assembly.shared.iter().find(|noise| noise.parameter == Some(parameter)).map(|noise| &noise.loads);
    let reach: f64 = loads
        .into_iter()
        .flatten()
        .map(|&(state, load)| match assembly.states[state].load {
            crate::structure::assembly::Load::Fixed(z) => z * load,
            _ => 0.0,
        })
        .sum();
    if reach == 0.0 { ratios[2] } else { ratios[1] / (reach * reach) }
}

/// Combinations of values for the parameters that are not variances, each in the order of the parameters.
fn shape_grid(model: &Model) -> Vec<Vec<f64>> {
    let mut grid: Vec<Vec<f64>> = vec![Vec::new()];
    for spec in model.parameters() {
        let values: Vec<f64> = match (spec.link, spec.role) {
            (Link::Variance, _) => continue,
            (Link::Between { .. }, Role::Slope) => vec![0.9, 0.6],
            (Link::Between { low, high }, Role::Cycle) if high > 1.0 => {
                let ratio = high / low;
                (0..6).map(|i| low * ratio.powf((f64::from(i) + 0.5) / 6.0)).collect()
            }
            (Link::Between { .. }, _) => vec![0.9],
            (Link::Free, _) if spec.name == "ar_1" => vec![0.6, -0.6],
            (Link::Free, _) => vec![0.0],
        };
        grid = grid
            .iter()
            .flat_map(|so_far| {
                values.iter().map(|v| so_far.iter().copied().chain([*v]).collect::<Vec<f64>>())
            })
            .collect();
    }
    grid
}

/// Mean square of first differences of neighbouring observed points; 1 where there are none.
fn difference_variance(observed: &[f64]) -> f64 {
    let (mut sum, mut count) = (0.0, 0.0);
    for pair in observed.windows(2) {
        let difference = pair[1] - pair[0];
        if difference.is_finite() {
            sum += difference * difference;
            count += 1.0;
        }
    }
    if sum > 0.0 { sum / count } else { 1.0 }
}
