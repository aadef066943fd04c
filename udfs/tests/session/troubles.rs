//! Bad series among good ones: each says what is wrong with it, and the others never notice.

use std::sync::Arc;

use arrow::array::{ArrayRef, Float64Array, Int64Array, RecordBatch, StringArray};
use datafusion::prelude::{SessionConfig, SessionContext};

use crate::support::*;

/// Rows: time, value, price.
type Rows = Vec<(Option<i64>, Option<f64>, Option<f64>)>;

/// A key with its rows.
type Case = (&'static str, Rows);

fn series(count: usize, value: impl Fn(usize) -> f64) -> Rows {
    (0..count).map(|at| (Some(at as i64), Some(value(at)), Some(1.0 + ((at * 7) % 5) as f64))).collect()
}

fn healthy(at: usize) -> f64 {
    let mut noise = Noise(at as u32 * 7_919 + 11);
    noise.next();
    100.0 + at as f64 * 0.3 + 3.0 * noise.next()
}

fn cases() -> Vec<(Case, &'static str)> {
    let edit = |edit: &dyn Fn(&mut Rows)| {
        let mut rows = series(30, healthy);
        edit(&mut rows);
        rows
    };
    vec![
        (("all missing", edit(&|rows| rows.iter_mut().for_each(|row| row.1 = None))), "all missing"),
        (("all nan", edit(&|rows| rows.iter_mut().for_each(|row| row.1 = Some(f64::NAN)))), "all missing"),
        (("one point", series(1, healthy)), "no grid"),
        (("three points", series(3, healthy)), "too short"),
        (("constant", series(30, |_| 5.0)), "constant"),
        (("duplicate", edit(&|rows| rows[4].0 = Some(3))), "duplicate time"),
        (("no time", edit(&|rows| rows[4].0 = None)), "missing time"),
        (("infinite", edit(&|rows| rows[4].1 = Some(f64::INFINITY))), "not finite"),
        (("huge", edit(&|rows| rows[4].1 = Some(1e300))), "too large"),
        (("driver gap", edit(&|rows| rows[4].2 = None)), "driver gap"),
        (("collinear", edit(&|rows| rows.iter_mut().for_each(|row| row.2 = Some(2.0)))), "collinear drivers"),
        (("healthy", series(30, healthy)), "ok"),
        (("two values", series(30, |at| f64::from(u8::from(at % 3 == 0)))), "ok"),
        (("leading and inner gaps", edit(&|rows| (0..9).for_each(|at| rows[at / 2 * 3].1 = None))), "ok"),
    ]
}

fn context(cases: &[(Case, &str)]) -> SessionContext {
    let (mut keys, mut times, mut values, mut prices) = (Vec::new(), Vec::new(), Vec::new(), Vec::new());
    for ((key, rows), _) in cases {
        for (time, value, price) in rows {
            keys.push(*key);
            times.push(*time);
            values.push(*value);
            prices.push(*price);
        }
    }
    let columns: Vec<(&str, ArrayRef)> = vec![
        ("depot", Arc::new(StringArray::from(keys))),
        ("week", Arc::new(Int64Array::from(times))),
        ("units", Arc::new(Float64Array::from(values))),
        ("price", Arc::new(Float64Array::from(prices))),
    ];
    session_over(RecordBatch::try_from_iter(columns).unwrap(), SessionConfig::new().with_target_partitions(2))
}

fn call(function: &str, more: &str) -> String {
    format!(
        "SELECT * FROM {function}(data => sales, per => depot, at => week, observed => units, drivers => price,
         trend => 'local level', season => 0, transform => 'none' {more})"
    )
}

#[tokio::test]
async fn each_bad_series_says_so_in_its_own_row() {
    let cases = cases();
    let batch = rows(&context(&cases), &call("diagnostics", "")).await;
    assert_eq!(batch.num_rows(), cases.len());
    let found = texts(&batch, "depot").into_iter().zip(texts(&batch, "status")).zip(texts(&batch, "message"));
    for ((depot, status), message) in found {
        let ((_, _), expected) = cases.iter().find(|((key, _), _)| Some(*key) == depot.as_deref()).unwrap();
        assert_eq!(status.as_deref(), Some(*expected), "{depot:?}: {message:?}");
        assert_eq!(message.is_none(), *expected == "ok", "{depot:?}");
    }
}

#[tokio::test]
async fn good_series_are_the_same_with_and_without_bad_neighbours() {
    let cases = cases();
    let healthy = cases.iter().filter(|(_, status)| *status == "ok").cloned().collect::<Vec<_>>();
    for (function, more) in [("components", ""), ("diagnostics", "")] {
        let order = if function == "components" { "ORDER BY depot, at" } else { "ORDER BY depot" };
        let sql = format!("SELECT * FROM ({}) WHERE status = 'ok' {order}", call(function, more));
        let with = rows(&context(&cases), &sql).await;
        let without = rows(&context(&healthy), &sql).await;
        assert_eq!(bits(&with), bits(&without));
    }
}

#[tokio::test]
async fn components_of_a_bad_series_are_its_own_rows() {
    let cases = cases();
    let sql = format!("SELECT * FROM ({}) WHERE depot = 'infinite' ORDER BY at", call("components", ""));
    let batch = rows(&context(&cases), &sql).await;
    assert_eq!(batch.num_rows(), 30);
    assert_eq!(numbers(&batch, "observed")[4], Some(f64::INFINITY));
    assert!(numbers(&batch, "level").iter().all(Option::is_none));
    assert_eq!(texts(&batch, "status"), vec![Some("not finite".to_string()); 30]);
    let sql =
        format!("SELECT * FROM ({}) WHERE depot = 'no time' ORDER BY at NULLS LAST", call("components", ""));
    let batch = rows(&context(&cases), &sql).await;
    assert_eq!(texts(&batch, "at")[29], None, "a row without a time is returned as it is");
}

#[tokio::test]
async fn a_forecast_of_a_bad_series_has_its_steps_where_the_grid_is_known() {
    let cases = cases();
    let context = context(&cases);
    let steps = |depot: &str| {
        format!(
            "SELECT * FROM ({}) WHERE depot = '{depot}' ORDER BY step",
            call("forecast", ", horizon => 2")
        )
    };
    let constant = rows(&context, &steps("constant")).await;
    assert_eq!(texts(&constant, "at"), [Some("30".to_string()), Some("31".to_string())]);
    assert_eq!(texts(&constant, "status"), vec![Some("constant".to_string()); 2]);
    let missing = rows(&context, &steps("all missing")).await;
    assert_eq!(texts(&missing, "at"), [Some("30".to_string()), Some("31".to_string())]);
    let unknown = rows(&context, &steps("one point")).await;
    assert_eq!((texts(&unknown, "at"), counts(&unknown, "step")), (vec![None], vec![None]));
}

#[tokio::test]
async fn the_message_says_value_place_and_remedy() {
    let cases = cases();
    let batch = rows(
        &context(&cases),
        &format!("SELECT depot, message FROM ({}) WHERE depot = 'huge'", call("diagnostics", "")),
    )
    .await;
    let message = texts(&batch, "message")[0].clone().unwrap();
    assert!(message.contains("1e300") && message.contains("time of that point: 4"), "{message}");
}

#[tokio::test]
async fn trouble_can_be_an_error() {
    let cases = cases()
        .into_iter()
        .filter(|((key, _), _)| matches!(*key, "healthy" | "constant"))
        .collect::<Vec<_>>();
    let message = error(&context(&cases), &call("components", ", on_trouble => 'fail'")).await;
    assert!(
        message.contains("components: series depot=constant: constant: every observed value is 5"),
        "{message}"
    );
    let fine = &cases[1..];
    assert_eq!(rows(&context(fine), &call("components", ", on_trouble => 'fail'")).await.num_rows(), 30);
}

#[tokio::test]
async fn progress_counts_series_and_names_those_in_trouble() {
    let cases = cases();
    let progress = Arc::new(stillwell::Progress::default());
    let context = context(&cases);
    context.state_ref().write().config_mut().set_extension(Arc::clone(&progress));
    rows(&context, &call("diagnostics", "")).await;
    assert_eq!(progress.series(), cases.len() as u64);
    let bad = cases.iter().filter(|(_, status)| *status != "ok").count();
    assert_eq!(progress.in_trouble(), bad as u64);
    let all = cases.iter().map(|((_, rows), _)| rows.len() as u64).sum::<u64>();
    assert_eq!(progress.rows(), all);
    let troubled = progress.troubled();
    assert_eq!(troubled.len(), bad);
    assert_eq!((troubled[0].series.as_str(), troubled[0].status), ("depot=all missing", "all missing"));
}

#[tokio::test]
async fn progress_knows_how_many_rows_come_out_of_files() {
    let folder = tempfile::tempdir().unwrap();
    let path = format!("{}/sales/", folder.path().display());
    let progress = Arc::new(stillwell::Progress::default());
    let context = session();
    context.state_ref().write().config_mut().set_extension(Arc::clone(&progress));
    context.sql(&format!("COPY sales TO '{path}' STORED AS PARQUET")).await.unwrap().collect().await.unwrap();
    let create = format!("CREATE EXTERNAL TABLE files STORED AS PARQUET LOCATION '{path}'");
    context.sql(&create).await.unwrap();
    let call =
        "diagnostics(data => files, per => (region, product), at => week, observed => units, season => 0)";
    rows(&context, &format!("SELECT * FROM {call}")).await;
    assert_eq!((progress.expected_rows(), progress.rows()), (360, 360));
    progress.reset();
    rows(&context, &format!("SELECT * FROM {call} WHERE region = 'South'")).await;
    assert_eq!((progress.expected_rows(), progress.rows()), (180, 180));
}
