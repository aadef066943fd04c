//! The smallest request: one trend, no season, no transform, nothing left to choose.

use stillwell_statespace::structure::Trend;
use stillwell_statespace::{Request, SeasonRequest, TransformRequest};

/// A request of this trend and nothing else; tests add to it by struct update.
pub(crate) fn plain(trend: Trend) -> Request {
    Request {
        trend: Some(trend),
        season: SeasonRequest::Given(Vec::new()),
        transform: TransformRequest::None,
        ..Request::default()
    }
}
