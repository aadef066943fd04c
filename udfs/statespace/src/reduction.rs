//! Orthogonal reduction of the rows of the augmented filter.
//!
//! Each observed point gives a row: its response to the `d` diffuse elements and to the data, divided by
//! the square root of its variance. The rows are reduced to a triangle `R`, a right side `z = Q' y` and a
//! residual sum of squares, by Householder reflections over blocks of rows (Golub & Van Loan, *Matrix
//! Computations*, 4th ed., 5.2). No normal equations: their condition would be squared, and that is
//! what spoils start-ups whose first points hardly tell the elements apart.

/// `|R_ii|` below this share of its column's norm counts as zero: the element cannot be told.
const RANK_TOLERANCE: f64 = 1e-13;

/// Smallest sine of the angle between an element's column and those before it at which the elements count as well told apart.
const WELL_TOLD: f64 = 0.02;

/// Rows of one block. A whole number of vector registers, and enough to make the triangle's own share small.
const BLOCK: usize = 16;

/// The reduced rows. Column order: the `d` elements, then the data.
#[derive(Debug, Clone, Default)]
pub(crate) struct Reduction {
    elements: usize,
    /// `d x (d + 1)` row-major: `[R | z]`.
    triangle: Vec<f64>,
    /// Rows waiting for the next reduction: `d + 1` columns of [`BLOCK`] elements, unused ones zero.
    block: Vec<f64>,
    used: usize,
    rss: f64,
    /// `1 / R_ii` once finished.
    inverse: Vec<f64>,
    eliminated: Eliminated,
}

/// The rows of the triangle that belong to elements which have left it for the state.
#[derive(Debug, Clone, Default)]
struct Eliminated {
    count: usize,
    width: usize,
    /// `count x width`: `[R_11 | R_12 | z_1]`.
    triangle: Vec<f64>,
    inverse: Vec<f64>,
}

impl Reduction {
    pub(crate) fn reset(&mut self, elements: usize) {
        self.elements = elements;
        let width = elements + 1;
        self.triangle.clear();
        self.triangle.resize(elements * width, 0.0);
        self.block.clear();
        self.block.resize(BLOCK * width, 0.0);
        (self.used, self.rss) = (0, 0.0);
        self.eliminated.count = 0;
        self.eliminated.triangle.clear();
        self.eliminated.inverse.clear();
    }

    /// Elements that have been eliminated.
    pub(crate) fn eliminated(&self) -> usize {
        self.eliminated.count
    }

    /// True when the first `count` elements are well told apart by the rows so far. Asked at block ends only, else false.
    pub(crate) fn ready(&self, count: usize) -> bool {
        let width = self.elements + 1;
        self.used == 0
            && (0..count).all(|j| {
                let squares: f64 = (0..=j).map(|i| self.triangle[i * width + j].powi(2)).sum();
                squares > 0.0 && self.triangle[j * width + j] >= WELL_TOLD * squares.sqrt()
            })
    }

    /// Takes the first `count` elements out of the triangle. Given the others, they are now
    /// `R_11^-1 (z_1 + e - R_12 d_2)` with `e ~ N(0, I)`.
    pub(crate) fn eliminate(&mut self, count: usize) {
        let (d, width) = (self.elements, self.elements + 1);
        self.eliminated.count = count;
        self.eliminated.width = width;
        self.eliminated.triangle.extend_from_slice(&self.triangle[..count * width]);
        for j in 0..count {
            self.eliminated.inverse.push(1.0 / self.triangle[j * width + j]);
        }
        let rest = d - count;
        for i in 0..rest {
            let from = (count + i) * width + count;
            self.triangle.copy_within(from..from + rest + 1, i * (rest + 1));
        }
        self.elements = rest;
        self.triangle.truncate(rest * (rest + 1));
        self.block.truncate(BLOCK * (rest + 1));
    }

    /// Rewrites a row of responses `[data, first elements, others]` in the basis of `e`: `[mean, e, others given e]`.
    pub(crate) fn condition(&self, row: &mut [f64]) {
        let Eliminated { count, width, triangle, inverse } = &self.eliminated;
        for j in 0..*count {
            let r = &triangle[j * width..(j + 1) * width];
            let x = row[1 + j] * inverse[j];
            row[1 + j] = x;
            if x != 0.0 {
                for (to, from) in row[2 + j..].iter_mut().zip(&r[j + 1..width - 1]) {
                    *to -= x * from;
                }
                row[0] += x * r[width - 1];
            }
        }
    }

    /// Adds one row. `row[0]` is the data's path, `row[1..]` the innovation's response to the elements
    /// (so the regression row is its negative); `weight` = 1 / sqrt(F).
    #[inline]
    pub(crate) fn push(&mut self, row: &[f64], weight: f64) {
        let mut at = self.used;
        for from in &row[1..] {
            self.block[at] = -from * weight;
            at += BLOCK;
        }
        self.block[at] = row[0] * weight;
        self.used += 1;
        if self.used == BLOCK {
            self.reduce();
        }
    }

    fn reduce(&mut self) {
        let (d, width) = (self.elements, self.elements + 1);
        for j in 0..d {
            let (left, right) = self.block.split_at_mut((j + 1) * BLOCK);
            let pivot = &mut left[j * BLOCK..];
            let below = dot(pivot, pivot);
            if below == 0.0 {
                continue;
            }
            let diagonal = self.triangle[j * width + j];
            let norm = (diagonal * diagonal + below).sqrt();
            // The diagonal is kept non-negative, so v_0 = diagonal + norm does not cancel.
            let v0 = diagonal + norm;
            let scaled = 2.0 * v0 * v0 / (v0 * v0 + below);
            self.triangle[j * width + j] = norm;
            let inverse = 1.0 / v0;
            pivot.iter_mut().for_each(|x| *x *= inverse);
            for (k, column) in right.chunks_exact_mut(BLOCK).enumerate() {
                let above = &mut self.triangle[j * width + j + 1 + k];
                let along = scaled * (*above + dot(pivot, column));
                // The reflection maps the pivot to -norm; flipping the row's sign keeps it positive.
                *above = along - *above;
                for (x, v) in column.iter_mut().zip(pivot.iter()) {
                    *x -= along * v;
                }
            }
        }
        let rest = &self.block[d * BLOCK..];
        self.rss += dot(rest, rest);
        self.block.fill(0.0);
        self.used = 0;
    }

    /// Reduces what is left; returns the first element that the data do not determine, if any (counted with the eliminated).
    pub(crate) fn finish(&mut self) -> Result<(), usize> {
        self.reduce();
        let (d, width) = (self.elements, self.elements + 1);
        self.inverse.clear();
        let first = self.eliminated.count;
        for j in 0..d {
            // The column's part along the eliminated elements counts: what repeats them leaves nothing but rounding here.
            let along = self.eliminated.triangle.iter().skip(first + j).step_by(self.eliminated.width.max(1));
            let squares = along.take(first).map(|r| r * r).sum::<f64>()
                + (0..=j).map(|i| self.triangle[i * width + j].powi(2)).sum::<f64>();
            let norm = squares.sqrt();
            let pivot = self.triangle[j * width + j];
            if pivot.is_nan() || pivot <= RANK_TOLERANCE * norm || norm == 0.0 {
                return Err(first + j);
            }
            self.inverse.push(1.0 / pivot);
        }
        Ok(())
    }

    pub(crate) fn rss(&self) -> f64 {
        self.rss
    }

    /// Sum of log R_ii, eliminated elements included.
    pub(crate) fn log_diagonal(&self) -> f64 {
        let first: f64 = self.eliminated.inverse.iter().map(|r| r.ln()).sum();
        self.inverse.iter().map(|r| -r.ln()).sum::<f64>() - first
    }

    /// Rewrites a row of responses `[data, elements]` in the basis in which the elements' posterior covariance is I:
    /// mean, then the response to each white element (`x R = row`).
    #[inline]
    pub(crate) fn whiten(&self, row: &mut [f64]) {
        let (mean, columns) = row.split_at_mut(1);
        self.whiten_split(&mut mean[0], columns);
    }

    /// [`Self::whiten`] with the mean and the columns apart.
    #[inline]
    pub(crate) fn whiten_split(&self, mean: &mut f64, columns: &mut [f64]) {
        let width = self.elements + 1;
        for j in 0..self.elements {
            let r = &self.triangle[j * width..(j + 1) * width];
            let x = columns[j] * self.inverse[j];
            columns[j] = x;
            if x != 0.0 {
                for (to, from) in columns[j + 1..].iter_mut().zip(&r[j + 1..]) {
                    *to -= x * from;
                }
                *mean += x * r[self.elements];
            }
        }
    }
}

/// Dot product of two columns of a block, in an order of additions that fills vector registers.
#[inline]
fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut lanes = [0.0; 8];
    for (x, y) in a.chunks_exact(8).zip(b.chunks_exact(8)) {
        for l in 0..8 {
            lanes[l] += x[l] * y[l];
        }
    }
    let [a, b, c, d, e, f, g, h] = lanes;
    ((a + e) + (b + f)) + ((c + g) + (d + h))
}

#[cfg(test)]
mod tests {
    use super::*;
    use nalgebra::{DMatrix, DVector};
    use proptest::prelude::*;

    proptest! {
        /// Against the library's own QR of the stacked rows.
        #[test]
        fn equals_a_dense_qr(values in proptest::collection::vec(-10.0..10.0f64, 4 * 37)) {
            let (rows, d) = (37, 3);
            let mut reduction = Reduction::default();
            reduction.reset(d);
            for row in values.chunks(4) {
                reduction.push(row, 0.5);
            }
            prop_assert!(reduction.finish().is_ok());
            let x = DMatrix::from_fn(rows, d, |i, j| -0.5 * values[i * 4 + 1 + j]);
            let y = DVector::from_fn(rows, |i, _| 0.5 * values[i * 4]);
            let qr = x.clone().qr();
            let log_diagonal: f64 = qr.r().diagonal().iter().map(|v| v.abs().ln()).sum();
            let z = qr.q().transpose() * &y;
            prop_assert!((reduction.log_diagonal() - log_diagonal).abs() < 1e-11);
            prop_assert!((reduction.rss() - (y.norm_squared() - z.norm_squared())).abs() < 1e-9);
            let mut probe = vec![0.0, 1.0, -2.0, 0.5];
            reduction.whiten(&mut probe);
            let variance = (x.transpose() * &x).try_inverse().unwrap();
            let g = DVector::from_vec(vec![1.0, -2.0, 0.5]);
            let expected = (g.transpose() * &variance * &g)[0];
            prop_assert!((probe[1..].iter().map(|v| v * v).sum::<f64>() / expected - 1.0).abs() < 1e-9);
            let direct = (g.transpose() * variance * x.transpose() * y)[0];
            prop_assert!((probe[0] - direct).abs() < 1e-9 * (1.0 + direct.abs()));
        }
    }

    #[test]
    fn a_repeated_column_is_found() {
        let mut reduction = Reduction::default();
        reduction.reset(2);
        for i in 0..9 {
            let x = f64::from(i) * 0.37 - 1.0;
            reduction.push(&[1.0, x, 3.0 * x], 1.0);
        }
        assert_eq!(reduction.finish(), Err(1));
    }
}
