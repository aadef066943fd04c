//! Help, version, the reference, the samples.

use crate::support::Place;

#[test]
fn help_names_the_verbs_and_the_exit_codes() {
    let place = Place::new();
    let ran = place.stillwell(&["--help"]);
    assert_eq!(ran.code, Some(0));
    for word in ["run", "query", "shell", "functions", "samples", "130  stopped by Ctrl-C"] {
        assert!(ran.out.contains(word), "{word} in {}", ran.out);
    }
    let ran = place.stillwell(&["run", "--help"]);
    assert!(
        ran.out.contains("Relative paths in a job count") && ran.out.contains("Exit codes"),
        "{}",
        ran.out
    );
}

#[test]
fn the_version_is_the_crates() {
    assert_eq!(
        Place::new().stillwell(&["--version"]).out,
        format!("stillwell {}\n", env!("CARGO_PKG_VERSION"))
    );
}

#[test]
fn an_unknown_verb_suggests_one() {
    let ran = Place::new().stillwell(&["qurey"]);
    assert_eq!(ran.code, Some(2));
    assert!(ran.err.contains("'query'"), "{}", ran.err);
}

#[test]
fn options_that_make_no_sense_are_refused() {
    let place = Place::new();
    for args in [["--threads", "0"], ["--memory-limit", "lots"], ["--set", "batch_size"]] {
        let ran = place.stillwell(&["query", "SELECT 1", args[0], args[1]]);
        assert_eq!(ran.code, Some(2), "{args:?}");
        assert!(ran.err.contains(args[0]), "{args:?}: {}", ran.err);
    }
}

#[test]
fn the_reference_lists_and_describes_the_functions() {
    let place = Place::new();
    let list = place.stillwell(&["functions"]).out;
    let page = place.stillwell(&["functions", "--markdown"]).out;
    for name in ["components", "forecast", "diagnostics", "structural_components"] {
        assert!(list.contains(name) && page.contains(&format!("## {name}\n")), "{name}");
        let one = place.stillwell(&["functions", name]).out;
        assert!(one.starts_with(name) && one.contains("observed") && one.contains("Example:"), "{one}");
    }
}

#[test]
fn the_page_in_the_tree_is_the_one_that_is_printed() {
    let page = Place::new().stillwell(&["functions", "--markdown"]).out;
    let kept = concat!(env!("CARGO_MANIFEST_DIR"), "/../udfs/docs/functions.md");
    let kept = std::fs::read_to_string(kept).expect("the page in the tree");
    assert!(page == kept, "udfs/docs/functions.md is stale: write `stillwell functions --markdown` into it");
}

#[test]
fn an_unknown_function_suggests_one() {
    let ran = Place::new().stillwell(&["functions", "forcast"]);
    assert_eq!(ran.code, Some(2));
    assert!(ran.err.contains("did you mean 'forecast'"), "{}", ran.err);
}

#[test]
fn samples_can_be_written_and_queried() {
    let place = Place::new();
    let ran = place.stillwell(&["samples", "demo", "--series", "8", "--weeks", "60"]);
    assert_eq!(ran.code, Some(0), "{}", ran.err);
    assert!(ran.out.contains("8 series"), "{}", ran.out);
    let series = place.rows("SELECT count(*) FROM (SELECT DISTINCT region, product FROM 'demo/sales/')");
    assert_eq!(series, ["8"]);
    assert_eq!(place.stillwell(&["samples", "other", "--weeks", "0"]).code, Some(2));
}
