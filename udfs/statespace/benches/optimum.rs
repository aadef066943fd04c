//! How near the estimation comes to the highest likelihood there is, and in how many evaluations.
//!
//! `cargo bench -p stillwell-statespace --bench optimum`. Each series of a mixed set is fitted in several structures; the likelihood at
//! the estimate is compared with the best of many random starts, climbed for long (`tests/support/slow_optimum.rs`).
//!
//! The set is simulated (monthly, weekly, intermittent). `MONTHLY=FILE` adds series of one's own: a text file, one series a line, its name and its
//! values separated by commas, of which every tenth is taken. The 1,428 monthly series of the M3 competition (Makridakis & Hibon
//! 2000, *International Journal of Forecasting* 16, 451-476) are meant; their terms keep them out of this repository.
//! `OPTIMA=FILE` keeps the slow optima from run to run, so that a change of the estimation is judged in seconds; `SHORT=1` names the series
//! that fall short.

#[path = "../tests/support/mixed_set.rs"]
mod mixed_set;
#[path = "../tests/support/slow_optimum.rs"]
mod slow_optimum;

use std::collections::BTreeMap;

use mixed_set::{judge, mixed};
use slow_optimum::slow_optimum;
use stillwell_statespace::{Series, Workspace};

/// Random starts of the slow search.
const STARTS: usize = 24;
/// Simulated series of each kind.
const SIZE: usize = 120;
/// Shortfall that counts.
const SHORT: f64 = 1e-4;

fn outside() -> Vec<Vec<f64>> {
    let Ok(path) = std::env::var("MONTHLY") else { return Vec::new() };
    let text = std::fs::read_to_string(path).expect("the file named by MONTHLY");
    let numbers = |line: &str| line.split(',').skip(1).map(|v| v.trim().parse().expect("a number")).collect();
    text.lines().step_by(10).map(numbers).collect()
}

fn kept() -> BTreeMap<String, f64> {
    let text = std::env::var("OPTIMA").ok().and_then(|path| std::fs::read_to_string(path).ok());
    text.iter()
        .flat_map(|text| text.lines())
        .filter_map(|line| line.rsplit_once('\t').map(|(k, v)| (k.to_owned(), v.parse().expect("a number"))))
        .collect()
}

fn keep(optima: &BTreeMap<String, f64>) {
    if let Ok(path) = std::env::var("OPTIMA") {
        let text: String = optima.iter().map(|(k, v)| format!("{k}\t{v:?}\n")).collect();
        std::fs::write(path, text).expect("the file named by OPTIMA");
    }
}

fn main() {
    let mut workspace = Workspace::new();
    let mut optima = kept();
    let (mut all, mut near, mut counts) = (0, 0, Vec::new());
    println!(
        "{:24} {:34} {:>6} {:>9} {:>9} {:>7} {:>4} {:>5}",
        "series", "structure", "fits", "within", "worst", "median", "p90", "most"
    );
    for group in mixed(&outside(), SIZE) {
        for (name, structure) in &group.structures {
            let (mut evaluations, mut short, mut worst) = (Vec::new(), Vec::new(), 0.0_f64);
            for (index, observed) in group.series.iter().enumerate() {
                let key = format!("{}/{name}/{index}", group.name);
                let mut best = |scaled: &Series| {
                    *optima
                        .entry(key.clone())
                        .or_insert_with(|| slow_optimum(structure, scaled, STARTS, index as u64))
                };
                let Some(judged) = judge(structure, observed, &mut workspace, &mut best) else {
                    println!("    {} {index}: no fit", group.name);
                    short.push((f64::INFINITY, index, Vec::new()));
                    evaluations.push(0);
                    continue;
                };
                worst = worst.max(judged.below);
                if judged.below > SHORT || !judged.converged {
                    short.push((judged.below, index, judged.values));
                }
                evaluations.push(judged.evaluations);
            }
            keep(&optima);
            evaluations.sort_unstable();
            let fits = evaluations.len();
            if fits == 0 {
                continue;
            }
            println!(
                "{:24} {:34} {:6} {:8.2}% {:9.1e} {:7} {:4} {:5}",
                group.name,
                name,
                fits,
                100.0 * (fits - short.len()) as f64 / fits as f64,
                worst,
                evaluations[fits / 2],
                evaluations[fits * 9 / 10],
                evaluations[fits - 1]
            );
            if std::env::var("SHORT").is_ok() {
                for (below, index, values) in &short {
                    println!("    {index}: {below:.2e} below, {values:?}");
                }
            }
            all += fits;
            near += fits - short.len();
            counts.extend(evaluations);
        }
    }
    counts.sort_unstable();
    println!(
        "all: {all} fits, {:.2} % within {SHORT:e} of the slow optimum and converged; evaluations: median {}, 90 % at most {}",
        100.0 * f64::from(near as u32) / f64::from(all as u32),
        counts[counts.len() / 2],
        counts[counts.len() * 9 / 10]
    );
}
