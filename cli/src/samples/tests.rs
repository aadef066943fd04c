//! The demo as a whole: what is in the files, and that the story of the README is really there.

use std::collections::{BTreeMap, BTreeSet};
use std::fs::{self, File};
use std::ops::Range;
use std::path::{Path, PathBuf};

use arrow::array::{Array, AsArray, RecordBatch};
use arrow::datatypes::{DataType, Date32Type, Float64Type};
use parquet::arrow::arrow_reader::ParquetRecordBatchReaderBuilder;
use tempfile::TempDir;

use super::story::{EVENTS, Fate, What};
use super::*;

/// Rows of one series, column by column; NULL = `None`.
#[derive(Debug, Default, Clone, PartialEq)]
struct Rows {
    week: Vec<i32>,
    numbers: BTreeMap<String, Vec<Option<f64>>>,
}

impl Rows {
    fn column(&self, name: &str) -> &[Option<f64>] {
        self.numbers.get(name).map_or_else(|| panic!("no column {name}"), Vec::as_slice)
    }

    fn values(&self, name: &str) -> Vec<f64> {
        self.column(name).iter().map(|value| value.expect("no NULL in this column")).collect()
    }
}

/// (region, product) -> its rows.
type Table = BTreeMap<(String, String), Rows>;

fn batches(path: &Path) -> Vec<RecordBatch> {
    let file = File::open(path).unwrap_or_else(|error| panic!("{}: {error}", path.display()));
    let reader = ParquetRecordBatchReaderBuilder::try_new(file).expect("Parquet").build().expect("a reader");
    reader.map(|batch| batch.expect("a batch")).collect()
}

fn read_file(path: &Path, region: Option<&str>, into: &mut Table) {
    for batch in batches(path) {
        let text = |name: &str| batch.column_by_name(name).map(|column| column.as_string::<i32>().clone());
        let product = text("product").expect("a product column");
        let regions = text("region");
        for row in 0..batch.num_rows() {
            let region =
                region.unwrap_or_else(|| regions.as_ref().expect("a region column").value(row)).to_owned();
            let rows = into.entry((region, product.value(row).to_owned())).or_default();
            for (field, column) in batch.schema().fields().iter().zip(batch.columns()) {
                match field.data_type() {
                    DataType::Date32 => rows.week.push(column.as_primitive::<Date32Type>().value(row)),
                    DataType::Float64 => {
                        let column = column.as_primitive::<Float64Type>();
                        let value = column.is_valid(row).then(|| column.value(row));
                        rows.numbers.entry(field.name().clone()).or_default().push(value);
                    }
                    _ => {}
                }
            }
        }
    }
}

fn sales(dir: &Path) -> Table {
    let mut table = Table::new();
    for region in &REGIONS {
        let path = dir.join(format!("sales/region={}/part-0.parquet", region.name));
        read_file(&path, Some(region.name), &mut table);
    }
    table
}

fn truth(dir: &Path, file: &str) -> Table {
    let mut table = Table::new();
    read_file(&dir.join("truth").join(file), None, &mut table);
    table
}

fn written(options: &SampleOptions) -> (TempDir, SampleSummary) {
    let place = tempfile::tempdir().expect("a temporary folder");
    let summary = write(place.path(), options).expect("written");
    (place, summary)
}

/// Every file below a folder with its bytes, by relative path.
fn contents(dir: &Path) -> BTreeMap<PathBuf, Vec<u8>> {
    fn visit(root: &Path, dir: &Path, into: &mut BTreeMap<PathBuf, Vec<u8>>) {
        for entry in fs::read_dir(dir).expect("a folder") {
            let path = entry.expect("an entry").path();
            if path.is_dir() {
                visit(root, &path, into);
            } else {
                let relative = path.strip_prefix(root).expect("below").to_path_buf();
                into.insert(relative, fs::read(&path).expect("readable"));
            }
        }
    }
    let mut files = BTreeMap::new();
    visit(dir, dir, &mut files);
    files
}

fn key(region: &str, product: &str) -> (String, String) {
    (region.to_owned(), product.to_owned())
}

/// The weeks of the default history as Mondays.
fn mondays(steps: Range<usize>) -> Vec<i32> {
    let first = LAST_MONDAY - 7 * (DEFAULT_WEEKS as i32 - 1);
    steps.map(|step| first + 7 * step as i32).collect()
}

fn event(what: What) -> (Option<&'static str>, Option<&'static str>, Range<usize>) {
    let event = EVENTS.iter().find(|event| event.what == what).expect("an event of the story");
    (event.region, event.product, event.steps(DEFAULT_WEEKS))
}

fn committed() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("../parquet-samples")
}

#[test]
fn the_committed_demo_is_what_the_generator_writes() {
    let (place, _) = written(&SampleOptions::default());
    assert_eq!(sales(place.path()), sales(&committed()));
    for file in ["states.parquet", "parameters.parquet"] {
        assert_eq!(truth(place.path(), file), truth(&committed(), file), "{file}");
    }
    for file in ["README.md", "samples.txt"] {
        let read = |dir: &Path| fs::read_to_string(dir.join(file)).expect(file);
        assert_eq!(read(place.path()), read(&committed()), "{file}");
    }
    let bytes: usize = contents(&committed()).values().map(Vec::len).sum();
    assert!(bytes < 2_000_000, "{bytes} bytes");
}

#[test]
fn the_order_that_the_files_of_sales_speak_of_is_kept() {
    let warehouse = SampleOptions { series: Some(41), weeks: 60, ..SampleOptions::default() };
    for options in [SampleOptions::default(), warehouse] {
        let (place, _) = written(&options);
        for region in &REGIONS {
            let path = place.path().join(format!("sales/region={}/part-0.parquet", region.name));
            let file = File::open(&path).expect("a file");
            let reader = ParquetRecordBatchReaderBuilder::try_new(file).expect("Parquet");
            let metadata = reader.metadata();
            let names = metadata.row_groups().iter().map(|group| {
                let order = group.sorting_columns().expect("an order");
                assert!(order.iter().all(|column| !column.descending));
                order
                    .iter()
                    .map(|column| group.column(column.column_idx as usize).column_path().string())
                    .collect()
            });
            assert!(names.into_iter().all(|names: Vec<_>| names == ["product", "week"]));
            let mut keys = Vec::new();
            for batch in batches(&path) {
                let product = batch.column_by_name("product").expect("products").as_string::<i32>().clone();
                let week = batch.column_by_name("week").expect("weeks").as_primitive::<Date32Type>().clone();
                keys.extend(
                    (0..batch.num_rows()).map(|row| (product.value(row).to_owned(), week.value(row))),
                );
            }
            assert!(keys.is_sorted() && !keys.is_empty());
        }
    }
}

#[test]
fn same_options_give_the_same_bytes_and_another_seed_other_ones() {
    let options = SampleOptions { weeks: 60, ..SampleOptions::default() };
    let data = |place: &TempDir| {
        let mut files = contents(place.path());
        files.retain(|path, _| path.extension().is_some_and(|extension| extension == "parquet"));
        files
    };
    let (first, second) = (written(&options).0, written(&options).0);
    assert_eq!(data(&first).len(), 6);
    assert_eq!(data(&first), data(&second));
    // Again into the first folder, after something else was there.
    write(first.path(), &SampleOptions { series: Some(5), weeks: 3, seed: 9 }).expect("written");
    assert!(!first.path().join("truth").exists());
    write(first.path(), &options).expect("written");
    assert_eq!(data(&first), data(&second));
    let other = written(&SampleOptions { seed: 2, ..options }).0;
    assert_ne!(data(&first), data(&other));
}

#[test]
fn sales_have_the_stated_columns() {
    let path = committed().join("sales/region=Eastfell/part-0.parquet");
    let batch = batches(&path).remove(0);
    let columns: Vec<_> = batch
        .schema()
        .fields()
        .iter()
        .map(|field| (field.name().clone(), field.data_type().clone(), field.is_nullable()))
        .collect();
    let wanted = [
        ("product", DataType::Utf8, false),
        ("week", DataType::Date32, false),
        ("units", DataType::Float64, true),
        ("price", DataType::Float64, false),
        ("promo", DataType::Float64, false),
        ("holiday", DataType::Float64, false),
    ];
    assert_eq!(columns, wanted.map(|(name, kind, nullable)| (name.to_owned(), kind, nullable)));
}

#[test]
fn every_series_has_its_weeks_and_its_plan() {
    let table = sales(&committed());
    assert_eq!(table.len(), 48);
    assert_eq!(table.keys().map(|(region, _)| region).collect::<BTreeSet<_>>().len(), 4);
    let mut rows = 0;
    for ((region, product), series) in &table {
        let fate = Fate::of(region, product, DEFAULT_WEEKS, PLAN_WEEKS);
        let steps: Vec<i32> = mondays(fate.listed.clone())
            .into_iter()
            .filter(|week| !mondays(fate.rows_lost.clone()).contains(week))
            .collect();
        assert_eq!(series.week, steps, "{region} {product}");
        assert!(series.week.iter().all(|week| (week + 3) % 7 == 0), "Mondays");
        let plan = mondays(DEFAULT_WEEKS..DEFAULT_WEEKS + PLAN_WEEKS);
        for (week, units) in series.week.iter().zip(series.column("units")) {
            if plan.contains(week) {
                assert_eq!(*units, None, "{region} {product}: {} is planned", holidays::iso(*week));
            }
        }
        rows += series.week.len();
        for value in series.column("units").iter().flatten() {
            assert!(*value >= 1.0 && value.fract() == 0.0, "whole units: {value}");
        }
        for name in ["promo", "holiday"] {
            assert!(series.values(name).iter().all(|flag| *flag == 0.0 || *flag == 1.0));
        }
    }
    // 48 series x 221 weeks, less 6 lost rows, 4 x 110 before the launch, 4 x (221 - 150) after the withdrawal.
    assert_eq!(rows, 48 * 221 - 6 - 4 * 110 - 4 * 71);
    assert_eq!(mondays(0..1), [18_995], "the first week is 2022-01-03");
}

#[test]
fn gaps_launch_withdrawal_and_the_unsold_series_are_there() {
    let table = sales(&committed());
    let (region, product, lost) = event(What::RowsLost);
    let series = &table[&key(region.expect("one"), product.expect("one"))];
    assert_eq!(lost.len(), 6);
    assert!(mondays(lost).iter().all(|week| !series.week.contains(week)));
    assert!(series.column("units")[..202].iter().all(Option::is_some), "nothing else is missing");

    let (region, product, lost) = event(What::UnitsLost);
    let series = &table[&key(region.expect("one"), product.expect("one"))];
    let missing: Vec<i32> = series.week[..208]
        .iter()
        .zip(series.column("units"))
        .filter_map(|(week, units)| units.is_none().then_some(*week))
        .collect();
    assert_eq!(missing, mondays(lost.clone()));
    assert_eq!(lost.len(), 5);

    for region in &REGIONS {
        let launched = &table[&key(region.name, "Gorse Kefir")];
        assert_eq!((launched.week.len(), launched.week[0]), (98 + 13, mondays(110..111)[0]));
        let withdrawn = &table[&key(region.name, "Larch Whey")];
        assert_eq!(withdrawn.week, mondays(0..150));
        assert!(withdrawn.column("units").iter().all(Option::is_some));
    }
    let unsold: Vec<_> = table
        .iter()
        .filter(|(_, series)| series.column("units").iter().all(Option::is_none))
        .map(|(key, _)| key.clone())
        .collect();
    assert_eq!(unsold, [key("Saltmarsh", "Hollow Blue")]);
}

#[test]
fn the_outage_halves_sales_in_its_region_and_nowhere_else() {
    let table = sales(&committed());
    let (region, _, steps) = event(What::Outage(-0.7));
    let mean_log = |series: &Rows, weeks: &[i32]| {
        let logs: Vec<f64> = series
            .week
            .iter()
            .zip(series.column("units"))
            .filter(|(week, _)| weeks.contains(week))
            .filter_map(|(_, units)| units.map(f64::ln))
            .collect();
        logs.iter().sum::<f64>() / logs.len() as f64
    };
    let around: Vec<i32> =
        mondays(steps.start - 6..steps.start).into_iter().chain(mondays(steps.end..steps.end + 6)).collect();
    let inside = mondays(steps);
    for region_of in &REGIONS {
        let drops: Vec<f64> = table
            .iter()
            .filter(|((name, product), _)| name == region_of.name && product != "Gorse Kefir")
            .map(|(_, series)| mean_log(series, &inside) - mean_log(series, &around))
            .filter(|drop| drop.is_finite())
            .collect();
        let drop = drops.iter().sum::<f64>() / drops.len() as f64;
        let wanted = if Some(region_of.name) == region { -0.7 } else { 0.0 };
        // Promotions, season and noise of ten products and six weeks leave about 0.05 of spread.
        assert!((drop - wanted).abs() < 0.2, "{}: {drop} against {wanted}", region_of.name);
    }
}

#[test]
fn the_price_rise_promotions_and_holidays_show() {
    let table = sales(&committed());
    let (_, _, rise) = event(What::PriceRise(0.18));
    for region in &REGIONS {
        let series = &table[&key(region.name, "Alder Butter")];
        let list = |steps: Range<usize>| {
            let prices: Vec<f64> = steps
                .filter(|step| series.values("promo")[*step] == 0.0)
                .map(|step| series.values("price")[step])
                .collect();
            prices.iter().sum::<f64>() / prices.len() as f64
        };
        let ratio = list(rise.start..rise.start + 8) / list(rise.start - 8..rise.start);
        assert!((ratio - 1.18).abs() < 0.005, "{}: {ratio}", region.name);
        let holidays = series.values("holiday")[..208].iter().sum::<f64>();
        assert!(
            (18.0..=24.0).contains(&holidays),
            "five or six holiday weeks a year, found {holidays} in four"
        );
    }
    for (name, wanted) in [("promo_effect", 0.28), ("holiday_effect", 0.09)] {
        let states = truth(&committed(), "states.parquet");
        let effects: Vec<f64> =
            states.values().flat_map(|series| series.values(name)).filter(|effect| *effect != 0.0).collect();
        let mean = effects.iter().sum::<f64>() / effects.len() as f64;
        // The averages over the catalogue of the story, within what its 10 % spread between series allows.
        assert!((mean / wanted - 1.0).abs() < 0.2, "{name}: {mean}");
    }
}

#[test]
fn the_truth_adds_up_and_covers_what_is_missing_and_planned() {
    let known = sales(&committed());
    let states = truth(&committed(), "states.parquet");
    assert_eq!(states.len(), 47, "all but the series that was never sold");
    for (key, series) in &states {
        let fate = Fate::of(&key.0, &key.1, DEFAULT_WEEKS, PLAN_WEEKS);
        assert_eq!(series.week, mondays(fate.listed), "{key:?}: no week without its truth");
        let parts = [
            "level",
            "season",
            "price_effect",
            "promo_effect",
            "holiday_effect",
            "event_effect",
            "irregular",
        ]
        .map(|name| series.values(name));
        let units = series.values("units");
        let reported: BTreeMap<i32, Option<f64>> =
            known[key].week.iter().copied().zip(known[key].column("units").iter().copied()).collect();
        for (row, units) in units.iter().enumerate() {
            let log_units: f64 = parts.iter().map(|part| part[row]).sum();
            assert!((units - log_units.exp()).abs() <= 0.5 + 1e-9, "{key:?} row {row}: {units}");
            if let Some(Some(reported)) = reported.get(&series.week[row]) {
                assert_eq!(reported, units, "{key:?} row {row}");
            }
        }
    }
}

#[test]
fn effects_are_their_coefficients_times_the_columns_of_the_warehouse() {
    let known = sales(&committed());
    let states = truth(&committed(), "states.parquet");
    let parameters = truth(&committed(), "parameters.parquet");
    assert_eq!(states.keys().collect::<Vec<_>>(), parameters.keys().collect::<Vec<_>>());
    for (key, series) in &known {
        let Some(parameters) = parameters.get(key) else { continue };
        let value = |name: &str| parameters.values(name)[0];
        let price = series.values("price");
        let average = price.iter().sum::<f64>() / price.len() as f64;
        assert!((average - value("average_price")).abs() < 1e-9, "{key:?}");
        let effects: BTreeMap<i32, usize> =
            states[key].week.iter().enumerate().map(|(row, week)| (*week, row)).collect();
        let columns = ["price_effect", "promo_effect", "holiday_effect"].map(|name| states[key].values(name));
        let (promo, holiday) = (series.values("promo"), series.values("holiday"));
        for (row, week) in series.week.iter().enumerate() {
            let wanted = [
                value("price_coefficient") * (price[row] - average),
                value("promo_coefficient") * promo[row],
                value("holiday_coefficient") * holiday[row],
            ];
            for (column, wanted) in columns.iter().zip(wanted) {
                assert!((column[effects[week]] - wanted).abs() < 1e-6, "{key:?} {}", holidays::iso(*week));
            }
        }
        assert!(value("price_coefficient") < 0.0 && value("promo_coefficient") > 0.0);
    }
}

#[test]
fn any_number_of_series_is_laid_out_by_region_without_a_truth() {
    let (place, summary) = written(&SampleOptions { series: Some(2_003), weeks: 4, seed: 3 });
    let table = sales(place.path());
    assert_eq!((table.len(), summary.series), (2_003, 2_003));
    assert_eq!(summary.rows, 2_003 * 17);
    assert!(table.values().all(|series| series.week.len() == 17));
    let unsold = table.values().filter(|series| series.column("units").iter().all(Option::is_none)).count();
    assert_eq!(unsold, 2, "one series in a thousand");
    assert!(!place.path().join("truth").exists());
    let (place, _) = written(&SampleOptions { series: Some(2), weeks: 1, seed: 3 });
    assert_eq!(fs::read_dir(place.path().join("sales")).expect("sales").count(), 2, "no empty partitions");
}

#[test]
fn the_job_written_beside_the_data_speaks_of_its_folder_and_stays_when_edited() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let dir = place.path().join("owner's demo");
    let options = SampleOptions { series: Some(1), weeks: 2, seed: 1 };
    write(&dir, &options).expect("written");
    let job = dir.join("weekly_outlook.sql");
    let text = fs::read_to_string(&job).expect("the job");
    let location = format!("LOCATION '{}/sales/'", dir.display().to_string().replace('\'', "''"));
    assert!(text.contains(&location), "{location} in\n{text}");
    fs::write(&job, "SELECT 1;").expect("edited");
    write(&dir, &options).expect("written again");
    assert_eq!(fs::read_to_string(&job).expect("the job"), "SELECT 1;");
}

#[test]
fn options_out_of_range_say_the_range() {
    let place = tempfile::tempdir().expect("a temporary folder");
    let message = |options: SampleOptions| write(place.path(), &options).expect_err("refused").to_string();
    let base = SampleOptions::default();
    let text = message(SampleOptions { weeks: 51, ..base.clone() });
    assert!(text.contains("between 52 and 1040") && text.contains("got 51"), "{text}");
    let text = message(SampleOptions { weeks: 0, series: Some(3), ..base.clone() });
    assert!(text.contains("between 1 and 1040") && text.contains("--weeks"), "{text}");
    let text = message(SampleOptions { series: Some(0), ..base });
    assert!(text.contains("between 1 and 10000000") && text.contains("--series"), "{text}");
    assert_eq!(fs::read_dir(place.path()).expect("untouched").count(), 0);
}
