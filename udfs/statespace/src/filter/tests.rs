//! What holds at every point of a pass, whatever the data: covariances are covariances, and the start scale cancels.

use super::*;
use crate::kernel::{Buffers, Kernel};
use crate::request::Series;
use crate::structure::Model;
use crate::structure::{Season, Structure, Trend};
use crate::system::System;
use proptest::prelude::*;

fn kernel(model: &Model, system: &System, series: &Series) -> Kernel<f64> {
    let mut kernel = Kernel::new(model, system, series.drifting_drivers.len(), Buffers::default());
    kernel.data.load(0, series);
    kernel
}

/// No predicted covariance has a direction of negative variance.
fn assert_covariances(pass: &Pass<f64>) -> Result<(), TestCaseError> {
    let m = pass.m;
    for t in 0..pass.n {
        let p = pass.covariance(t);
        let matrix = nalgebra::DMatrix::from_fn(m, m, |i, j| p[packed_at(i, j)]);
        let largest = matrix.amax();
        let smallest = matrix.symmetric_eigenvalues().min();
        prop_assert!(smallest >= -1e-12 * largest, "eigenvalue {smallest} beside {largest}");
    }
    Ok(())
}

proptest! {
    #[test]
    fn covariances_are_not_negative(
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
        let (model, system) = (structure.model(), structure.model().system_at(&values).unwrap());
        let mut observed = noise.clone();
        observed[gap..gap + 8].fill(f64::NAN);
        let price: Vec<f64> = (0..60).map(|t| (f64::from(t) * 0.7).sin()).collect();
        let series = Series { observed, drivers: Vec::new(), drifting_drivers: vec![price] };
        let mut kernel = kernel(&model, &system, &series);
        kernel.filter(Keep::Everything);
        if kernel.buffers.pass.reached(0).is_ok() {
            assert_covariances(&kernel.buffers.pass)?;
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
        let (model, system) = (structure.model(), structure.model().system_at(&[0.5, level, 0.01, 0.05]).unwrap());
        let driver: Vec<f64> = (0..40).map(|t| f64::from(t % 7) - 3.0).collect();
        let mut observed = noise.clone();
        observed[3] = f64::NAN;
        let series = Series { observed, drivers: vec![driver], drifting_drivers: Vec::new() };
        let level = crate::smoother::Functional::States(vec![(0, 1.0)]);
        let smoothed = [1.0, factor].map(|factor| {
            let mut kernel = kernel(&model, &system, &series);
            kernel.dynamics.start_scale *= factor;
            kernel.smooth(std::slice::from_ref(&level), None, |_| {});
            (kernel.buffers.pass.reached(0).unwrap(), kernel.buffers.smoother.lane(0, 40).functionals)
        });
        let [(a, x), (b, y)] = &smoothed;
        prop_assert!((a - b).abs() < 1e-9);
        for t in 0..40 {
            prop_assert!((x[0].mean[t] - y[0].mean[t]).abs() < 1e-9);
            prop_assert!((x[0].variance[t] / y[0].variance[t] - 1.0).abs() < 1e-9);
        }
    }
}
