//! Statements on an in-memory store that is registered under a URL, through the same steps as those of a job.

use clap::Parser;
use datafusion::prelude::{SessionConfig, SessionContext};
use futures::TryStreamExt;
use object_store::memory::InMemory;
use object_store::{ObjectStoreExt, PutPayload};

use super::*;
use crate::args::{Cli, EngineArgs, Verb};
use crate::execute::{Show, Step, execute};
use crate::exit::Outcome;
use crate::formats::Format;
use crate::session;
use crate::statements::parse;
use crate::streams::Out;

struct Warehouse {
    context: SessionContext,
    store: Arc<InMemory>,
}

impl Warehouse {
    async fn at(root: &str) -> Self {
        let context = session::open(&options(), SessionConfig::new()).await.expect("opens");
        let store = Arc::new(InMemory::new());
        let url = Url::parse(root).expect("a URL");
        context.runtime_env().register_object_store(&url, Arc::clone(&store) as Arc<dyn ObjectStore>);
        Self { context, store }
    }

    /// Runs a job to its end or its first failure.
    async fn run(&self, sql: &str) -> Outcome<Vec<Step>> {
        let show = Show { format: Format::Table, rows: 0 };
        let mut steps = Vec::new();
        for statement in parse(sql)? {
            steps.push(execute(self.context.clone(), statement.statement, show, Out::default()).await?);
        }
        Ok(steps)
    }

    async fn done(&self, sql: &str) -> Vec<Step> {
        self.run(sql).await.unwrap_or_else(|failure| panic!("{sql}: {}", failure.message))
    }

    async fn refused(&self, sql: &str) -> String {
        self.run(sql).await.expect_err(sql).message
    }

    /// The last table of a job as text.
    async fn table(&self, sql: &str) -> String {
        let last = self.done(sql).await.pop().and_then(|step| step.table).expect("a table");
        last.render(None, "").expect("text")
    }

    async fn objects(&self) -> Vec<String> {
        let listed: Vec<_> = self.store.list(None).try_collect().await.expect("listed");
        let mut names: Vec<String> = listed.into_iter().map(|object| object.location.to_string()).collect();
        names.sort();
        names
    }
}

fn options() -> EngineArgs {
    match Cli::parse_from(["stillwell", "query", "SELECT 1", "--threads", "2"]).verb {
        Verb::Query(args) => args.engine,
        other => panic!("{other:?}"),
    }
}

const SALES: &str = "SELECT value AS week, CASE WHEN value % 2 = 0 THEN 'North' ELSE 'South' END AS region
                     FROM generate_series(1, 10)";

#[tokio::test(flavor = "multi_thread")]
async fn what_is_written_is_read_again() {
    let warehouse = Warehouse::at("s3://warehouse").await;
    let steps = warehouse
        .done(&format!(
            "COPY ({SALES}) TO 's3://warehouse/sales/' STORED AS PARQUET PARTITIONED BY (region);
             COPY ({SALES}) TO 's3://warehouse/weeks.csv';"
        ))
        .await;
    let written = steps[0].written.as_ref().expect("written");
    assert_eq!((written.target.as_str(), written.rows), ("s3://warehouse/sales/", Some(10)));
    let objects = warehouse.objects().await;
    assert_eq!(objects.len(), 3, "{objects:?}");
    assert!(objects[0].starts_with("sales/region=North/") && objects[1].starts_with("sales/region=South/"));
    for from in [
        "'s3://warehouse/sales/'",
        "'s3://warehouse/sales/*.parquet'",
        "'s3://warehouse/sales/region=*/*.parquet'",
        "'s3://warehouse/sales/**/*.parquet'",
        "'s3://warehouse/weeks.csv'",
        "'s3://warehouse/week?.csv'",
    ] {
        let counts = format!("SELECT region, count(*) AS n FROM {from} GROUP BY region ORDER BY region");
        let table = warehouse.table(&counts).await;
        assert!(table.contains("| North  | 5 |") && table.contains("| South  | 5 |"), "{from}: {table}");
    }
    let table = "CREATE EXTERNAL TABLE sales STORED AS PARQUET PARTITIONED BY (region)
                 LOCATION 's3://warehouse/sales/'; SELECT max(week) AS m FROM sales WHERE region = 'North'";
    assert!(warehouse.table(table).await.contains("| 10 |"));
}

#[tokio::test(flavor = "multi_thread")]
async fn patterns_in_ordinary_folders_pick_files() {
    let warehouse = Warehouse::at("gs://warehouse").await;
    for (name, litres) in [("2024/a.csv", 1), ("2025/a.csv", 2), ("2025/b.csv", 4), ("2025/.hidden/c.csv", 8)]
    {
        let payload = PutPayload::from(format!("litres\n{litres}\n"));
        warehouse.store.put(&name.into(), payload).await.expect("put");
    }
    for (pattern, total) in [("2025/*.csv", 6), ("*/a.csv", 3), ("**/*.csv", 7), ("202[45]/b.csv", 4)] {
        let table =
            warehouse.table(&format!("SELECT sum(litres) AS n FROM 'gs://warehouse/{pattern}'")).await;
        assert!(table.contains(&format!("| {total} |")), "{pattern}: {table}");
    }
    let told = warehouse.refused("SELECT * FROM 'gs://warehouse/2026/*.csv'").await;
    assert!(
        told.contains("no file matches 'gs://warehouse/2026/*.csv'") && !told.contains("directory"),
        "{told}"
    );
}

#[tokio::test(flavor = "multi_thread")]
async fn a_folder_is_written_once_and_an_object_again() {
    let warehouse = Warehouse::at("az://warehouse").await;
    let copy =
        |n: i32, to: &str| format!("COPY (SELECT {n} AS n) TO 'az://warehouse/{to}' STORED AS PARQUET;");
    warehouse.done(&copy(1, "out/")).await;
    let told = warehouse.refused(&copy(2, "out")).await;
    assert!(told.contains("holds 'out/") && told.contains("twice") && told.contains("new folder"), "{told}");
    // The neighbour whose name begins alike is another folder.
    warehouse.done(&copy(3, "outlook/")).await;
    assert_eq!(warehouse.objects().await.len(), 2);
    warehouse.done(&(copy(4, "one.parquet") + &copy(5, "one.parquet"))).await;
    assert!(warehouse.table("SELECT n FROM 'az://warehouse/one.parquet'").await.contains("| 5 |"));
}

#[tokio::test(flavor = "multi_thread")]
async fn a_copy_must_not_write_to_what_it_reads() {
    let warehouse = Warehouse::at("s3://warehouse").await;
    warehouse.done("COPY (SELECT 1 AS n) TO 's3://warehouse/in/a.parquet'").await;
    for copy in [
        "COPY (SELECT n FROM 's3://warehouse/in/a.parquet') TO 's3://warehouse/in/a.parquet'",
        "COPY (SELECT n FROM 's3://warehouse/in/*.parquet') TO 's3://warehouse/in/' STORED AS PARQUET",
        "COPY (SELECT n FROM 's3://warehouse/in/') TO 's3://warehouse/in/out/' STORED AS PARQUET",
        "CREATE EXTERNAL TABLE t STORED AS PARQUET LOCATION 's3://warehouse/in/'; CREATE VIEW v AS SELECT n FROM t;
         COPY (SELECT 1 AS n WHERE EXISTS (SELECT 1 FROM v)) TO 's3://warehouse/in/b.parquet'",
    ] {
        let told = warehouse.refused(copy).await;
        assert!(told.contains("which the same statement reads"), "{copy}: {told}");
    }
    assert_eq!(warehouse.objects().await, ["in/a.parquet"]);
}

#[tokio::test(flavor = "multi_thread")]
async fn an_empty_result_still_has_its_columns() {
    let warehouse = Warehouse::at("s3://warehouse").await;
    for target in ["flat/", "one.parquet"] {
        let copy = format!("COPY (SELECT 1 AS a WHERE false) TO 's3://warehouse/{target}' STORED AS PARQUET");
        warehouse.done(&copy).await;
        let table = warehouse.table(&format!("SELECT * FROM 's3://warehouse/{target}'")).await;
        assert!(table.contains("| a |"), "{table}");
    }
    assert_eq!(warehouse.objects().await, ["flat/part-0.parquet", "one.parquet"]);
}

#[tokio::test(flavor = "multi_thread")]
async fn a_failing_copy_leaves_the_object_that_was_there() {
    let warehouse = Warehouse::at("s3://warehouse").await;
    warehouse.done("COPY (SELECT 7 AS a) TO 's3://warehouse/one.parquet'").await;
    let fails_late = "SELECT 1 / (300000 - value) AS a FROM generate_series(1, 300000)";
    for target in ["one.parquet", "one.csv", "deep/er/out/"] {
        let copy = format!("COPY ({fails_late}) TO 's3://warehouse/{target}' STORED AS PARQUET");
        let told = warehouse.refused(&copy).await;
        assert!(told.contains("ivide by zero"), "{told}");
    }
    assert_eq!(warehouse.objects().await, ["one.parquet"]);
    assert!(warehouse.table("SELECT a FROM 's3://warehouse/one.parquet'").await.contains("| 7 |"));
}

#[tokio::test(flavor = "multi_thread")]
async fn rows_travel_between_the_disk_and_a_store() {
    let warehouse = Warehouse::at("abfss://files@ostrel.dfs.core.windows.net").await;
    let place = tempfile::tempdir().expect("a folder");
    let local = place.path().join("sales").display().to_string();
    let remote = "abfss://files@ostrel.dfs.core.windows.net/sales/";
    warehouse
        .done(&format!(
            "COPY ({SALES}) TO '{local}/' STORED AS PARQUET PARTITIONED BY (region);
             COPY (SELECT * FROM '{local}/') TO '{remote}' STORED AS PARQUET PARTITIONED BY (region);
             COPY (SELECT * FROM '{remote}') TO '{local}/' STORED AS PARQUET PARTITIONED BY (region);"
        ))
        .await;
    assert!(warehouse.table(&format!("SELECT count(*) AS n FROM '{local}/'")).await.contains("| 10 |"));
}

#[tokio::test(flavor = "multi_thread")]
async fn what_no_store_serves_is_explained() {
    let warehouse = Warehouse::at("s3://warehouse").await;
    for (statement, why) in [
        ("SELECT * FROM 'hdfs://depot/a.parquet'", "no kind of store is called 'hdfs'"),
        ("COPY (SELECT 1 AS a) TO 's3a://warehouse/a.parquet'", "did you mean 's3://'"),
        ("CREATE EXTERNAL TABLE t STORED AS PARQUET LOCATION 'hdfs://depot/'", "s3://, gs://, az://"),
        ("CREATE EXTERNAL TABLE t STORED AS PARQUET LOCATION 's3://warehouse/*.parquet'", "CREATE VIEW"),
        ("COPY (SELECT 1 AS a) TO 'https://ostrel.example/a.parquet'", "web servers are for reading"),
        ("COPY (SELECT 1 AS a) TO 's3://warehouse/*.parquet'", "one place"),
        ("SELECT * FROM 'https://ostrel.example/*.parquet'", "a web server gives none"),
        ("SELECT * FROM 's3://warehouse/none.parquet'", "no file matches"),
    ] {
        let told = warehouse.refused(statement).await;
        assert!(told.contains(why), "{statement}: {told}");
    }
}

#[tokio::test]
async fn a_store_is_made_once_and_a_registered_one_is_used() {
    let stores = Stores::default();
    let url = |text: &str| Url::parse(text).expect("a URL");
    let first = stores.get_store(&url("https://ostrel.example/a.parquet")).expect("made");
    let again = stores.get_store(&url("https://ostrel.example/b/c.parquet")).expect("known");
    assert!(Arc::ptr_eq(&first, &again));
    let other = stores.get_store(&url("https://ostrel.example:8443/a.parquet")).expect("made");
    assert!(!Arc::ptr_eq(&first, &other));

    // Two containers of one account are two stores.
    let store: Arc<dyn ObjectStore> = Arc::new(InMemory::new());
    let files = url("abfss://files@ostrel.dfs.core.windows.net");
    stores.register_store(&files, Arc::clone(&store));
    assert!(Arc::ptr_eq(&stores.get_store(&files).expect("registered"), &store));
    assert!(Arc::ptr_eq(&stores.deregister_store(&files).expect("there"), &store));
    assert!(stores.deregister_store(&files).is_err());
}
