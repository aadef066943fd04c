//! Staging folders from opening to clearing, on a real folder.

use super::*;

struct Place(tempfile::TempDir);

impl Place {
    fn new() -> Self {
        Self(tempfile::tempdir().expect("folder"))
    }

    fn at(&self, name: &str) -> PathBuf {
        self.0.path().canonicalize().expect("there").join(name)
    }

    fn target(&self, name: &str, kind: Kind) -> Target {
        Target { shown: name.to_string(), path: self.at(name), kind }
    }

    fn names(&self) -> Vec<String> {
        let entries = fs::read_dir(self.0.path()).expect("readable");
        let mut names: Vec<_> =
            entries.map(|entry| entry.expect("entry").file_name().to_string_lossy().into_owned()).collect();
        names.sort();
        names
    }
}

#[test]
fn a_dropped_staging_folder_leaves_nothing() {
    let place = Place::new();
    let staging = Staging::open(place.target("deep/er/out", Kind::Folder)).expect("opened");
    fs::write(staging.content().join("x.parquet"), "half").expect("written");
    drop(staging);
    assert!(place.names().is_empty(), "{:?}", place.names());
}

#[test]
fn folders_above_the_target_that_were_there_stay() {
    let place = Place::new();
    fs::create_dir(place.at("kept")).expect("made");
    drop(Staging::open(place.target("kept/new/out.csv", Kind::File)).expect("opened"));
    assert_eq!(place.names(), ["kept"]);
    assert_eq!(fs::read_dir(place.at("kept")).expect("readable").count(), 0);
}

#[test]
fn a_file_appears_whole_and_alone() {
    let place = Place::new();
    let staging = Staging::open(place.target("out.csv", Kind::File)).expect("opened");
    fs::write(staging.content(), "a\n1\n").expect("written");
    assert!(!place.at("out.csv").exists());
    let files = staging.put_in_place(None).expect("placed");
    assert_eq!(files, Files { number: 1, bytes: 4 });
    assert_eq!(place.names(), ["out.csv"]);
}

#[test]
fn a_folder_is_replaced_with_its_old_files() {
    let place = Place::new();
    for rows in ["one", "two"] {
        let staging = Staging::open(place.target("out", Kind::Folder)).expect("opened");
        fs::write(staging.content().join(format!("{rows}_0.csv")), rows).expect("written");
        staging.put_in_place(None).expect("placed");
        assert_eq!(fs::read_to_string(place.at("out/part-0.csv")).expect("there"), rows);
    }
    assert_eq!(fs::read_dir(place.at("out")).expect("readable").count(), 1);
    assert_eq!(place.names(), ["out"]);
}

#[test]
fn an_empty_parquet_folder_carries_its_columns() {
    use arrow::datatypes::{DataType, Field, Schema};
    let place = Place::new();
    let schema = SchemaRef::new(Schema::new(vec![Field::new("litres", DataType::Float64, true)]));
    let staging = Staging::open(place.target("out", Kind::Folder)).expect("opened");
    staging.put_in_place(Some(&schema)).expect("placed");
    let file = File::open(place.at("out/part-0.parquet")).expect("there");
    let reader =
        parquet::arrow::arrow_reader::ParquetRecordBatchReaderBuilder::try_new(file).expect("parquet");
    assert_eq!(reader.schema().field(0).name(), "litres");
}

#[test]
fn what_was_removed_at_a_signal_does_not_come_back() {
    let place = Place::new();
    let staging = Staging::open(place.target("out", Kind::Folder)).expect("opened");
    forget(&staging.hidden);
    assert!(staging.put_in_place(None).is_err());
    assert!(place.names().is_empty(), "{:?}", place.names());
}

#[test]
fn leftovers_are_cleared_and_folders_in_use_are_not() {
    let place = Place::new();
    let in_use = Staging::open(place.target("out", Kind::Folder)).expect("opened");
    let leftover = place.at(".out.stillwell-killed");
    fs::create_dir_all(leftover.join("new")).expect("made");
    fs::write(leftover.join("lock"), "").expect("written");
    let setting_up = place.at(".out.stillwell-begun");
    fs::create_dir(&setting_up).expect("made");
    clear_leftovers_of(&place.at("out"), "out");
    assert!(!leftover.exists());
    assert!(setting_up.exists() && in_use.content().exists());
}

#[test]
fn a_swap_that_was_killed_half_way_is_undone() {
    let place = Place::new();
    let leftover = place.at(".out.stillwell-killed");
    fs::create_dir_all(leftover.join("old")).expect("made");
    fs::write(leftover.join("old/part-0.csv"), "kept").expect("written");
    fs::write(leftover.join("lock"), "").expect("written");
    clear_leftovers_of(&place.at("out"), "out");
    assert_eq!(fs::read_to_string(place.at("out/part-0.csv")).expect("back"), "kept");
    assert_eq!(place.names(), ["out"]);
}

#[test]
fn hidden_names_do_not_look_like_hive_folders() {
    assert_eq!(prefix("region=North"), ".region-North.stillwell-");
}

#[cfg(unix)]
#[test]
fn who_may_read_the_output_stays_the_same() {
    use std::os::unix::fs::PermissionsExt;
    let place = Place::new();
    fs::create_dir(place.at("out")).expect("made");
    fs::set_permissions(place.at("out"), fs::Permissions::from_mode(0o750)).expect("set");
    let staging = Staging::open(place.target("out", Kind::Folder)).expect("opened");
    staging.put_in_place(None).expect("placed");
    let mode = fs::metadata(place.at("out")).expect("there").permissions().mode();
    assert_eq!(mode & 0o777, 0o750);
}
