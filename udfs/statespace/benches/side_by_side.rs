//! Whole fits beside R's `StructTS` and statsmodels' structural model, measured in one run: estimate, smooth, 12 forecasts.
//!
//! `tests/side_by_side/run.sh` installs both and runs this. The three take turns, several rounds, one core each, on the same series; the best
//! round of each counts, because what else the machine does only ever adds. What counts is the ratio: absolute times are those of the machine and the hour.

use std::collections::BTreeMap;
use std::error::Error;
use std::fmt::Write as _;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::time::Instant;
use std::{env, hint::black_box};

use stillwell_statespace::{Instructions, Likelihoods, Series, Workspace, fit_many};

#[path = "support/settings.rs"]
mod settings;
#[path = "../tests/support/simulate.rs"]
mod simulate;

use settings::{Setting, request, settings};

type Outcome<T> = Result<T, Box<dyn Error>>;

const ROUNDS: usize = 3;
/// Series that this project fits in a round.
const SERIES: usize = 400;
/// Series that the others do.
const THEIRS: usize = 8;

/// Seconds per fit and per likelihood.
type Times = BTreeMap<String, (f64, f64)>;

fn main() -> Outcome<()> {
    let scripts = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../../tests/side_by_side");
    let folder = tempfile::tempdir()?;
    let all: Vec<(Setting, Vec<Series>)> = settings().into_iter().map(drawn).collect();
    for (setting, series) in &all {
        fs::write(folder.path().join(format!("{}.csv", setting.short)), table(&series[..THEIRS]))?;
    }
    let python = env::var("STILLWELL_PYTHON").unwrap_or_else(|_| "python3".to_owned());
    let (mut ours, mut in_r, mut in_python) = (Times::new(), Times::new(), Times::new());
    for _ in 0..ROUNDS {
        for (setting, series) in &all {
            best(&mut ours, setting.short, own(setting, series)?);
        }
        for (times, program, script) in
            [(&mut in_r, "Rscript", "timing.R"), (&mut in_python, python.as_str(), "timing.py")]
        {
            for (name, seconds) in measured(program, &scripts.join(script), folder.path())? {
                best(times, &name, seconds);
            }
        }
    }
    println!("milliseconds per fit, best of {ROUNDS} rounds, one core, {:?}\n", Instructions::widest());
    println!(
        "{:42} {:>9} {:>9} {:>12} {:>8} {:>14}",
        "structure", "stillwell", "R", "statsmodels", "R / s.", "statsm. / s."
    );
    for (setting, _) in &all {
        let own = ours[setting.short].0;
        let theirs = |times: &Times| times.get(setting.short).map_or(f64::NAN, |t| t.0);
        let (r, python) = (theirs(&in_r), theirs(&in_python));
        println!(
            "{:42} {:9.3} {:9.1} {:12.1} {:8.0} {:14.0}",
            setting.name,
            1e3 * own,
            1e3 * r,
            1e3 * python,
            r / own,
            python / own
        );
    }
    let (own, python) = (ours["harmonics"].1, in_python.get("harmonics").map_or(f64::NAN, |t| t.1));
    println!(
        "\none likelihood of the last: {:.1} microseconds a series with all lanes full; statsmodels {:.0}, ratio {:.0}",
        1e6 * own,
        1e6 * python,
        python / own
    );
    Ok(())
}

/// The series of a setting, drawn from its own equations.
fn drawn(setting: Setting) -> (Setting, Vec<Series>) {
    let draw =
        |seed| simulate::simulate(&setting.structure, &setting.values, setting.n, 3.0, Vec::new(), seed);
    let series = (0..SERIES as u64).map(draw).collect();
    (setting, series)
}

/// A row of numbers a series.
fn table(series: &[Series]) -> String {
    let mut out = String::new();
    for series in series {
        let row: Vec<String> = series.observed.iter().map(f64::to_string).collect();
        let _ = writeln!(out, "{}", row.join(","));
    }
    out
}

/// Seconds of this project per fit, and per likelihood with all lanes full.
fn own(setting: &Setting, series: &[Series]) -> Outcome<(f64, f64)> {
    let request = request(&setting.structure);
    let mut workspace = Workspace::new();
    let handed: Vec<&Series> = series.iter().collect();
    let begin = Instant::now();
    for chunk in handed.chunks(100) {
        for fit in fit_many(chunk, &request, true, &mut workspace) {
            let fit = fit?;
            black_box((fit.components(0.9)?, fit.forecast(12, 0.9)?));
        }
    }
    let fits = begin.elapsed().as_secs_f64() / series.len() as f64;
    let mut likelihoods =
        Likelihoods::new(setting.structure.model(), &series[..Likelihoods::MOST], Instructions::widest());
    let at: Vec<&[f64]> = vec![&setting.values; Likelihoods::MOST];
    let times = 200;
    let begin = Instant::now();
    for _ in 0..times {
        black_box(likelihoods.at(&at));
    }
    Ok((fits, begin.elapsed().as_secs_f64() / (times * Likelihoods::MOST) as f64))
}

/// What a script printed: name, seconds per fit, seconds per likelihood.
fn measured(program: &str, script: &Path, folder: &Path) -> Outcome<Vec<(String, (f64, f64))>> {
    let output = Command::new(program).arg(script).arg(folder).arg(THEIRS.to_string()).output();
    let output =
        output.map_err(|error| format!("{program}: {error}; tests/side_by_side/run.sh installs it"))?;
    if !output.status.success() {
        return Err(format!("{program}: {}", String::from_utf8_lossy(&output.stderr)).into());
    }
    let mut found = Vec::new();
    for line in String::from_utf8(output.stdout)?.lines() {
        let mut cells = line.split(',');
        let name = cells.next().unwrap_or_default().to_owned();
        let mut number = || cells.next().map_or(Ok(f64::NAN), str::parse::<f64>);
        found.push((name, (number()?, number()?)));
    }
    Ok(found)
}

fn best(times: &mut Times, name: &str, (fit, likelihood): (f64, f64)) {
    let kept = times.entry(name.to_owned()).or_insert((f64::INFINITY, f64::INFINITY));
    *kept = (kept.0.min(fit), kept.1.min(likelihood));
}
