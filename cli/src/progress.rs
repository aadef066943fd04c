//! The progress line of a statement: how many series are fitted, how fast, and how many are in trouble.
//!
//! It is drawn on the standard error, only if that is a terminal, and leaves nothing behind.

use std::io::{self, IsTerminal};
use std::time::Duration;

use indicatif::{ProgressBar, ProgressState, ProgressStyle};

use crate::amounts;
use crate::fits::Fits;

/// Often enough to look alive, seldom enough to cost nothing.
const REDRAW: Duration = Duration::from_millis(150);

/// A progress line that is shown until it is dropped.
#[derive(Debug)]
pub(crate) struct Bar {
    line: Option<ProgressBar>,
}

impl Bar {
    /// Begins to draw, unless `quiet` or the standard error is no terminal.
    pub(crate) fn start(label: &str, fits: &Fits, quiet: bool) -> Self {
        if quiet || !io::stderr().is_terminal() {
            return Self { line: None };
        }
        let fits = fits.clone();
        let told = move |state: &ProgressState, out: &mut dyn std::fmt::Write| {
            let (series, in_trouble) = fits.counts();
            // A terminal that cannot be written to is no reason to stop the work.
            let _ = out.write_str(&words(series, in_trouble, state.elapsed()));
        };
        let Ok(style) = ProgressStyle::with_template("{spinner} {msg}  {fits}  {elapsed}") else {
            return Self { line: None };
        };
        let line = ProgressBar::new_spinner().with_style(style.with_key("fits", told));
        line.set_message(label.to_string());
        line.enable_steady_tick(REDRAW);
        Self { line: Some(line) }
    }
}

impl Drop for Bar {
    fn drop(&mut self) {
        if let Some(line) = &self.line {
            line.finish_and_clear();
        }
    }
}

fn words(series: u64, in_trouble: u64, elapsed: Duration) -> String {
    if series == 0 {
        return String::new();
    }
    // The first moments would give a wild rate.
    let seconds = elapsed.as_secs_f64().max(0.5);
    let rate = (series as f64 / seconds).round() as u64;
    let trouble = match in_trouble {
        0 => String::new(),
        n => format!(", {} in trouble", amounts::count(n)),
    };
    format!("{} series, {}/s{trouble}", amounts::count(series), amounts::count(rate))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_line_tells_series_rate_and_trouble() {
        assert_eq!(words(0, 0, Duration::from_secs(1)), "");
        assert_eq!(words(3000, 0, Duration::from_secs(2)), "3,000 series, 1,500/s");
        assert_eq!(words(10, 2, Duration::from_secs(10)), "10 series, 1/s, 2 in trouble");
    }
}
