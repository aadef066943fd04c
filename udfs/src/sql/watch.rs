//! How functions in expressions tell the host what they have done.
//!
//! An operator finds the session's [`Progress`] in the task it runs in. A function in an expression is told nothing of its session, so it
//! carries the counter that the session had when the functions were put into it.

use std::hash::{Hash, Hasher};
use std::sync::Arc;

use super::progress::{Progress, TroubledSeries};

/// The session's counter, if it has one. Two functions are the same whatever they report to.
#[derive(Debug, Clone, Default)]
pub(crate) struct Watch(Option<Arc<Progress>>);

impl PartialEq for Watch {
    fn eq(&self, _: &Self) -> bool {
        true
    }
}

impl Eq for Watch {}

impl Hash for Watch {
    fn hash<H: Hasher>(&self, _: &mut H) {}
}

/// What was wrong with a series: status and sentence.
pub(crate) type Trouble<'a> = (&'a str, &'a str);

impl Watch {
    pub(crate) fn new(progress: Option<Arc<Progress>>) -> Self {
        Self(progress)
    }

    /// A series of `rows` rows is done by `function`; `series` names it in words where something was wrong.
    pub(crate) fn record(
        &self,
        function: &'static str,
        rows: usize,
        trouble: Option<Trouble<'_>>,
        series: impl FnOnce() -> String,
    ) {
        let Some(progress) = &self.0 else { return };
        let describe = trouble.map(|(status, message)| {
            move || TroubledSeries {
                series: series(),
                function,
                status: known(status),
                message: message.to_string(),
            }
        });
        progress.record(rows, describe);
    }
}

/// The status as it stands in the list; a stored fit may hold anything.
fn known(status: &str) -> &'static str {
    let statuses = stillwell_statespace::Trouble::STATUSES;
    statuses.into_iter().find(|known| *known == status).unwrap_or("damaged fit")
}
