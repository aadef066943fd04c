//! One likelihood evaluation and one whole fit (estimate, smooth, 12 forecasts) of four structures.
//!
//! `cargo bench -p stillwell-statespace`. The series are drawn from each structure's own equations.

use std::hint::black_box;

use criterion::{Criterion, Throughput, criterion_group, criterion_main};
use stillwell_statespace::{Instructions, Likelihood, Likelihoods, Series, Workspace, fit, fit_many};

#[path = "support/settings.rs"]
mod settings;
#[path = "../tests/support/simulate.rs"]
mod simulate;

use settings::{request, settings};

fn benches(c: &mut Criterion) {
    let mut workspace = Workspace::new();
    for setting in settings() {
        let request = request(&setting.structure);
        let many: Vec<Series> = (0..40)
            .map(|seed| {
                simulate::simulate(&setting.structure, &setting.values, setting.n, 3.0, Vec::new(), seed)
            })
            .collect();
        let mut evaluations: Vec<usize> =
            many.iter().map(|s| fit(s, &request, &mut workspace).expect("a fit").evaluations()).collect();
        evaluations.sort_unstable();
        println!(
            "{} ({}): likelihood evaluations per fit, median {}, most {}",
            setting.name, setting.short, evaluations[20], evaluations[39]
        );
        let mut next = many.iter().cycle();
        c.bench_function(&format!("fit, {}", setting.name), |b| {
            b.iter(|| {
                let fit = fit(next.next().expect("a series"), &request, &mut workspace).expect("a fit");
                (black_box(fit.components(0.9)), black_box(fit.forecast(12, 0.9)))
            });
        });
        let side_by_side: Vec<&Series> = many.iter().cycle().take(120).collect();
        let mut group = c.benchmark_group("in lock step");
        group.throughput(Throughput::Elements(side_by_side.len() as u64)).sample_size(20);
        group.bench_function(format!("120 fits, {}", setting.name), |b| {
            b.iter(|| {
                for fit in fit_many(&side_by_side, &request, true, &mut workspace) {
                    let fit = fit.expect("a fit");
                    black_box((
                        fit.components(0.9).expect("components"),
                        fit.forecast(12, 0.9).expect("a forecast"),
                    ));
                }
            });
        });
        group.finish();
        let at: Vec<&[f64]> = vec![&setting.values; Likelihoods::MOST];
        for instructions in Instructions::available() {
            let mut lanes =
                Likelihoods::new(setting.structure.model(), &many[..Likelihoods::MOST], instructions);
            c.bench_function(&format!("likelihood x 8, {instructions:?}, {}", setting.name), |b| {
                b.iter(|| black_box(lanes.at(black_box(&at))));
            });
            c.bench_function(&format!("likelihood and score x 8, {instructions:?}, {}", setting.name), |b| {
                b.iter(|| black_box(lanes.with_score(black_box(&at)).len()));
            });
        }
        let mut likelihood = Likelihood::new(setting.structure.model(), many[0].clone());
        c.bench_function(&format!("likelihood, {}", setting.name), |b| {
            b.iter(|| black_box(likelihood.at(black_box(&setting.values))));
        });
        c.bench_function(&format!("likelihood and score, {}", setting.name), |b| {
            b.iter(|| black_box(likelihood.with_score(black_box(&setting.values)).map(|v| v.0)));
        });
    }
}

criterion_group!(all, benches);
criterion_main!(all);
