//! The state-space form of one structure at given parameter values.
//!
//! Observation `y_t = Z_t a_t + x_t b + e_t`, `e_t ~ N(0, h)`; transition `a_{t+1} = T a_t + n_t`,
//! `n_t ~ N(0, Q)` (DK eq. 3.1 with R = I): `Q` is diagonal for the named structures, and `diag(q)` plus a sum of
//! [`SharedNoise`] for systems given as matrices. `T` is block diagonal and each block is an operation on
//! rows rather than a matrix: a shift, a rotation, an addition. Row operations run over contiguous
//! memory, so that one routine serves vectors, covariances and the columns of the augmented filter.

mod op;

pub use op::Op;

/// A disturbance that moves several states at once: `variance` times the outer product of its loads.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct SharedNoise {
    /// State and load.
    pub loads: Vec<(usize, f64)>,
    /// Its variance.
    pub variance: f64,
}

/// A proper (stationary) start of a block of states: a covariance, row-major `size x size`.
#[derive(Debug, Clone, PartialEq)]
pub struct ProperStart {
    /// First state of the block.
    pub offset: usize,
    /// Number of states.
    pub size: usize,
    /// Covariance in model units, row-major.
    pub covariance: Vec<f64>,
}

/// A structure with numbers in it.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct System {
    /// Number of states m.
    pub states: usize,
    /// Blocks of `T` in order of their states.
    pub transition: Vec<Op>,
    /// Loads of `Z` that do not change: state and value.
    pub fixed_loads: Vec<(usize, f64)>,
    /// Loads that are a drifting driver's value: state and driver.
    pub driver_loads: Vec<(usize, usize)>,
    /// Irregular variance.
    pub h: f64,
    /// Variance of each state's disturbance, length m.
    pub q: Vec<f64>,
    /// Disturbances that move several states at once; none in the named structures.
    pub shared: Vec<SharedNoise>,
    /// States with a diffuse start, ascending.
    pub diffuse: Vec<usize>,
    /// Starts of the other states.
    pub proper: Vec<ProperStart>,
}

impl System {
    /// `x <- T x` for an `m x width` row-major matrix.
    #[inline]
    pub fn forward(&self, x: &mut [f64], width: usize) {
        let mut offset = 0;
        for op in &self.transition {
            let end = offset + op.len() * width;
            op.forward(&mut x[offset..end], width);
            offset = end;
        }
    }

    /// `x <- T' x` for an `m x width` row-major matrix.
    #[inline]
    pub fn backward(&self, x: &mut [f64], width: usize) {
        let mut offset = 0;
        for op in &self.transition {
            let end = offset + op.len() * width;
            op.backward(&mut x[offset..end], width);
            offset = end;
        }
    }

    /// `p <- T p T'` for a symmetric `p`; the result is symmetric to the last bit.
    #[inline]
    pub fn propagate(&self, p: &mut [f64]) {
        let m = self.states;
        self.forward(p, m);
        transpose(p, m);
        self.forward(p, m);
        mirror(p, m);
    }

    /// `n <- T' n T` for a symmetric `n`; the result is symmetric to the last bit.
    #[inline]
    pub fn pull_back(&self, n: &mut [f64]) {
        let m = self.states;
        self.backward(n, m);
        transpose(n, m);
        self.backward(n, m);
        mirror(n, m);
    }

    /// `p <- p + Q`.
    #[inline]
    pub(crate) fn disturb(&self, p: &mut [f64]) {
        let m = self.states;
        for i in 0..m {
            p[i * m + i] += self.q[i];
        }
        for noise in &self.shared {
            for &(i, a) in &noise.loads {
                for &(j, b) in &noise.loads {
                    p[i * m + j] += noise.variance * (a * b);
                }
            }
        }
    }

    /// Start covariance of the diffuse states: the largest noise variance. Any value gives the same
    /// results (a flat prior convolved with a proper one is flat); this one is near the size that the
    /// covariance settles at.
    pub fn start_scale(&self) -> f64 {
        let shared = self
            .shared
            .iter()
            .flat_map(|noise| noise.loads.iter().map(|&(_, load)| noise.variance * load * load));
        let largest = self.q.iter().copied().chain(shared).fold(self.h, f64::max);
        self.proper.iter().flat_map(|p| p.covariance.iter()).fold(largest, |a, &b| a.max(b))
    }

    /// Calls `f(state, load)` for each non-zero element of `Z_t`.
    #[inline]
    pub(crate) fn for_loads(&self, drifting: &[Vec<f64>], t: usize, mut f: impl FnMut(usize, f64)) {
        for &(state, load) in &self.fixed_loads {
            f(state, load);
        }
        for &(state, driver) in &self.driver_loads {
            f(state, drifting[driver][t]);
        }
    }
}

#[inline]
fn transpose(x: &mut [f64], m: usize) {
    for i in 0..m {
        for j in 0..i {
            x.swap(i * m + j, j * m + i);
        }
    }
}

/// Copies the lower triangle onto the upper one.
#[inline]
fn mirror(x: &mut [f64], m: usize) {
    for i in 0..m {
        for j in 0..i {
            x[j * m + i] = x[i * m + j];
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use nalgebra::DMatrix;
    use proptest::prelude::*;

    fn system() -> System {
        let transition = vec![
            Op::Trend { damping: 0.9 },
            Op::Season { len: 4 },
            Op::Rotate { cos: 0.3, sin: -0.8 },
            Op::Negate,
            Op::Autoregression { coefficients: vec![0.5, -0.3, 0.1] },
            Op::Keep,
            Op::Matrix { size: 2, values: vec![0.4, -1.5, 2.0, 0.25] },
        ];
        System { states: transition.iter().map(Op::len).sum(), transition, ..System::default() }
    }

    /// T as a matrix, written out from the definitions and not from the row operations.
    fn dense() -> DMatrix<f64> {
        let mut t = DMatrix::zeros(15, 15);
        (t[(0, 0)], t[(0, 1)], t[(1, 1)]) = (1.0, 1.0, 0.9);
        for j in 2..6 {
            t[(2, j)] = -1.0;
        }
        for i in 3..6 {
            t[(i, i - 1)] = 1.0;
        }
        (t[(6, 6)], t[(6, 7)], t[(7, 6)], t[(7, 7)]) = (0.3, -0.8, 0.8, 0.3);
        t[(8, 8)] = -1.0;
        (t[(9, 9)], t[(9, 10)], t[(9, 11)], t[(10, 9)], t[(11, 10)]) = (0.5, -0.3, 0.1, 1.0, 1.0);
        t[(12, 12)] = 1.0;
        (t[(13, 13)], t[(13, 14)], t[(14, 13)], t[(14, 14)]) = (0.4, -1.5, 2.0, 0.25);
        t
    }

    proptest! {
        #[test]
        fn row_operations_equal_the_matrix(values in proptest::collection::vec(-1e3..1e3f64, 15 * 15)) {
            let (s, t) = (system(), dense());
            let x = DMatrix::from_row_slice(15, 15, &values);
            let close = |a: &[f64], b: &DMatrix<f64>| {
                let scale = 1.0 + b.amax();
                a.iter().zip(b.transpose().iter()).all(|(u, v)| (u - v).abs() <= 1e-13 * scale)
            };
            let mut forward = values.clone();
            s.forward(&mut forward, 15);
            prop_assert!(close(&forward, &(&t * &x)));
            let mut backward = values.clone();
            s.backward(&mut backward, 15);
            prop_assert!(close(&backward, &(t.transpose() * &x)));
            let p = &x * x.transpose();
            let mut propagated: Vec<f64> = p.transpose().iter().copied().collect();
            s.propagate(&mut propagated);
            prop_assert!(close(&propagated, &(&t * &p * t.transpose())));
            let mut pulled: Vec<f64> = p.transpose().iter().copied().collect();
            s.pull_back(&mut pulled);
            prop_assert!(close(&pulled, &(t.transpose() * &p * &t)));
            prop_assert!((0..15).all(|i| (0..15).all(|j| propagated[i * 15 + j] == propagated[j * 15 + i])));
        }
    }
}
