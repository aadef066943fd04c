//! The example of every function runs, on a table `sales(region, product, week, litres, price, promo)` made of the demo,
//! and shows something.
//!
//! The examples come from the documentation that the functions carry, which is also what the page `udfs/docs/functions.md`
//! and `stillwell functions` print.

use std::fs;

use arrow::array::{Array, RecordBatch};
use datafusion::prelude::SessionContext;

use crate::support::{ROOT, query, rows, session_over_files};

/// Columns that have nothing to say of a good series.
const SILENT: [&str; 1] = ["message"];

/// Name and example of every function.
fn examples() -> Vec<(String, String)> {
    let relations = stillwell::functions().into_iter();
    let relations = relations.map(|doc| (doc.function.name().to_string(), doc.example.to_string()));
    relations.chain(stillwell::value_functions().into_iter().map(|doc| (doc.name, doc.example))).collect()
}

async fn session() -> SessionContext {
    let context = session_over_files();
    let sales = "CREATE VIEW sales AS SELECT region, product, week, units AS litres, price, promo FROM 'parquet-samples/sales/'";
    rows(&context, sales).await;
    context
}

/// What is wrong with an answer: no rows, or a column that is NULL throughout.
fn complaint(answer: &RecordBatch) -> Option<String> {
    if answer.num_rows() == 0 {
        return Some("answers with no row".to_string());
    }
    let schema = answer.schema();
    let columns = schema.fields().iter().zip(answer.columns());
    let mut silent = columns.filter(|(_, column)| column.logical_null_count() == answer.num_rows());
    silent
        .find(|(field, _)| !SILENT.contains(&field.name().as_str()))
        .map(|(field, _)| format!("answers with NULL in every row of {}", field.name()))
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn every_example_shows_something() {
    let context = session().await;
    let mut failures = Vec::new();
    for (name, example) in examples() {
        let outcome = match query(&context, &example).await {
            Ok(answer) => complaint(&answer),
            Err(error) => Some(format!("fails: {}", error.strip_backtrace())),
        };
        failures.extend(outcome.map(|complaint| format!("the example of {name} {complaint}\n{example}")));
    }
    assert!(failures.is_empty(), "{}", failures.join("\n\n"));
}

#[test]
fn every_function_has_an_example_on_the_page() {
    let page = fs::read_to_string(ROOT.join("udfs/docs/functions.md")).expect("the reference");
    let shown = page.split("```sql\n").skip(1).map(|block| block.split("\n```").next().unwrap_or_default());
    let shown = shown.collect::<Vec<_>>();
    let examples = examples();
    assert_eq!(shown.len(), examples.len(), "an example that is no function's, or one that is missing");
    let records = fs::read_to_string(ROOT.join("tests/slt/examples.slt")).expect("the records");
    for (name, example) in examples {
        assert!(example.contains(&format!("{name}(")), "the example of {name} does not call it");
        assert!(shown.contains(&example.as_str()), "the example of {name} is not on the page");
        let record = format!("statement ok\n{example}\n");
        assert!(
            records.contains(&record),
            "the example of {name} is no record of slt/examples.slt:\n{record}"
        );
    }
}

#[tokio::test]
async fn an_answer_that_shows_nothing_is_found() {
    let context = SessionContext::new();
    let answer = |sql: &'static str| {
        let context = &context;
        async move { complaint(&rows(context, sql).await) }
    };
    assert_eq!(answer("SELECT 1 AS a, NULL AS message").await, None);
    assert_eq!(answer("SELECT 1 AS a WHERE false").await.as_deref(), Some("answers with no row"));
    let silent = answer("SELECT * FROM (VALUES (1, CAST(NULL AS DOUBLE)), (2, NULL)) AS v(a, level)").await;
    assert_eq!(silent.as_deref(), Some("answers with NULL in every row of level"));
}
