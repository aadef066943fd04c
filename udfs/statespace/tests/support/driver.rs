//! A regressor for tests.

/// A driver that wanders between about -1 and 1.
pub(crate) fn driver(n: usize, phase: f64) -> Vec<f64> {
    (0..n).map(|t| (t as f64 * 0.37 + phase).sin() + 0.3 * (t as f64 * 1.91 + phase).cos()).collect()
}
