//! `stillwell query`: formats, files, pipes.

use std::io::{BufRead, BufReader, Read};

use crate::support::Place;

const ROWS: &str = "SELECT * FROM (VALUES ('Butter', 1.5), ('Quark', NULL)) AS t(product, litres)";

fn answer(args: &[&str]) -> String {
    let ran = Place::new().stillwell(&[&["query", ROWS], args].concat());
    assert_eq!((ran.code, ran.err.as_str()), (Some(0), ""));
    ran.out
}

#[test]
fn rows_come_in_every_format() {
    assert!(answer(&[]).contains("| Quark   | NULL   |"));
    assert_eq!(answer(&["--format", "csv"]), "product,litres\nButter,1.5\nQuark,\n");
    assert_eq!(
        answer(&["--format", "ndjson"]),
        "{\"product\":\"Butter\",\"litres\":1.5}\n{\"product\":\"Quark\",\"litres\":null}\n"
    );
    let json = answer(&["--format", "json"]);
    assert!(json.starts_with("[{") && json.trim_end().ends_with("}]"), "{json}");
    assert!(answer(&["--format", "parquet"]).starts_with("PAR1"));
}

#[test]
fn the_ending_of_a_file_tells_the_format() {
    let place = Place::new();
    for ending in ["csv", "json", "ndjson", "parquet", "txt"] {
        let file = format!("rows.{ending}");
        let ran = place.stillwell(&["query", ROWS, "--to", &file]);
        assert_eq!((ran.code, ran.out.as_str()), (Some(0), ""), "{}", ran.err);
        assert!(ran.err.contains(&format!("wrote    {file}")) && ran.err.contains("2 rows"), "{}", ran.err);
    }
    assert_eq!(place.rows("SELECT count(*) FROM 'rows.parquet'"), ["2"]);
    assert!(place.read("rows.txt").contains("| Butter  |"));
    place.stillwell(&["query", "SELECT value FROM generate_series(1, 90)", "--to", "all.txt"]);
    assert_eq!(place.read("all.txt").lines().count(), 4 + 90);
    let ran = place.stillwell(&["query", ROWS, "--to", "rows.xlsx"]);
    assert_eq!(ran.code, Some(2));
    assert!(ran.err.contains(".parquet") && ran.err.contains("--format"), "{}", ran.err);
}

#[test]
fn a_file_appears_whole_or_not_at_all() {
    let place = Place::new();
    place.write("kept.csv", "a\n1\n");
    let fails_late = "SELECT 1 / (300000 - value) AS a FROM generate_series(1, 300000)";
    for file in ["kept.csv", "new.csv", "deep/new.parquet"] {
        let ran = place.stillwell(&["query", fails_late, "--to", file]);
        assert_eq!(ran.code, Some(1), "{}", ran.err);
    }
    assert_eq!((place.files(), place.read("kept.csv")), (vec!["kept.csv".to_string()], "a\n1\n".to_string()));
}

#[test]
fn a_dash_reads_the_statement_from_the_standard_input() {
    let ran = Place::new().fed(&["query", "-", "--format", "csv"], "SELECT 1 AS a -- the only one\n;");
    assert_eq!((ran.code, ran.out.as_str()), (Some(0), "a\n1\n"));
}

#[test]
fn a_reader_that_leaves_ends_the_query_quietly() {
    let place = Place::new();
    let mut child =
        place.start(&["query", "SELECT value FROM generate_series(1, 100000000)", "--format", "csv"]);
    let mut first = String::new();
    BufReader::new(child.stdout.take().expect("a pipe")).read_line(&mut first).expect("a line");
    assert_eq!(first, "value\n");
    let mut told = String::new();
    child.stderr.take().expect("a pipe").read_to_string(&mut told).expect("read");
    assert_eq!((child.wait().expect("ends").code(), told.as_str()), (Some(0), ""));
}

#[test]
fn a_reader_that_leaves_does_not_stop_a_job() {
    let place = Place::new();
    place.write("job.sql", "SELECT value FROM generate_series(1, 1000); COPY (SELECT 1 AS a) TO 'done.csv';");
    let mut child = place.start(&["run", "job.sql", "--rows", "0"]);
    drop(child.stdout.take());
    assert_eq!(child.wait_with_output().expect("ends").status.code(), Some(0));
    assert_eq!(place.read("done.csv"), "a\n1\n");
}

#[test]
fn what_changes_something_belongs_in_a_job() {
    let place = Place::new();
    for sql in [
        "COPY (SELECT 1 AS a) TO 'a.csv'",
        "CREATE VIEW v AS SELECT 1",
        "EXPLAIN ANALYZE COPY (SELECT 1 AS a) TO 'a.csv'",
    ] {
        let ran = place.stillwell(&["query", sql]);
        assert_eq!(ran.code, Some(2), "{sql}");
        assert!(ran.err.contains("stillwell run"), "{sql}: {}", ran.err);
    }
    assert_eq!(place.stillwell(&["query", "SELECT 1; SELECT 2"]).code, Some(2));
    assert!(place.files().is_empty());
}

#[test]
fn settings_reach_the_engine_and_slips_are_named() {
    let place = Place::new();
    let show = "SHOW datafusion.execution.batch_size";
    let ran =
        place.stillwell(&["query", show, "--format", "csv", "--set", "datafusion.execution.batch_size=123"]);
    assert!(ran.out.contains("batch_size,123"), "{}{}", ran.out, ran.err);
    let ran = place.stillwell(&["query", show, "--set", "datafusion.execution.batch_sise=123"]);
    assert_eq!(ran.code, Some(2));
    assert!(ran.err.contains("did you mean 'datafusion.execution.batch_size'"), "{}", ran.err);
    assert_eq!(
        place.stillwell(&["query", show, "--set", "datafusion.execution.batch_size=many"]).code,
        Some(2)
    );
}

#[test]
fn trouble_is_told_beside_the_rows() {
    let sql = "SELECT status, expected FROM forecast(data => (SELECT 1 AS week, 2.5 AS litres), at => week, \
               observed => litres, horizon => 1)";
    let ran = Place::new().stillwell(&["query", sql, "--format", "csv"]);
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert!(!ran.out.contains("ok,"), "{}", ran.out);
    assert!(
        ran.err.contains("fits     0 ok, 1 in trouble") && ran.err.contains("the only series: "),
        "{}",
        ran.err
    );
}
