//! What is offered where. `|` marks the cursor.

use super::*;

fn names() -> Names {
    let table = |path: &[&str], columns: &[&str]| TableNames {
        path: path.iter().map(|part| (*part).to_string()).collect(),
        columns: columns.iter().map(|column| (*column).to_string()).collect(),
    };
    Names {
        functions: vec!["round".to_string(), "row_number".to_string()],
        tables: vec![
            table(&["sales"], &["region", "product", "week", "litres", "price", "promo"]),
            table(&["Depots"], &["region", "Lead Time"]),
            table(&["cold", "trucks"], &["plate"]),
        ],
        ..Names::of_library()
    }
}

fn offered(marked: &str) -> Vec<String> {
    let cursor = marked.find('|').expect("a cursor");
    let text = marked.replacen('|', "", 1);
    complete(&text, cursor, &names()).candidates.into_iter().map(|candidate| candidate.text).collect()
}

/// The text with its only candidate filled in.
fn filled(marked: &str) -> String {
    let cursor = marked.find('|').expect("a cursor");
    let mut text = marked.replacen('|', "", 1);
    let completion = complete(&text, cursor, &names());
    let [only] = completion.candidates.as_slice() else { panic!("{marked}: {:?}", completion.candidates) };
    text.replace_range(completion.from..cursor, &only.text);
    text
}

#[test]
fn keywords_keep_the_letters_that_were_typed() {
    assert!(offered("SELE|").contains(&"SELECT".to_string()));
    assert!(offered("sele|").contains(&"select".to_string()));
    assert_eq!(filled("SELECT 1 UNIO|"), "SELECT 1 UNION");
    assert!(offered("SELECT 1; sele|").contains(&"select".to_string()));
}

#[test]
fn tables_and_functions_stand_after_from() {
    assert_eq!(filled("SELECT * FROM sa|"), "SELECT * FROM sales");
    assert_eq!(filled("SELECT * FROM foreca|"), "SELECT * FROM forecast(");
    assert_eq!(filled("SELECT * FROM dep|"), "SELECT * FROM \"Depots\"");
    assert_eq!(filled("SELECT * FROM \"Dep|"), "SELECT * FROM \"Depots\"");
    assert_eq!(filled("SELECT * FROM cold.|"), "SELECT * FROM cold.trucks");
    let all = offered("SELECT * FROM |");
    assert!(all.contains(&"sales".to_string()) && all.contains(&"components(".to_string()), "{all:?}");
    assert!(!all.contains(&"SELECT".to_string()), "{all:?}");
}

#[test]
fn columns_are_those_of_the_tables_mentioned() {
    assert_eq!(offered("SELECT p| FROM sales")[..3], ["product", "price", "promo"]);
    assert_eq!(filled("SELECT * FROM sales WHERE lit|"), "SELECT * FROM sales WHERE litres");
    assert!(!offered("SELECT pl| FROM sales").contains(&"plate".to_string()));
    assert_eq!(offered("SELECT lead| FROM \"Depots\"")[0], "\"Lead Time\"");
    // Those of another statement do not count.
    assert!(!offered("SELECT 1 FROM cold.trucks; SELECT p| FROM sales").contains(&"plate".to_string()));
}

#[test]
fn a_dot_gives_the_columns_of_its_table() {
    assert_eq!(filled("SELECT s.lit| FROM sales AS s"), "SELECT s.litres FROM sales AS s");
    assert_eq!(
        filled("SELECT d.lead| FROM sales s JOIN \"Depots\" d"),
        "SELECT d.\"Lead Time\" FROM sales s JOIN \"Depots\" d"
    );
    assert_eq!(offered("SELECT sales.|").len(), 6);
}

#[test]
fn a_call_offers_the_arguments_that_are_left() {
    assert_eq!(filled("SELECT * FROM forecast(hori|"), "SELECT * FROM forecast(horizon => ");
    assert_eq!(
        filled("SELECT * FROM forecast(\n  data => (SELECT 1),\n  obs|"),
        "SELECT * FROM forecast(\n  data => (SELECT 1),\n  observed => "
    );
    let left = offered("SELECT * FROM forecast(data => (SELECT a, b FROM c), at => week, |)");
    assert!(left.contains(&"observed => ".to_string()), "{left:?}");
    assert!(!left.contains(&"data => ".to_string()) && !left.contains(&"at => ".to_string()), "{left:?}");
    // Another function has no horizon, and is no place for one.
    assert!(offered("SELECT * FROM components(hori|").is_empty());
}

#[test]
fn values_that_are_words_come_with_their_quotes() {
    let trend = offered("FROM components(data => sales, trend => |");
    assert!(
        trend.contains(&"'local level'".to_string()) && trend.contains(&"'auto'".to_string()),
        "{trend:?}"
    );
    assert_eq!(filled("FROM components(trend => 'local lin|"), "FROM components(trend => 'local linear'");
    assert_eq!(
        filled("FROM components(trend => 'dam|', season => 0)"),
        "FROM components(trend => 'damped', season => 0)"
    );
    assert_eq!(filled("FROM components(trend => damp|"), "FROM components(trend => 'damped'");
    assert_eq!(offered("FROM components(fixed_season => |"), ["true", "false"]);
    assert!(offered("FROM components(known => {'|").is_empty());
    assert!(offered("SELECT 'da|").is_empty());
}

#[test]
fn values_that_are_columns_are_offered_as_such() {
    assert_eq!(
        filled("FROM forecast(data => (SELECT * FROM sales), at => we|"),
        "FROM forecast(data => (SELECT * FROM sales), at => week"
    );
    let drivers = offered("FROM forecast(data => (SELECT * FROM sales), drivers => (price, pro|");
    assert_eq!(drivers[..2], ["product", "promo"]);
    assert_eq!(filled("FROM forecast(data => sal|"), "FROM forecast(data => sales");
    assert_eq!(
        filled("FROM forecast(data => (SELECT * FROM sal|"),
        "FROM forecast(data => (SELECT * FROM sales"
    );
}

#[test]
fn nothing_is_offered_in_comments_and_after_values() {
    for marked in ["-- sel|", "/* sel|", "SELECT $$ sel|", "SELECT 52|", "SELECT 'a'|", "SELECT (1)|"] {
        assert!(offered(marked).is_empty(), "{marked}: {:?}", offered(marked));
    }
}

#[test]
fn functions_of_expressions_open_their_bracket() {
    assert!(offered("SELECT rou|").contains(&"round(".to_string()));
}

#[test]
fn the_words_of_the_shell_are_completed() {
    assert_eq!(filled("hel|"), "help");
    assert_eq!(filled("help dia|"), "help diagnostics");
    assert_eq!(filled("columns of sa|"), "columns of sales");
    assert_eq!(filled("format nd|"), "format ndjson");
    assert_eq!(filled("timing of|"), "timing off");
    assert!(
        offered("tab|").contains(&"tables".to_string()) && offered("tab|").contains(&"table".to_string())
    );
}
