//! What holds at every point of a pass, whatever the data: covariances are covariances, and the start scale cancels.

use super::*;
use crate::structure::{Season, Structure, Trend};
use proptest::prelude::*;

/// Every predicted covariance is symmetric to the last bit and has no direction of negative variance.
fn assert_covariances(pass: &Pass) -> Result<(), TestCaseError> {
    let m = pass.m;
    for p in pass.covariances.chunks_exact(m * m).take(pass.n) {
        let matrix = nalgebra::DMatrix::from_row_slice(m, m, p);
        prop_assert_eq!(&matrix, &matrix.transpose());
        let largest = matrix.amax();
        let smallest = matrix.symmetric_eigenvalues().min();
        prop_assert!(smallest >= -1e-12 * largest, "eigenvalue {smallest} beside {largest}");
    }
    Ok(())
}

proptest! {
    #[test]
    fn covariances_are_symmetric_and_not_negative(
        noise in proptest::collection::vec(-1.0..1.0f64, 60),
        variances in proptest::collection::vec(0.0..1.0f64, 8),
        gap in 0usize..50,
    ) {
        let structure = Structure {
            trend: Trend::Damped,
            seasons: vec![Season { period: 12.4, harmonics: Some(3), fixed: false }],
            drifting_drivers: vec!["price".to_owned()],
            ..Structure::default()
        };
        let values = [variances[0], variances[1], variances[2], 0.8, variances[3], variances[4]];
        let system = structure.model().system_at(&values).unwrap();
        let mut observed = noise.clone();
        observed[gap..gap + 8].fill(f64::NAN);
        let price: Vec<f64> = (0..60).map(|t| (f64::from(t) * 0.7).sin()).collect();
        let data = Data { observed: &observed, drivers: &[], drifting: &[price] };
        let mut pass = Pass::default();
        if run(&system, data, Keep::Everything, &mut pass).is_ok() {
            assert_covariances(&pass)?;
        }
    }

    /// A flat prior convolved with any proper one is still flat.
    #[test]
    fn nothing_depends_on_the_start_scale(
        noise in proptest::collection::vec(-1.0..1.0f64, 40),
        factor in 0.02..50.0f64,
        level in 0.01..1.0f64,
    ) {
        let structure = Structure {
            trend: Trend::LocalLinear,
            seasons: vec![Season { period: 4.0, harmonics: None, fixed: false }],
            drivers: 1,
            ..Structure::default()
        };
        let system = structure.model().system_at(&[0.5, level, 0.01, 0.05]).unwrap();
        let driver: Vec<f64> = (0..40).map(|t| f64::from(t % 7) - 3.0).collect();
        let mut observed = noise.clone();
        observed[3] = f64::NAN;
        let data = Data { observed: &observed, drivers: &[driver], drifting: &[] };
        let (mut a, mut b) = (Pass::default(), Pass::default());
        let scale = system.start_scale();
        run_from(&system, data, Start::Scale(scale), Keep::Everything, &mut a).unwrap();
        run_from(&system, data, Start::Scale(scale * factor), Keep::Everything, &mut b).unwrap();
        prop_assert!((a.log_likelihood - b.log_likelihood).abs() < 1e-9);
        a.whiten_rows();
        b.whiten_rows();
        let level = crate::smoother::Functional::States(vec![(0, 1.0)]);
        let [x, y] = [&a, &b].map(|pass| {
            crate::smoother::run(&system, data, pass, std::slice::from_ref(&level), None).unwrap().functionals
        });
        for t in 0..40 {
            prop_assert!((x[0].mean[t] - y[0].mean[t]).abs() < 1e-9);
            prop_assert!((x[0].variance[t] / y[0].variance[t] - 1.0).abs() < 1e-9);
        }
    }
}
