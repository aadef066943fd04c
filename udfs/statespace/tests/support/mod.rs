//! Reading the reference cases (tests/reference/README.md says where they come from).

use serde_json::Value;
use stillwell_statespace::Series;
use stillwell_statespace::structure::{Cycle, Season, Structure, Trend};

/// One pair of series and structure.
pub(crate) struct Case {
    pub(crate) id: String,
    pub(crate) json: Value,
    pub(crate) structure: Structure,
    pub(crate) series: Series,
    pub(crate) drivers: Vec<String>,
    /// States that the case starts diffuse although this crate starts them stationary.
    pub(crate) diffuse_start: bool,
}

fn folder() -> std::path::PathBuf {
    std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference")
}

pub(crate) fn numbers(value: &Value) -> Vec<f64> {
    value.as_array().expect("an array").iter().map(|v| v.as_f64().unwrap_or(f64::NAN)).collect()
}

fn names(value: &Value) -> Vec<String> {
    value
        .as_array()
        .map(|a| a.iter().map(|v| v.as_str().expect("a name").to_owned()).collect())
        .unwrap_or_default()
}

pub(crate) fn all() -> Vec<Case> {
    let series: Value =
        serde_json::from_str(&std::fs::read_to_string(folder().join("series.json")).expect("series.json"))
            .expect("valid JSON");
    let mut files: Vec<_> = std::fs::read_dir(folder())
        .expect("tests/reference")
        .map(|entry| entry.expect("a file").path())
        .filter(|p| p.extension().is_some_and(|e| e == "json") && !p.ends_with("series.json"))
        .collect();
    files.sort();
    files.iter().map(|path| read(path, &series)).collect()
}

fn read(path: &std::path::Path, all: &Value) -> Case {
    let json: Value =
        serde_json::from_str(&std::fs::read_to_string(path).expect("a case")).expect("valid JSON");
    let spec = &json["spec"];
    let level = spec["level"].as_str();
    let trend = match (level, spec["slope"].as_str()) {
        (Some("stoch"), None) => Trend::LocalLevel,
        (Some("det"), None) => Trend::FixedLevel,
        (Some("stoch"), Some("stoch")) => Trend::LocalLinear,
        (Some("det"), Some("stoch")) => Trend::Smooth,
        (Some("stoch"), Some("damped")) => Trend::Damped,
        other => panic!("unknown trend {other:?}"),
    };
    let seasons = match spec.get("seasonal") {
        None | Some(Value::Null) => Vec::new(),
        Some(s) => vec![Season {
            period: s["s"].as_f64().expect("a period"),
            harmonics: s.get("harmonics").and_then(Value::as_array).map(Vec::len),
            fixed: s["stoch"].as_bool() == Some(false),
        }],
    };
    let cycle = spec.get("cycle").filter(|c| !c.is_null());
    let drivers = names(&spec["xreg"]);
    let drifting = names(&spec["tvreg"]);
    let columns = &all[json["series"].as_str().expect("a series")];
    // Forecasts keep a driver at the value the case states for each future step.
    let with_future = |name: &String| -> Vec<f64> {
        let mut x = numbers(&columns[name.as_str()]);
        x.extend(numbers(&json["fixed"]["forecast"]["x_future"][name.as_str()]));
        x
    };
    Case {
        id: json["id"].as_str().expect("an id").to_owned(),
        structure: Structure {
            trend,
            seasons,
            cycle: cycle.map(|_| Cycle { shortest: 2.5, longest: 100.0 }),
            autoregression: spec["ar"].as_u64().unwrap_or(0) as usize,
            drivers: drivers.len(),
            drifting_drivers: drifting.clone(),
        },
        series: Series {
            observed: numbers(&columns["y"]),
            drivers: drivers.iter().map(with_future).collect(),
            drifting_drivers: drifting.iter().map(with_future).collect(),
        },
        drivers,
        diffuse_start: cycle.is_some_and(|c| c["init"] == "diffuse") || spec["slope_init"] == "diffuse",
        json,
    }
}
