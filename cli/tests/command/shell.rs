//! `stillwell shell` through a pipe. What a terminal adds (editing, completion, Ctrl-C) is tested where it is made.

use crate::support::{Place, Ran};

fn shell(place: &Place, args: &[&str], input: &str) -> Ran {
    place.fed(&[&["shell"], args].concat(), input)
}

const SALES: &str =
    "CREATE VIEW sales AS SELECT value AS week, 100.0 + value % 4 AS litres FROM generate_series(1, 60);";

#[test]
fn statements_run_as_they_come() {
    let place = Place::new();
    let ran = shell(
        &place,
        &[],
        "-- a comment; with a semicolon
         CREATE VIEW v AS
           SELECT value AS a, ';' AS b
           FROM generate_series(1, 3); SELECT max(a) AS top FROM v;
         /* nothing */ SELECT b
         FROM v LIMIT 1",
    );
    assert_eq!((ran.code, ran.err.as_str()), (Some(0), ""));
    assert_eq!(ran.out, "+-----+\n| top |\n+-----+\n| 3   |\n+-----+\n+---+\n| b |\n+---+\n| ; |\n+---+\n");
}

#[test]
fn words_stand_between_statements() {
    let place = Place::new();
    let ran = shell(
        &place,
        &["--format", "ndjson"],
        &format!(
            "{SALES}\ntables\ncolumns of sales\nformat csv\nSELECT 1 AS a;\nformat table\nrows 1\nSELECT week FROM sales;\nquit\nSELECT no;"
        ),
    );
    assert_eq!((ran.code, ran.err.as_str()), (Some(0), ""));
    let lines: Vec<&str> = ran.out.lines().collect();
    assert_eq!(lines[0], r#"{"name":"sales","kind":"view"}"#);
    assert!(lines[1].contains(r#""column_name":"week","data_type":"Int64""#), "{}", ran.out);
    assert_eq!(lines[3..5], ["a", "1"]);
    assert_eq!(ran.out.lines().last(), Some("1 of 60 rows; rows N shows more, rows 0 all"));
}

#[test]
fn help_tells_the_words_and_the_functions() {
    let place = Place::new();
    let ran = shell(&place, &[], "help\nhelp forecast\n");
    for told in ["columns of NAME", "timing off", "components", "horizon", "Example:"] {
        assert!(ran.out.contains(told), "{told} in {}", ran.out);
    }
    let long = place.stillwell(&["shell", "--help"]).out;
    for told in ["columns of NAME", "STILLWELL_HISTORY", "Exit codes"] {
        assert!(long.contains(told), "{told} in {long}");
    }
}

#[test]
fn the_first_failure_ends_a_pipe_and_says_where() {
    let place = Place::new();
    for (input, code, told) in [
        (
            "SELECT 1 AS a;\n\nSELECT\n  nothing\nFROM (SELECT 2 AS b);\nSELECT 3;",
            1,
            "statement 2 (line 3): there is no column 'nothing'",
        ),
        ("SELECT 1 AS a;\nSELECT 1 +;\nSELECT 3;", 1, "statement 2 (line 2): syntax error: "),
        ("SELECT 1 AS a;\n\nSELECT 2 +\n;", 1, "Line: 4"),
        ("SELECT 1 AS a;\nSELECT 'open", 1, "statement 2 (line 2): syntax error: "),
        (
            "SELECT 1 AS a;\nformat jsn\nSELECT 3;",
            1,
            "line 2: there is no format 'jsn' (did you mean 'json'?)",
        ),
        ("SELECT 1 AS a;\nhelp forcast\n", 2, "line 2: there is no function 'forcast'"),
    ] {
        let ran = shell(&place, &["--format", "csv"], input);
        assert_eq!((ran.code, ran.out.as_str()), (Some(code), "a\n1\n"), "{input}: {}", ran.err);
        assert!(ran.err.starts_with("stillwell: ") && ran.err.contains(told), "{told} in {}", ran.err);
    }
}

#[test]
fn a_copy_is_whole_or_not_at_all() {
    let place = Place::new();
    place.write("kept.csv", "a\n9\n");
    let ran = shell(
        &place,
        &[],
        "COPY (SELECT 1 AS a) TO 'first.csv';
         COPY (SELECT 1 / (300000 - value) AS a FROM generate_series(1, 300000)) TO 'kept.csv';",
    );
    assert_eq!(ran.code, Some(1));
    assert!(ran.err.contains("wrote    first.csv  4 B, 1 row\n"), "{}", ran.err);
    assert_eq!(place.files(), ["first.csv", "kept.csv"]);
    assert_eq!(place.read("kept.csv"), "a\n9\n");
    // The next session replaces the result of the last.
    assert_eq!(shell(&place, &["--quiet"], "COPY (SELECT 2 AS a) TO 'first.csv';").err, "");
    assert_eq!(place.read("first.csv"), "a\n2\n");
}

#[test]
fn timing_is_told_where_it_is_asked_for() {
    let ran = shell(
        &Place::new(),
        &["--format", "csv"],
        "timing on\nSELECT 1 AS a;\nCREATE VIEW v AS SELECT 1;\ntiming off\nSELECT 2 AS a;",
    );
    assert_eq!(ran.out, "a\n1\na\n2\n");
    let lines: Vec<&str> = ran.err.lines().collect();
    assert_eq!(lines.len(), 2, "{}", ran.err);
    assert!(lines[0].starts_with("1 row in 0.") && lines[1].starts_with("done in "), "{}", ran.err);
}

#[test]
fn troubled_series_are_told_and_strict_counts_them() {
    let place = Place::new();
    let sql = "SELECT status FROM forecast(data => (SELECT 1 AS week, 2.5 AS litres), at => week, observed => litres, \
               horizon => 1);";
    let ran = shell(&place, &["--format", "csv", "--strict"], sql);
    assert_eq!(ran.code, Some(3), "{}", ran.err);
    assert!(ran.err.contains("0 ok, 1 in trouble"), "{}", ran.err);
    assert_eq!(shell(&place, &["--strict"], "SELECT 1;").code, Some(0));
}

#[test]
fn parquet_goes_through_a_pipe() {
    let ran = shell(&Place::new(), &["--format", "parquet"], "SELECT 1 AS a;");
    assert!(ran.code == Some(0) && ran.out.starts_with("PAR1"), "{}", ran.err);
}

#[test]
fn a_pipe_keeps_no_history() {
    let place = Place::new();
    let mut command = place.command(&["shell"]);
    let home = place.at("state");
    let ran = command.env("XDG_STATE_HOME", &home).env_remove("STILLWELL_HISTORY").output().expect("runs");
    assert_eq!((ran.status.code(), home.exists()), (Some(0), false));
}
