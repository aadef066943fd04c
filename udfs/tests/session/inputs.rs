//! Types of keys, times, values and drivers; NULL keys; plans of drivers.

use std::sync::Arc;

use arrow::array::{
    ArrayRef, Decimal128Array, DictionaryArray, Float32Array, Float64Array, Int32Array, Int64Array,
    RecordBatch, StringArray, StringViewArray, TimestampMicrosecondArray, UInt16Array,
};
use arrow::compute::cast;
use arrow::datatypes::{DataType, Int32Type};
use datafusion::prelude::{SessionConfig, SessionContext};

use crate::support::*;

fn table(columns: Vec<(&str, ArrayRef)>) -> SessionContext {
    session_over(RecordBatch::try_from_iter(columns).unwrap(), SessionConfig::new().with_target_partitions(2))
}

fn wobble(count: usize) -> Vec<f64> {
    let mut noise = Noise(3);
    let mut level = 50.0;
    (0..count)
        .map(|_| {
            level += noise.next();
            level + 2.0 * noise.next()
        })
        .collect()
}

fn counter(count: usize) -> ArrayRef {
    Arc::new(Int64Array::from_iter_values(0..count as i64))
}

const LEVEL: &str = "trend => 'local level', season => 0, transform => 'none'";

#[tokio::test]
async fn null_is_a_key_and_keys_keep_their_types() {
    let keys = (0..90).map(|at| [Some("North"), None, Some("South")][at / 30]).collect::<Vec<_>>();
    let dictionary: ArrayRef = Arc::new(keys.iter().copied().collect::<DictionaryArray<Int32Type>>());
    let view: ArrayRef = Arc::new(StringViewArray::from(keys.clone()));
    let number: ArrayRef = Arc::new(UInt16Array::from(
        (0..90).map(|at| (at >= 30).then_some(at as u16 / 60)).collect::<Vec<_>>(),
    ));
    let week: ArrayRef = Arc::new(Int64Array::from_iter_values((0..90).map(|at| at % 30)));
    let units: ArrayRef = Arc::new(Float64Array::from(wobble(90)));
    let types = [&dictionary, &view, &number].map(|array| array.data_type().clone());
    let context =
        table(vec![("d", dictionary), ("v", view), ("line", number), ("week", week), ("units", units)]);
    let sql = format!(
        "SELECT d, v, line, status FROM diagnostics(data => sales, per => (d, v, line), at => week,
         observed => units, {LEVEL}) ORDER BY d"
    );
    let batch = rows(&context, &sql).await;
    assert_eq!(texts(&batch, "d"), [Some("North".to_string()), Some("South".to_string()), None]);
    assert_eq!(texts(&batch, "v"), texts(&batch, "d"));
    assert_eq!(texts(&batch, "status"), vec![Some("ok".to_string()); 3]);
    for (name, data_type) in ["d", "v", "line"].into_iter().zip(types) {
        assert_eq!(column(&batch, name).data_type(), &data_type);
    }
}

#[tokio::test]
async fn the_answer_does_not_depend_on_the_type_of_the_value() {
    let units: Vec<f64> = wobble(40).iter().map(|u| (u * 100.0).round()).collect();
    let whole: ArrayRef = Arc::new(Int32Array::from_iter_values(units.iter().map(|&u| u as i32)));
    let decimal: ArrayRef = Arc::new(
        Decimal128Array::from_iter_values(units.iter().map(|&u| u as i128 * 100))
            .with_precision_and_scale(12, 2)
            .unwrap(),
    );
    let short: ArrayRef = Arc::new(Float32Array::from_iter_values(units.iter().map(|&u| u as f32)));
    let long: ArrayRef = Arc::new(Float64Array::from(units));
    let mut answers = Vec::new();
    for column in [whole, decimal, short, long] {
        let context = table(vec![("week", counter(40)), ("units", column)]);
        let sql = format!(
            "SELECT at, level, level_se FROM components(data => sales, at => week, observed => units, {LEVEL})"
        );
        answers.push(bits(&rows(&context, &sql).await));
    }
    assert!(answers.iter().all(|answer| *answer == answers[0]));
}

#[tokio::test]
async fn times_of_every_type_come_back_in_their_type() {
    let days: ArrayRef = Arc::new(Int32Array::from_iter_values((0..40).map(|at| FIRST_WEEK + 7 * at)));
    let days = cast(&days, &DataType::Date32).unwrap();
    let micros = TimestampMicrosecondArray::from_iter_values(
        (0..40).map(|at| 1_600_000_000_000_000 + at * 3_600_000_000),
    );
    let zoned: ArrayRef = Arc::new(micros.clone().with_timezone("Europe/Berlin"));
    let short: ArrayRef = cast(&counter(40), &DataType::Int16).unwrap();
    for (time, every) in [(days, "week"), (Arc::new(micros), "hour"), (zoned, "hour"), (short, "step 1")] {
        let data_type = time.data_type().clone();
        let context = table(vec![("t", time), ("units", Arc::new(Float64Array::from(wobble(40))))]);
        let sql = format!(
            "SELECT * FROM forecast(data => sales, at => t, observed => units, {LEVEL}, horizon => 2)"
        );
        let batch = rows(&context, &sql).await;
        assert_eq!(column(&batch, "at").data_type(), &data_type);
        assert_eq!(column(&batch, "at").null_count(), 0);
        let sql = format!(
            "SELECT every, first_at FROM diagnostics(data => sales, at => t, observed => units, {LEVEL})"
        );
        assert_eq!(texts(&rows(&context, &sql).await, "every")[0].as_deref(), Some(every));
    }
}

#[tokio::test]
async fn gaps_are_points_and_rows_without_a_value_carry_the_plan() {
    // Points 0..44 but 20 and 21; values up to 39; prices up to 43.
    let at = (0..44).filter(|at| !(20..22).contains(at)).collect::<Vec<i64>>();
    let mut values = wobble(40);
    values.resize(44, f64::NAN);
    let price = |at: i64| 2.0 + ((at * 7) % 5) as f64 / 10.0;
    let units = at.iter().map(|&t| (t < 40).then(|| values[t as usize] - 8.0 * price(t))).collect::<Vec<_>>();
    let context = table(vec![
        ("week", Arc::new(Int64Array::from(at.clone()))),
        ("units", Arc::new(Float64Array::from(units))),
        ("price", Arc::new(Float64Array::from_iter_values(at.iter().map(|&t| price(t))))),
    ]);
    let call = |function: &str, more: &str| {
        format!(
            "SELECT * FROM {function}(data => sales, at => week, observed => units, drivers => price, {LEVEL} {more})"
        )
    };
    let components = rows(&context, &call("components", "")).await;
    assert_eq!(components.num_rows(), 40, "the gap is there, the plan is not");
    assert_eq!(numbers(&components, "observed")[20], None);
    assert!(numbers(&components, "level")[20].is_some());
    let diagnostics = rows(&context, &call("diagnostics", "")).await;
    assert_eq!((counts(&diagnostics, "n")[0], counts(&diagnostics, "missing")[0]), (Some(38), Some(2)));

    let forecast = rows(&context, &call("forecast", ", horizon => 4, parts => true")).await;
    let coefficient = numbers(&diagnostics, "coefficient_of_price")[0].unwrap();
    for (step, effect) in numbers(&forecast, "effect_of_price").into_iter().enumerate() {
        let planned = coefficient * price(40 + step as i64);
        assert!((effect.unwrap() - planned).abs() < 1e-9 * planned.abs(), "{effect:?} {planned}");
    }
    let too_far = rows(&context, &call("forecast", ", horizon => 6")).await;
    assert_eq!(too_far.num_rows(), 6);
    assert_eq!(texts(&too_far, "status"), vec![Some("no driver plan".to_string()); 6]);
    assert_eq!(texts(&too_far, "at")[5].as_deref(), Some("45"), "times are known even so");
}

#[tokio::test]
async fn drivers_can_be_computed_and_named() {
    let sql = |drivers: &str| {
        format!(
            "SELECT * FROM components(data => sales, per => (region, product), at => week, observed => units,
             drivers => {drivers}, trend => 'local level', season => 4)"
        )
    };
    let context = session();
    let cases = [
        ("ln(price)", "effect_of_ln_price"),
        ("{'log_price': ln(price)}", "effect_of_log_price"),
        ("named_struct('log_price', ln(price))", "effect_of_log_price"),
        ("struct(ln(price) AS log_price, promo)", "effect_of_promo"),
        ("[promo, ln(price)]", "effect_of_promo"),
        ("sales.price", "effect_of_price"),
    ];
    for (drivers, column) in cases {
        let batch = rows(&context, &sql(drivers)).await;
        assert!(numbers(&batch, column).iter().all(Option::is_some), "{drivers}");
        assert!(batch.column_by_name(&format!("{column}_se")).is_some());
    }
}

#[tokio::test]
async fn drifting_drivers_have_a_variance() {
    let sql = "SELECT * FROM diagnostics(data => (SELECT * FROM sales WHERE region = 'North'), per => product, at => week,
               observed => units, drivers => promo, drifting_drivers => price, trend => 'local level', season => 4)";
    let batch = rows(&session(), sql).await;
    assert!(numbers(&batch, "variance_of_price").iter().all(|variance| variance.is_some_and(|v| v >= 0.0)));
    assert!(batch.column_by_name("variance_of_promo").is_none());
    assert!(numbers(&batch, "coefficient_of_promo_t").iter().all(Option::is_some));
}

#[tokio::test]
async fn every_column_is_flat_and_the_same_whatever_the_data() {
    let context = session();
    let call = |data: &str| {
        format!(
            "SELECT * FROM diagnostics(data => ({data}), per => region, at => week, observed => units, season => 0)"
        )
    };
    let good = rows(&context, &call("SELECT * FROM sales WHERE product = 'Curd'")).await;
    let bad = rows(
        &context,
        &call("SELECT region, week, CAST(1 AS DOUBLE) AS units FROM sales WHERE product = 'Curd'"),
    )
    .await;
    assert_eq!(good.schema(), bad.schema());
    assert!(good.schema().fields().iter().all(|field| !field.data_type().is_nested()));
    assert_eq!(texts(&bad, "status"), vec![Some("constant".to_string()); 2]);
    let strings = StringArray::from(vec!["ok"; 2]);
    assert_eq!(column(&good, "status").as_ref(), &strings as &dyn arrow::array::Array);
}
