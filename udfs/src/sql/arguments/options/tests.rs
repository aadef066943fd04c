//! Structs of options, good and bad.

use datafusion::common::{DFSchema, ScalarValue};
use datafusion::functions_nested::expr_fn::make_array;
use datafusion::logical_expr::{Expr, lit};
use datafusion::physical_expr::expressions::Column;
use datafusion::prelude::{SessionContext, named_struct};
use stillwell_statespace::SeasonRequest;
use stillwell_statespace::structure::Trend;

use super::*;

const FIT: OptionSet = OptionSet { function: "a_fit", without: &["coverage"] };

/// The options as the engine hands them over.
fn options(expr: Expr) -> ScalarValue {
    let expr = SessionContext::new().create_physical_expr(expr, &DFSchema::empty()).unwrap();
    constant("a_fit", "options", &expr).unwrap()
}

fn read(expr: Expr) -> Result<Settings> {
    FIT.read(&options(expr), Axis::Integer, &["price".to_string(), "promo".to_string()])
}

fn complaint(expr: Expr) -> String {
    read(expr).unwrap_err().strip_backtrace()
}

#[test]
fn fields_are_arguments() {
    let known = named_struct(vec![lit("level"), lit(0.5)]);
    let given = vec![
        lit("trend"),
        lit("damped"),
        lit("season"),
        lit(52.18),
        lit("harmonics"),
        lit(3),
        lit("known"),
        known,
    ];
    let settings = read(named_struct(given)).unwrap();
    assert_eq!(settings.request.trend, Some(Trend::Damped));
    assert_eq!(settings.request.season, SeasonRequest::Given(vec![52.18]));
    assert_eq!(settings.request.harmonics, Some(vec![3]));
    assert_eq!(settings.request.known, [("level".to_string(), 0.5)]);
    assert_eq!(settings.request.drivers, ["price", "promo"]);
}

#[test]
fn without_options_everything_is_default() {
    let plain = read(lit(ScalarValue::Null)).unwrap();
    assert_eq!(
        plain,
        Values { caller: FIT.caller(), given: &[] }
            .settings(Axis::Integer, &plain.request.drivers, &[])
            .unwrap()
    );
}

#[test]
fn lists_and_tuples_are_lists() {
    let tuple = named_struct(vec![lit("c0"), lit(8), lit("c1"), lit(30)]);
    assert_eq!(read(named_struct(vec![lit("cycle"), tuple])).unwrap().request.cycle, Some((8.0, 30.0)));
    let list = make_array(vec![lit(7.0), lit(365.25)]);
    let season = SeasonRequest::Given(vec![7.0, 365.25]);
    assert_eq!(read(named_struct(vec![lit("season"), list])).unwrap().request.season, season);
}

#[test]
fn drivers_that_drift_are_named() {
    let request =
        read(named_struct(vec![lit("drifting_drivers"), make_array(vec![lit("price")])])).unwrap().request;
    assert_eq!(
        (request.drivers, request.drifting_drivers),
        (vec!["promo".to_string()], vec!["price".to_string()])
    );
    let message = complaint(named_struct(vec![lit("drifting_drivers"), lit("prise")]));
    assert!(message.contains("option 'drifting_drivers' names 'prise', which is no driver"), "{message}");
    assert!(message.ends_with("did you mean 'price'?"), "{message}");
    assert!(
        complaint(named_struct(vec![lit("drifting_drivers"), lit(1)])).contains("takes names of drivers")
    );
}

#[test]
fn an_unknown_option_is_met_with_those_there_are() {
    let message = complaint(named_struct(vec![lit("sesaon"), lit(4)]));
    assert!(
        message
            .contains("a_fit: there is no option 'sesaon'; valid are 'drifting_drivers', 'trend', 'season'"),
        "{message}"
    );
    assert!(message.ends_with("did you mean 'season'?"), "{message}");
    assert!(!message.contains("'horizon'") && !message.contains("'coverage'"), "{message}");
    assert!(complaint(named_struct(vec![lit("coverage"), lit(0.5)])).contains("no option 'coverage'"));
    assert!(complaint(named_struct(vec![lit("drivers"), lit(1)])).contains("an argument of its own"));
}

#[test]
fn values_are_checked_and_the_option_is_named() {
    let message = complaint(named_struct(vec![lit("trend"), lit("dampd")]));
    assert!(message.contains("a_fit: option 'trend' does not know 'dampd'"), "{message}");
    let message = complaint(named_struct(vec![lit("season"), lit(ScalarValue::Int64(None))]));
    assert!(message.contains("option 'season' is NULL; leave it out for its default"), "{message}");
    let message = complaint(named_struct(vec![lit("season"), lit(0), lit("fixed_season"), lit(true)]));
    assert!(
        message.contains("option 'fixed_season' describes a season, but 'season': 0 leaves it out"),
        "{message}"
    );
}

#[test]
fn options_are_a_struct() {
    let message = FIT.check_type(&DataType::Utf8).unwrap_err().strip_backtrace();
    assert!(message.contains("a_fit: argument 'options' takes a struct"), "{message}");
    assert!(FIT.check_type(&DataType::Null).is_ok());
}

#[test]
fn a_column_is_no_constant() {
    let column: Arc<dyn PhysicalExpr> = Arc::new(Column::new("week", 3));
    let message = constant("a_fit", "options", &column).unwrap_err().strip_backtrace();
    assert!(
        message.contains("argument 'options' must be the same for all rows, but depends on column 'week'"),
        "{message}"
    );
}
