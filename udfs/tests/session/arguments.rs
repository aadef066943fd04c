//! Mistakes in a call: what is said about them.

use crate::support::*;

/// The message for a call of `function` on sales with these arguments more.
async fn message(function: &str, arguments: &str) -> String {
    let sql =
        format!("SELECT * FROM {function}(data => sales, per => (region, product), at => week, {arguments})");
    let message = error(&session(), &sql).await;
    message.trim_start_matches("Error during planning: ").to_string()
}

macro_rules! mistakes {
    ($($name:ident: $function:literal $arguments:literal => $expected:literal;)*) => {$(
        #[tokio::test]
        async fn $name() {
            assert_eq!(message($function, $arguments).await, $expected);
        }
    )*};
}

mistakes! {
    an_unknown_argument: "forecast" "observed => units, horizont => 3" =>
        "forecast: there is no argument 'horizont'; valid are 'data', 'per', 'at', 'observed', 'drivers', \
         'drifting_drivers', 'trend', 'season', 'period', 'harmonics', 'fixed_season', 'cycle', 'autoregression', \
         'transform', 'known', 'every', 'estimate', 'on_trouble', 'coverage', 'horizon', 'parts'; did you mean 'horizon'?";
    an_argument_of_another_function: "components" "observed => units, horizon => 3" =>
        "components: argument 'horizon' belongs to forecast; leave it out here";
    an_argument_given_twice: "forecast" "observed => units, horizon => 3, horizon => 4" =>
        "forecast: argument 'horizon' is given twice";
    a_missing_argument: "forecast" "observed => units" =>
        "forecast: argument 'horizon' is required: horizon => a whole number from 1 to 10000";
    an_unnamed_argument: "components" "units" =>
        "components: 'units' has no name; only data may stand first without one, write name => value";
    an_unknown_value: "components" "observed => units, trend => 'local lineal'" =>
        "components: argument 'trend' does not know 'local lineal'; valid are 'local level', 'local linear', 'smooth', \
         'damped', 'fixed level', 'fixed line', 'none', 'auto'; did you mean 'local linear'?";
    a_value_without_quotes: "components" "observed => units, trend => damped" =>
        "components: argument 'trend' takes a value, not a column such as damped (trend => 'damped' with quotes, if that text \
         is meant; it takes 'local level', 'local linear', 'smooth', 'damped', 'fixed level', 'fixed line', 'none', 'auto')";
    a_transform_of_another_day: "components" "observed => units, transform => 'root'" =>
        "components: argument 'transform' does not know 'root'; valid are 'none', 'log', 'log1p', 'box-cox', 'auto'";
    a_horizon_of_nothing: "forecast" "observed => units, horizon => 0" =>
        "forecast: argument 'horizon' takes a whole number from 1 to 10000, not 0";
    a_horizon_with_a_fraction: "forecast" "observed => units, horizon => 2.5" =>
        "forecast: argument 'horizon' takes a whole number from 1 to 10000, not 2.5";
    a_horizon_without_end: "forecast" "observed => units, horizon => 1000000" =>
        "forecast: argument 'horizon' takes a whole number from 1 to 10000, not 1000000";
    a_coverage_in_percent: "forecast" "observed => units, horizon => 3, coverage => 90" =>
        "forecast: argument 'coverage' takes a number above 0 and at most 0.999999, not 90";
    null_as_a_value: "components" "observed => units, season => NULL" =>
        "components: argument 'season' is NULL; leave it out for its default";
    a_season_of_text: "components" "observed => units, season => 'weekly'" =>
        "components: argument 'season' takes a period in steps, a list of periods, 0 for none, or 'auto', not 'weekly'";
    a_season_and_a_period: "components" "observed => units, season => 52, period => 52" =>
        "components: argument 'period' is what season => 'auto' considers, but season is 52; leave one of them out";
    harmonics_of_no_season: "components" "observed => units, season => 0, harmonics => 2" =>
        "components: argument 'harmonics' describes a season, but season => 0 leaves it out; drop one of the two";
    known_without_names: "components" "observed => units, known => 3" =>
        "components: argument 'known' takes {'parameter': value, …} or named_struct('parameter', value, …), not 3";
    known_without_a_number: "components" "observed => units, known => {'level': 'much'}" =>
        "components: argument 'known' gives 'level' the value 'much', but needs a finite number";
    an_integer_step_of_dates: "components" "observed => units, every => 7" =>
        "components: argument 'every' does not fit: 7 does not say of what unit; a DATE column takes whole days, weeks, \
         months, quarters or years, such as INTERVAL '7 days' or INTERVAL '1 month'";
    text_as_observations: "components" "observed => region" =>
        "components: argument 'observed' takes a numeric column (integer, decimal or floating point), but has type Utf8";
    text_as_a_driver: "components" "observed => units, drivers => (price, region)" =>
        "components: argument 'drivers' takes a numeric or boolean column, but 'region' has type Utf8";
    a_driver_twice: "components" "observed => units, drivers => price, drifting_drivers => price" =>
        "components: argument 'drivers' names 'price' twice; a driver has one coefficient, constant or drifting";
    a_list_for_one_column: "components" "observed => (units, price)" =>
        "components: argument 'observed' takes one column here, not the list (units, price)";
    an_aggregate_as_a_column: "components" "observed => sum(units)" =>
        "components: argument 'observed' takes columns of data; compute 'sum(units)' inside the query of data";
    a_column_as_a_value: "forecast" "observed => units, horizon => 1 + week" =>
        "Schema error: No field named week.";
    a_parameter_that_decides_columns: "forecast" "observed => units, horizon => 2, parts => $1" =>
        "forecast: argument 'parts' decides which columns or units the result has, so it cannot be a parameter; write its value";
    another_way_to_estimate: "components" "observed => units, estimate => 'posterior'" =>
        "components: argument 'estimate' does not know 'posterior'; valid are 'likelihood'";
}

#[tokio::test]
async fn text_as_a_time() {
    let sql = "SELECT * FROM components(data => sales, at => note, observed => units)";
    let message = error(&session(), sql).await;
    assert!(message.contains("components: argument 'at' takes a DATE, a TIMESTAMP"), "{message}");
    assert!(message.contains("has type Utf8"), "{message}");
}

#[tokio::test]
async fn a_key_named_like_a_column_of_the_result() {
    let sql =
        "SELECT * FROM components(data => (SELECT region AS level, week, units FROM sales), per => level,
               at => week, observed => units)";
    let message = error(&session(), sql).await;
    assert!(
        message
            .contains("argument 'per' names 'level', which is a column of the result; rename it inside data"),
        "{message}"
    );
}

#[tokio::test]
async fn a_key_given_twice() {
    let sql =
        "SELECT * FROM components(data => sales, per => (region, region), at => week, observed => units)";
    assert!(error(&session(), sql).await.contains("argument 'per' names 'region' twice"));
}

#[tokio::test]
async fn a_column_that_is_not_there() {
    let sql = "SELECT * FROM components(data => sales, at => weak, observed => units)";
    let message = error(&session(), sql).await;
    assert!(message.contains("weak") && message.contains("week"), "{message}");
}

#[tokio::test]
async fn a_table_that_is_not_there() {
    let sql = "SELECT * FROM components(data => sails, at => week, observed => units)";
    let message = error(&session(), sql).await;
    let expected =
        "components: argument 'data' names 'sails', but there is no such table or CTE; did you mean 'sales'?";
    assert!(message.contains(expected), "{message}");
}

#[tokio::test]
async fn data_that_depends_on_its_neighbour() {
    let sql = "SELECT * FROM (SELECT 7 AS n) AS t, LATERAL (SELECT * FROM components(
                   data => (SELECT * FROM sales WHERE price > t.n), at => week, observed => units))";
    let message = error(&session(), sql).await;
    assert!(message.contains("argument 'data' cannot depend on another relation"), "{message}");
}

#[tokio::test]
async fn data_that_is_no_relation() {
    let sql = "SELECT * FROM components(data => 1 + 1, at => week, observed => units)";
    let message = error(&session(), sql).await;
    assert!(
        message.contains("takes a query in parentheses, data => (SELECT … FROM …), not 1 + 1"),
        "{message}"
    );
    let sql = "SELECT * FROM components(data => 'sales/*.parquet', at => week, observed => units)";
    let message = error(&session(), sql).await;
    assert!(message.contains("data => (SELECT * FROM 'sales/*.parquet')"), "{message}");
}

#[tokio::test]
async fn requests_that_no_series_could_satisfy_fail_before_anything_is_read() {
    for (arguments, words) in [
        ("season => 1", "season"),
        ("season => 4, harmonics => 3", "harmonics"),
        ("trend => 'local level', known => {'slope': 1.0}", "known"),
    ] {
        let sql = format!(
            "EXPLAIN SELECT * FROM components(data => sales, at => week, observed => units, {arguments})"
        );
        let message = error(&session(), &sql).await;
        assert!(message.contains(&format!("components: argument '{words}'")), "{message}");
    }
}

#[tokio::test]
async fn a_session_with_a_planner_of_its_own_is_left_alone() {
    use std::sync::Arc;

    use async_trait::async_trait;
    use datafusion::catalog::Session;
    use datafusion::error::Result;
    use datafusion::execution::SessionStateBuilder;
    use datafusion::execution::context::QueryPlanner;
    use datafusion::logical_expr::LogicalPlan;
    use datafusion::physical_plan::ExecutionPlan;
    use datafusion::physical_planner::{DefaultPhysicalPlanner, PhysicalPlanner};
    use datafusion::prelude::SessionContext;

    #[derive(Debug)]
    struct HousePlanner;

    #[async_trait]
    impl QueryPlanner for HousePlanner {
        async fn create_physical_plan(
            &self,
            plan: &LogicalPlan,
            session: &dyn Session,
        ) -> Result<Arc<dyn ExecutionPlan>> {
            DefaultPhysicalPlanner::with_extension_planners(vec![Arc::new(
                stillwell::StructuralExtensionPlanner,
            )])
            .create_physical_plan(plan, session)
            .await
        }
    }

    let state =
        SessionStateBuilder::new_with_default_features().with_query_planner(Arc::new(HousePlanner)).build();
    let context = SessionContext::new_with_state(state);
    let message = stillwell::register(&context).unwrap_err().to_string();
    assert!(message.contains("plans queries with HousePlanner"), "{message}");
    stillwell::register_relations(&context).unwrap();
    add_table(&context, "sales", vec![vec![sales(30)]]);
    let sql =
        "SELECT * FROM diagnostics(data => sales, per => (region, product), at => week, observed => units)";
    assert_eq!(rows(&context, sql).await.num_rows(), 6);
}

#[tokio::test]
async fn extend_and_a_second_register_are_harmless() {
    use datafusion::execution::SessionStateBuilder;
    use datafusion::prelude::SessionContext;

    let builder = stillwell::extend(SessionStateBuilder::new_with_default_features());
    let context = SessionContext::new_with_state(builder.build());
    stillwell::register(&context).unwrap();
    stillwell::register(&context).unwrap();
    add_table(&context, "sales", vec![vec![sales(30)]]);
    let sql =
        "SELECT * FROM diagnostics(data => sales, per => (region, product), at => week, observed => units)";
    assert_eq!(rows(&context, sql).await.num_rows(), 6);
}
