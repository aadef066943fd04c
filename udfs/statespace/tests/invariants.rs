//! Invariants of likelihood, score, smoother and estimation on random structures and data.

#[path = "support/driver.rs"]
mod driver;
#[path = "support/simulate.rs"]
mod simulate;

use driver::driver;
use nalgebra::{DMatrix, DVector};
use proptest::prelude::*;
use simulate::simulate;
use stillwell_statespace::structure::{Cycle, Link, Role, Season, Structure, Trend};
use stillwell_statespace::{Evaluation, Series};

fn trends() -> impl Strategy<Value = Trend> {
    prop_oneof![
        Just(Trend::None),
        Just(Trend::FixedLevel),
        Just(Trend::LocalLevel),
        Just(Trend::FixedLine),
        Just(Trend::LocalLinear),
        Just(Trend::Smooth),
        Just(Trend::Damped),
    ]
}

fn seasons() -> impl Strategy<Value = Vec<Season>> {
    let season = |period: f64, harmonics: Option<usize>| {
        any::<bool>().prop_map(move |fixed| vec![Season { period, harmonics, fixed }])
    };
    // Two that share no frequency: what they share no series could tell apart.
    let two = |first: (f64, Option<usize>), second: (f64, Option<usize>)| {
        (season(first.0, first.1), season(second.0, second.1)).prop_map(|(a, b)| [a, b].concat())
    };
    prop_oneof![
        Just(Vec::new()),
        season(4.0, None),
        season(7.0, None),
        season(6.0, Some(3)),
        season(12.4, Some(2)),
        two((4.0, None), (7.0, None)),
        two((4.0, None), (12.4, Some(2))),
        two((6.0, Some(3)), (12.4, Some(2))),
    ]
}

prop_compose! {
    fn structures()(
        trend in trends(),
        seasons in seasons(),
        cycle in any::<bool>(),
        autoregression in 0usize..3,
        drivers in 0usize..2,
        drifting in 0usize..2,
    ) -> Structure {
        Structure {
            trend,
            seasons,
            cycle: cycle.then_some(Cycle { shortest: 3.0, longest: 30.0 }),
            autoregression,
            // Without a trend something else must be there.
            drivers: if trend == Trend::None { 1 } else { drivers },
            drifting_drivers: (0..drifting).map(|i| format!("price_{i}")).collect(),
        }
    }
}

/// A structure, parameter values inside their bounds, and a series of it with some points missing.
#[derive(Debug, Clone)]
struct Setting {
    structure: Structure,
    values: Vec<f64>,
    series: Series,
}

prop_compose! {
    fn settings()(
        structure in structures(),
        draws in proptest::collection::vec(0.05f64..1.0, 16),
        seed in any::<u64>(),
        missing in proptest::collection::vec(0usize..60, 0..12),
    ) -> Setting {
        let n = 60;
        let values: Vec<f64> = structure.model().parameters().iter().enumerate().map(|(i, p)| match p.link {
            Link::Variance => draws[i],
            Link::Between { low, high } => low + (high - low) * (0.1 + 0.8 * draws[i]),
            // Small coefficients are stationary whatever their signs.
            Link::Free => 0.45 * (2.0 * draws[i] - 1.0),
        }).collect();
        let drifting = structure.drifting_drivers.iter().enumerate().map(|(i, _)| driver(n, i as f64)).collect();
        let mut series = simulate(&structure, &values, n, 2.0, drifting, seed);
        series.drivers = (0..structure.drivers).map(|i| driver(n, 7.0 + i as f64)).collect();
        for t in missing {
            series.observed[t] = f64::NAN;
        }
        Setting { structure, values, series }
    }
}

impl Setting {
    fn at(&self, values: &[f64]) -> Evaluation {
        Evaluation::new(self.structure.model(), values, self.series.clone()).expect("a likelihood")
    }

    /// Diffuse log-likelihood by generalised least squares on the dense covariance of the observed points: no recursion
    /// and no start covariance; missing points are rows that are simply not there.
    fn dense(&self) -> f64 {
        let system = self.structure.model().system_at(&self.values).expect("stationary");
        let (n, m) = (self.series.observed.len(), system.states);
        let mut t = DMatrix::identity(m, m);
        let mut columns: Vec<f64> = t.transpose().iter().copied().collect();
        system.forward(&mut columns, m);
        t.copy_from(&DMatrix::from_row_slice(m, m, &columns));
        let z = |at: usize| -> DVector<f64> {
            let mut z = DVector::<f64>::zeros(m);
            system.fixed_loads.iter().for_each(|&(i, v)| z[i] += v);
            system.driver_loads.iter().for_each(|&(i, d)| z[i] += self.series.drifting_drivers[d][at]);
            z
        };
        let mut state = DMatrix::<f64>::zeros(m, m);
        for block in &system.proper {
            for i in 0..block.size {
                for j in 0..block.size {
                    state[(block.offset + i, block.offset + j)] = block.covariance[i * block.size + j];
                }
            }
        }
        let q = DMatrix::from_diagonal(&DVector::from_column_slice(&system.q));
        let mut states = vec![state];
        for at in 1..n {
            states.push(&t * &states[at - 1] * t.transpose() + &q);
        }
        let seen: Vec<usize> = (0..n).filter(|&i| !self.series.observed[i].is_nan()).collect();
        let mut v = DMatrix::zeros(seen.len(), seen.len());
        for (a, &first) in seen.iter().enumerate() {
            let mut ahead = &states[first] * z(first);
            let mut at = first;
            for (b, &last) in seen.iter().enumerate().skip(a) {
                while at < last {
                    ahead = &t * ahead;
                    at += 1;
                }
                let c = z(last).dot(&ahead) + if a == b { system.h } else { 0.0 };
                (v[(a, b)], v[(b, a)]) = (c, c);
            }
        }
        let mut powers = vec![DMatrix::identity(m, m)];
        for k in 1..n {
            powers.push(&t * &powers[k - 1]);
        }
        let d = system.diffuse.len() + self.structure.drivers;
        let x = DMatrix::from_fn(seen.len(), d, |a, j| match j.checked_sub(system.diffuse.len()) {
            None => z(seen[a]).dot(&powers[seen[a]].column(system.diffuse[j])),
            Some(k) => self.series.drivers[k][seen[a]],
        });
        let y = DVector::from_fn(seen.len(), |a, _| self.series.observed[seen[a]]);
        let factor = v.cholesky().expect("positive definite");
        let white_x = factor.l().solve_lower_triangular(&x).expect("regular");
        let white_y = factor.l().solve_lower_triangular(&y).expect("regular");
        let qr = white_x.clone().qr();
        let log_r: f64 = qr.r().diagonal().iter().map(|r| r.abs().ln()).sum();
        let rest = &white_y - qr.q() * (qr.q().transpose() * &white_y);
        let log_v: f64 = 2.0 * factor.l().diagonal().iter().map(|l| l.ln()).sum::<f64>();
        let free = (seen.len() - d) as f64;
        -0.5 * (free * std::f64::consts::TAU.ln() + log_v + 2.0 * log_r + rest.norm_squared())
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 32, ..ProptestConfig::default() })]

    #[test]
    fn likelihood_equals_dense_least_squares_on_the_observed_rows(setting in settings()) {
        let ours = setting.at(&setting.values).log_likelihood();
        prop_assert!((ours - setting.dense()).abs() < 1e-7, "{ours} {}", setting.dense());
    }

    #[test]
    fn score_equals_finite_differences(setting in settings()) {
        let (gradient, information) = setting.at(&setting.values).score_and_information();
        let p = gradient.len();
        for i in 0..p {
            // Five-point rule: error of fourth order in the step.
            let step = 1e-3 * setting.values[i].abs().max(1e-2);
            let at = |k: f64| {
                let mut values = setting.values.clone();
                values[i] += k * step;
                setting.at(&values).log_likelihood()
            };
            let slope = (8.0 * (at(1.0) - at(-1.0)) - (at(2.0) - at(-2.0))) / (12.0 * step);
            prop_assert!((gradient[i] - slope).abs() <= 1e-5 * (1.0 + slope.abs()), "{i}: {} {slope}", gradient[i]);
            for j in 0..p {
                prop_assert_eq!(information[i * p + j], information[j * p + i]);
            }
        }
        let matrix = DMatrix::from_row_slice(p, p, &information);
        let size = matrix.amax();
        let smallest = matrix.symmetric_eigenvalues().min();
        prop_assert!(smallest >= -1e-9 * size, "average information has eigenvalue {smallest}");
    }

    #[test]
    fn smoothed_variances_shrink_and_stay_positive(setting in settings()) {
        let evaluation = setting.at(&setting.values);
        for role in [Role::Level, Role::Slope, Role::Season, Role::Cycle] {
            if let Some(state) = evaluation.component(role) {
                prop_assert!(state.std_error.iter().all(|s| s.is_finite() && *s >= 0.0));
            }
        }
        // The signal is known at least as well as the irregular variance allows where there is an observation.
        let signal = evaluation.signal();
        for (t, y) in setting.series.observed.iter().enumerate() {
            if !y.is_nan() {
                prop_assert!(signal.std_error[t].powi(2) <= setting.values[0] * (1.0 + 1e-9));
            }
        }
    }

    #[test]
    fn smoother_meets_the_forecast_at_the_end(setting in settings()) {
        let evaluation = setting.at(&setting.values);
        let (mut level, slope) = (evaluation.component(Role::Level), evaluation.component(Role::Slope));
        // A series with one more, missing, point: its smoothed signal there is the one-step forecast.
        let mut longer = setting.clone();
        longer.series.observed.push(f64::NAN);
        for x in longer.series.drivers.iter_mut().chain(&mut longer.series.drifting_drivers) {
            x.push(0.5);
        }
        let extended = longer.at(&setting.values);
        prop_assert!((extended.log_likelihood() - evaluation.log_likelihood()).abs() < 1e-10);
        let mut with_plan = setting.clone();
        for x in with_plan.series.drivers.iter_mut().chain(&mut with_plan.series.drifting_drivers) {
            x.push(0.5);
        }
        let (mean, _, variance) = with_plan.at(&setting.values).forecast(1);
        let signal = extended.signal();
        let n = setting.series.observed.len();
        prop_assert!((signal.value[n] - mean[0]).abs() < 1e-8 * (1.0 + mean[0].abs()));
        prop_assert!((signal.std_error[n].powi(2) / variance[0] - 1.0).abs() < 1e-8);
        // And the level's own equation holds between the last smoothed point and the predicted one.
        if let (Some(level), Some(predicted)) = (level.take(), extended.component(Role::Level)) {
            let slope = slope.map_or(0.0, |s| s.value[n - 1]);
            let expected = level.value[n - 1] + slope;
            prop_assert!((predicted.value[n] - expected).abs() < 1e-8 * (1.0 + expected.abs()));
        }
    }

    #[test]
    fn a_missing_point_before_the_first_changes_nothing(setting in settings(), driver in 0.01f64..100.0) {
        // A flat start one step earlier is a flat start, up to the determinant of T on the diffuse states.
        let mut earlier = setting.clone();
        earlier.series.observed.insert(0, f64::NAN);
        for x in earlier.series.drivers.iter_mut().chain(&mut earlier.series.drifting_drivers) {
            x.insert(0, driver);
        }
        // |det T| = 1 for every non-stationary block here.
        let (a, b) = (earlier.at(&setting.values).log_likelihood(), setting.at(&setting.values).log_likelihood());
        prop_assert!((a - b).abs() < 1e-8, "{a} {b}");
    }
}
