//! Standardised one-step errors: what each point brought that the points before it did not foretell.
//!
//! With the diffuse elements estimated from the past alone, the error of point t over its standard deviation is
//! what is left of its row after it has been rotated into the triangle of the rows before it (recursive
//! residuals: Brown, Durbin & Evans 1975, *JRSS B* 37, 149-192; DK 5.5 for the same numbers by the exact diffuse
//! recursion). A point that only serves to determine a diffuse element has no error.

use crate::filter::Pass;
use crate::lanes::Real;

/// Elements of a row below this share of the row's own size are rounding, not information on an element that is
/// still open. Start-ups of reference cases that are nearly singular have true elements of 1e-6.
const INFORMATIVE: f64 = 1e-10;

/// One-step errors of a series.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct OneStep {
    /// Error over its standard deviation; NaN where missing or where the point only determines a start value.
    pub standardised: Vec<f64>,
    /// Variance of the error, model scale; NaN likewise.
    pub variance: Vec<f64>,
}

/// Rotates the kept rows of one lane (not yet whitened) into a triangle, one by one.
pub(crate) fn errors<V: Real>(pass: &Pass<V>, lane: usize) -> OneStep {
    let n = pass.lengths[lane];
    let mut d = pass.elements;
    let mut width = d + 1;
    let mut triangle = vec![0.0; d * width];
    let mut row = vec![0.0; width];
    let mut out = OneStep { standardised: vec![f64::NAN; n], variance: vec![f64::NAN; n] };
    for t in 0..n {
        if t == pass.collapsed_at[lane] {
            // The collapsed elements' rows leave the triangle: what is left concerns the open ones alone.
            let gone = pass.states;
            let narrow = width - gone;
            for i in 0..narrow - 1 {
                let from = (gone + i) * width + gone;
                triangle.copy_within(from..from + narrow, i * narrow);
            }
            (d, width) = (narrow - 1, narrow);
        }
        if pass.inverse[t].lane(lane) == 0.0 {
            continue;
        }
        let f = pass.f[t].lane(lane);
        let kept = pass.row(t);
        let weight = 1.0 / f.sqrt();
        // The row may still have room for elements that other lanes hold open.
        for (to, from) in row.iter_mut().zip(&kept[kept.len() - d..]) {
            *to = -from.lane(lane) * weight;
        }
        row[d] = kept[0].lane(lane) * weight;
        let size = row[..d].iter().fold(0.0_f64, |a, v| a.max(v.abs()));
        let mut shrink = 1.0;
        let mut opened = false;
        for j in 0..d {
            if row[j].abs() <= INFORMATIVE * size {
                continue;
            }
            let pivot = triangle[j * width + j];
            if pivot == 0.0 {
                let sign = row[j].signum();
                for k in j..width {
                    triangle[j * width + k] = sign * row[k];
                }
                opened = true;
                break;
            }
            // Both are in standard deviations: their squares are in range.
            let norm = (pivot * pivot + row[j] * row[j]).sqrt();
            let (c, s) = (pivot / norm, row[j] / norm);
            for k in j..width {
                let (r, x) = (triangle[j * width + k], row[k]);
                triangle[j * width + k] = c * r + s * x;
                row[k] = c * x - s * r;
            }
            shrink *= c;
        }
        if !opened {
            out.standardised[t] = row[d];
            out.variance[t] = f / (shrink * shrink);
        }
    }
    out
}
