//! A series' numbers do not depend on what is fitted beside it, in which lane, in which order, or with which instructions: to the last bit.

use stillwell_statespace::structure::{Season, Structure, Trend};
use stillwell_statespace::{
    Instructions, Likelihood, Likelihoods, Request, SeasonRequest, Series, TransformRequest, Trouble,
    Workspace, fit, fit_many,
};

#[path = "support/simulate.rs"]
mod simulate;

/// All that a fit says, digit by digit.
fn told(result: Result<stillwell_statespace::Fit, Trouble>) -> String {
    match result {
        Ok(fit) => format!(
            "{:?} {:?} {:?} {:?} {:?} {:?}",
            fit.parameters(),
            fit.diagnostics(),
            fit.components(0.9),
            fit.forecast(9, 0.9),
            fit.standing(),
            fit.standardised_errors(),
        ),
        Err(trouble) => format!("{trouble:?}"),
    }
}

/// Series of all sorts: long and short, with gaps, in trouble, far from zero, tiny.
fn warehouse(period: usize, drivers: usize) -> Vec<Series> {
    let structure = Structure { trend: Trend::LocalLinear, ..Structure::default() };
    let mut all: Vec<Series> = (0..29)
        .map(|seed: u64| {
            let n = 40 + (seed as usize * 17) % 90;
            let variances = [1.0, [0.0, 0.2, 1.5][seed as usize % 3], [0.0, 0.02][seed as usize % 2]];
            let mut series = simulate::simulate(&structure, &variances, n, 3.0, Vec::new(), seed);
            for (t, y) in series.observed.iter_mut().enumerate() {
                *y += 60.0 + 4.0 * (t % period) as f64;
                if seed % 4 == 1 && (t * 7 + seed as usize) % 11 < 3 && t > 0 && t + 1 < n {
                    *y = f64::NAN;
                }
                *y *= [1.0, 1e-6, 1e7][seed as usize % 3];
            }
            series
        })
        .collect();
    all.push(Series { observed: vec![5.0; 30], ..Series::default() });
    all.push(Series { observed: vec![1.0, 2.0, 4.0], ..Series::default() });
    all.push(Series { observed: (0..60).map(|t| 3.0 + 2.0 * f64::from(t)).collect(), ..Series::default() });
    for (k, series) in all.iter_mut().enumerate() {
        let reach = series.observed.len() + 9;
        series.drivers =
            (0..drivers).map(|d| (0..reach).map(|t| ((t * (3 + d) + k) % 7) as f64).collect()).collect();
    }
    all
}

fn requests() -> Vec<(&'static str, Request, usize, usize)> {
    let plain = Request { transform: TransformRequest::None, ..Request::default() };
    let with = |trend, season: &[f64], harmonics: Option<usize>| Request {
        trend: Some(trend),
        season: SeasonRequest::Given(season.to_vec()),
        harmonics: harmonics.map(|h| vec![h]),
        ..plain.clone()
    };
    vec![
        ("local level", with(Trend::LocalLevel, &[], None), 5, 0),
        ("local linear", with(Trend::LocalLinear, &[], None), 5, 0),
        ("damped", with(Trend::Damped, &[], None), 5, 0),
        ("dummy season", with(Trend::LocalLinear, &[12.0], None), 12, 0),
        ("harmonics", with(Trend::LocalLinear, &[13.0], Some(3)), 13, 0),
        (
            "drivers",
            Request {
                drivers: vec!["price".into(), "promo".into()],
                ..with(Trend::LocalLevel, &[4.0], None)
            },
            4,
            2,
        ),
        ("autoregression", Request { autoregression: 2, ..with(Trend::LocalLevel, &[], None) }, 5, 0),
        ("log", Request { transform: TransformRequest::Log, ..with(Trend::LocalLinear, &[4.0], None) }, 4, 0),
    ]
}

#[test]
fn a_fit_does_not_depend_on_its_neighbours() {
    for (name, request, period, drivers) in requests() {
        let series = warehouse(period, drivers);
        let mut workspace = Workspace::new();
        let alone: Vec<String> = series.iter().map(|s| told(fit(s, &request, &mut workspace))).collect();
        assert!(
            alone.iter().filter(|t| t.contains("log_likelihood")).count() >= 9,
            "{name}: enough can be fitted"
        );
        for instructions in Instructions::available() {
            let mut workspace = Workspace::with_instructions(instructions);
            for (order, smoothed) in [(1, true), (5, false), (19, true)] {
                // Another order, other neighbours, a chunk that leaves lanes empty at its end.
                let chosen: Vec<usize> =
                    (0..series.len()).map(|i| i * order % series.len()).take(27).collect();
                let handed: Vec<&Series> = chosen.iter().map(|&i| &series[i]).collect();
                let together = fit_many(&handed, &request, smoothed, &mut workspace);
                for (i, result) in chosen.into_iter().zip(together) {
                    assert_eq!(alone[i], told(result), "{name}, series {i}, {instructions:?}");
                }
            }
        }
    }
}

#[test]
fn a_likelihood_does_not_depend_on_its_neighbours() {
    let season = |period, harmonics| vec![Season { period, harmonics, fixed: false }];
    let structures = [
        (
            Structure { trend: Trend::LocalLinear, seasons: season(12.0, None), ..Structure::default() },
            vec![1.0, 0.2, 0.01, 0.05],
        ),
        (
            Structure { trend: Trend::Damped, seasons: season(52.18, Some(2)), ..Structure::default() },
            vec![1.0, 0.2, 0.01, 0.8, 0.05],
        ),
    ];
    for (structure, values) in structures {
        let series: Vec<Series> =
            warehouse(12, 0).into_iter().filter(|s| s.observed.len() > 59).take(Likelihoods::MOST).collect();
        let at: Vec<Vec<f64>> =
            (0..series.len()).map(|i| values.iter().map(|v| v * [1.0, 0.5, 0.0][i % 3]).collect()).collect();
        let at: Vec<&[f64]> = at.iter().map(Vec::as_slice).collect();
        for instructions in Instructions::available() {
            let mut together = Likelihoods::new(structure.model(), &series, instructions);
            let (values, derivatives) = (together.at(&at), together.with_score(&at));
            for (lane, series) in series.iter().enumerate() {
                let mut alone = Likelihood::new(structure.model(), series.clone());
                let value = alone.at(at[lane]);
                assert_eq!(format!("{value:?}"), format!("{:?}", values[lane]));
                let owned = alone.with_score(at[lane]).map(|(l, g, h)| (l, g.to_vec(), h.to_vec()));
                assert_eq!(
                    format!("{owned:?}"),
                    format!("{:?}", derivatives[lane]),
                    "lane {lane}, {instructions:?}"
                );
            }
        }
    }
}

/// Drivers that hardly move at first make the way back across the collapse lose digits: such lanes are gone over again with their columns open, and
/// what is reported must be what a series alone reports.
#[test]
fn lanes_that_are_gone_over_again_say_what_they_say_alone() {
    let request = Request {
        trend: Some(Trend::LocalLevel),
        season: SeasonRequest::Given(Vec::new()),
        transform: TransformRequest::None,
        drifting_drivers: vec!["price".into()],
        ..Request::default()
    };
    let mut state = 12345_u64;
    let mut next = || {
        state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        (state >> 33) as f64 / 2147483648.0
    };
    for early in [1e-3, 1e-5, 1e-6] {
        let all: Vec<Series> = (0..24)
            .map(|k| {
                let driver: Vec<f64> =
                    (0..129).map(|t| (next() - 0.5) * if t < 40 { early } else { 1.0 }).collect();
                let mut level = f64::from(k);
                let observed = (0..120)
                    .map(|t| {
                        level += 0.2 * next();
                        level + next() + 3.0 * driver[t]
                    })
                    .collect();
                Series { observed, drivers: Vec::new(), drifting_drivers: vec![driver] }
            })
            .collect();
        let handed: Vec<&Series> = all.iter().collect();
        let mut workspace = Workspace::new();
        let alone: Vec<String> = all.iter().map(|s| told(fit(s, &request, &mut workspace))).collect();
        for smoothed in [true, false] {
            for (i, result) in fit_many(&handed, &request, smoothed, &mut workspace).into_iter().enumerate() {
                assert_eq!(alone[i], told(result), "series {i}, {early:e}, smoothed {smoothed}");
            }
        }
    }
}
