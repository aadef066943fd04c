//! What only matrices can say (constants, starts, correlated disturbances, another basis) against what it must equal, and mistakes in
//! matrices. `general_form.rs` holds the named structures against their matrices.

#[path = "support/matrices.rs"]
mod matrices;
#[path = "support/simulate.rs"]
mod simulate;

use std::f64::consts::TAU;

use matrices::{TOLERANCE, close, run};
use proptest::prelude::*;
use simulate::simulate;
use stillwell_statespace::structure::{Structure, Trend};
use stillwell_statespace::{BadRequest, Evaluation, GeneralForm, Series, Trouble, Workspace};

const N: usize = 60;

/// A local linear trend as matrices: variances 1.3, 0.4 and 0.02.
fn local_linear() -> GeneralForm {
    GeneralForm {
        z: vec![Some(1.0), Some(0.0)],
        t: vec![1.0, 1.0, 0.0, 1.0],
        r: vec![1.0, 0.0, 0.0, 1.0],
        h: Some(1.3),
        q: vec![Some(0.4), Some(0.0), Some(0.0), Some(0.02)],
        p1: vec![None, Some(0.0), Some(0.0), None],
        ..GeneralForm::default()
    }
}

#[test]
fn constants_move_the_states_and_the_observations() {
    // A level with the constant c is the fixed line whose slope is known to be c; d lifts the observations.
    let base = GeneralForm {
        z: vec![Some(1.0)],
        t: vec![1.0],
        r: vec![1.0],
        h: Some(0.5),
        q: vec![Some(0.2)],
        c: vec![0.75],
        d: -40.0,
        ..GeneralForm::default()
    };
    let observed: Vec<f64> = (0..N).map(|t| 60.0 + 0.75 * t as f64 + (t as f64 * 1.7).sin()).collect();
    let plain: Vec<f64> = (0..N).map(|t| observed[t] + 40.0 - 0.75 * t as f64).collect();
    let series = |observed: &[f64]| Series { observed: observed.to_vec(), ..Series::default() };
    let ours = run(&base, &series(&observed));
    let without = run(&GeneralForm { c: Vec::new(), d: 0.0, ..base.clone() }, &series(&plain));
    assert!((ours.log_likelihood - without.log_likelihood).abs() < TOLERANCE);
    let expected: Vec<f64> =
        without.states[0].value.iter().enumerate().map(|(t, v)| v + 0.75 * t as f64).collect();
    close("state", &ours.states[0].value, &expected, TOLERANCE);
    close("error", &ours.states[0].std_error, &without.states[0].std_error, TOLERANCE);
    let fitted: Vec<f64> = expected.iter().map(|v| v - 40.0).collect();
    close("fitted", &ours.fitted, &fitted, TOLERANCE);
}

/// With a proper start and one point, everything is a two-variable normal law.
#[test]
fn a_proper_start_is_a_prior() {
    let form = GeneralForm {
        z: vec![Some(2.0)],
        t: vec![1.0],
        h: Some(3.0),
        a1: vec![5.0],
        p1: vec![Some(4.0)],
        ..GeneralForm::default()
    };
    let fit = run(&form, &Series { observed: vec![13.0], ..Series::default() });
    // y ~ N(10, 2^2 4 + 3 = 19); a given y: 5 + 4 2 / 19 (13 - 10), variance 4 - (4 2)^2 / 19.
    assert!((fit.states[0].value[0] - (5.0 + 24.0 / 19.0)).abs() < 1e-12);
    assert!((fit.states[0].std_error[0] - (4.0 - 64.0 / 19.0_f64).sqrt()).abs() < 1e-12);
    let density = -0.5 * ((TAU * 19.0).ln() + 9.0 / 19.0);
    assert!((fit.log_likelihood - density).abs() < 1e-12);
}

#[test]
fn points_after_the_last_observation_are_forecasts() {
    let structure = Structure { trend: Trend::LocalLinear, ..Structure::default() };
    let values = [1.3, 0.4, 0.02];
    let mut series = simulate(&structure, &values, N, 3.0, Vec::new(), 5);
    for gap in [0, 17, 18, 19, 41] {
        series.observed[gap] = f64::NAN;
    }
    let named = Evaluation::new(structure.model(), &values, series.clone()).expect("an evaluation");
    let (mean, _, variance) = named.forecast(5);
    series.observed.extend([f64::NAN; 5]);
    let fit = run(&local_linear(), &series);
    close("forecast", &fit.fitted[N..], &mean, TOLERANCE);
    let z = stillwell_statespace::quantile::normal_quantile(0.95);
    let upper: Vec<f64> = mean.iter().zip(&variance).map(|(m, v)| m + z * v.sqrt()).collect();
    close("upper", &fit.upper[N..], &upper, TOLERANCE);
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 40, failure_persistence: None, ..ProptestConfig::default() })]

    /// Another basis of the states, b = M a, is another system for the same series: T becomes M T M^-1, R M R, Z Z M^-1. With a proper start
    /// its likelihood and signal are the same, and correlated disturbances and starts come up on the way.
    #[test]
    fn another_basis_of_the_states_changes_nothing(
        m in proptest::collection::vec(-1.0..1.0f64, 4),
        noise in proptest::collection::vec(-2.0..2.0f64, 40),
        correlation in -0.9..0.9f64,
    ) {
        let basis = nalgebra::Matrix2::new(2.0 + m[0], m[1], m[2], 2.0 + m[3]);
        let inverse = basis.try_inverse().expect("diagonally dominant");
        let t = nalgebra::Matrix2::new(1.0, 1.0, 0.0, 0.9);
        let z = nalgebra::RowVector2::new(1.0, 0.0);
        let off = correlation * (0.5_f64 * 0.1).sqrt();
        let q = nalgebra::Matrix2::new(0.5, off, off, 0.1);
        let p1 = nalgebra::Matrix2::new(3.0, 0.4, 0.4, 1.0);
        let rows = |x: nalgebra::Matrix2<f64>| vec![x[(0, 0)], x[(0, 1)], x[(1, 0)], x[(1, 1)]];
        let symmetric = |x: nalgebra::Matrix2<f64>| {
            vec![Some(x[(0, 0)]), Some(x[(0, 1)]), Some(x[(0, 1)]), Some(x[(1, 1)])]
        };
        let form = |t, z: nalgebra::RowVector2<f64>, r, q, p1| GeneralForm {
            z: vec![Some(z[0]), Some(z[1])],
            t: rows(t),
            r: rows(r),
            h: Some(0.3),
            q: symmetric(q),
            p1: symmetric(p1),
            ..GeneralForm::default()
        };
        let identity = nalgebra::Matrix2::identity();
        let plain = form(t, z, identity, q, p1);
        let moved = basis * p1 * basis.transpose();
        // Once with the basis in R, once with it in Q.
        let in_r = form(basis * t * inverse, z * inverse, basis, q, moved);
        let in_q = form(basis * t * inverse, z * inverse, identity, basis * q * basis.transpose(), moved);
        let series = Series { observed: noise, ..Series::default() };
        let plain = run(&plain, &series);
        for other in [run(&in_r, &series), run(&in_q, &series)] {
            prop_assert!((other.log_likelihood - plain.log_likelihood).abs() < 1e-9);
            for t in 0..series.observed.len() {
                prop_assert!((other.fitted[t] - plain.fitted[t]).abs() < 1e-9);
            }
        }
    }
}

/// The error that `change` makes of a sound form.
fn refused(change: impl FnOnce(&mut GeneralForm)) -> BadRequest {
    let mut form = local_linear();
    form.check().expect("sound");
    change(&mut form);
    form.check().expect_err("a mistake")
}

#[test]
fn mistakes_are_named() {
    assert_eq!(refused(|f| f.z.clear()).argument, "z");
    assert_eq!(refused(|f| f.t.truncate(3)).argument, "t");
    assert_eq!(refused(|f| f.r.truncate(3)).argument, "r");
    assert_eq!(refused(|f| f.q.truncate(3)).argument, "q");
    assert_eq!(refused(|f| f.q[0] = Some(-1.0)).argument, "q");
    assert_eq!(refused(|f| f.q[1] = None).argument, "q");
    assert_eq!(refused(|f| f.q[1] = Some(0.01)).argument, "q");
    assert_eq!(refused(|f| (f.q[1], f.q[2]) = (Some(9.0), Some(9.0))).argument, "q");
    assert_eq!(refused(|f| f.h = Some(-1.0)).argument, "h");
    assert_eq!(refused(|f| f.d = f64::NAN).argument, "d");
    assert_eq!(refused(|f| f.c = vec![1.0]).argument, "c");
    assert_eq!(refused(|f| f.a1 = vec![1.0, 2.0, 3.0]).argument, "a1");
    assert_eq!(refused(|f| (f.a1, f.p1) = (vec![1.0, 2.0], Vec::new())).argument, "a1");
    assert_eq!(refused(|f| f.z[0] = None).argument, "z");
    assert!(refused(|f| f.t.truncate(3)).why.contains("2 x 2"));
}

#[test]
fn a_state_that_no_observation_reaches_is_named() {
    // A level, and beside it a state that neither stands in the observation nor moves the level.
    let form = GeneralForm { t: vec![1.0, 0.0, 0.0, 1.0], ..local_linear() };
    let observed = (0..30).map(|t| f64::from(t * t % 11)).collect();
    let fit = form.fit(&Series { observed, ..Series::default() }, 0.9, &mut Workspace::new());
    assert_eq!(fit, Err(Trouble::UndeterminedState { state: 2 }));
}
