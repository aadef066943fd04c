//! The reduction against a dense QR of the stacked rows.

use super::*;
use nalgebra::{DMatrix, DVector};
use proptest::prelude::*;

const ALL: Mask = Mask::only(0);

proptest! {
    /// Against the library's own QR of the stacked rows.
    #[test]
    fn equals_a_dense_qr(values in proptest::collection::vec(-10.0..10.0f64, 4 * 37)) {
        let (rows, d) = (37, 3);
        let mut reduction = Reduction::<f64>::default();
        reduction.reset(d, 0, ALL);
        for row in values.chunks(4) {
            reduction.push(row, 0.5);
        }
        prop_assert_eq!(reduction.finish()[0], None);
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
    let mut reduction = Reduction::<f64>::default();
    reduction.reset(2, 0, ALL);
    for i in 0..9 {
        let x = f64::from(i) * 0.37 - 1.0;
        reduction.push(&[1.0, x, 3.0 * x], 1.0);
    }
    assert_eq!(reduction.finish()[0], Some(1));
}

#[test]
fn an_element_that_never_moves_is_found() {
    let mut reduction = Reduction::<f64>::default();
    reduction.reset(1, 0, ALL);
    for _ in 0..40 {
        reduction.push(&[1.0, 0.0], 1.0);
    }
    assert_eq!(reduction.finish()[0], Some(0));
}
