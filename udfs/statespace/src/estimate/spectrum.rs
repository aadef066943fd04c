//! An approximate likelihood that costs a small part of an exact one: where a search starts.
//!
//! First differences of the series are taken to the frequency domain by a cosine transform. There the covariance of a random walk
//! and of white noise is diagonal, since the cosines are the eigenvectors of the second difference with reflecting ends (Strang 1999,
//! *SIAM Review* 41, the DCT-2); that of a differenced irregular is diagonal but for its two ends, `e_1 e_1' + e_n e_n'`, a matrix of rank one among the even
//! and among the odd cosines, which the formula of Sherman & Morrison (1950, *Annals of Mathematical Statistics* 21) takes up; that of a damped slope
//! with its stationary start likewise. So the likelihood of a trend with an irregular is exact; that of a season stands by the diagonal alone, its spectral generating function (H 2.4, 4.3: Whittle's
//! likelihood). A fixed seasonal pattern is taken off first, and the frequencies on which it lies are left out. Missing points are
//! left out or filled: this is a start, not an estimate.

use std::f64::consts::PI;

use super::ordinates::{Transform, filled_differences, ordinates, period, seasonal, seasons, take_off};
use super::{Answer, Question};
use crate::instructions::{Instructions, Task};
use crate::structure::assembly::Shape;
use crate::structure::{Link, Model, Role};

/// A number for the even or the odd cosines, and its derivative in the damping.
#[derive(Debug, Clone, Copy, Default)]
struct Kept {
    value: f64,
    slope: f64,
}

/// A symmetric two by two matrix, `[aa, ab, bb]`.
type Pair = [f64; 3];

/// The approximate likelihood of one model on one series.
#[derive(Debug, Clone)]
pub(super) struct Spectrum {
    /// Nothing is left out or filled in: the likelihood is exact up to a constant.
    pub(super) exact: bool,
    /// Most ordinates that one stands for.
    pub(super) thinned: f64,
    frequency: Vec<f64>,
    /// Ordinates that each one stands for.
    weight: Vec<f64>,
    /// Coefficient, times the root of the weight.
    coefficient: Vec<f64>,
    /// The cosine at the first point, likewise: what the ends of the irregular load on.
    end: Vec<f64>,
    /// What the stationary start of a damped slope loads on, its derivative in the damping, and its part: `-part * tilt tilt'` times the slope variance.
    tilt: Vec<f64>,
    tilt_slope: Vec<f64>,
    part: [Kept; 2],
    /// So many even cosines come first, then the odd ones.
    even: usize,
    parameters: usize,
    /// `p x K`: derivative of the diagonal in each parameter.
    slopes: Vec<f64>,
    /// Slope variance and damping of a damped trend.
    damped: Option<(usize, usize)>,
    variances: Vec<usize>,
    gradient: Vec<f64>,
    information: Vec<f64>,
    /// The inverse of the diagonal, and the solution `V^-1 c`.
    inverse: Vec<f64>,
    solved: Vec<f64>,
    /// `p x K`: `V_i V^-1 c`.
    responses: Vec<f64>,
    /// The diagonal of `V^-1`.
    own: Vec<f64>,
    instructions: Instructions,
}

impl Spectrum {
    /// `None` where the model has parts, or the series too few points, for this way.
    pub(super) fn new(model: &Model, observed: &[f64], instructions: Instructions) -> Option<Self> {
        let assembly = &model.assembly;
        let plain = |role: &Role| matches!(role, Role::Irregular | Role::Level | Role::Slope | Role::Season);
        let has_level = assembly.states.first().is_some_and(|s| s.role == Role::Level);
        if model.drivers > 0 || !has_level || !assembly.parameters.iter().all(|p| plain(&p.role)) {
            return None;
        }
        let seasons = seasons(model);
        let mut differences = filled_differences(observed, seasons.first().map(|(_, poles)| period(poles)))?;
        for (_, poles) in &seasons {
            take_off(poles, &mut differences);
        }
        let damped = assembly.shapes.iter().find_map(|placed| match placed.shape {
            Shape::DampedSlope { damping, variance } => Some((variance, damping)),
            _ => None,
        });
        let n = differences.len();
        let mut ordinates = ordinates(n, damped.is_some() || !has_slope(model), &seasons);
        ordinates.sort_by_key(|(k, _)| (k % 2, *k));
        let even = ordinates.iter().filter(|(k, _)| k % 2 == 0).count();
        let weight: Vec<f64> = ordinates.iter().map(|o| o.1).collect();
        let frequency: Vec<f64> = ordinates.iter().map(|o| o.0 as f64 * PI / n as f64).collect();
        // Half the frequency: cos w = 2 cos^2 (w/2) - 1, and a difference has the spectrum 2 - 2 cos w.
        let half: Vec<f64> = frequency.iter().map(|w| (0.5 * w).cos()).collect();
        let (p, k) = (assembly.parameters.len(), frequency.len());
        if k < 4 {
            return None;
        }
        let norm = |w: f64| if w == 0.0 { 1.0 } else { 2.0_f64.sqrt() } / (n as f64).sqrt();
        let with_weight = |values: Vec<f64>| -> Vec<f64> {
            values
                .iter()
                .zip(frequency.iter().zip(&weight))
                .map(|(v, (&w, weight))| v * norm(w) * weight.sqrt())
                .collect()
        };
        let mut this = Self {
            thinned: weight.iter().fold(1.0, |a, w| w.max(a)),
            exact: seasons.is_empty() && k + 1 >= n && !observed.iter().any(|v| v.is_nan()),
            coefficient: with_weight(instructions.perform(Transform { x: &differences, half: &half })),
            end: with_weight(half.clone()),
            even,
            parameters: p,
            slopes: vec![0.0; p * k],
            damped,
            variances: (0..p).filter(|&i| assembly.parameters[i].link == Link::Variance).collect(),
            gradient: vec![0.0; p],
            information: vec![0.0; p * p],
            tilt: vec![0.0; k],
            tilt_slope: vec![0.0; k],
            part: [Kept::default(); 2],
            inverse: vec![0.0; k],
            solved: vec![0.0; k],
            responses: vec![0.0; p * k],
            own: vec![0.0; k],
            instructions,
            frequency,
            weight,
        };
        for (i, spec) in assembly.parameters.iter().enumerate() {
            for (at, &w) in this.frequency.iter().enumerate() {
                let difference = 4.0 * (1.0 - half[at]) * (1.0 + half[at]);
                this.slopes[i * k + at] = match spec.role {
                    Role::Irregular => difference,
                    Role::Level => 1.0,
                    Role::Slope => 1.0 / difference.max(1e-12),
                    _ => seasons
                        .iter()
                        .filter(|(variance, _)| *variance == Some(i))
                        .map(|(_, poles)| difference * seasonal(poles, w))
                        .sum(),
                };
            }
        }
        Some(this)
    }

    /// The approximate likelihood with its score and average information. Parameter 0 is the irregular.
    pub(super) fn answer(&mut self, question: Question<'_>) -> Answer<'_> {
        let [log_likelihood, rss, degrees] = self.instructions.perform(Evaluate { spectrum: self, question });
        Answer {
            log_likelihood,
            rss,
            degrees,
            gradient: &self.gradient[..self.parameters],
            information: &self.information,
        }
    }

    /// Log-likelihood, residual sum of squares and degrees of freedom; score and information into their buffers.
    #[inline(always)]
    fn evaluate(&mut self, question: Question<'_>) -> [f64; 3] {
        let k = self.frequency.len();
        let values = question.values;
        if let Some((variance, damping)) = self.damped {
            self.damp(values[variance], values[damping], variance, damping);
        }
        self.inverse.fill(0.0);
        for &i in &self.variances {
            if values[i] != 0.0 {
                for (v, c) in self.inverse.iter_mut().zip(&self.slopes[i * k..(i + 1) * k]) {
                    *v += values[i] * c;
                }
            }
        }
        // Frequency zero may have nothing on its diagonal.
        let floor = 1e-12 * self.inverse.iter().fold(0.0_f64, |a, v| a.max(*v));
        let slope_variance = self.damped.map_or(0.0, |(variance, _)| values[variance]);
        let (mut logs, mut degrees) = (LogSum::default(), 0.0);
        let (mut loads, mut inner) = ([[0.0; 3]; 2], [[0.0; 3]; 2]);
        for v in &mut self.inverse {
            *v = if *v > floor { *v } else { floor };
        }
        for (v, weight) in self.inverse.iter().zip(&self.weight) {
            logs.add(*v, *weight);
            degrees += weight;
        }
        for v in &mut self.inverse {
            *v = 1.0 / *v;
        }
        let mut log_determinant = logs.total();
        for parity in 0..2 {
            let range = self.range(parity);
            let inverse = &self.inverse[range.clone()];
            let (end, tilt) = (&self.end[range.clone()], &self.tilt[range]);
            loads[parity][0] = dot3(end, end, inverse);
            if self.damped.is_some() {
                loads[parity][1] = dot3(end, tilt, inverse);
                loads[parity][2] = dot3(tilt, tilt, inverse);
            }
            let centre = [2.0 * values[0], -slope_variance * self.part[parity].value];
            let determinant;
            (inner[parity], determinant) = woodbury(centre, loads[parity]);
            log_determinant += determinant.ln();
        }
        self.solved.copy_from_slice(&self.coefficient);
        self.solve(&inner);
        let rss = dot(&self.solved, &self.coefficient);
        if question.derivatives {
            self.differentiate(&loads, &inner, slope_variance);
        }
        [-0.5 * (log_determinant + rss), rss, degrees]
    }

    #[inline(always)]
    fn range(&self, parity: usize) -> std::ops::Range<usize> {
        if parity == 0 { 0..self.even } else { self.even..self.frequency.len() }
    }

    /// `solved <- V^-1 solved`.
    #[inline(always)]
    fn solve(&mut self, inner: &[Pair; 2]) {
        for (u, inverse) in self.solved.iter_mut().zip(&self.inverse) {
            *u *= inverse;
        }
        let damped = self.damped.is_some();
        for (parity, [aa, ab, bb]) in inner.iter().enumerate() {
            let range = self.range(parity);
            let (end, tilt) = (&self.end[range.clone()], &self.tilt[range.clone()]);
            let (inverse, solved) = (&self.inverse[range.clone()], &mut self.solved[range]);
            let a = dot(end, solved);
            let b = if damped { dot(tilt, solved) } else { 0.0 };
            let (by_end, by_tilt) = (aa * a + ab * b, ab * a + bb * b);
            for ((u, inverse), (end, tilt)) in solved.iter_mut().zip(inverse).zip(end.iter().zip(tilt)) {
                *u -= (end * by_end + tilt * by_tilt) * inverse;
            }
        }
    }

    /// Score and average information: `V_i` is a diagonal, for the irregular that of the ends besides, for a damped slope and its damping
    /// that of the start.
    #[inline(always)]
    fn differentiate(&mut self, loads: &[Pair; 2], inner: &[Pair; 2], slope_variance: f64) {
        let (k, p) = (self.frequency.len(), self.parameters);
        self.gradient.fill(0.0);
        for parity in 0..2 {
            let range = self.range(parity);
            let (end, tilt) = (&self.end[range.clone()], &self.tilt[range.clone()]);
            let (inverse, solved) = (&self.inverse[range.clone()], &self.solved[range.clone()]);
            let ([aa, ab, bb], [xx, xy, yy]) = (inner[parity], loads[parity]);
            // The diagonal of the inverse of V, in weighted ordinates.
            for (at, own) in self.own[range.clone()].iter_mut().enumerate() {
                let taken = aa * end[at] * end[at] + 2.0 * ab * end[at] * tilt[at] + bb * tilt[at] * tilt[at];
                *own = (self.weight[range.start + at] - taken * inverse[at]) * inverse[at];
            }
            let own = &self.own[range.clone()];
            let part = self.part[parity];
            for i in 0..p {
                let slope = &self.slopes[i * k + range.start..i * k + range.end];
                let q = &mut self.responses[i * k + range.start..i * k + range.end];
                for ((q, slope), u) in q.iter_mut().zip(slope).zip(solved) {
                    *q = slope * u;
                }
                let mut trace = dot(slope, own);
                let damped = self.damped.filter(|&(variance, damping)| i == variance || i == damping);
                if i == 0 {
                    let by_end = 2.0 * dot(end, solved);
                    q.iter_mut().zip(end).for_each(|(q, end)| *q += by_end * end);
                    trace += 2.0 * (xx - (aa * xx * xx + 2.0 * ab * xx * xy + bb * xy * xy));
                } else if let Some((variance, _)) = damped {
                    let of_tilt = yy - (aa * xy * xy + 2.0 * ab * xy * yy + bb * yy * yy);
                    let by_tilt = dot(tilt, solved);
                    if i == variance {
                        q.iter_mut().zip(tilt).for_each(|(q, tilt)| *q -= part.value * by_tilt * tilt);
                        trace -= part.value * of_tilt;
                    } else {
                        let tilt_slope = &self.tilt_slope[range.clone()];
                        let by_slope = dot(tilt_slope, solved);
                        let of_tilts = part.slope * by_tilt + part.value * by_slope;
                        for ((q, tilt), tilt_slope) in q.iter_mut().zip(tilt).zip(tilt_slope) {
                            *q -= slope_variance * (of_tilts * tilt + part.value * by_tilt * tilt_slope);
                        }
                        let (zx, zy) = (dot3(end, tilt_slope, inverse), dot3(tilt, tilt_slope, inverse));
                        let across = zy - (aa * xy * zx + ab * (xy * zy + yy * zx) + bb * yy * zy);
                        trace -= slope_variance * (part.slope * of_tilt + 2.0 * part.value * across);
                    }
                }
                self.gradient[i] += 0.5 * (dot(q, solved) - trace);
            }
        }
        for j in 0..p {
            self.solved.copy_from_slice(&self.responses[j * k..(j + 1) * k]);
            self.solve(inner);
            for i in 0..=j {
                let value = 0.5 * dot(&self.responses[i * k..(i + 1) * k], &self.solved);
                self.information[i * p + j] = value;
                self.information[j * p + i] = value;
            }
        }
    }

    /// The covariance of a damped slope with a stationary start: its inverse is `g = 1 + d^2 - 2 d cos w` on the diagonal and `d (1 - d)` at both
    /// ends besides, so that it is `1 / g` less a matrix of rank one for each parity.
    #[inline(always)]
    fn damp(&mut self, value: f64, d: f64, variance: usize, damping: usize) {
        let k = self.frequency.len();
        for at in 0..k {
            // A difference has this spectrum.
            let difference = self.slopes[at];
            let inverse = 1.0 / ((1.0 - d) * (1.0 - d) + d * difference);
            let slope = difference - 2.0 * (1.0 - d);
            let tilt = self.end[at] * inverse;
            self.tilt[at] = tilt;
            self.tilt_slope[at] = -tilt * slope * inverse;
            self.slopes[variance * k + at] = inverse;
            self.slopes[damping * k + at] = -value * slope * inverse * inverse;
        }
        for parity in 0..2 {
            let range = self.range(parity);
            let end = &self.end[range.clone()];
            let (sum, slope) = (dot(end, &self.tilt[range.clone()]), dot(end, &self.tilt_slope[range]));
            let (corner, corner_slope) = (2.0 * d * (1.0 - d), 2.0 - 4.0 * d);
            let below = 1.0 + corner * sum;
            self.part[parity] = Kept {
                value: corner / below,
                slope: (corner_slope - corner * corner * slope) / (below * below),
            };
        }
    }
}

/// One evaluation, compiled for the vector instructions.
struct Evaluate<'a, 'q> {
    spectrum: &'a mut Spectrum,
    question: Question<'q>,
}

impl Task for Evaluate<'_, '_> {
    type Output = [f64; 3];
    #[inline(always)]
    fn run(self) -> [f64; 3] {
        self.spectrum.evaluate(self.question)
    }
}

/// A sum of weighted logarithms that takes few of them: products first.
#[derive(Debug, Default)]
struct LogSum {
    total: f64,
    product: Option<f64>,
}

impl LogSum {
    #[inline(always)]
    fn add(&mut self, value: f64, weight: f64) {
        if weight != 1.0 {
            self.total += weight * value.ln();
            return;
        }
        let product = self.product.unwrap_or(1.0) * value;
        if (1e-100..1e100).contains(&product) {
            self.product = Some(product);
        } else {
            self.total += self.product.unwrap_or(1.0).ln() + value.ln();
            self.product = None;
        }
    }

    #[inline(always)]
    fn total(&self) -> f64 {
        self.total + self.product.unwrap_or(1.0).ln()
    }
}

/// The sum of eight.
#[inline(always)]
fn folded(sum: [f64; 8]) -> f64 {
    let [a, b, c, d, e, f, g, h] = sum;
    ((a + e) + (b + f)) + ((c + g) + (d + h))
}

/// Eight sums side by side: a vector register, and no waiting for each addition.
#[inline(always)]
fn dot(a: &[f64], b: &[f64]) -> f64 {
    let (eights, rest) = a.as_chunks::<8>();
    let (others, other_rest) = b.as_chunks::<8>();
    let mut sum = [0.0; 8];
    for (a, b) in eights.iter().zip(others) {
        for lane in 0..8 {
            sum[lane] += a[lane] * b[lane];
        }
    }
    let rest: f64 = rest.iter().zip(other_rest).map(|(a, b)| a * b).sum();
    folded(sum) + rest
}

#[inline(always)]
fn dot3(a: &[f64], b: &[f64], c: &[f64]) -> f64 {
    let (a, a_rest) = a.as_chunks::<8>();
    let (b, b_rest) = b.as_chunks::<8>();
    let (c, c_rest) = c.as_chunks::<8>();
    let mut sum = [0.0; 8];
    for ((a, b), c) in a.iter().zip(b).zip(c) {
        for lane in 0..8 {
            sum[lane] += a[lane] * b[lane] * c[lane];
        }
    }
    let rest: f64 = a_rest.iter().zip(b_rest).zip(c_rest).map(|((a, b), c)| a * b * c).sum();
    folded(sum) + rest
}

/// `(C^-1 + E)^-1` for a diagonal `C`, and the determinant of `I + C E` (Woodbury's formula).
#[inline(always)]
fn woodbury(centre: [f64; 2], [xx, xy, yy]: Pair) -> (Pair, f64) {
    let [a, b] = centre;
    let determinant = (1.0 + a * xx) * (1.0 + b * yy) - a * b * xy * xy;
    (
        [a * (1.0 + b * yy) / determinant, -a * b * xy / determinant, b * (1.0 + a * xx) / determinant],
        determinant,
    )
}

fn has_slope(model: &Model) -> bool {
    model.assembly.states.iter().any(|s| s.role == Role::Slope)
}

#[cfg(test)]
mod tests;
