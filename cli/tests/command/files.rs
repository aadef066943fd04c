//! Files as tables: folders, patterns, formats, and what is said about those that are not there.

use crate::support::Place;

fn warehouse() -> Place {
    let place = Place::new();
    let job = "COPY (SELECT value AS week, CASE WHEN value % 2 = 0 THEN 'North' ELSE 'South' END AS region
                     FROM generate_series(1, 10)) TO 'sales/' STORED AS PARQUET PARTITIONED BY (region);";
    assert_eq!(place.run(job).code, Some(0));
    place.write("years/2024/a.csv", "litres\n1\n");
    place.write("years/2025/a.csv", "litres\n2\n");
    place.write("years/2025/b.csv", "litres\n4\n");
    place
}

#[test]
fn folders_and_patterns_are_read_with_their_hive_columns() {
    let place = warehouse();
    for from in ["sales", "sales/", "./sales/*.parquet", "sales/region=*/*.parquet", "sales/**/*.parquet"] {
        let from = if from.contains('/') { from.to_string() } else { format!("./{from}") };
        let rows =
            place.rows(&format!("SELECT region, count(*) FROM '{from}' GROUP BY region ORDER BY region"));
        assert_eq!(rows, ["North,5", "South,5"], "{from}");
    }
    assert_eq!(place.rows("SELECT count(*) FROM 'sales/region=North/part-0.parquet'"), ["5"]);
}

#[test]
fn patterns_reach_into_folders() {
    let place = warehouse();
    for (pattern, total) in [
        ("years/2025/*.csv", "6"),
        ("years/*/a.csv", "3"),
        ("years/20?5/[ab].csv", "6"),
        ("years/**/*.csv", "7"),
    ] {
        assert_eq!(place.rows(&format!("SELECT sum(litres) FROM '{pattern}'")), [total], "{pattern}");
    }
}

#[test]
fn files_work_as_data_of_a_function() {
    let place = warehouse();
    let rows = place.rows(
        "SELECT count(*) FROM components(data => (SELECT * FROM 'sales/*.parquet'), per => region, at => week,
         observed => week, trend => 'local level', season => 0)",
    );
    // Every other week is there: the grid step is 2, and each region has its 5 points.
    assert_eq!(rows, ["10"]);
}

#[test]
fn text_formats_are_read_compressed_or_not() {
    let place = Place::new();
    place.write("a.ndjson", "{\"litres\": 1}\n{\"litres\": 2}\n");
    place.write("b.jsonl", "{\"litres\": 3}\n");
    assert_eq!(place.rows("SELECT sum(litres) FROM 'a.ndjson'"), ["3"]);
    assert_eq!(place.rows("SELECT sum(litres) FROM 'b.jsonl'"), ["3"]);
}

#[test]
fn what_cannot_be_read_is_explained() {
    let place = warehouse();
    place.write("mixed/a.csv", "a\n1\n");
    place.write("mixed/b.json", "{}\n");
    place.write("notes/today.txt", "call the depot");
    for (from, why) in [
        ("'nowhere/*.parquet'", "no file matches 'nowhere/*.parquet' in '"),
        ("'missing.parquet'", "no file matches 'missing.parquet'"),
        ("'mixed/'", "'mixed/*.csv'"),
        ("'notes/'", "'today.txt' has none of the endings"),
        ("'sales/region=N*/*.parquet'", "WHERE region = "),
        ("sales", "table 'sales' is not known here"),
    ] {
        let ran = place.stillwell(&["query", &format!("SELECT * FROM {from}")]);
        assert_eq!(ran.code, Some(1), "{from}");
        assert!(ran.err.contains(why), "{from}: {}", ran.err);
    }
}
