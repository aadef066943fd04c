//! One diagonal block of the transition as an operation on rows: a shift, a rotation, an addition, and its transpose.
//!
//! A block of `k` states works in place on `k` rows of any width, so that one routine serves a vector, a covariance and the columns of
//! the augmented filter. Only [`Op::Matrix`] multiplies a matrix out.

/// One diagonal block of `T`, with its numbers filled in.
#[derive(Debug, Clone, PartialEq)]
pub enum Op {
    /// `a' = a`: level, coefficient.
    Keep,
    /// `a' = -a`: the harmonic at half the period.
    Negate,
    /// `level' = level + slope`, `slope' = damping * slope`.
    Trend {
        /// 1 for a random-walk slope.
        damping: f64,
    },
    /// Dummy season: `s' = -(sum of the last len)`, the rest shifts down.
    Season {
        /// Period - 1.
        len: usize,
    },
    /// `[c s; -s c]`, damping included in both numbers.
    Rotate {
        /// damping * cos(frequency)
        cos: f64,
        /// damping * sin(frequency)
        sin: f64,
    },
    /// First row holds the coefficients, the rest shifts down.
    Autoregression {
        /// Coefficients of lags 1, 2, ...
        coefficients: Vec<f64>,
    },
    /// Any matrix, row-major.
    Matrix {
        /// Number of rows and columns.
        size: usize,
        /// `size x size` numbers.
        values: Vec<f64>,
    },
}

impl Op {
    /// Number of states of the block.
    pub fn len(&self) -> usize {
        match self {
            Self::Keep | Self::Negate => 1,
            Self::Trend { .. } | Self::Rotate { .. } => 2,
            Self::Season { len } => *len,
            Self::Autoregression { coefficients } => coefficients.len(),
            Self::Matrix { size, .. } => *size,
        }
    }

    /// False: every block has a state (kept beside `len` by convention).
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// `x <- T x` on the `len() x width` rows of this block.
    #[inline]
    pub(super) fn forward(&self, x: &mut [f64], width: usize) {
        match self {
            Self::Keep => {}
            Self::Negate => x.iter_mut().for_each(|v| *v = -*v),
            Self::Trend { damping } => {
                let (level, slope) = x.split_at_mut(width);
                for (l, s) in level.iter_mut().zip(slope) {
                    *l += *s;
                    *s *= *damping;
                }
            }
            Self::Season { len } => {
                // The last row makes room for the new first one: negate the sum in place, then rotate.
                let (head, last) = x.split_at_mut((len - 1) * width);
                for row in head.chunks_exact(width) {
                    for (sum, v) in last.iter_mut().zip(row) {
                        *sum += *v;
                    }
                }
                last.iter_mut().for_each(|v| *v = -*v);
                x.rotate_right(width);
            }
            Self::Rotate { cos, sin } => {
                let (first, second) = x.split_at_mut(width);
                for (a, b) in first.iter_mut().zip(second) {
                    (*a, *b) = (cos * *a + sin * *b, cos * *b - sin * *a);
                }
            }
            Self::Autoregression { coefficients } => {
                let order = coefficients.len();
                for j in 0..width {
                    let new: f64 = (0..order).map(|i| coefficients[i] * x[i * width + j]).sum();
                    x[(order - 1) * width + j] = new;
                }
                x.rotate_right(width);
            }
            Self::Matrix { size, values } => multiply(x, width, *size, |i, j| values[i * size + j]),
        }
    }

    /// `x <- T' x` on the rows of this block.
    #[inline]
    pub(super) fn backward(&self, x: &mut [f64], width: usize) {
        match self {
            Self::Keep => {}
            Self::Negate => x.iter_mut().for_each(|v| *v = -*v),
            Self::Trend { damping } => {
                let (level, slope) = x.split_at_mut(width);
                for (l, s) in level.iter().zip(slope) {
                    *s = *l + *damping * *s;
                }
            }
            Self::Season { len } => {
                x.rotate_left(width);
                let (head, first) = x.split_at_mut((len - 1) * width);
                for row in head.chunks_exact_mut(width) {
                    for (v, f) in row.iter_mut().zip(first.iter()) {
                        *v -= *f;
                    }
                }
                first.iter_mut().for_each(|v| *v = -*v);
            }
            Self::Rotate { cos, sin } => {
                let (first, second) = x.split_at_mut(width);
                for (a, b) in first.iter_mut().zip(second) {
                    (*a, *b) = (cos * *a - sin * *b, cos * *b + sin * *a);
                }
            }
            Self::Autoregression { coefficients } => {
                let order = coefficients.len();
                x.rotate_left(width);
                for j in 0..width {
                    let first = x[(order - 1) * width + j];
                    for i in 0..order - 1 {
                        x[i * width + j] += coefficients[i] * first;
                    }
                    x[(order - 1) * width + j] = coefficients[order - 1] * first;
                }
            }
            Self::Matrix { size, values } => multiply(x, width, *size, |i, j| values[j * size + i]),
        }
    }
}

/// `x <- M x` for a `size x width` row-major `x`, column by column.
fn multiply(x: &mut [f64], width: usize, size: usize, element: impl Fn(usize, usize) -> f64) {
    let (mut few, mut many) = ([0.0; 16], Vec::new());
    let column = if size <= few.len() {
        &mut few[..size]
    } else {
        many.resize(size, 0.0);
        &mut many[..]
    };
    for j in 0..width {
        for (i, c) in column.iter_mut().enumerate() {
            *c = (0..size).map(|k| element(i, k) * x[k * width + j]).sum();
        }
        for (i, c) in column.iter().enumerate() {
            x[i * width + j] = *c;
        }
    }
}
