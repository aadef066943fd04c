//! How many series the running statement has fitted, and which were in trouble.

use std::sync::Arc;

use datafusion::prelude::SessionConfig;
use stillwell::{Progress, TroubledSeries};

/// Troubled series that are kept by name; more are counted.
const KEPT: usize = 10_000;

/// The counter that the library's operators add to.
#[derive(Debug, Clone)]
pub(crate) struct Fits {
    progress: Arc<Progress>,
}

/// What a statement has fitted.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub(crate) struct Fitted {
    /// Series, those in trouble included.
    pub(crate) series: u64,
    pub(crate) in_trouble: u64,
    /// The troubled series, as far as they were kept by name.
    pub(crate) troubled: Vec<TroubledSeries>,
}

impl Default for Fits {
    fn default() -> Self {
        Self { progress: Arc::new(Progress::with_capacity(KEPT)) }
    }
}

impl Fits {
    /// The configuration of a session whose fits are counted here.
    pub(crate) fn observed_config(&self) -> SessionConfig {
        SessionConfig::new().with_extension(Arc::clone(&self.progress))
    }

    /// Series done so far, and how many of them are in trouble.
    pub(crate) fn counts(&self) -> (u64, u64) {
        (self.progress.series(), self.progress.in_trouble())
    }

    /// What was fitted since the last call.
    pub(crate) fn take(&self) -> Fitted {
        let (series, in_trouble) = self.counts();
        let fitted = Fitted { series, in_trouble, troubled: self.progress.troubled() };
        self.progress.reset();
        fitted
    }
}
