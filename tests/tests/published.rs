//! Published figures of the literature, asked for in SQL.
//!
//! DK = Durbin & Koopman (2012), *Time Series Analysis by State Space Methods*, 2nd ed.; CK = Commandeur & Koopman (2007),
//! *An Introduction to State Space Time Series Analysis*. Every published figure is quoted from memory of those books; so are
//! those of `udfs/statespace/tests/published.rs`, which holds more of them against the numerical core. Tolerances are half a
//! unit of the last printed digit unless a line says otherwise, and for estimates besides the small share of their standard
//! error that the stopping rule leaves open. The series are R's `datasets`
//! (`udfs/statespace/tests/reference/README.md`).

use std::sync::Arc;

use arrow::array::{ArrayRef, Date32Array, Float64Array, RecordBatch};
use datafusion::datasource::MemTable;
use datafusion::prelude::{SessionConfig, SessionContext};

use crate::support::{ROOT, number, numbers, rows, session_with, texts};

/// Share of a standard error by which an estimate may miss its maximum: worth 1e-7 in log-likelihood.
const LEFT_OPEN: f64 = 4.5e-4;

/// A column of the reference series, NaN = missing.
fn column(series: &str, name: &str) -> Vec<f64> {
    let path = ROOT.join("udfs/statespace/tests/reference/series.json");
    let text = std::fs::read_to_string(path).expect("series.json");
    let all: serde_json::Value = serde_json::from_str(&text).expect("valid JSON");
    let values = all[series][name].as_array().expect("a series and one of its columns");
    values.iter().map(|value| value.as_f64().unwrap_or(f64::NAN)).collect()
}

fn add(context: &SessionContext, table: &str, columns: Vec<(&str, ArrayRef)>) {
    let batch = RecordBatch::try_from_iter(columns).expect("columns of one length");
    let table_provider = MemTable::try_new(batch.schema(), vec![vec![batch]]).expect("a table");
    context.register_table(table, Arc::new(table_provider)).expect("a new name");
}

fn values(values: Vec<f64>) -> ArrayRef {
    Arc::new(Float64Array::from(values))
}

/// Dates of `count` years or months from 1 January of a year.
fn dates(year: i32, months: i32, count: usize) -> ArrayRef {
    let day = |at: i32| {
        // Days from 1970 by the proleptic Gregorian calendar: 365.2425 a year, in whole numbers.
        let (year, month) = (year + at * months / 12, at * months % 12);
        let leap = |y: i32| y % 4 == 0 && (y % 100 != 0 || y % 400 == 0);
        let before = |y: i32| 365 * (y - 1) + (y - 1) / 4 - (y - 1) / 100 + (y - 1) / 400;
        let lengths = [31, if leap(year) { 29 } else { 28 }, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31];
        before(year) - before(1970) + lengths.iter().take(month as usize).sum::<i32>()
    };
    Arc::new(Date32Array::from_iter_values((0..count as i32).map(day)))
}

/// The Nile at Aswan, 1871 to 1970, once in full and once without 1891-1910 and 1931-1950; and the car drivers killed or
/// seriously injured in the UK, monthly from January 1969 to December 1984, with the petrol price and the seat-belt law.
fn session() -> SessionContext {
    let context = session_with(SessionConfig::new());
    add(&context, "nile", vec![("year", dates(1871, 12, 100)), ("flow", values(column("nile", "y")))]);
    let gaps = values(column("nile_missing", "y"));
    add(&context, "nile_missing", vec![("year", dates(1871, 12, 100)), ("flow", gaps)]);
    // The reference holds logarithms; the counts were whole.
    let counts = column("drivers_ln", "y").iter().map(|y| y.exp().round()).collect();
    let petrol = column("drivers_ln", "log_petrol").iter().map(|p| p.exp()).collect();
    add(
        &context,
        "uk",
        vec![
            ("month", dates(1969, 1, 192)),
            ("drivers", values(counts)),
            ("petrol", values(petrol)),
            ("law", values(column("drivers_ln", "law"))),
        ],
    );
    context
}

#[track_caller]
fn printed(what: &str, ours: f64, published: f64, half_a_unit: f64) {
    println!("{what:34} {ours:16.9} {published:16.9}");
    assert!((ours - published).abs() <= half_a_unit, "{what}: {ours}, published {published}");
}

/// A variance of a one-row `diagnostics` against the printed one.
#[track_caller]
fn variance(what: &str, row: &RecordBatch, name: &str, published: f64, half_a_unit: f64) {
    let error = number(row, &format!("{name}_variance_se"));
    printed(
        &format!("{what} {name}"),
        number(row, &format!("{name}_variance")),
        published,
        half_a_unit + LEFT_OPEN * error,
    );
}

/// The arguments of DK's local level for the Nile; at their variances where `known`.
fn nile(function: &str, known: bool, more: &str) -> String {
    let known = if known { "known => {'irregular': 15099.0, 'level': 1469.1}," } else { "" };
    format!(
        "{function}(data => nile, at => year, observed => flow, trend => 'local level', season => 0, {known}
                    transform => 'none' {more})"
    )
}

#[tokio::test]
async fn nile_variances_and_likelihood() {
    let row = rows(&session(), &format!("SELECT * FROM {}", nile("diagnostics", false, ""))).await;
    // DK 2.10. The book's level variance is its ratio 0.0973, printed to four digits, times the irregular variance.
    variance("Nile, DK 2.10", &row, "irregular", 15099.0, 0.5);
    variance("Nile, DK 2.10", &row, "level", 1469.1, 0.00005 * 15099.0);
    // Printed -632.54; the exact value in this convention is -632.5456, which would be printed as -632.55.
    printed("Nile log-likelihood, DK 2.10", number(&row, "log_likelihood"), -632.54, 0.01);
    printed("Nile ratio, DK table 2.1", number(&row, "level_to_irregular"), 0.0973, 0.00005);
    assert_eq!(
        (texts(&row, "every"), texts(&row, "last_at")),
        (vec!["year".to_string()], vec!["1970-01-01".to_string()])
    );
}

#[tokio::test]
async fn nile_residual_checks() {
    let row = rows(&session(), &format!("SELECT * FROM {}", nile("diagnostics", true, ""))).await;
    // DK 2.12.
    printed("Nile skewness, DK 2.12", number(&row, "skewness"), -0.03, 0.005);
    printed("Nile excess kurtosis, DK 2.12", number(&row, "kurtosis") - 3.0, 0.09, 0.005);
    printed("Nile normality, DK 2.12", number(&row, "normality"), 0.05, 0.005);
    printed("Nile H(33), DK 2.12", number(&row, "h"), 0.61, 0.005);
}

#[tokio::test]
async fn nile_level_forecast_and_residuals() {
    let context = session();
    let level = format!(
        "SELECT at, level, level_se, outlier_t, shift_t FROM {} ORDER BY at",
        nile("components", true, "")
    );
    let history = rows(&context, &level).await;
    let forecast = format!("SELECT * FROM {} ORDER BY step", nile("forecast", true, ", horizon => 30"));
    let forecast = rows(&context, &forecast).await;
    // DK 2.2.4: at the steady state the filtered variance is irregular * p / (p + 1), p = (q + sqrt(q^2 + 4 q)) / 2; at the last
    // point smoothed = filtered. The level of 1970 is that of a 50-digit filter.
    let q: f64 = 1469.1 / 15099.0;
    let p = (q + (q * q + 4.0 * q).sqrt()) / 2.0;
    let filtered = 15099.0 * p / (p + 1.0);
    let level_1970 = numbers(&history, "level")[99];
    printed("Nile level 1970 (50-digit filter)", level_1970, 798.37029, 5e-6);
    printed("its variance, DK 2.2.4", numbers(&history, "level_se")[99].powi(2), filtered, 1e-8 * filtered);
    // DK 2.11: the forecast stays at the last level, its variance grows by the level's variance each step.
    let spread = numbers(&forecast, "std_error");
    for (step, expected) in numbers(&forecast, "expected").into_iter().enumerate() {
        assert!((expected - level_1970).abs() < 1e-9);
        let variance = filtered + (step + 1) as f64 * 1469.1 + 15099.0;
        assert!((spread[step].powi(2) - variance).abs() < 1e-8 * variance, "step {}", step + 1);
    }
    assert_eq!(texts(&forecast, "at")[29], "2000-01-01");
    // Harvey & Koopman (1992), JBES 10, and DK 2.12.2: the dam of 1899, the low flows of 1877 and 1913.
    let year = |year: usize| year - 1871;
    printed("Nile shift of 1899", numbers(&history, "shift_t")[year(1899)], -3.23, 0.005);
    printed("Nile outlier of 1913", numbers(&history, "outlier_t")[year(1913)], -3.04, 0.005);
    printed("Nile outlier of 1877", numbers(&history, "outlier_t")[year(1877)], -2.50, 0.006);
    let most = format!(
        "SELECT at FROM {} ORDER BY abs(shift_t) DESC NULLS LAST LIMIT 1",
        nile("components", true, "")
    );
    assert_eq!(texts(&rows(&context, &most).await, "at"), ["1899-01-01"]);
}

#[tokio::test]
async fn nile_missing_stretches_are_bridged_by_straight_lines() {
    let context = session();
    // DK 2.7. The likelihood counts the 60 observed points: -380.58706 by a 50-digit filter at these variances.
    let call = |function: &str| nile(function, true, "").replace("data => nile", "data => nile_missing");
    let row = rows(&context, &format!("SELECT * FROM {}", call("diagnostics"))).await;
    printed("Nile with gaps, log-likelihood", number(&row, "log_likelihood"), -380.58706, 5e-6);
    assert_eq!((number(&row, "n"), number(&row, "missing")), (60.0, 40.0));
    let level =
        numbers(&rows(&context, &format!("SELECT * FROM {} ORDER BY at", call("components"))).await, "level");
    for gap in [20..40, 60..80] {
        for t in gap {
            let bend: f64 = level[t - 1] - 2.0 * level[t] + level[t + 1];
            assert!(bend.abs() < 1e-8, "bend {bend} at {t}");
        }
    }
}

/// One model of CK for the logarithm of the drivers killed or seriously injured.
struct Table {
    section: &'static str,
    arguments: &'static str,
    /// Name, published value, half a unit of its last printed digit.
    variances: &'static [(&'static str, f64, f64)],
    /// Published log-likelihood per observation and half a unit.
    log_likelihood: (f64, f64),
    /// Driver, coefficient, half a unit.
    coefficients: &'static [(&'static str, f64, f64)],
}

const NONE: &str = "season => 0";
/// CK's seasonal form: all six harmonics (the dummy form is another model when it drifts).
const DRIFTING: &str = "season => 12, harmonics => 6";
const FIXED: &str = "season => 12, harmonics => 6, fixed_season => true";

const TABLES: &[Table] = &[
    Table {
        section: "2.1",
        arguments: "trend => 'fixed level'",
        variances: &[("irregular", 0.029353, 5e-7)],
        log_likelihood: (0.3297597, 5e-8),
        coefficients: &[],
    },
    Table {
        section: "2.2",
        arguments: "trend => 'local level'",
        variances: &[("irregular", 0.00222157, 5e-9), ("level", 0.011866, 5e-7)],
        log_likelihood: (0.6451960, 5e-8),
        coefficients: &[],
    },
    Table {
        section: "3.2",
        arguments: "trend => 'local linear'",
        // The slope's variance is printed as 1.5e-11: where the book's optimiser stopped on its way to zero.
        variances: &[("irregular", 0.0021181, 5e-8), ("level", 0.012128, 5e-7), ("slope", 0.0, 0.0)],
        log_likelihood: (0.6247935, 5e-8),
        coefficients: &[],
    },
    Table {
        section: "4.2",
        arguments: "trend => 'local level', drifting",
        // Seven printed digits of an optimum that is flat: ours differ in the last two, at a likelihood not below.
        variances: &[
            ("irregular", 0.00341598, 3e-8),
            ("level", 0.00093585, 4e-8),
            ("season", 5.0109e-7, 2e-10),
        ],
        log_likelihood: (0.9369063, 5e-8),
        coefficients: &[],
    },
    Table {
        section: "4.3",
        arguments: "trend => 'local level', fixed",
        variances: &[("irregular", 0.00351385, 5e-9), ("level", 0.000945723, 5e-10)],
        log_likelihood: (0.9363361, 5e-8),
        coefficients: &[],
    },
    Table {
        section: "5.2",
        arguments: "trend => 'local level', drivers => {'petrol': ln(petrol)}",
        variances: &[("irregular", 0.0023480, 5e-8), ("level", 0.0116673, 5e-8)],
        log_likelihood: (0.6456361, 5e-8),
        coefficients: &[("petrol", -0.26105, 5e-6)],
    },
    Table {
        section: "6.2",
        arguments: "trend => 'local level', drivers => law",
        // The last digits of this log-likelihood are remembered with some doubt.
        variances: &[("irregular", 0.0026926, 5e-8), ("level", 0.0104111, 5e-8)],
        log_likelihood: (0.6630847, 5e-7),
        coefficients: &[("law", -0.3785, 5e-5)],
    },
    Table {
        section: "7.1",
        arguments: "trend => 'fixed level', fixed, drivers => {'petrol': ln(petrol), 'law': law}",
        variances: &[("irregular", 0.00740223, 5e-9)],
        log_likelihood: (0.8023778, 5e-8),
        coefficients: &[("petrol", -0.45213, 5e-6), ("law", -0.19714, 5e-6)],
    },
    Table {
        section: "7.2",
        arguments: "trend => 'local level', drifting, drivers => {'petrol': ln(petrol), 'law': law}",
        variances: &[
            ("irregular", 0.0037862, 5e-8),
            ("level", 0.00026768, 2e-8),
            ("season", 1.1622e-6, 4e-10),
        ],
        log_likelihood: (0.9825225, 5e-8),
        coefficients: &[("petrol", -0.2914, 5e-5), ("law", -0.23774, 5e-6)],
    },
];

#[tokio::test]
async fn uk_drivers() {
    let context = session();
    for table in TABLES {
        let arguments = table.arguments.replace("drifting", DRIFTING).replace("fixed,", &format!("{FIXED},"));
        let arguments = match arguments.strip_suffix(", fixed") {
            Some(head) => format!("{head}, {FIXED}"),
            None if arguments.contains("season") => arguments,
            None => format!("{arguments}, {NONE}"),
        };
        let sql = format!(
            "SELECT * FROM diagnostics(data => uk, at => month, observed => drivers, transform => 'log', {arguments})"
        );
        let row = rows(&context, &sql).await;
        let section = format!("CK {}", table.section);
        let (published, half) = table.log_likelihood;
        printed(
            &format!("{section} log-likelihood / 192"),
            number(&row, "log_likelihood") / 192.0,
            published,
            half,
        );
        for &(name, published, half) in table.variances {
            let error = number(&row, &format!("{name}_variance_se"));
            let open = if error.is_nan() { 0.0 } else { LEFT_OPEN * error };
            printed(
                &format!("{section} {name}"),
                number(&row, &format!("{name}_variance")),
                published,
                half + open,
            );
        }
        for &(name, published, half) in table.coefficients {
            let open = LEFT_OPEN * number(&row, &format!("coefficient_of_{name}_se"));
            printed(
                &format!("{section} {name}"),
                number(&row, &format!("coefficient_of_{name}")),
                published,
                half + open,
            );
        }
    }
}

#[tokio::test]
async fn uk_drivers_level_and_effects() {
    let context = session();
    // CK 5.1: a fixed level of 5.8787 on the log scale, and -0.67166 per unit of log price.
    let sql = "SELECT ln(min(level)) AS level, ln(max(level)) AS again FROM components(data => uk, at => month, observed => drivers,
                   drivers => {'petrol': ln(petrol)}, trend => 'fixed level', season => 0, transform => 'log')";
    let row = rows(&context, sql).await;
    printed("CK 5.1 level", number(&row, "level"), 5.8787, 5e-5);
    printed("CK 5.1 level, everywhere", number(&row, "again"), number(&row, "level"), 1e-12);
    // CK 6.2: exp(-0.3785) = 0.685 of the drivers under the law, from February 1983 on.
    let sql = "SELECT min(effect_of_law) AS under, max(effect_of_law) AS without, count(*) FILTER (WHERE effect_of_law < 1) AS months,
                      min(at) FILTER (WHERE effect_of_law < 1) AS since
               FROM components(data => uk, at => month, observed => drivers, drivers => law, trend => 'local level',
                               season => 0, transform => 'log')";
    let row = rows(&context, sql).await;
    printed("CK 6.2 effect of the law", number(&row, "under").ln(), -0.3785, 1e-4);
    assert_eq!((number(&row, "without"), number(&row, "months")), (1.0, 23.0));
    assert_eq!(texts(&row, "since"), ["1983-02-01"]);
}
