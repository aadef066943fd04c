//! A counter that a host can put into its session to watch a long query.
//!
//! The operators of a query add to it as series are done; a command line can draw a bar from it and, at the
//! end, say which series had trouble. Without it nothing is counted.

use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Mutex, PoisonError};

/// How many troubled series are kept by name, unless [`Progress::with_capacity`] says otherwise.
const KEPT: usize = 1_000;

/// A series that could not be fitted.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord)]
pub struct TroubledSeries {
    /// Its key as text, `region=North, product=Oat milk`; empty where there is no key.
    pub series: String,
    /// Name of the function that met it.
    pub function: &'static str,
    /// The words of the `status` column.
    pub status: &'static str,
    /// The sentence of the `message` column.
    pub message: String,
}

/// Counts what the operators of a session have done. Cheap, and shared between threads.
///
/// Put it into the session before the query is planned:
///
/// ```
/// use std::sync::Arc;
/// use datafusion::prelude::{SessionConfig, SessionContext};
///
/// let progress = Arc::new(stillwell::Progress::default());
/// let config = SessionConfig::new().with_extension(Arc::clone(&progress));
/// let context = SessionContext::new_with_config(config);
/// stillwell::register(&context)?;
/// assert_eq!(progress.series(), 0);
/// # Ok::<(), datafusion::error::DataFusionError>(())
/// ```
#[derive(Debug)]
pub struct Progress {
    expected_rows: AtomicU64,
    rows: AtomicU64,
    series: AtomicU64,
    in_trouble: AtomicU64,
    troubled: Mutex<Vec<TroubledSeries>>,
    capacity: usize,
}

impl Default for Progress {
    fn default() -> Self {
        Self::with_capacity(KEPT)
    }
}

impl Progress {
    /// Keeps at most `capacity` troubled series by name; all are counted.
    pub fn with_capacity(capacity: usize) -> Self {
        Self {
            expected_rows: AtomicU64::new(0),
            rows: AtomicU64::new(0),
            series: AtomicU64::new(0),
            in_trouble: AtomicU64::new(0),
            troubled: Mutex::new(Vec::new()),
            capacity,
        }
    }

    /// Input rows there will be, as far as operators know: an operator knows when its rows begin to arrive, from the
    /// sort that has read them all or from the statistics of files that need none. 0 = not known; never to be relied
    /// on but for a bar.
    pub fn expected_rows(&self) -> u64 {
        self.expected_rows.load(Ordering::Relaxed)
    }

    /// Input rows of the series that are done.
    pub fn rows(&self) -> u64 {
        self.rows.load(Ordering::Relaxed)
    }

    /// Series that are done, those in trouble included.
    pub fn series(&self) -> u64 {
        self.series.load(Ordering::Relaxed)
    }

    /// Series in trouble.
    pub fn in_trouble(&self) -> u64 {
        self.in_trouble.load(Ordering::Relaxed)
    }

    /// The troubled series that were kept, in order of their keys.
    pub fn troubled(&self) -> Vec<TroubledSeries> {
        let mut troubled = self.troubled.lock().unwrap_or_else(PoisonError::into_inner).clone();
        troubled.sort();
        troubled
    }

    /// Starts again from nothing, for the next query of the session.
    pub fn reset(&self) {
        for count in [&self.expected_rows, &self.rows, &self.series, &self.in_trouble] {
            count.store(0, Ordering::Relaxed);
        }
        self.troubled.lock().unwrap_or_else(PoisonError::into_inner).clear();
    }

    /// An operator will get `rows` rows.
    pub(crate) fn expect(&self, rows: usize) {
        self.expected_rows.fetch_add(rows as u64, Ordering::Relaxed);
    }

    /// A series of `rows` rows is done; `trouble` names it if something was wrong.
    pub(crate) fn record(&self, rows: usize, trouble: Option<impl FnOnce() -> TroubledSeries>) {
        self.rows.fetch_add(rows as u64, Ordering::Relaxed);
        self.series.fetch_add(1, Ordering::Relaxed);
        if let Some(describe) = trouble {
            self.in_trouble.fetch_add(1, Ordering::Relaxed);
            let mut troubled = self.troubled.lock().unwrap_or_else(PoisonError::into_inner);
            if troubled.len() < self.capacity {
                troubled.push(describe());
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn troubled(series: &str) -> TroubledSeries {
        TroubledSeries {
            series: series.to_string(),
            function: "forecast",
            status: "constant",
            message: "it never moves".to_string(),
        }
    }

    #[test]
    fn all_are_counted_and_some_are_kept() {
        let progress = Progress::with_capacity(2);
        progress.record(10, None::<fn() -> TroubledSeries>);
        for name in ["c", "a", "b"] {
            progress.record(1, Some(|| troubled(name)));
        }
        assert_eq!((progress.rows(), progress.series(), progress.in_trouble()), (13, 4, 3));
        let kept = progress.troubled().into_iter().map(|kept| kept.series).collect::<Vec<_>>();
        assert_eq!(kept, ["a", "c"]);
        progress.reset();
        assert_eq!((progress.series(), progress.troubled().len()), (0, 0));
    }
}
