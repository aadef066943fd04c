//! Ctrl-C, SIGTERM and SIGKILL: nothing half-written stays.
#![cfg(unix)]

use std::io::Write;
use std::process::{Child, Command, Stdio};
use std::thread;
use std::time::{Duration, Instant};

use crate::support::{Place, Ran};

/// More rows than anybody waits for.
const ENDLESS: &str =
    "SELECT a.value + b.value AS n FROM generate_series(1, 1000000) a, generate_series(1, 1000000) b";

/// Ten thousand series that take minutes to fit in a test build.
const MANY_FITS: &str = "SELECT * FROM components(
    data => (SELECT value % 10000 AS product, value / 10000 AS week, 100.0 + value * 7919 % 101 AS litres
             FROM generate_series(0, 1199999)),
    per => product, at => week, observed => litres, trend => 'local linear', season => 12, transform => 'none')";

/// Runs a job until a staging folder is there, sends the signal, and returns how it ended.
fn signalled(place: &Place, job: &str, signal: &str) -> Ran {
    place.write("job.sql", job);
    let child = place.start(&["run", "job.sql"]);
    wait_for_staging(place);
    send(signal, &child);
    let sent = Instant::now();
    let ran: Ran = child.wait_with_output().expect("ends").into();
    assert!(sent.elapsed() < Duration::from_secs(2), "took {:?}", sent.elapsed());
    ran
}

fn wait_for_staging(place: &Place) {
    wait_for(place, ".stillwell-");
}

fn wait_for(place: &Place, staging: &str) {
    let begun = Instant::now();
    while !place.files().iter().any(|name| name.contains(staging)) {
        assert!(begun.elapsed() < Duration::from_secs(60), "no staging folder came");
        thread::sleep(Duration::from_millis(20));
    }
    // Into the middle of the work.
    thread::sleep(Duration::from_millis(300));
}

fn send(signal: &str, child: &Child) {
    let sent = Command::new("kill").args([signal, &child.id().to_string()]).status().expect("kill runs");
    assert!(sent.success());
}

#[test]
fn ctrl_c_stops_a_copy_and_tells_what_stands() {
    let place = Place::new();
    let job =
        format!("COPY (SELECT 1 AS a) TO 'first.csv';\nCOPY ({ENDLESS}) TO 'second/' STORED AS PARQUET;");
    let ran = signalled(&place, &job, "-INT");
    assert_eq!(ran.code, Some(130), "{}", ran.err);
    assert!(
        ran.err.contains("wrote    first.csv") && ran.err.contains("1 of 2 statements done"),
        "{}",
        ran.err
    );
    assert!(ran.err.contains("statement 2 (line 2): stopped"), "{}", ran.err);
    assert_eq!(place.files(), ["first.csv"]);
}

#[test]
fn ctrl_c_stops_fits() {
    let place = Place::new();
    let ran = signalled(&place, &format!("COPY ({MANY_FITS}) TO 'fits.parquet';"), "-INT");
    assert_eq!(ran.code, Some(130), "{}", ran.err);
    assert!(place.files().is_empty(), "{:?}", place.files());
}

#[test]
fn sigterm_does_the_same_under_its_own_code() {
    let place = Place::new();
    place.write("old.csv", "a\n1\n");
    let ran = signalled(&place, &format!("COPY ({ENDLESS}) TO 'old.csv';"), "-TERM");
    assert_eq!(ran.code, Some(143), "{}", ran.err);
    assert_eq!((place.files(), place.read("old.csv")), (vec!["old.csv".to_string()], "a\n1\n".to_string()));
}

#[test]
fn what_a_killed_job_leaves_is_cleared_by_the_next() {
    let place = Place::new();
    let ran = signalled(&place, &format!("COPY ({ENDLESS}) TO 'out/' STORED AS CSV;"), "-KILL");
    assert_eq!(ran.code, None);
    assert!(!place.files().is_empty());
    assert_eq!(place.run("COPY (SELECT 1 AS a) TO 'out/' STORED AS CSV;").code, Some(0));
    assert_eq!(place.files(), ["out/part-0.csv"]);
}

#[test]
fn ctrl_c_ends_a_shell_that_reads_a_pipe() {
    let place = Place::new();
    let mut command = place.command(&["shell"]);
    let mut child =
        command.stdin(Stdio::piped()).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().expect("starts");
    // The pipe stays open: more statements could come.
    let mut input = child.stdin.take().expect("a pipe");
    write!(input, "COPY (SELECT 1 AS a) TO 'first.csv';\nCOPY ({ENDLESS}) TO 'second/' STORED AS CSV;\n")
        .expect("fed");
    wait_for(&place, ".second.stillwell-");
    send("-INT", &child);
    let ran: Ran = child.wait_with_output().expect("ends").into();
    assert_eq!(ran.code, Some(130), "{}", ran.err);
    assert!(
        ran.err.contains("wrote    first.csv") && ran.err.contains("statement 2 (line 2): stopped"),
        "{}",
        ran.err
    );
    assert_eq!(place.files(), ["first.csv"]);
}

#[test]
fn ctrl_c_stops_a_query_to_a_file() {
    let place = Place::new();
    let child = place.start(&["query", ENDLESS, "--to", "n.ndjson"]);
    wait_for_staging(&place);
    send("-INT", &child);
    let ran: Ran = child.wait_with_output().expect("ends").into();
    assert_eq!((ran.code, place.files().len()), (Some(130), 0), "{} {:?}", ran.err, place.files());
}
