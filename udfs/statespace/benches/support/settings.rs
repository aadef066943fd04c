//! The four structures that the benches measure.

use stillwell_statespace::structure::{Season, Structure, Trend};
use stillwell_statespace::{Request, SeasonRequest, TransformRequest};

/// A structure, the values its series are drawn at, and their length.
pub(crate) struct Setting {
    pub(crate) name: &'static str,
    /// For files.
    pub(crate) short: &'static str,
    pub(crate) n: usize,
    pub(crate) structure: Structure,
    pub(crate) values: Vec<f64>,
}

pub(crate) fn settings() -> Vec<Setting> {
    let season = |period, harmonics| vec![Season { period, harmonics, fixed: false }];
    let structure = |trend, seasons| Structure { trend, seasons, ..Structure::default() };
    vec![
        Setting {
            name: "local level, n 100",
            short: "local_level",
            n: 100,
            structure: structure(Trend::LocalLevel, Vec::new()),
            values: vec![1.0, 0.2],
        },
        Setting {
            name: "local linear, n 156",
            short: "local_linear",
            n: 156,
            structure: structure(Trend::LocalLinear, Vec::new()),
            values: vec![1.0, 0.2, 0.01],
        },
        Setting {
            name: "local linear + dummy season 12, n 144",
            short: "dummy_season",
            n: 144,
            structure: structure(Trend::LocalLinear, season(12.0, None)),
            values: vec![1.0, 0.2, 0.005, 0.05],
        },
        Setting {
            name: "local linear + 3 harmonics of 52, n 156",
            short: "harmonics",
            n: 156,
            structure: structure(Trend::LocalLinear, season(52.0, Some(3))),
            values: vec![1.0, 0.2, 0.005, 0.005],
        },
    ]
}

pub(crate) fn request(structure: &Structure) -> Request {
    Request {
        trend: Some(structure.trend),
        season: SeasonRequest::Given(structure.seasons.iter().map(|s| s.period).collect()),
        harmonics: structure.seasons.first().and_then(|s| s.harmonics).map(|h| vec![h]),
        transform: TransformRequest::None,
        ..Request::default()
    }
}
