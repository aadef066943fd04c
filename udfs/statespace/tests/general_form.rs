//! The named structures, written out as matrices from their definitions, give the numbers of the named structures to 1e-9, and with
//! open variances the same optimum. `general_systems.rs` has what only matrices can say.

#[path = "support/matrices.rs"]
mod matrices;
#[path = "support/plain.rs"]
mod plain;
#[path = "support/series.rs"]
mod series;
#[path = "support/simulate.rs"]
mod simulate;

use std::f64::consts::TAU;

use matrices::{TOLERANCE, close, run};
use plain::plain;
use series::column;
use simulate::simulate;
use stillwell_statespace::structure::{Cycle, Role, Season, Structure, Trend};
use stillwell_statespace::{Evaluation, GeneralForm, Request, SeasonRequest, Series, State, Workspace, fit};

/// A block-diagonal system under construction: Durbin & Koopman (2012), 3.2 to 3.5, by the letter.
#[derive(Default)]
struct Blocks {
    z: Vec<Option<f64>>,
    /// The component that each state belongs to; a constant coefficient belongs to none.
    role: Vec<Option<Role>>,
    t: Vec<(usize, usize, f64)>,
    /// State and variance of each disturbance.
    q: Vec<(usize, f64)>,
    /// Proper variances and covariances; states not named are diffuse.
    p1: Vec<(usize, usize, f64)>,
    drivers: Vec<String>,
}

impl Blocks {
    fn states(&mut self, role: Option<Role>, z: &[Option<f64>]) -> usize {
        self.z.extend_from_slice(z);
        self.role.resize(self.z.len(), role);
        self.z.len() - z.len()
    }

    fn trend(&mut self, level: Option<f64>, slope: Option<Option<f64>>, damping: Option<f64>) {
        let at = self.states(Some(Role::Level), &[Some(1.0)]);
        self.t.push((at, at, 1.0));
        self.q.extend(level.map(|v| (at, v)));
        if let Some(slope) = slope {
            let b = self.states(Some(Role::Slope), &[Some(0.0)]);
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
        let at = self.states(Some(Role::Season), &z);
        self.t.extend((0..period - 1).map(|j| (at, at + j, -1.0)));
        self.t.extend((1..period - 1).map(|i| (at + i, at + i - 1, 1.0)));
        self.q.extend(variance.map(|v| (at, v)));
    }

    fn rotation(&mut self, role: Role, period: f64, damping: f64) -> usize {
        let at = self.states(Some(role), &[Some(1.0), Some(0.0)]);
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
                let at = self.states(Some(Role::Season), &[Some(1.0)]);
                self.t.push((at, at, -1.0));
                self.q.push((at, variance));
            } else {
                let at = self.rotation(Role::Season, period / j as f64, 1.0);
                self.q.extend([(at, variance), (at + 1, variance)]);
            }
        }
    }

    fn cycle(&mut self, period: f64, damping: f64, variance: f64) {
        let at = self.rotation(Role::Cycle, period, damping);
        self.q.extend([(at, variance), (at + 1, variance)]);
        let spread = variance / (1.0 - damping * damping);
        self.p1.extend([(at, at, spread), (at + 1, at + 1, spread)]);
    }

    /// AR(2) with its stationary start: variance `(1 - b) s / ((1 + b) ((1 - b)^2 - a^2))` (Box & Jenkins 1976, 3.2.4).
    fn autoregression(&mut self, a: f64, b: f64, variance: f64) {
        let at = self.states(Some(Role::Autoregression), &[Some(1.0), Some(0.0)]);
        self.t.extend([(at, at, a), (at, at + 1, b), (at + 1, at, 1.0)]);
        self.q.push((at, variance));
        let v = (1.0 - b) * variance / ((1.0 + b) * ((1.0 - b).powi(2) - a * a));
        let c = v * a / (1.0 - b);
        self.p1.extend([(at, at, v), (at + 1, at + 1, v), (at, at + 1, c), (at + 1, at, c)]);
    }

    /// A drifting coefficient where there is a variance, the first one being `Role::Driver(0)`.
    fn driver(&mut self, name: &str, variance: Option<f64>) {
        let drifting = self.role.iter().filter(|role| matches!(role, Some(Role::Driver(_)))).count();
        let at = self.states(variance.map(|_| Role::Driver(drifting)), &[None]);
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
    let without = Structure { drivers: 1, ..named(Trend::None) };
    add("no trend", without, &[1.3], &|b| b.driver("price", None));
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
        let roles = [
            Role::Level,
            Role::Slope,
            Role::Season,
            Role::Cycle,
            Role::Autoregression,
            Role::Driver(0),
            Role::Driver(1),
        ];
        for role in roles {
            let Some(component) = named.component(role) else {
                assert!(!blocks.role.contains(&Some(role)), "{name}: {role:?} is in the matrices only");
                continue;
            };
            // What stands in the observation, or, for the slope and a coefficient, the state itself.
            let shown = (0..blocks.z.len()).filter(|&i| blocks.role[i] == Some(role));
            let shown: Vec<(f64, &State)> = match role {
                Role::Slope | Role::Driver(_) => shown.map(|i| (1.0, &general.states[i])).collect(),
                _ => shown
                    .filter_map(|i| blocks.z[i].filter(|z| *z != 0.0).map(|z| (z, &general.states[i])))
                    .collect(),
            };
            let sum: Vec<f64> =
                (0..N).map(|t| shown.iter().map(|(z, state)| z * state.value[t]).sum()).collect();
            close(&format!("{name}: {role:?}"), &sum, &component.value, TOLERANCE);
            if let [(_, state)] = shown[..] {
                close(
                    &format!("{name}: error of {role:?}"),
                    &state.std_error,
                    &component.std_error,
                    TOLERANCE,
                );
            }
        }
        let constant = blocks.z.iter().zip(&blocks.role).position(|(z, role)| z.is_none() && role.is_none());
        assert_eq!(constant.is_some(), structure.drivers > 0, "{name}");
        if let Some(i) = constant {
            let (value, error) = named.coefficient(0);
            close(name, &general.states[i].value, &[value; N], TOLERANCE);
            close(name, &general.states[i].std_error, &[error; N], TOLERANCE);
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

/// The request for a structure, everything in it open.
fn request(structure: &Structure) -> Request {
    let names = |count: usize| (0..count).map(|i| format!("driver_{i}")).collect();
    Request {
        season: SeasonRequest::Given(structure.seasons.iter().map(|s| s.period).collect()),
        harmonics: structure
            .seasons
            .iter()
            .map(|s| s.harmonics)
            .collect::<Option<Vec<_>>>()
            .filter(|h| !h.is_empty()),
        fixed_season: structure.seasons.iter().any(|s| s.fixed),
        drivers: names(structure.drivers),
        drifting_drivers: structure.drifting_drivers.clone(),
        ..plain(structure.trend)
    }
}

#[test]
fn open_variances_reach_the_optimum_of_every_named_structure() {
    let (mut equal, mut above) = (0, 0);
    for (name, structure, values, blocks) in cases() {
        let parameters = structure.model().parameters().len();
        let mixed = structure.seasons.iter().any(|s| s.harmonics.is_none())
            && structure.seasons.iter().any(|s| s.harmonics.is_some());
        // Dampings, periods and coefficients stand in T, where nothing is estimated; one call cannot ask for dummies and harmonics.
        let only_variances =
            !(structure.trend == Trend::Damped || structure.cycle.is_some() || structure.autoregression > 0);
        if !only_variances || mixed {
            continue;
        }
        let series = series_of(&structure, &values);
        let named = fit(&series, &request(&structure), &mut Workspace::new()).expect("a fit");
        assert_eq!(named.structure(), &structure, "{name}");
        let mut form = blocks.form(1.0);
        form.h = None;
        let g = form.disturbances();
        (0..g).for_each(|k| form.q[k * g + k] = None);
        let general = run(&form, &all_in_z(&series));
        let difference = general.log_likelihood - named.diagnostics().log_likelihood;
        assert!(named.converged() && general.converged, "{name}");
        assert!(difference > -1e-6, "{name}: log-likelihood {difference:e} below the named one");
        if 1 + g == parameters {
            assert!(difference < 1e-6, "{name}: log-likelihood {difference:e} above the named one");
            for (ours, other) in general.variances.iter().zip(named.parameters()) {
                assert!(
                    (ours.value - other.value).abs() < 1e-3 * (1.0 + other.value),
                    "{name}: {ours:?} {other:?}"
                );
            }
            equal += 1;
        } else {
            // One variance for all states of a season is one number; as matrices each state has its own, which can only fit better.
            above += 1;
        }
    }
    assert_eq!((equal, above), (9, 2));
}
