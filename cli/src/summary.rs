//! The report at the end: what was written, which series were in trouble, how long it took.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt::Write as _;
use std::io::{self, Write as _};
use std::time::{Duration, Instant};

use crate::amounts::{bytes, count, counted};
use crate::copy_staging::{Kind, Written};
use crate::fits::Fitted;

/// Troubled series that are named; the others are counted.
const NAMED: usize = 10;

/// What has been done so far.
#[derive(Debug)]
pub(crate) struct Report {
    statements: usize,
    finished: usize,
    /// What was written, and how many series were fitted for it.
    written: Vec<(Written, u64)>,
    fitted: Fitted,
    begun: Instant,
}

impl Report {
    /// The report of a job with that many statements, which begins now.
    pub(crate) fn new(statements: usize) -> Self {
        Self {
            statements,
            finished: 0,
            written: Vec::new(),
            fitted: Fitted::default(),
            begun: Instant::now(),
        }
    }

    /// One more statement has succeeded.
    pub(crate) fn finished(&mut self, written: Option<Written>, fitted: Fitted) {
        self.finished += 1;
        self.written.extend(written.map(|written| (written, fitted.series)));
        self.fitted(fitted);
    }

    /// What a statement has fitted that did not succeed.
    pub(crate) fn fitted(&mut self, fitted: Fitted) {
        self.fitted.series += fitted.series;
        self.fitted.in_trouble += fitted.in_trouble;
        self.fitted.troubled.extend(fitted.troubled);
    }

    /// Whether any series was in trouble.
    pub(crate) fn has_trouble(&self) -> bool {
        self.fitted.in_trouble > 0
    }

    /// Whether anything was written.
    pub(crate) fn has_written(&self) -> bool {
        !self.written.is_empty()
    }

    /// Prints the report on the standard error. It is a courtesy: a standard error that is closed does not fail a
    /// job that is done.
    pub(crate) fn print(&self) {
        let _ = io::stderr().write_all(self.text().as_bytes());
    }

    /// What was written and which series were in trouble, without the line about the time.
    pub(crate) fn notes(&self) -> String {
        let mut text = String::new();
        self.tell_written(&mut text);
        self.tell_fits(&mut text);
        text
    }

    /// The report as text, some lines.
    pub(crate) fn text(&self) -> String {
        let mut text = self.notes();
        let statements = match self.finished == self.statements {
            true => counted(self.statements as u64, "statement"),
            false => format!("{} of {} statements done", self.finished, self.statements),
        };
        line(&mut text, "time", &format!("{}, {statements}", duration(self.begun.elapsed())));
        text
    }

    fn tell_written(&self, text: &mut String) {
        let width = self.written.iter().map(|(written, _)| written.target.chars().count()).max().unwrap_or(0);
        for (at, (written, series)) in self.written.iter().enumerate() {
            let label = if at == 0 { "wrote" } else { "" };
            let of_series =
                if *series > 0 { format!(" of {} series", count(*series)) } else { String::new() };
            line(text, label, &format!("{:<width$}  {}{of_series}", written.target, amount(written)));
        }
    }

    fn tell_fits(&self, text: &mut String) {
        let Fitted { series, in_trouble, troubled } = &self.fitted;
        if *series == 0 {
            return;
        }
        if *in_trouble == 0 {
            return line(text, "fits", &format!("{} ok, none in trouble", count(*series)));
        }
        let ok = series.saturating_sub(*in_trouble);
        line(text, "fits", &format!("{} ok, {} in trouble", count(ok), count(*in_trouble)));

        // Several functions meet the same trouble in the same series; it is one trouble to whoever reads this.
        let distinct: BTreeMap<(&str, &str), &str> =
            troubled.iter().map(|t| ((t.series.as_str(), t.status), t.message.as_str())).collect();
        let mut by_status: BTreeMap<&str, BTreeSet<&str>> = BTreeMap::new();
        for (series, status) in distinct.keys() {
            by_status.entry(status).or_default().insert(series);
        }
        let statuses: Vec<String> = by_status
            .iter()
            .map(|(status, series)| format!("{status}: {} series", count(series.len() as u64)))
            .collect();
        let kept = troubled.len() as u64;
        let of_kept = match kept < *in_trouble {
            true => format!(" (among the first {})", count(kept)),
            false => String::new(),
        };
        line(text, "trouble", &format!("{}{of_kept}", statuses.join(", ")));
        for ((series, status), message) in distinct.iter().take(NAMED) {
            let series = if series.is_empty() { "the only series" } else { series };
            let told = if message.is_empty() { status } else { message };
            line(text, "", &format!("{series}: {told}"));
        }
        if distinct.len() > NAMED {
            line(
                text,
                "",
                &format!("and {} more; their rows carry the status", count((distinct.len() - NAMED) as u64)),
            );
        }
    }
}

/// One line of the report: a word of at most seven letters, and what it is about.
fn line(text: &mut String, label: &str, told: &str) {
    let _ = writeln!(text, "{label:<8} {told}");
}

fn amount(written: &Written) -> String {
    let mut parts = Vec::new();
    if let (Some(Kind::Folder), Some(files)) = (written.kind, written.files) {
        parts.push(counted(files.number as u64, "file"));
    }
    parts.extend(written.files.map(|files| bytes(files.bytes)));
    parts.extend(written.rows.map(|rows| counted(rows, "row")));
    parts.join(", ")
}

fn duration(elapsed: Duration) -> String {
    let seconds = elapsed.as_secs_f64();
    match elapsed.as_secs() {
        0..60 => format!("{seconds:.1} s"),
        whole => format!("{} min {} s", whole / 60, whole % 60),
    }
}

#[cfg(test)]
mod tests {
    use stillwell::TroubledSeries;

    use super::*;
    use crate::copy_staging::Files;

    fn troubled(series: &str, status: &'static str) -> TroubledSeries {
        let message = format!("{status}, in a sentence");
        TroubledSeries { series: series.to_string(), function: "forecast", status, message }
    }

    fn written(target: &str, kind: Option<Kind>, number: usize) -> Written {
        let files = kind.map(|_| Files { number, bytes: 2_000 });
        Written { target: target.to_string(), kind, rows: Some(1_200), files }
    }

    #[test]
    fn what_was_written_stands_in_columns() {
        let mut report = Report::new(3);
        let fitted = Fitted { series: 48, ..Fitted::default() };
        report.finished(Some(written("out/forecast", Some(Kind::Folder), 4)), fitted);
        report.finished(Some(written("a.csv", Some(Kind::File), 1)), Fitted::default());
        report.finished(Some(written("s3://b/c", None, 0)), Fitted::default());
        let text = report.text();
        let lines: Vec<_> = text.lines().collect();
        assert_eq!(lines[0], "wrote    out/forecast  4 files, 2.0 kB, 1,200 rows of 48 series");
        assert_eq!(lines[1], "         a.csv         2.0 kB, 1,200 rows");
        assert_eq!(lines[2], "         s3://b/c      1,200 rows");
        assert_eq!(lines[3], "fits     48 ok, none in trouble");
        assert!(lines[4].ends_with(" s, 3 statements"), "{text}");
    }

    #[test]
    fn trouble_is_counted_by_status_and_named_once() {
        let mut report = Report::new(1);
        for _ in 0..2 {
            let troubled = vec![troubled("product=Quark", "too short"), troubled("product=Whey", "constant")];
            report.fitted(Fitted { series: 10, in_trouble: 2, troubled });
        }
        let text = report.text();
        assert!(text.contains("fits     16 ok, 4 in trouble\n"), "{text}");
        assert!(text.contains("trouble  constant: 1 series, too short: 1 series\n"), "{text}");
        assert_eq!(text.matches("product=Quark: too short, in a sentence").count(), 1, "{text}");
        assert!(text.contains("0 of 1 statements done"), "{text}");
    }

    #[test]
    fn the_first_ten_are_named_and_the_others_counted() {
        let mut report = Report::new(1);
        let many = (0..14).map(|n| troubled(&format!("product={n}"), "too short")).collect();
        report.fitted(Fitted { series: 20, in_trouble: 14, troubled: many });
        let text = report.text();
        assert_eq!(text.matches("in a sentence").count(), 10, "{text}");
        assert!(text.contains("and 4 more"), "{text}");
    }

    #[test]
    fn a_job_without_fits_says_nothing_of_series() {
        let mut report = Report::new(1);
        report.finished(None, Fitted::default());
        assert_eq!(report.text().lines().count(), 1);
    }

    #[test]
    fn long_times_are_in_minutes() {
        assert_eq!(duration(Duration::from_millis(1_240)), "1.2 s");
        assert_eq!(duration(Duration::from_secs(185)), "3 min 5 s");
    }
}
