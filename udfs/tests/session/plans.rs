//! What EXPLAIN shows: what is pushed down, what stays, what the optimizer adds and leaves out.

use datafusion::prelude::{SessionConfig, SessionContext};

use crate::support::*;

const CALL: &str = "components(data => sales, per => (region, product), at => week, observed => units,
                    trend => 'damped', season => 4)";

/// Lines of a plan without the table around them.
fn lines(plan: &str) -> Vec<String> {
    let cells = plan.lines().filter_map(|line| line.trim_end_matches(['|', ' ']).rsplit('|').next());
    cells.map(|cell| cell.trim().to_string()).collect()
}

fn line_with(plan: &str, word: &str) -> String {
    lines(plan).into_iter().find(|line| line.contains(word)).unwrap_or_else(|| panic!("no {word} in\n{plan}"))
}

/// Over more rows than one batch, where the optimizer repartitions.
fn wide_session() -> SessionContext {
    session_over(sales(60), SessionConfig::new().with_target_partitions(4).with_batch_size(64))
}

#[tokio::test]
async fn a_predicate_on_a_key_goes_down_to_the_table() {
    let sql = format!("SELECT * FROM {CALL} WHERE region = 'North' AND level > 90");
    let plan = explain(&session(), &sql).await;
    let logical = plan.split("physical_plan").next().unwrap();
    let node = logical.find("Components: per=").unwrap();
    assert!(logical.find("level > Float64(90)").unwrap() < node, "{plan}");
    assert!(logical.rfind("region = Utf8").unwrap() > node, "{plan}");
    assert_eq!(
        rows(&session(), &format!("SELECT DISTINCT region FROM {CALL} WHERE region = 'North'"))
            .await
            .num_rows(),
        1
    );
}

#[tokio::test]
async fn a_predicate_on_time_stays_above() {
    let sql = format!("SELECT * FROM {CALL} WHERE at > DATE '2022-01-01'");
    let plan = explain(&session(), &sql).await;
    let logical = plan.split("physical_plan").next().unwrap();
    assert!(
        logical.find("Date32(\"2022-01-01\")").unwrap() < logical.find("Components: per=").unwrap(),
        "{plan}"
    );
    assert_eq!(logical.matches("2022-01-01").count(), 1, "{plan}");
}

#[tokio::test]
async fn a_predicate_on_a_computed_key_is_rewritten_on_its_way_down() {
    let sql = "SELECT * FROM components(data => sales, per => (upper(region), product), at => week,
               observed => units, season => 0, trend => 'local level') WHERE upper_region = 'NORTH'";
    let context = session();
    let plan = explain(&context, sql).await;
    assert!(plan.rfind("upper(sales.region) = Utf8").is_some(), "{plan}");
    let batch = rows(&context, sql).await;
    assert_eq!(batch.num_rows(), 180);
    assert_eq!(texts(&batch, "upper_region")[0].as_deref(), Some("NORTH"));
}

#[tokio::test]
async fn columns_that_nobody_needs_are_not_read() {
    let plan = explain(&session(), &format!("SELECT region, level FROM {CALL}")).await;
    assert!(
        line_with(&plan, "TableScan: sales").contains("projection=[region, product, week, units]"),
        "{plan}"
    );
}

#[tokio::test]
async fn the_operator_says_what_it_does() {
    let sql = "SELECT * FROM forecast(data => sales, per => (region, product), at => week, observed => units,
               drivers => (price, promo), trend => 'damped', season => 52.18, harmonics => 2, horizon => 13)";
    let plan = explain(&session(), sql).await;
    let expected = "ForecastExec: per=[region, product], at=week, observed=units, drivers=[price, promo], \
                    trend=damped, season=52.18, harmonics=2, horizon=13";
    assert_eq!(line_with(&plan, "ForecastExec"), expected);
}

#[tokio::test]
async fn rows_are_partitioned_by_key_and_sorted_below() {
    let plan = explain(&wide_session(), &format!("SELECT * FROM {CALL}")).await;
    assert!(line_with(&plan, "RepartitionExec").contains("Hash([region@0, product@1], 4)"), "{plan}");
    let sort = "expr=[region@0 ASC NULLS LAST, product@1 ASC NULLS LAST, week@2 ASC NULLS LAST], preserve_partitioning=[true]";
    assert!(line_with(&plan, "SortExec").contains(sort), "{plan}");
}

#[tokio::test]
async fn the_order_of_the_result_is_known() {
    for context in [session(), wide_session()] {
        let plan = explain(&context, &format!("SELECT * FROM {CALL} ORDER BY region, product, at")).await;
        assert_eq!(plan.matches("SortExec").count(), 1, "only the sort below the operator:\n{plan}");
        let plan = explain(
            &context,
            &format!("SELECT region, product, avg(level) FROM {CALL} GROUP BY region, product"),
        )
        .await;
        assert!(plan.contains("ordering_mode=Sorted"), "{plan}");
    }
}

#[tokio::test]
async fn a_constant_key_keeps_the_order_known() {
    let context = wide_session();
    let sql =
        format!("SELECT region, product, at FROM {CALL} WHERE region = 'South' ORDER BY region, product, at");
    let plan = explain(&context, &sql).await;
    assert_eq!(plan.matches("SortExec").count(), 1, "{plan}");
    assert_eq!(rows(&context, &sql).await.num_rows(), 180);
    let by_time = format!(
        "SELECT product, at FROM {CALL} WHERE region = 'South' AND product = 'Curd' ORDER BY at DESC"
    );
    assert_eq!(texts(&rows(&context, &by_time).await, "at")[0].as_deref(), Some("2022-02-21"));
}

#[tokio::test]
async fn without_a_key_all_rows_come_together() {
    let context = wide_session();
    let sql = "SELECT * FROM components(data => (SELECT week, sum(units) AS units FROM sales GROUP BY week),
               at => week, observed => units, season => 0)";
    let plan = explain(&context, sql).await;
    assert!(!line_with(&plan, "ComponentsExec").contains("per="), "{plan}");
    assert_eq!(rows(&context, sql).await.num_rows(), 60);
}

#[tokio::test]
async fn a_limit_does_not_shorten_the_history() {
    let plan = explain(&session(), &format!("SELECT * FROM {CALL} LIMIT 3")).await;
    let logical = plan.split("physical_plan").next().unwrap();
    assert!(!logical[logical.find("Components: per=").unwrap()..].contains("fetch="), "{plan}");
}

#[tokio::test]
async fn partition_folders_without_the_key_are_not_opened() {
    let context = session();
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("sales");
    let copy = format!("COPY sales TO '{}' STORED AS PARQUET PARTITIONED BY (region)", path.display());
    context.sql(&copy).await.unwrap().collect().await.unwrap();
    let create = format!(
        "CREATE EXTERNAL TABLE warehouse STORED AS PARQUET PARTITIONED BY (region) LOCATION '{}/'",
        path.display()
    );
    context.sql(&create).await.unwrap();
    let sql = "SELECT * FROM diagnostics(data => warehouse, per => (region, product), at => week,
               observed => units, season => 0) WHERE region = 'South'";
    let plan = explain(&context, sql).await;
    assert!(plan.contains("region=South") && !plan.contains("region=North"), "{plan}");
    assert_eq!(rows(&context, sql).await.num_rows(), 3);
}
