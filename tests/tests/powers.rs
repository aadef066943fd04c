//! `transform => 'box-cox'` estimates a power; handed back as a number, that power is the same model to the bit, in every function.

use std::fs;

use datafusion::prelude::{SessionConfig, SessionContext};

use crate::support::{ROOT, number, numbers, rows, session_with};

/// `sales` and `butter`, as the SQL records have them.
async fn session() -> SessionContext {
    let context = session_with(SessionConfig::new().with_target_partitions(2));
    let text = fs::read_to_string(ROOT.join("tests/slt/sales.inc")).expect("the records' tables");
    for statement in text.split("statement ok\n").skip(1) {
        rows(&context, statement.split("\n\n").next().unwrap_or(statement)).await;
    }
    context
}

/// A call for one series of quick growth whose spread grows less quickly: a power in between is called for.
fn call(function: &str, more: &str, transform: &str) -> String {
    format!(
        "SELECT * FROM {function}(data => grown, at => week, observed => litres, trend => 'local level', season => 4,
             transform => {transform}{more})"
    )
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn an_estimated_power_given_back_is_the_same_model() {
    let context = session().await;
    rows(&context, "CREATE TABLE grown AS SELECT week, power(litres / 10.0, 2) AS litres FROM butter").await;
    let open = rows(&context, &call("diagnostics", "", "'box-cox'")).await;
    let power = number(&open, "transform_power");
    assert!(power > 0.0 && power < 1.0, "a power of {power} is no test: name another series");
    // Shortest decimal that reads back as the same number.
    let given = format!("{power:?}");

    let named = rows(&context, &call("diagnostics", "", &given)).await;
    for column in
        ["transform_power", "log_likelihood", "irregular_variance", "level_variance", "season_variance"]
    {
        assert_eq!(number(&open, column).to_bits(), number(&named, column).to_bits(), "{column}");
    }
    assert_eq!(number(&open, "estimated"), number(&named, "estimated") + 1.0);

    for (function, more) in [("components", ""), ("forecast", ", horizon => 8, parts => true")] {
        let open = rows(&context, &call(function, more, "'box-cox'")).await;
        let named = rows(&context, &call(function, more, &given)).await;
        // Arrow compares floating-point values bit by bit.
        assert!(open == named && open.num_rows() >= 8, "{function}");
    }

    let fit = |transform: &str| {
        format!(
            "SELECT s['expected'] AS expected, s['lower'] AS lower, s['upper'] AS upper, s['total_upper'] AS total_upper
             FROM (SELECT unnest(fit_forecast(structural_fit(week, litres,
                       {{'trend': 'local level', 'season': 4, 'transform': {transform}}}), 8)) AS s FROM grown)"
        )
    };
    let (open, named) = (rows(&context, &fit("'box-cox'")).await, rows(&context, &fit(&given)).await);
    assert!(open == named && open.num_rows() == 8, "fit_forecast");

    // Another power is another model.
    let near = rows(&context, &call("forecast", ", horizon => 8", &format!("{:?}", power + 1e-3))).await;
    let open = rows(&context, &call("forecast", ", horizon => 8", "'box-cox'")).await;
    assert_ne!(numbers(&near, "expected"), numbers(&open, "expected"));
}
