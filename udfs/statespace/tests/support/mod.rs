//! Reading the reference cases (tests/reference/README.md says where they come from).

use serde_json::Value;
use stillwell_statespace::structure::{Cycle, Season, Structure, Trend};
use stillwell_statespace::{Evaluation, EvaluationError, Series};

/// One pair of series and structure.
pub struct Case {
    pub id: String,
    pub json: Value,
    pub structure: Structure,
    pub series: Series,
    pub drivers: Vec<String>,
    /// States that the case starts diffuse although this crate starts them stationary.
    pub diffuse_start: bool,
}

fn folder() -> std::path::PathBuf {
    std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference")
}

pub fn numbers(value: &Value) -> Vec<f64> {
    value.as_array().expect("an array").iter().map(|v| v.as_f64().unwrap_or(f64::NAN)).collect()
}

fn names(value: &Value) -> Vec<String> {
    value
        .as_array()
        .map(|a| a.iter().map(|v| v.as_str().expect("a name").to_owned()).collect())
        .unwrap_or_default()
}

pub fn all() -> Vec<Case> {
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

pub fn one(id: &str) -> Case {
    all().into_iter().find(|c| c.id == id).expect("a known case")
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

impl Case {
    /// Values of the model's parameters in a `params` block of the case.
    pub fn values(&self, params: &Value) -> Vec<f64> {
        let model = self.structure.model();
        let get = |name: &str| params[name].as_f64().unwrap_or(0.0);
        model
            .parameters()
            .iter()
            .map(|p| match p.name.as_str() {
                "irregular" => get("sigma2.irregular"),
                "level" => get("sigma2.level"),
                "slope" => get("sigma2.slope"),
                "season" => get("sigma2.seasonal"),
                "slope_damping" => get("phi.slope"),
                "cycle" => get("sigma2.cycle"),
                "cycle_damping" => get("rho.cycle"),
                "cycle_period" => std::f64::consts::TAU / get("frequency.cycle"),
                "autoregression" => get("sigma2.ar"),
                "ar_1" => get("phi.ar"),
                driver => get(&format!("sigma2.beta.{driver}")),
            })
            .collect()
    }

    pub fn evaluate(&self, params: &Value) -> Result<Evaluation, EvaluationError> {
        let (model, values) = (self.structure.model(), self.values(params));
        if !self.diffuse_start {
            return Evaluation::new(model, &values, self.series.clone());
        }
        let mut system = model.system_at(&values)?;
        for start in std::mem::take(&mut system.proper) {
            system.diffuse.extend(start.offset..start.offset + start.size);
        }
        system.diffuse.sort_unstable();
        Evaluation::with_system(model, system, self.series.clone())
    }
}

/// Standard deviation of the observed values.
pub fn sd(values: &[f64]) -> f64 {
    let seen: Vec<f64> = values.iter().copied().filter(|v| !v.is_nan()).collect();
    let mean = seen.iter().sum::<f64>() / seen.len() as f64;
    (seen.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / seen.len() as f64).sqrt()
}
