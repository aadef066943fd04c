use arrow::array::{Array, AsArray, Int32Array, StructArray};
use arrow::compute::cast;
use stillwell_statespace::calendar::Step;
use stillwell_statespace::structure::Trend;
use stillwell_statespace::{Request, SeasonRequest, Series, TransformRequest, Workspace, fit};

use super::*;

/// A fit with everything in it: two seasons, both kinds of drivers, a transform, a plan with a hole.
fn fitted() -> FittedValue {
    let points = 60;
    let observed = (0..points).map(|t| 50.0 + f64::from(t % 4) + (f64::from(t) * 1.3).sin()).collect();
    let price = (0..points + 5).map(|t| (f64::from(t) * 0.4).cos()).collect();
    let mut heat: Vec<f64> = (0..points + 5).map(|t| 1.0 + (f64::from(t) * 0.77).sin()).collect();
    heat[62] = f64::NAN;
    let series = Series { observed, drivers: vec![price], drifting_drivers: vec![heat] };
    let request = Request {
        trend: Some(Trend::Damped),
        season: SeasonRequest::Given(vec![4.0, 13.5]),
        harmonics: Some(vec![1, 2]),
        transform: TransformRequest::BoxCox(Some(0.25)),
        drivers: vec!["price".to_string()],
        drifting_drivers: vec!["heat".to_string()],
        ..Request::default()
    };
    FittedValue {
        standing: fit(&series, &request, &mut Workspace::new()).expect("a fit").standing(),
        rule: GridRule { step: Step::Months(1), anchor_day: Some(31), of_day: None },
        every: "month end".to_string(),
        first_at: 10_000,
        // 31 March 2005.
        last_at: 12_873,
    }
}

fn time() -> TimeKind {
    TimeKind::try_new(&DataType::Date32).expect("a time")
}

fn rows() -> Vec<Option<FitValue>> {
    let broken = FitValue {
        status: "constant".to_string(),
        refused: None,
        message: Some("a sentence".to_string()),
        fitted: None,
    };
    vec![
        Some(FitValue { status: "ok".to_string(), refused: None, message: None, fitted: Some(fitted()) }),
        None,
        Some(broken),
    ]
}

fn column() -> arrow::array::ArrayRef {
    let mut builder = FitBuilder::new(time());
    rows().into_iter().for_each(|row| builder.push(row));
    builder.finish().expect("an array")
}

/// As text, because what is NaN (unknown) equals nothing.
fn text(rows: &[Option<FitValue>]) -> String {
    format!("{rows:?}")
}

fn read(column: &arrow::array::ArrayRef) -> Vec<Option<FitValue>> {
    let fits = FitColumn::try_new(column).expect("a column of fits");
    (0..fits.len()).map(|row| fits.get(row).expect("a fit")).collect()
}

#[test]
fn what_is_written_is_read_bit_for_bit() {
    let column = column();
    assert_eq!(column.data_type(), &fit_type(&DataType::Date32));
    assert_eq!(text(&read(&column)), text(&rows()));
}

#[test]
fn order_of_fields_views_and_large_lists_do_not_matter() {
    let column = column();
    let given = column.as_struct();
    let mut columns: Vec<_> = given
        .fields()
        .iter()
        .zip(given.columns())
        .map(|(field, column)| {
            let data_type = match field.data_type() {
                DataType::Utf8 => DataType::Utf8View,
                DataType::List(item) => DataType::LargeList(Arc::clone(item)),
                other => other.clone(),
            };
            let column = cast(column, &data_type).expect("another type of the same");
            (super::field(field.name(), data_type), column)
        })
        .collect();
    columns.reverse();
    let shuffled = StructArray::new(
        columns.iter().map(|(field, _)| Arc::clone(field)).collect(),
        columns.into_iter().map(|(_, column)| column).collect(),
        given.nulls().cloned(),
    );
    let shuffled: arrow::array::ArrayRef = Arc::new(shuffled);
    assert_eq!(text(&read(&shuffled)), text(&rows()));
}

/// The column with one field of the fits replaced.
fn with(name: &str, values: arrow::array::ArrayRef) -> arrow::array::ArrayRef {
    let column = column();
    let given = column.as_struct();
    let (at, _) = given.fields().find(name).expect("a field");
    let mut columns = given.columns().to_vec();
    columns[at] = values;
    Arc::new(StructArray::new(given.fields().clone(), columns, given.nulls().cloned()))
}

#[test]
fn later_layouts_and_damaged_fits_are_refused() {
    let later = with("layout_version", Arc::new(Int32Array::from(vec![2, 2, 2])));
    let fits = FitColumn::try_new(&later).expect("a column of fits");
    assert_eq!(fits.get(0), Err(ReadError::Later { version: 2 }));

    let none = with("layout_version", Arc::new(Int32Array::from(vec![Some(0), None, Some(1)])));
    let longer = with("autoregression", Arc::new(Int32Array::from(vec![3, 0, 0])));
    for damaged in [none, longer] {
        let fits = FitColumn::try_new(&damaged).expect("a column of fits");
        let fit = fits.get(0).expect("a row of its own").expect("a fit");
        assert_eq!((fit.status.as_str(), fit.fitted.is_none()), ("damaged fit", true));
        assert!(fit.message.expect("a sentence").contains("fit the series again"));
        assert_eq!(fits.get(2).expect("the others").expect("a fit").status, "constant");
    }
}

#[test]
fn what_is_no_fit_is_named() {
    let message = |data_type: &DataType| FitColumn::time_of(data_type).unwrap_err().to_string();
    assert!(message(&DataType::Float64).contains("has type Float64"));
    let other = DataType::Struct(Fields::from(vec![field("last_at", DataType::Date32)]));
    assert!(message(&other).contains("without 'layout_version'"), "{}", message(&other));
}

#[test]
fn the_grid_goes_on_where_the_fit_ends() {
    let grid = fitted().grid(&time()).expect("a grid");
    // Month ends: 30 April, 31 May and 30 June 2005.
    assert_eq!([0, 1, 2, 3].map(|step| grid.time_at(step)), [12_873, 12_903, 12_934, 12_964].map(Some));
    let elsewhere = FittedValue { last_at: 12_870, ..fitted() };
    assert!(elsewhere.grid(&time()).is_none(), "28 March is no month end");
}
