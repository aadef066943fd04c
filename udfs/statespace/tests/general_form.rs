//! The named structures, written out as matrices from their definitions, give the numbers of the named structures to 1e-9; and what
//! only matrices can say (constants, starts, correlated disturbances) against what it must equal.

#[path = "support/series.rs"]
mod series;
#[path = "support/simulate.rs"]
mod simulate;

use std::f64::consts::TAU;

use proptest::prelude::*;
use series::column;
use simulate::simulate;
use stillwell_statespace::structure::{Cycle, Role, Season, Structure, Trend};
use stillwell_statespace::{
    BadRequest, Evaluation, GeneralFit, GeneralForm, Series, State, Trouble, Workspace,
};

/// A block-diagonal system under construction: Durbin & Koopman (2012), 3.2 to 3.5, by the letter.
#[derive(Default)]
struct Blocks {
    z: Vec<Option<f64>>,
    t: Vec<(usize, usize, f64)>,
    /// State and variance of each disturbance.
    q: Vec<(usize, f64)>,
    /// Proper variances and covariances; states not named are diffuse.
    p1: Vec<(usize, usize, f64)>,
    drivers: Vec<String>,
}

impl Blocks {
    fn states(&mut self, z: &[Option<f64>]) -> usize {
        self.z.extend_from_slice(z);
        self.z.len() - z.len()
    }

    fn trend(&mut self, level: Option<f64>, slope: Option<Option<f64>>, damping: Option<f64>) {
        let at = self.states(&[Some(1.0)]);
        self.t.push((at, at, 1.0));
        self.q.extend(level.map(|v| (at, v)));
        if let Some(slope) = slope {
            let b = self.states(&[Some(0.0)]);
            self.t.extend([(at, b, 1.0), (b, b, damping.unwrap_or(1.0))]);
            self.q.extend(slope.map(|v| (b, v)));
            if let (Some(damping), Some(v)) = (damping, slope) {
                self.p1.push((b, b, v / (1.0 - damping * damping)));
            }
        }
    }

    fn dummies(&mut self, period: usize, variance: Option<f64>) {
        let mut z = vec![Some(0.0); period - 1];
        z[0] = Some(1.0);
        let at = self.states(&z);
        self.t.extend((0..period - 1).map(|j| (at, at + j, -1.0)));
        self.t.extend((1..period - 1).map(|i| (at + i, at + i - 1, 1.0)));
        self.q.extend(variance.map(|v| (at, v)));
    }

    fn rotation(&mut self, period: f64, damping: f64) -> usize {
        let at = self.states(&[Some(1.0), Some(0.0)]);
        let (sin, cos) = (TAU / period).sin_cos();
        self.t.extend([
            (at, at, damping * cos),
            (at, at + 1, damping * sin),
            (at + 1, at, -damping * sin),
            (at + 1, at + 1, damping * cos),
        ]);
        at
    }

    fn harmonics(&mut self, period: f64, count: usize, variance: f64) {
        for j in 1..=count {
            if 2.0 * j as f64 == period {
                let at = self.states(&[Some(1.0)]);
                self.t.push((at, at, -1.0));
                self.q.push((at, variance));
            } else {
                let at = self.rotation(period / j as f64, 1.0);
                self.q.extend([(at, variance), (at + 1, variance)]);
            }
        }
    }

    fn cycle(&mut self, period: f64, damping: f64, variance: f64) {
        let at = self.rotation(period, damping);
        self.q.extend([(at, variance), (at + 1, variance)]);
        let spread = variance / (1.0 - damping * damping);
        self.p1.extend([(at, at, spread), (at + 1, at + 1, spread)]);
    }

    /// AR(2) with its stationary start: variance `(1 - b) s / ((1 + b) ((1 - b)^2 - a^2))` (Box & Jenkins 1976, 3.2.4).
    fn autoregression(&mut self, a: f64, b: f64, variance: f64) {
        let at = self.states(&[Some(1.0), Some(0.0)]);
        self.t.extend([(at, at, a), (at, at + 1, b), (at + 1, at, 1.0)]);
        self.q.push((at, variance));
        let v = (1.0 - b) * variance / ((1.0 + b) * ((1.0 - b).powi(2) - a * a));
        let c = v * a / (1.0 - b);
        self.p1.extend([(at, at, v), (at + 1, at + 1, v), (at, at + 1, c), (at + 1, at, c)]);
    }

    fn driver(&mut self, name: &str, variance: Option<f64>) {
        let at = self.states(&[None]);
        self.t.push((at, at, 1.0));
        self.q.extend(variance.map(|v| (at, v)));
        self.drivers.push(name.to_owned());
    }

    fn form(&self, h: f64) -> GeneralForm {
        let (m, g) = (self.z.len(), self.q.len());
        let mut form = GeneralForm {
            z: self.z.clone(),
            t: vec![0.0; m * m],
            r: vec![0.0; m * g],
            h: Some(h),
            q: vec![Some(0.0); g * g],
            p1: vec![Some(0.0); m * m],
            drivers: self.drivers.clone(),
            ..GeneralForm::default()
        };
        self.t.iter().for_each(|&(i, j, v)| form.t[i * m + j] += v);
        for (k, &(state, variance)) in self.q.iter().enumerate() {
            form.r[state * g + k] = 1.0;
            form.q[k * g + k] = Some(variance);
        }
        for i in 0..m {
            let proper = self.p1.iter().any(|&(a, b, _)| a == i && b == i);
            if !proper {
                form.p1[i * m + i] = None;
            }
        }
        self.p1.iter().for_each(|&(i, j, v)| form.p1[i * m + j] = Some(v));
        form
    }
}

const N: usize = 60;
const TOLERANCE: f64 = 1e-9;

fn wave(phase: f64) -> Vec<f64> {
    (0..N).map(|t| 1.0 + (t as f64 * 0.7 + phase).sin()).collect()
}

/// A structure, its parameters, its drivers, and itself as matrices.
fn cases() -> Vec<(&'static str, Structure, Vec<f64>, Blocks)> {
    let named = |trend| Structure { trend, ..Structure::default() };
    let seasonal = |trend, period, harmonics, fixed| Structure {
        seasons: vec![Season { period, harmonics, fixed }],
        ..named(trend)
    };
    let mut cases = Vec::new();
    let mut add = |name, structure, values: &[f64], build: &dyn Fn(&mut Blocks)| {
        let mut blocks = Blocks::default();
        build(&mut blocks);
        cases.push((name, structure, values.to_vec(), blocks));
    };
    add("local level", named(Trend::LocalLevel), &[1.3, 0.4], &|b| b.trend(Some(0.4), None, None));
    add("local linear", named(Trend::LocalLinear), &[1.3, 0.4, 0.02], &|b| {
        b.trend(Some(0.4), Some(Some(0.02)), None);
    });
    add("smooth", named(Trend::Smooth), &[1.3, 0.02], &|b| b.trend(None, Some(Some(0.02)), None));
    add("damped", named(Trend::Damped), &[1.3, 0.4, 0.02, 0.85], &|b| {
        b.trend(Some(0.4), Some(Some(0.02)), Some(0.85));
    });
    add("fixed level", named(Trend::FixedLevel), &[1.3], &|b| b.trend(None, None, None));
    add("fixed line", named(Trend::FixedLine), &[1.3], &|b| b.trend(None, Some(None), None));
    add("dummies", seasonal(Trend::LocalLevel, 4.0, None, false), &[1.3, 0.4, 0.1], &|b| {
        b.trend(Some(0.4), None, None);
        b.dummies(4, Some(0.1));
    });
    add("fixed dummies", seasonal(Trend::LocalLevel, 7.0, None, true), &[1.3, 0.4], &|b| {
        b.trend(Some(0.4), None, None);
        b.dummies(7, None);
    });
    add("all harmonics", seasonal(Trend::Smooth, 6.0, Some(3), false), &[1.3, 0.02, 0.05], &|b| {
        b.trend(None, Some(Some(0.02)), None);
        b.harmonics(6.0, 3, 0.05);
    });
    add("fractional period", seasonal(Trend::LocalLevel, 12.4, Some(2), false), &[1.3, 0.4, 0.05], &|b| {
        b.trend(Some(0.4), None, None);
        b.harmonics(12.4, 2, 0.05);
    });
    let two = Structure {
        seasons: vec![
            Season { period: 4.0, harmonics: None, fixed: false },
            Season { period: 13.5, harmonics: Some(1), fixed: false },
        ],
        ..named(Trend::LocalLevel)
    };
    add("two seasons", two, &[1.3, 0.4, 0.1, 0.03], &|b| {
        b.trend(Some(0.4), None, None);
        b.dummies(4, Some(0.1));
        b.harmonics(13.5, 1, 0.03);
    });
    let cycle = Structure { cycle: Some(Cycle { shortest: 5.0, longest: 30.0 }), ..named(Trend::LocalLevel) };
    add("cycle", cycle, &[1.3, 0.4, 0.3, 0.8, 11.0], &|b| {
        b.trend(Some(0.4), None, None);
        b.cycle(11.0, 0.8, 0.3);
    });
    let ar = Structure { autoregression: 2, ..named(Trend::FixedLine) };
    add("autoregression", ar, &[1.3, 0.7, 0.5, -0.3], &|b| {
        b.trend(None, Some(None), None);
        b.autoregression(0.5, -0.3, 0.7);
    });
    let driven =
        Structure { drivers: 1, drifting_drivers: vec!["promotion".to_owned()], ..named(Trend::LocalLevel) };
    add("drivers", driven, &[1.3, 0.4, 0.06], &|b| {
        b.trend(Some(0.4), None, None);
        b.driver("price", None);
        b.driver("promotion", Some(0.06));
    });
    cases
}

fn series_of(structure: &Structure, values: &[f64]) -> Series {
    let drifting: Vec<Vec<f64>> = structure.drifting_drivers.iter().map(|_| wave(2.0)).collect();
    let mut series = simulate(structure, values, N, 3.0, drifting, 5);
    series.drivers = (0..structure.drivers).map(|_| wave(0.0)).collect();
    for gap in [0, 17, 18, 19, 41] {
        series.observed[gap] = f64::NAN;
    }
    series
}

/// The series as a system given as matrices wants it: every driver stands in Z.
fn all_in_z(series: &Series) -> Series {
    let all = series.drivers.iter().chain(&series.drifting_drivers).cloned().collect();
    Series { observed: series.observed.clone(), drivers: Vec::new(), drifting_drivers: all }
}

fn run(form: &GeneralForm, series: &Series) -> GeneralFit {
    form.check().expect("matrices that fit together");
    form.fit(series, 0.9, &mut Workspace::new()).expect("a fit")
}

#[track_caller]
fn close(name: &str, ours: &[f64], other: &[f64], tolerance: f64) {
    assert_eq!(ours.len(), other.len(), "{name}");
    for (t, (a, b)) in ours.iter().zip(other).enumerate() {
        assert!((a - b).abs() <= tolerance * (1.0 + b.abs()), "{name} at {t}: {a} {b}");
    }
}

#[test]
fn named_structures_written_as_matrices_give_the_same_numbers() {
    for (name, structure, values, blocks) in cases() {
        let series = series_of(&structure, &values);
        let named = Evaluation::new(structure.model(), &values, series.clone()).expect("an evaluation");
        let general = run(&blocks.form(values[0]), &all_in_z(&series));
        let difference = general.log_likelihood - named.log_likelihood();
        assert!(difference.abs() < TOLERANCE, "{name}: log-likelihood differs by {difference:e}");
        assert_eq!(general.diffuse, named.diffuse_elements(), "{name}");
        close(name, &general.fitted, &named.signal().value, TOLERANCE);
        let state = |s: &State, other: &State| {
            close(name, &s.value, &other.value, TOLERANCE);
            close(name, &s.std_error, &other.std_error, TOLERANCE);
        };
        if let Some(level) = named.component(Role::Level) {
            state(&general.states[0], &level);
        }
        if let Some(slope) = named.component(Role::Slope) {
            state(&general.states[1], &slope);
        }
        if let Some(price) = (structure.drivers > 0).then(|| named.coefficient(0)) {
            close(name, &general.states[1].value[30..31], &[price.0], TOLERANCE);
            close(name, &general.states[1].std_error[30..31], &[price.1], TOLERANCE);
        }
        assert!(general.variances.iter().all(|v| v.known), "{name}");
    }
}

#[test]
fn open_variances_reach_the_optimum_of_the_named_structure() {
    // UK drivers killed or injured, as in tests/reference (series.json): the local level with dummies has its optimum there.
    let text = std::fs::read_to_string(
        std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference/drivers__ll_dummy.json"),
    )
    .expect("the case");
    let case: serde_json::Value = serde_json::from_str(&text).expect("valid JSON");
    let mut blocks = Blocks::default();
    blocks.trend(Some(1.0), None, None);
    blocks.dummies(12, Some(1.0));
    let mut form = blocks.form(1.0);
    form.h = None;
    (form.q[0], form.q[3]) = (None, None);
    let observed = column(case["series"].as_str().expect("a series"), "y");
    let fit = run(&form, &Series { observed, ..Series::default() });
    let reference = case["maximum_likelihood"]["loglik_nd"].as_f64().expect("a number");
    assert!(fit.converged && fit.log_likelihood >= reference - 1e-6, "{} {reference}", fit.log_likelihood);
    assert!(fit.log_likelihood <= reference + 1e-6);
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
    let mut blocks = Blocks::default();
    blocks.trend(Some(0.4), Some(Some(0.02)), None);
    let structure = Structure { trend: Trend::LocalLinear, ..Structure::default() };
    let values = [1.3, 0.4, 0.02];
    let mut series = series_of(&structure, &values);
    let named = Evaluation::new(structure.model(), &values, series.clone()).expect("an evaluation");
    let (mean, _, variance) = named.forecast(5);
    series.observed.extend([f64::NAN; 5]);
    let fit = run(&blocks.form(1.3), &series);
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
    let mut blocks = Blocks::default();
    blocks.trend(Some(0.4), Some(Some(0.02)), None);
    let mut form = blocks.form(1.3);
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
    let mut blocks = Blocks::default();
    blocks.trend(Some(0.4), None, None);
    let at = blocks.states(&[Some(0.0)]);
    blocks.t.push((at, at, 1.0));
    let observed = (0..30).map(|t| f64::from(t * t % 11)).collect();
    let fit = blocks.form(1.0).fit(&Series { observed, ..Series::default() }, 0.9, &mut Workspace::new());
    assert_eq!(fit, Err(Trouble::UndeterminedState { state: 2 }));
}
