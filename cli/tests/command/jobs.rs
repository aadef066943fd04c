//! `stillwell run`: statements, errors, the report, exit codes.

use crate::support::Place;

/// Twelve weeks of three products: Whey has one week only, which is too short for any structure.
const SALES: &str = "
    CREATE VIEW sales AS
    SELECT 'Butter' AS product, value AS week, 100.0 + value % 4 AS litres FROM generate_series(1, 60)
    UNION ALL
    SELECT 'Quark', value, 50.0 + value % 3 FROM generate_series(1, 60)
    UNION ALL
    SELECT 'Whey', 1, 7.0;
";

const FORECAST: &str = "SELECT product, step, expected, status FROM forecast(
    data => (SELECT * FROM sales), per => product, at => week, observed => litres,
    trend => 'local level', season => 0, transform => 'none', horizon => 2)";

#[test]
fn statements_run_one_after_another() {
    let place = Place::new();
    let ran = place.run(
        "-- a comment; with a semicolon
         CREATE TABLE t AS SELECT value FROM generate_series(1, 5);
         CREATE VIEW v AS SELECT value * 2 AS twice FROM t;
         PREPARE above AS SELECT count(*) AS n FROM v WHERE twice > $1;
         SET datafusion.execution.batch_size = 100;
         EXECUTE above(6);",
    );
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert_eq!(ran.out, "+---+\n| n |\n+---+\n| 2 |\n+---+\n");
    assert!(ran.err.contains("5 statements"), "{}", ran.err);
}

#[test]
fn external_tables_and_partitioned_output_work() {
    let place = Place::new();
    place.write("weeks.csv", "region,litres\nNorth,1\nSouth,2\nNorth,3\n");
    let ran = place.run(
        "CREATE EXTERNAL TABLE weeks STORED AS CSV LOCATION 'weeks.csv';
         COPY (SELECT * FROM weeks) TO 'out/' STORED AS PARQUET PARTITIONED BY (region);",
    );
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert_eq!(
        place.files(),
        ["out/region=North/part-0.parquet", "out/region=South/part-0.parquet", "weeks.csv"]
    );
    assert!(ran.err.starts_with("wrote    out/  2 files, "), "{}", ran.err);
    assert_eq!(
        place.rows("SELECT region, sum(litres) FROM 'out/' GROUP BY region ORDER BY 1"),
        ["North,4", "South,2"]
    );
}

#[test]
fn insert_adds_to_a_folder() {
    let place = Place::new();
    let table = "CREATE EXTERNAL TABLE t (a BIGINT) STORED AS PARQUET LOCATION 't/';";
    for _ in 0..2 {
        let ran = place.run(&format!("{table} INSERT INTO t VALUES (1), (2);"));
        assert!(ran.err.contains("wrote    t  2 rows"), "{}", ran.err);
    }
    assert_eq!(place.rows("SELECT count(*) FROM 't/'"), ["4"]);
}

#[test]
fn a_failure_names_its_statement_and_line_and_ends_the_job() {
    let place = Place::new();
    let ran = place.run("COPY (SELECT 1 AS a) TO 'first.csv';\n\nSELECT nothing FROM 'first.csv';\nCOPY (SELECT 1) TO 'last.csv';");
    assert_eq!(ran.code, Some(1));
    assert!(ran.err.contains("stillwell: statement 2 (line 3): there is no column 'nothing'"), "{}", ran.err);
    assert!(
        ran.err.contains("wrote    first.csv") && ran.err.contains("1 of 3 statements done"),
        "{}",
        ran.err
    );
    assert_eq!(place.files(), ["first.csv"]);
}

#[test]
fn a_syntax_error_anywhere_keeps_the_whole_job_from_running() {
    let place = Place::new();
    let ran = place.run("COPY (SELECT 1 AS a) TO 'first.csv';\nSELECT 1 +;");
    assert_eq!(ran.code, Some(1));
    assert!(ran.err.starts_with("stillwell: statement 2 (line 2): syntax error: "), "{}", ran.err);
    assert!(place.files().is_empty(), "{:?}", place.files());
}

#[test]
fn troubled_series_are_named_and_do_not_stop_the_job() {
    let place = Place::new();
    let ran = place.run(&format!("{SALES} COPY ({FORECAST}) TO 'forecast.parquet';"));
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert!(ran.err.contains("rows of 3 series\n"), "{}", ran.err);
    assert!(ran.err.contains("fits     2 ok, 1 in trouble\n"), "{}", ran.err);
    assert!(ran.err.contains("         product=Whey: "), "{}", ran.err);
    let ok = place.rows("SELECT DISTINCT product FROM 'forecast.parquet' WHERE status = 'ok' ORDER BY 1");
    assert_eq!(ok, ["Butter", "Quark"]);
}

#[test]
fn strict_turns_trouble_into_an_exit_code() {
    let place = Place::new();
    place.write("strict.sql", &format!("{SALES} COPY ({FORECAST}) TO 'forecast.parquet';"));
    assert_eq!(place.stillwell(&["run", "strict.sql", "--strict"]).code, Some(3));
    place.write("strict.sql", "SELECT 1;");
    assert_eq!(place.stillwell(&["run", "strict.sql", "--strict"]).code, Some(0));
}

#[test]
fn on_trouble_fail_ends_the_job_and_leaves_no_file() {
    let place = Place::new();
    let fail = FORECAST.replace("horizon => 2", "horizon => 2, on_trouble => 'fail'");
    let ran = place.run(&format!("{SALES} COPY ({fail}) TO 'forecast.parquet';"));
    assert_eq!(ran.code, Some(1));
    assert!(ran.err.contains("statement 2 (line ") && ran.err.contains("Whey"), "{}", ran.err);
    assert!(place.files().is_empty(), "{:?}", place.files());
}

#[test]
fn a_bad_argument_lists_the_valid_ones() {
    let place = Place::new();
    let ran = place.run(&format!("{SALES} {};", FORECAST.replace("horizon", "horizn")));
    assert_eq!(ran.code, Some(1));
    for word in ["'horizn'", "'observed'", "did you mean 'horizon'"] {
        assert!(ran.err.contains(word), "{word} in {}", ran.err);
    }
    for noise in ["DataFusion", "Plan(", "backtrace", "Error during planning"] {
        assert!(!ran.err.contains(noise), "{noise} in {}", ran.err);
    }
}

#[test]
fn a_job_comes_from_the_standard_input_too() {
    let ran = Place::new().fed(&["run", "-", "--quiet"], "SELECT 1 AS a; SELECT 2 AS b;");
    assert_eq!((ran.code, ran.err.as_str()), (Some(0), ""));
    assert!(ran.out.contains("| a |") && ran.out.contains("| b |"), "{}", ran.out);
}

#[test]
fn a_missing_or_empty_job_is_a_usage_error() {
    let place = Place::new();
    let ran = place.stillwell(&["run", "nowhere.sql"]);
    assert_eq!(ran.code, Some(2));
    assert!(ran.err.contains("'nowhere.sql'"), "{}", ran.err);
    assert_eq!(place.run("-- nothing to do").code, Some(2));
}

#[test]
fn long_results_are_cut_with_a_note() {
    let place = Place::new();
    let ran = place.run("SELECT value FROM generate_series(1, 1000)");
    assert_eq!(ran.out.lines().count(), 3 + 40 + 1 + 1, "{}", ran.out);
    assert!(ran.out.ends_with("40 of 1,000 rows; --rows N shows more, --rows 0 all\n"), "{}", ran.out);
}

#[test]
fn a_pipe_has_no_progress_noise() {
    let place = Place::new();
    let ran = place.run(&format!("{SALES} {FORECAST};"));
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert!(!ran.err.contains(['\r', '\u{1b}']), "{:?}", ran.err);
}

#[test]
fn one_thread_and_little_memory_are_enough() {
    let place = Place::new();
    place.write(
        "job.sql",
        "SELECT max(value) AS m FROM (SELECT value FROM generate_series(1, 200000) ORDER BY value DESC)",
    );
    let ran = place.stillwell(&["run", "job.sql", "--threads", "1", "--memory-limit", "64MB"]);
    assert!(ran.out.contains("| 200000 |"), "{}{}", ran.out, ran.err);
}

#[test]
fn too_little_memory_says_what_to_change() {
    let place = Place::new();
    place.write(
        "job.sql",
        "SELECT count(*) FROM (SELECT DISTINCT value, repeat('x', 200) FROM generate_series(1, 200000))",
    );
    let ran = place.stillwell(&["run", "job.sql", "--memory-limit", "1MB"]);
    assert_eq!(ran.code, Some(1));
    assert!(ran.err.contains("--memory-limit") && ran.err.contains("statement 1"), "{}", ran.err);
}
