//! Columns of tests/reference/series.json (tests/reference/README.md says where they come from).

/// The values of one column, NaN = missing.
pub(crate) fn column(series: &str, name: &str) -> Vec<f64> {
    let path = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference/series.json");
    let text = std::fs::read_to_string(path).expect("series.json");
    let all: serde_json::Value = serde_json::from_str(&text).expect("valid JSON");
    let values = all[series][name].as_array().expect("a series and one of its columns");
    values.iter().map(|v| v.as_f64().unwrap_or(f64::NAN)).collect()
}
