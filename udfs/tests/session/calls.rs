//! Ways to call: bare names, CTEs, views, other calls, joins, aliases, prepared statements, COPY.

use crate::support::*;

const COMPONENTS: &str =
    "per => (region, product), at => week, observed => units, trend => 'local level', season => 4";

#[tokio::test]
async fn components_has_one_row_per_grid_point() {
    let sql =
        format!("SELECT * FROM components(data => (SELECT * FROM sales), {COMPONENTS}, transform => 'none')");
    let batch = rows(&session(), &sql).await;
    assert_eq!(batch.num_rows(), 6 * 60);
    let names = batch.schema().fields().iter().map(|field| field.name().clone()).collect::<Vec<_>>();
    let expected = [
        "region",
        "product",
        "at",
        "observed",
        "level",
        "level_se",
        "slope",
        "slope_se",
        "seasonal",
        "seasonal_se",
        "cycle",
        "cycle_se",
        "autoregression",
        "autoregression_se",
        "irregular",
        "fitted",
        "lower",
        "upper",
        "outlier_t",
        "shift_t",
        "status",
    ];
    assert_eq!(names, expected);
    assert!(texts(&batch, "status").iter().all(|status| status.as_deref() == Some("ok")));
    assert!(numbers(&batch, "slope").iter().all(Option::is_none), "a local level has no slope");
    for (((observed, level), seasonal), irregular) in numbers(&batch, "observed")
        .into_iter()
        .zip(numbers(&batch, "level"))
        .zip(numbers(&batch, "seasonal"))
        .zip(numbers(&batch, "irregular"))
    {
        let sum = level.unwrap() + seasonal.unwrap() + irregular.unwrap();
        assert!((observed.unwrap() - sum).abs() < 1e-9, "components add up");
    }
}

#[tokio::test]
async fn forecast_goes_on_after_the_last_observation() {
    let sql = "SELECT * FROM forecast(data => (SELECT * FROM sales), per => (region, product), at => week,
               observed => units, trend => 'local level', season => 4, transform => 'none', horizon => 3)
               ORDER BY region, product, step";
    let batch = rows(&session(), sql).await;
    assert_eq!(batch.num_rows(), 6 * 3);
    assert_eq!(counts(&batch, "step")[..3], [Some(1), Some(2), Some(3)]);
    // 60 weeks from 2021-01-04: the last is 2022-02-21.
    assert_eq!(
        texts(&batch, "at")[..3],
        ["2022-02-28", "2022-03-07", "2022-03-14"].map(|at| Some(at.to_string()))
    );
    let expected = numbers(&batch, "expected");
    let total = numbers(&batch, "total_expected");
    let sum = expected[0].unwrap() + expected[1].unwrap() + expected[2].unwrap();
    assert!((total[2].unwrap() - sum).abs() < 1e-9 * sum.abs());
    assert!(batch.column_by_name("level").is_none(), "parts were not asked for");
}

#[tokio::test]
async fn parts_of_a_forecast_are_columns() {
    let sql = "SELECT * FROM forecast(data => (SELECT * FROM sales WHERE product = 'Curd'), per => region, at => week,
               observed => units, trend => 'local level', season => 4, transform => 'none', horizon => 2, parts => true)";
    let batch = rows(&session(), sql).await;
    for ((expected, level), seasonal) in
        numbers(&batch, "expected").into_iter().zip(numbers(&batch, "level")).zip(numbers(&batch, "seasonal"))
    {
        assert!((expected.unwrap() - level.unwrap() - seasonal.unwrap()).abs() < 1e-9);
    }
}

#[tokio::test]
async fn diagnostics_has_one_row_per_series() {
    let sql = "SELECT * FROM diagnostics(data => (SELECT * FROM sales), per => (region, product), at => week,
               observed => units, drivers => (price, promo), trend => 'local level', season => 4, transform => 'none')";
    let batch = rows(&session(), sql).await;
    assert_eq!(batch.num_rows(), 6);
    assert_eq!(texts(&batch, "every")[0].as_deref(), Some("week"));
    assert_eq!(texts(&batch, "season")[0].as_deref(), Some("4"));
    assert_eq!(texts(&batch, "harmonics")[0].as_deref(), Some("dummy"));
    assert_eq!(texts(&batch, "first_at")[0].as_deref(), Some("2021-01-04"));
    assert_eq!(counts(&batch, "n"), [Some(60); 6]);
    // The price effect in the data is -10 per unit of money; noise has standard deviation 4/sqrt(12) = 1.15.
    for (coefficient, se) in
        numbers(&batch, "coefficient_of_price").into_iter().zip(numbers(&batch, "coefficient_of_price_se"))
    {
        let (coefficient, se) = (coefficient.unwrap(), se.unwrap());
        assert!((coefficient + 10.0).abs() < 4.0 * se, "{coefficient} +- {se}");
    }
}

#[tokio::test]
async fn a_table_by_its_bare_name() {
    let context = session();
    let short =
        rows(&context, &format!("SELECT count(*) AS n FROM components(data => sales, {COMPONENTS})")).await;
    assert_eq!(counts(&short, "n"), [Some(360)]);
    for data in ["sales", "TABLE(sales)", "public.sales", "(sales)", "data => datafusion.public.sales"] {
        let batch =
            rows(&context, &format!("SELECT count(*) AS n FROM components({data}, {COMPONENTS})")).await;
        assert_eq!(counts(&batch, "n"), [Some(360)], "{data}");
    }
}

#[tokio::test]
async fn a_cte_goes_before_a_table_of_the_same_name() {
    let sql = format!(
        "WITH sales AS (SELECT * FROM public.sales WHERE region = 'North')
         SELECT count(*) AS n FROM components(data => sales, {COMPONENTS})"
    );
    assert_eq!(counts(&rows(&session(), &sql).await, "n"), [Some(180)]);
}

#[tokio::test]
async fn in_a_view() {
    let context = session();
    let view =
        format!("CREATE VIEW state AS SELECT * FROM components(data => (SELECT * FROM sales), {COMPONENTS})");
    context.sql(&view).await.unwrap().collect().await.unwrap();
    let batch =
        rows(&context, "SELECT region, max(at) AS last FROM state GROUP BY region ORDER BY region").await;
    assert_eq!(texts(&batch, "last")[0].as_deref(), Some("2022-02-21"));
    let of_view = "SELECT count(*) AS n FROM components(data => state, per => (region, product), at => at,
                   observed => level, trend => 'local level', season => 0)";
    assert_eq!(counts(&rows(&context, of_view).await, "n"), [Some(360)], "a view by its bare name");
}

#[tokio::test]
async fn a_call_inside_a_call() {
    let nested = format!("components(data => sales, {COMPONENTS})");
    for data in [nested.clone(), format!("(SELECT * FROM {nested})")] {
        let sql = format!(
            "SELECT * FROM forecast(data => {data}, per => (region, product), at => at, observed => level,
             trend => 'local level', season => 0, horizon => 1)"
        );
        let batch = rows(&session(), &sql).await;
        assert_eq!(batch.num_rows(), 6);
        assert_eq!(texts(&batch, "at")[0].as_deref(), Some("2022-02-28"));
    }
}

#[tokio::test]
async fn joined_with_its_own_table() {
    let sql = format!(
        "SELECT c.region, s.price, c.level
         FROM components(data => sales, {COMPONENTS}) AS c
         JOIN sales AS s ON s.region = c.region AND s.product = c.product AND s.week = c.at
         WHERE c.product = 'Butter'"
    );
    assert_eq!(rows(&session(), &sql).await.num_rows(), 120);
    let without_alias = format!(
        "SELECT components.level, sales.price FROM components(data => sales, {COMPONENTS})
         JOIN sales ON sales.week = components.at AND sales.region = components.region AND sales.product = components.product"
    );
    assert_eq!(rows(&session(), &without_alias).await.num_rows(), 360);
}

#[tokio::test]
async fn an_alias_can_rename_columns() {
    let sql = "SELECT o.next, o.units FROM forecast((SELECT week, units FROM sales WHERE product = 'Curd' AND region = 'North'),
               at => week, observed => units, season => 0, horizon => 1)
               AS o(next, step, units, se, lo, hi, total, total_lo, total_hi, status)";
    assert_eq!(texts(&rows(&session(), sql).await, "next")[0].as_deref(), Some("2022-02-28"));
}

#[tokio::test]
async fn several_seasons_with_a_known_variance() {
    let sql = "SELECT season, harmonics, season_variance FROM diagnostics(data => (SELECT * FROM sales WHERE product = 'Curd'),
               per => region, at => week, observed => units, trend => 'local level', season => (4, 13.5),
               harmonics => (2, 1), known => {'season_4': 0.0}, fixed_season => false)";
    let batch = rows(&session(), sql).await;
    assert_eq!(texts(&batch, "season")[0].as_deref(), Some("4, 13.5"));
    assert_eq!(texts(&batch, "harmonics")[0].as_deref(), Some("2, 1"));
    assert_eq!(numbers(&batch, "season_variance"), [None, None], "two seasons have no one variance");
}

#[tokio::test]
async fn prepared_with_parameters() {
    let context = session();
    let prepare = "PREPARE outlook AS SELECT * FROM forecast(data => (SELECT * FROM sales), per => (region, product),
                   at => week, observed => units, trend => 'local level', season => $2, horizon => $1, coverage => 0.5)";
    context.sql(prepare).await.unwrap().collect().await.unwrap();
    assert_eq!(rows(&context, "EXECUTE outlook(2, 4)").await.num_rows(), 12);
    assert_eq!(rows(&context, "EXECUTE outlook(5, 4)").await.num_rows(), 30);
    let message = error(&context, "EXECUTE outlook(0, 4)").await;
    assert!(
        message.contains("forecast: argument 'horizon' takes a whole number from 1 to 10000, not 0"),
        "{message}"
    );
}

#[tokio::test]
async fn a_parameter_without_a_value_is_said() {
    let sql = "SELECT * FROM forecast(data => sales, at => week, observed => units, horizon => $1)";
    let message = error(&session(), sql).await;
    assert!(message.contains("horizon") && message.contains("parameter without a value"), "{message}");
}

#[tokio::test]
async fn constant_expressions_are_values() {
    let sql = "SELECT * FROM forecast(data => sales, per => (region, product), at => week, observed => units,
               trend => 'local level', season => [2 * 2], horizon => 1 + 1, coverage => 9 / 10.0,
               known => {'level': 0.5 * 2}, every => INTERVAL '1 week')";
    assert_eq!(rows(&session(), sql).await.num_rows(), 12);
}

#[tokio::test]
async fn the_dialect_with_other_named_arguments_works_too() {
    let context = session();
    context.sql("SET datafusion.sql_parser.dialect = 'PostgreSQL'").await.unwrap().collect().await.unwrap();
    let sql = "SELECT * FROM forecast(data => (SELECT * FROM sales), per => (region, product), at => week,
               observed => units, trend => 'local level', season => 4, horizon => 2,
               known => named_struct('level', 1.0))";
    assert_eq!(rows(&context, sql).await.num_rows(), 12);
}

#[tokio::test]
async fn copied_to_partitioned_parquet_and_read_back() {
    let context = session();
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("state");
    let copy = format!(
        "COPY (SELECT * FROM components(data => sales, {COMPONENTS})) TO '{}' STORED AS PARQUET PARTITIONED BY (region)",
        path.display()
    );
    context.sql(&copy).await.unwrap().collect().await.unwrap();
    assert!(path.join("region=North").is_dir() && path.join("region=South").is_dir());
    // Off by default: the engine then leaves out what files say about their fields.
    context
        .sql("SET datafusion.execution.parquet.skip_metadata = false")
        .await
        .unwrap()
        .collect()
        .await
        .unwrap();
    context
        .sql(&format!(
            "CREATE EXTERNAL TABLE state STORED AS PARQUET PARTITIONED BY (region) LOCATION '{}/'",
            path.display()
        ))
        .await
        .unwrap();
    let batch = rows(&context, "SELECT * FROM state WHERE region = 'South' ORDER BY product, at").await;
    assert_eq!(batch.num_rows(), 180);

    let unit = |name: &str| batch.schema().field_with_name(name).unwrap().metadata().get("unit").cloned();
    assert_eq!(unit("level").as_deref(), Some("data"), "the unit survives in the file");
    assert_eq!(unit("seasonal").as_deref(), Some("data or factor"));
}

#[tokio::test]
async fn a_union_of_results_with_different_units() {
    let of = |transform: &str| {
        format!(
            "SELECT region, product, at, seasonal FROM components(data => sales, {COMPONENTS}, transform => '{transform}')"
        )
    };
    let sql = format!("{} UNION ALL {}", of("none"), of("log"));
    assert_eq!(rows(&session(), &sql).await.num_rows(), 720);
}

#[tokio::test]
async fn limits_and_empty_inputs() {
    let context = session();
    let sql = format!("SELECT * FROM components(data => sales, {COMPONENTS}) LIMIT 5");
    assert_eq!(rows(&context, &sql).await.num_rows(), 5);
    let sql =
        format!("SELECT * FROM components(data => (SELECT * FROM sales WHERE units < -1e9), {COMPONENTS})");
    assert_eq!(rows(&context, &sql).await.num_rows(), 0);
    let sql = "SELECT * FROM forecast(data => (SELECT * FROM sales WHERE units < -1e9), at => week, observed => units, horizon => 3)";
    assert_eq!(rows(&context, sql).await.num_rows(), 0, "no rows are no series, also without a key");
}
