//! Forecasts and their sums against the joint normal law of past and future, and what holds of every forecast.

#[path = "support/dense.rs"]
mod dense;
#[path = "support/driver.rs"]
mod driver;
#[path = "support/plain.rs"]
mod plain;
#[path = "support/simulate.rs"]
mod simulate;

use dense::future;
use driver::driver;
use plain::plain;
use simulate::simulate;
use stillwell_statespace::quantile::normal_quantile;
use stillwell_statespace::structure::{Season, Structure, Trend};
use stillwell_statespace::{Fit, Forecast, Request, SeasonRequest, Series, Trouble, Workspace, fit};

const POINTS: usize = 60;
const STEPS: usize = 10;

/// A structure with given parameters, one driver of each kind where it has some, and a series of it with gaps.
struct Case {
    structure: Structure,
    values: Vec<f64>,
    series: Series,
}

impl Case {
    fn new(
        trend: Trend,
        season: Option<Season>,
        values: &[f64],
        drivers: usize,
        drifting: usize,
        seed: u64,
    ) -> Self {
        let structure = Structure {
            trend,
            seasons: season.into_iter().collect(),
            drivers,
            drifting_drivers: (0..drifting).map(|i| format!("promo_{i}")).collect(),
            ..Structure::default()
        };
        // Waves of one form span two dimensions only; the steps on top keep several drivers apart.
        let ahead = |count: usize, from: usize| -> Vec<Vec<f64>> {
            let stepped = |k: usize| {
                let wave = driver(POINTS + STEPS, k as f64);
                wave.iter().enumerate().map(|(t, x)| x + 0.2 * ((t * (2 * k + 3)) % 7) as f64).collect()
            };
            (from..from + count).map(stepped).collect()
        };
        let mut series = simulate(&structure, values, POINTS, 3.0, ahead(drifting, 1), seed);
        series.drivers = ahead(drivers, 4);
        for (t, y) in series.observed.iter_mut().enumerate() {
            *y += 20.0 + series.drivers.iter().map(|x| 2.5 * x[t]).sum::<f64>();
        }
        for t in [3, 20, 21, 22, 58] {
            series.observed[t] = f64::NAN;
        }
        Self { structure, values: values.to_vec(), series }
    }

    fn request(&self) -> Request {
        let names = self.structure.model();
        let names = names.parameters().iter().map(|p| p.name.clone());
        let season = self.structure.seasons.first();
        Request {
            season: SeasonRequest::Given(season.iter().map(|s| s.period).collect()),
            harmonics: season.and_then(|s| s.harmonics).map(|h| vec![h]),
            fixed_season: season.is_some_and(|s| s.fixed),
            known: names.zip(self.values.iter().copied()).collect(),
            drivers: (0..self.structure.drivers).map(|i| format!("price_{i}")).collect(),
            drifting_drivers: self.structure.drifting_drivers.clone(),
            ..plain(self.structure.trend)
        }
    }

    fn fit(&self) -> Fit {
        fit(&self.series, &self.request(), &mut Workspace::new()).expect("a fit")
    }
}

fn cases() -> Vec<Case> {
    let season = |period, harmonics, fixed| Some(Season { period, harmonics, fixed });
    vec![
        Case::new(Trend::FixedLevel, None, &[1.0], 0, 0, 1),
        Case::new(Trend::FixedLine, None, &[1.0], 1, 0, 2),
        Case::new(Trend::LocalLevel, None, &[1.0, 0.3], 0, 0, 3),
        Case::new(Trend::LocalLinear, season(4.0, None, false), &[1.0, 0.3, 0.02, 0.1], 0, 0, 4),
        Case::new(Trend::Smooth, season(7.0, Some(2), true), &[1.0, 0.02], 1, 0, 5),
        Case::new(Trend::Damped, None, &[1.0, 0.3, 0.1, 0.8, 0.1], 0, 1, 6),
        Case::new(Trend::LocalLevel, season(12.0, Some(6), false), &[0.0, 0.3, 0.02, 0.1], 2, 1, 7),
        Case::new(Trend::None, season(5.2, Some(2), false), &[1.0, 0.1], 1, 0, 8),
    ]
}

#[test]
fn steps_and_totals_follow_from_the_joint_law() {
    let z = normal_quantile(0.95);
    for case in cases() {
        let forecast = case.fit().forecast(STEPS, 0.9).expect("a forecast");
        let (mean, covariance) = future(&case.structure, &case.values, &case.series, STEPS);
        let (mut total, mut worst) = (0.0, 0.0_f64);
        for step in 0..STEPS {
            let error = covariance[(step, step)].sqrt();
            total += mean[step];
            let of_total = covariance.view((0, 0), (step + 1, step + 1)).sum().sqrt();
            for (ours, expected) in [
                (forecast.expected[step], mean[step]),
                (forecast.std_error[step], error),
                (forecast.lower[step], mean[step] - z * error),
                (forecast.upper[step], mean[step] + z * error),
                (forecast.total_expected[step], total),
                (forecast.total_lower[step], total - z * of_total),
                (forecast.total_upper[step], total + z * of_total),
            ] {
                let difference = (ours - expected).abs() / (1.0 + expected.abs());
                worst = if difference.is_nan() { f64::INFINITY } else { worst.max(difference) };
            }
        }
        println!("{:?}: worst {worst:.1e}", case.structure);
        assert!(worst < 1e-9, "{:?}: {worst:e}", case.structure);
    }
}

#[test]
fn the_first_total_is_the_first_step() {
    for case in cases() {
        let f = case.fit().forecast(STEPS, 0.8).expect("a forecast");
        assert_eq!(f.total_expected[0], f.expected[0]);
        assert!((f.total_lower[0] - f.lower[0]).abs() < 1e-12 * (1.0 + f.lower[0].abs()));
        assert!((f.total_upper[0] - f.upper[0]).abs() < 1e-12 * (1.0 + f.upper[0].abs()));
    }
}

#[test]
fn a_longer_horizon_begins_with_the_shorter_one() {
    for case in cases() {
        let fit = case.fit();
        let (long, short) = (fit.forecast(STEPS, 0.8).expect("long"), fit.forecast(3, 0.8).expect("short"));
        let Forecast { expected, lower, total_upper, .. } = long;
        assert_eq!(expected[..3], short.expected);
        assert_eq!(lower[..3], short.lower);
        assert_eq!(total_upper[..3], short.total_upper);
        assert!(fit.forecast(0, 0.8).expect("none").expected.is_empty());
    }
}

#[test]
fn parts_add_up_to_the_forecast() {
    for case in cases() {
        let forecast = case.fit().forecast(STEPS, 0.9).expect("a forecast");
        let parts = forecast.parts;
        assert_eq!(parts.level.is_some(), case.structure.trend.has_level());
        assert_eq!(parts.slope.is_some(), case.structure.trend.has_slope());
        assert_eq!(parts.seasonal.is_some(), !case.structure.seasons.is_empty());
        assert_eq!(parts.effects.len(), case.structure.drivers + case.structure.drifting_drivers.len());
        for step in 0..STEPS {
            let sum: f64 =
                parts.level.iter().chain(&parts.seasonal).chain(&parts.effects).map(|s| s.value[step]).sum();
            assert!((sum - forecast.expected[step]).abs() < 1e-10 * (1.0 + sum.abs()));
        }
        // The effect of a driver is its coefficient times its plan.
        let plan = case.series.drivers.iter().chain(&case.series.drifting_drivers);
        for ((effect, coefficient), x) in parts.effects.iter().zip(&parts.coefficients).zip(plan) {
            for step in 0..STEPS {
                let product = coefficient.value[step] * x[POINTS + step];
                assert!((effect.value[step] - product).abs() < 1e-12 * (1.0 + product.abs()));
                let error = coefficient.std_error[step] * x[POINTS + step].abs();
                assert!((effect.std_error[step] - error).abs() < 1e-12 * (1.0 + error));
            }
        }
    }
}

#[test]
fn more_coverage_is_a_wider_interval() {
    for case in cases() {
        let fit = case.fit();
        let mut inner: Option<(Forecast, Vec<f64>, Vec<f64>)> = None;
        for coverage in [0.05, 0.5, 0.8, 0.95, 0.999] {
            let forecast = fit.forecast(STEPS, coverage).expect("a forecast");
            let components = fit.components(coverage).expect("components");
            for t in 0..POINTS {
                assert!(
                    components.lower[t] <= components.fitted[t]
                        && components.fitted[t] <= components.upper[t]
                );
            }
            for step in 0..STEPS {
                assert!(
                    forecast.lower[step] < forecast.expected[step]
                        && forecast.expected[step] < forecast.upper[step]
                );
                assert!(forecast.total_lower[step] < forecast.total_upper[step]);
            }
            if let Some((narrow, lower, upper)) = inner {
                for step in 0..STEPS {
                    assert!(
                        forecast.lower[step] < narrow.lower[step]
                            && forecast.upper[step] > narrow.upper[step]
                    );
                    assert!(forecast.total_lower[step] < narrow.total_lower[step]);
                    assert!(forecast.total_upper[step] > narrow.total_upper[step]);
                    assert_eq!(forecast.expected[step], narrow.expected[step]);
                }
                assert!(
                    (0..POINTS).all(|t| components.lower[t] <= lower[t] && components.upper[t] >= upper[t])
                );
            }
            inner = Some((forecast, components.lower, components.upper));
        }
    }
}

#[test]
fn a_driver_without_a_plan_is_named_with_its_first_step() {
    let whole = Case::new(Trend::LocalLevel, None, &[1.0, 0.3, 0.1, 0.1], 2, 2, 9);
    let cut = |kind: usize, column: usize, at: usize, value: Option<f64>| {
        let mut series = whole.series.clone();
        let x = if kind == 0 { &mut series.drivers[column] } else { &mut series.drifting_drivers[column] };
        match value {
            Some(value) => x[POINTS + at] = value,
            None => x.truncate(POINTS + at),
        }
        fit(&series, &whole.request(), &mut Workspace::new()).expect("a fit")
    };
    for (kind, column, name) in [(0, 0, "price_0"), (0, 1, "price_1"), (1, 0, "promo_0"), (1, 1, "promo_1")] {
        for (at, value) in [(0, None), (4, None), (4, Some(f64::NAN)), (7, Some(f64::INFINITY))] {
            let fit = cut(kind, column, at, value);
            let trouble = fit.forecast(STEPS, 0.9).expect_err("a plan is missing");
            assert_eq!(trouble, Trouble::NoDriverPlan { driver: name.to_owned(), step: at + 1 });
            assert_eq!(trouble.status(), "no driver plan");
            // Up to there the forecast stands, and the history does not need the plan.
            let before = fit.forecast(at, 0.9).expect("a shorter forecast");
            let all = whole.fit().forecast(STEPS, 0.9).expect("a forecast");
            assert_eq!(before.expected, all.expected[..at]);
            assert!(fit.components(0.9).is_ok());
        }
    }
}

#[test]
fn intervals_cover_what_they_claim() {
    // At true parameters the observations to come fall into their 80 % intervals in 80 of 100 series. Steps of one
    // series depend on each other, so each step is counted on its own: 400 series, binomial, four standard errors.
    const SERIES: u64 = 400;
    let season = Some(Season { period: 4.0, harmonics: None, fixed: false });
    let template = Case::new(Trend::LocalLinear, season, &[1.0, 0.3, 0.02, 0.1, 0.2], 0, 1, 0);
    let request = template.request();
    let mut workspace = Workspace::new();
    let (mut inside, mut totals) = ([0.0; STEPS], [0.0; STEPS]);
    for seed in 0..SERIES {
        let plan = template.series.drifting_drivers.clone();
        let mut series =
            simulate(&template.structure, &template.values, POINTS + STEPS, 3.0, plan, 500 + seed);
        let truth = series.observed.split_off(POINTS);
        let forecast =
            fit(&series, &request, &mut workspace).expect("a fit").forecast(STEPS, 0.8).expect("a forecast");
        let mut total = 0.0;
        for step in 0..STEPS {
            total += truth[step];
            inside[step] +=
                f64::from(forecast.lower[step] <= truth[step] && truth[step] <= forecast.upper[step]);
            totals[step] +=
                f64::from(forecast.total_lower[step] <= total && total <= forecast.total_upper[step]);
        }
    }
    println!("steps {inside:?} totals {totals:?} of {SERIES}");
    let slack = 4.0 * (0.8 * 0.2 * SERIES as f64).sqrt();
    for count in inside.iter().chain(&totals) {
        assert!((count - 0.8 * SERIES as f64).abs() < slack, "{count} of {SERIES}, {slack} around 80 %");
    }
}
