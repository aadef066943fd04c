//! COPY to local files: whole or not at all, and the same again when a job runs again.

use std::fs;

use crate::support::Place;

/// Fails at its last row, after the engine has begun to write.
const FAILS_LATE: &str = "SELECT 1 / (300000 - value) AS a FROM generate_series(1, 300000)";

#[test]
fn a_job_that_runs_twice_leaves_the_same_files() {
    let place = Place::new();
    let job = "COPY (SELECT value, value % 3 AS depot FROM generate_series(1, 5000)) TO 'out/' STORED AS PARQUET PARTITIONED BY (depot);
               COPY (SELECT value FROM generate_series(1, 5000) ORDER BY value) TO 'plain' STORED AS PARQUET;
               COPY (SELECT 1 AS a) TO 'one.json';";
    assert_eq!(place.run(job).code, Some(0));
    let first: Vec<_> =
        place.files().iter().map(|name| (name.clone(), fs::read(place.at(name)).expect(name))).collect();
    assert_eq!(first.len(), 5, "{:?}", place.files());
    assert_eq!(place.run(job).code, Some(0));
    for (name, bytes) in &first {
        assert!(fs::read(place.at(name)).expect(name) == *bytes, "{name} differs");
    }
    assert_eq!(place.files().len(), 5);
}

#[test]
fn a_copy_must_not_replace_what_it_reads() {
    let place = Place::new();
    assert_eq!(place.run("COPY (SELECT 1 AS n) TO 'n/' STORED AS PARQUET").code, Some(0));
    let before = place.files();
    for job in [
        "COPY (SELECT n + 1 AS n FROM 'n/') TO 'n/' STORED AS PARQUET",
        "COPY (SELECT n FROM 'n/*.parquet') TO 'n/' STORED AS PARQUET",
        "COPY (SELECT n FROM 'n/') TO 'n/below/' STORED AS PARQUET",
        "CREATE EXTERNAL TABLE t STORED AS PARQUET LOCATION 'n/'; CREATE VIEW v AS SELECT n FROM t;
         COPY (SELECT 1 AS n WHERE EXISTS (SELECT 1 FROM v)) TO 'n/' STORED AS PARQUET",
        "CREATE EXTERNAL TABLE t STORED AS PARQUET LOCATION 'n/';
         COPY (SELECT * FROM forecast(data => (SELECT n FROM t), at => n, observed => n, horizon => 1))
         TO 'n/' STORED AS PARQUET",
    ] {
        let ran = place.run(job);
        assert_eq!(ran.code, Some(1), "{job}: {}", ran.err);
        assert!(ran.err.contains("which the same statement reads"), "{}", ran.err);
    }
    assert_eq!(place.files(), before);
    assert!(place.run("SELECT n FROM 'n/'").out.contains("| 1 |"));
}

#[test]
fn a_statement_sees_the_new_rows_of_the_one_before() {
    let place = Place::new();
    let copy = |n: i32| format!("COPY (SELECT {n} AS n) TO 'n/' STORED AS PARQUET;");
    assert_eq!(place.run(&copy(1)).code, Some(0));
    let table =
        "CREATE EXTERNAL TABLE n STORED AS PARQUET LOCATION 'n/'; SELECT * FROM n; SELECT * FROM 'n/';";
    let ran = place.run(&format!("{table} {} SELECT * FROM n; SELECT * FROM 'n/';", copy(7)));
    assert_eq!((ran.out.matches("| 1 |").count(), ran.out.matches("| 7 |").count()), (2, 2), "{}", ran.out);
}

#[test]
fn a_failing_copy_leaves_nothing() {
    let place = Place::new();
    let ran = place.run(&format!("COPY ({FAILS_LATE}) TO 'deep/er/out/' STORED AS PARQUET"));
    assert_eq!(ran.code, Some(1));
    assert!(ran.err.contains("statement 1 (line 1): ") && ran.err.contains("ivide by zero"), "{}", ran.err);
    assert!(place.files().is_empty(), "{:?}", place.files());
}

#[test]
fn a_failing_copy_keeps_what_was_there() {
    let place = Place::new();
    place.write("out/part-0.csv", "a\n1\n");
    place.write("one.csv", "a\n1\n");
    for target in ["out/", "one.csv"] {
        let ran = place.run(&format!("COPY ({FAILS_LATE}) TO '{target}' STORED AS CSV"));
        assert_eq!(ran.code, Some(1));
    }
    assert_eq!(place.files(), ["one.csv", "out/part-0.csv"]);
    assert_eq!((place.read("one.csv"), place.read("out/part-0.csv")), ("a\n1\n".into(), "a\n1\n".into()));
}

#[test]
fn a_folder_with_foreign_files_is_not_replaced() {
    let place = Place::new();
    place.write("out/part-0.parquet", "old");
    place.write("out/region=North/notes.txt", "do not lose me");
    let ran = place.run("COPY (SELECT 1 AS a) TO 'out/' STORED AS PARQUET");
    assert_eq!(ran.code, Some(1));
    assert!(
        ran.err.contains("'region=North/notes.txt'") && ran.err.contains("another folder"),
        "{}",
        ran.err
    );
    assert_eq!(place.files(), ["out/part-0.parquet", "out/region=North/notes.txt"]);
}

#[test]
fn places_that_must_not_be_replaced_are_refused() {
    let place = Place::new();
    place.write("file", "x");
    for (target, why) in [
        (".", "current folder"),
        ("..", "current folder"),
        ("file", "it is a file"),
        ("out/*/x", "one place"),
    ] {
        let ran = place.run(&format!("COPY (SELECT 1 AS a) TO '{target}' STORED AS PARQUET"));
        assert_eq!(ran.code, Some(1), "{target}");
        assert!(ran.err.contains(why), "{target}: {}", ran.err);
    }
    assert_eq!(place.files(), ["file"]);
}

#[test]
fn two_copies_to_one_place_are_a_slip() {
    let place = Place::new();
    let ran = place
        .run("COPY (SELECT 1 AS a) TO 'out/' STORED AS CSV;\nCOPY (SELECT 2 AS a) TO './out' STORED AS CSV;");
    assert_eq!(ran.code, Some(1));
    assert!(ran.err.contains("statement 2 (line 2)") && ran.err.contains("UNION ALL"), "{}", ran.err);
    assert!(place.files().is_empty());
}

#[test]
fn an_empty_result_never_leaves_nothing() {
    let place = Place::new();
    let copy = |condition: &str| {
        format!("COPY (SELECT 1 AS a WHERE {condition}) TO 'flat/' STORED AS PARQUET;
                 COPY (SELECT 1 AS a, 2 AS b WHERE {condition}) TO 'parts/' STORED AS PARQUET PARTITIONED BY (b);")
    };
    assert_eq!(place.run(&copy("true")).code, Some(0));
    let ran = place.run(&copy("false"));
    // An empty file still has its columns; an empty set of folders would have nothing, so the old ones stay.
    assert_eq!(ran.code, Some(1), "{}", ran.err);
    assert!(ran.err.contains("gave no rows"), "{}", ran.err);
    assert!(place.rows("SELECT a FROM 'flat/'").is_empty());
    assert_eq!(place.files(), ["flat/part-0.parquet", "parts/b=2/part-0.parquet"]);
}

#[test]
fn keys_of_any_type_make_folders_and_null_is_filed_as_null() {
    let place = Place::new();
    let ran = place.run(
        "COPY (SELECT 1 AS n, CAST(NULL AS BIGINT) AS depot, TIMESTAMP '2025-01-06T00:00:00' AS week)
         TO 'out/' STORED AS CSV PARTITIONED BY (depot, week)",
    );
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    let files = place.files();
    assert!(files[0].starts_with("out/depot=__HIVE_DEFAULT_PARTITION__/week=2025-01-06T00"), "{files:?}");
}

#[test]
fn keys_that_stay_in_the_files_keep_their_type() {
    let place = Place::new();
    let ran = place.run(
        "SET datafusion.execution.keep_partition_by_columns = true;
         COPY (SELECT 1 AS n, 7 AS depot) TO 'out/' STORED AS PARQUET PARTITIONED BY (depot)",
    );
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert_eq!(place.rows("SELECT arrow_typeof(depot) FROM 'out/depot=7/part-0.parquet'"), ["Int64"]);
}

#[test]
fn explain_analyze_of_a_copy_is_staged_as_well() {
    let place = Place::new();
    place.write("out/part-0.csv", "a\n9\n");
    let ran = place.run("EXPLAIN COPY (SELECT 1 AS a) TO 'never.csv'; EXPLAIN ANALYZE COPY (SELECT 1 AS a) TO 'out/' STORED AS CSV;");
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert!(ran.out.contains("DataSinkExec"), "{}", ran.out);
    assert_eq!(
        (place.files(), place.read("out/part-0.csv")),
        (vec!["out/part-0.csv".to_string()], "a\n1\n".to_string())
    );
}

#[cfg(unix)]
#[test]
fn a_link_to_a_folder_keeps_pointing_at_it() {
    let place = Place::new();
    fs::create_dir(place.at("real")).expect("made");
    std::os::unix::fs::symlink("real", place.at("link")).expect("linked");
    let ran = place.run("COPY (SELECT 1 AS a) TO 'link' STORED AS CSV");
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert!(place.at("link").is_symlink());
    assert_eq!(place.read("real/part-0.csv"), "a\n1\n");
}

#[test]
fn names_with_odd_letters_are_fine() {
    let place = Place::new();
    let ran = place.run("COPY (SELECT 1 AS a) TO 'käse & quark %20 #1/wöchentlich.csv'");
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert_eq!(place.files(), ["käse & quark %20 #1/wöchentlich.csv"]);
}
