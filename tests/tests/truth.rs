//! What the demo job answers, against what the demo was drawn from (`parquet-samples/README.md`).
//!
//! The job asks for the structure that the demo has: local linear, three harmonics of 52.18 weeks, price, promotion and
//! holiday, on the log scale. Bounds are derived where they stand; the figures of a run are printed.

use std::collections::BTreeSet;

use arrow::array::RecordBatch;

use crate::outlook::Outlook;
use crate::support::{number, numbers, rows, texts};

/// Fitted level against true level, per point, in log units. A model that knows nothing of the plant's outage sees it in its
/// level.
const LEVELS: &str = "
    SELECT c.region, c.product, c.at, s.event_effect,
           ln(c.level) - (s.level + s.event_effect) AS error, c.level_se / c.level AS claimed
    FROM written_components AS c
    JOIN states AS s ON s.region = c.region AND s.product = c.product AND s.week = c.at
    WHERE c.status = 'ok'";

/// The answer of a query over the job's results and the truth.
fn ask(sql: &str) -> RecordBatch {
    let outlook = Outlook::get();
    let runtime = tokio::runtime::Builder::new_multi_thread().enable_all().build().expect("a runtime");
    runtime.block_on(async { rows(&outlook.session().await, sql).await })
}

fn median(mut values: Vec<f64>) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}

#[test]
fn the_level_is_recovered() {
    // Root mean squared error of each series whose plant ran all the time, over that of a smoother that knows the variances and
    // has nothing else to estimate: level_sd irregular_sd / 2, the steady-state variance of a smoothed local level for a small
    // signal to noise ratio (from the Riccati equation of DK 2.2.4, smoothed). The job has slope, season, three coefficients and
    // four variances to estimate besides, and series whose level variance it puts at zero: twice that error is allowed at the
    // median. Giving the observations, less all true effects, for the level would be at about 2.8.
    let batch = ask(&format!(
        "SELECT e.region, e.product, sqrt(avg(e.error * e.error)) AS rms,
                sqrt(avg(e.error * e.error) / (max(p.level_sd) * max(p.irregular_sd) / 2)) AS ratio
         FROM ({LEVELS}) AS e JOIN parameters AS p ON p.region = e.region AND p.product = e.product
         WHERE e.region <> 'Marrowdale' GROUP BY e.region, e.product"
    ));
    let (ratios, errors) = (numbers(&batch, "ratio"), numbers(&batch, "rms"));
    assert_eq!(ratios.len(), 35, "three regions of twelve, less the one that never sold");
    let (ratio, error) = (median(ratios), median(errors.clone()));
    println!(
        "level: median RMS {error:.4} log units, {ratio:.2} times that of a smoother that knows everything"
    );
    assert!(ratio < 2.0, "{ratio}");
    assert!(error < 0.05, "{error}: 5 % of the level is what a reader of a chart would notice");
    assert!(errors.iter().all(|error| *error < 0.1), "{errors:?}");
}

#[test]
fn the_outage_is_seen_in_the_level() {
    // -0.7 for six weeks, all products of Marrowdale that were listed. The model shares such a
    // dip between level and irregular; the level must take two thirds of it.
    let batch = ask(&format!(
        "SELECT avg(error) AS error, count(DISTINCT product) AS products FROM ({LEVELS}) WHERE event_effect <> 0 AND region = 'Marrowdale'"
    ));
    let error = number(&batch, "error");
    println!("outage: the level misses {error:+.3} of -0.7");
    assert!(error.abs() < 0.7 / 3.0, "{error}");
    assert_eq!(number(&batch, "products"), 11.0, "Gorse Kefir was not launched yet");
    // Within every product the week in which the plant stopped and the one in which it ran again are the largest shifts.
    let shifts = ask(
        "SELECT product, count(*) FILTER (WHERE at IN ('2023-11-20', '2024-01-01')) AS n
         FROM (SELECT product, at, row_number() OVER (PARTITION BY product ORDER BY abs(shift_t) DESC NULLS LAST) AS rank
               FROM written_components WHERE region = 'Marrowdale' AND product <> 'Gorse Kefir')
         WHERE rank <= 2 GROUP BY product",
    );
    let found = numbers(&shifts, "n");
    assert_eq!(found.len(), 11);
    let both = found.iter().filter(|n| **n == 2.0).count();
    println!("outage: both ends are the largest shifts of {both} of 11 products");
    assert!(both >= 9, "{both}");
}

#[test]
fn standard_errors_of_the_level_are_honest() {
    // Share of points whose true level lies within 1.645 claimed standard errors. They are claimed given the variances; where an
    // estimate is zero the level is claimed to be a line, so somewhat fewer than nine in ten is what maximum likelihood gives.
    let batch = ask(&format!(
        "SELECT avg(CASE WHEN abs(error) < 1.645 * claimed THEN 1.0 ELSE 0.0 END) AS share FROM ({LEVELS})"
    ));
    let share = number(&batch, "share");
    println!("level: the truth lies within 1.645 standard errors at {:.1} % of the points", 100.0 * share);
    assert!((0.75..0.97).contains(&share), "{share}");
}

#[test]
fn weekly_intervals_cover_what_they_claim() {
    let batch = ask(
        "SELECT count(*) AS weeks, count(*) FILTER (WHERE s.units < f.lower) AS below, count(*) FILTER (WHERE s.units > f.upper) AS above
         FROM written_forecast AS f JOIN states AS s ON s.region = f.region AND s.product = f.product AND s.week = f.at
         WHERE f.status = 'ok'",
    );
    let (weeks, below, above) = (number(&batch, "weeks"), number(&batch, "below"), number(&batch, "above"));
    let covered = 1.0 - (below + above) / weeks;
    println!(
        "weeks: {:.1} % of {weeks} within 90 % intervals, {below} below, {above} above",
        100.0 * covered
    );
    assert_eq!(weeks, 43.0 * 13.0, "48 series, less four withdrawn ones and the one that never sold");
    // Three standard deviations of a binomial share of 0.9 in 559 weeks, widened by the square root of 2 because the weeks of a
    // series err together: 3 sqrt(2 x 0.09 / 559) = 0.054.
    assert!((covered - 0.9).abs() < 0.054, "{covered}");
    // Neither side holds more than its 5 % by as much.
    assert!(below / weeks < 0.05 + 0.04 && above / weeks < 0.05 + 0.04, "{below} {above}");
}

#[test]
fn totals_of_thirteen_weeks_cover_what_they_claim() {
    let batch = ask(
        "SELECT count(*) AS series, count(*) FILTER (WHERE sold BETWEEN total_lower AND total_upper) AS covered
         FROM (SELECT f.*, sum(s.units) OVER (PARTITION BY f.region, f.product ORDER BY f.step) AS sold
               FROM written_forecast AS f JOIN states AS s ON s.region = f.region AND s.product = f.product AND s.week = f.at
               WHERE f.status = 'ok')
         WHERE step = 13",
    );
    let (series, covered) = (number(&batch, "series"), number(&batch, "covered"));
    println!("totals: {covered} of {series} within 90 % intervals");
    // Binomial with 43 trials of 0.9: 33 or fewer happen once in 200 times.
    assert_eq!(series, 43.0);
    assert!(covered > 33.0, "{covered}");
}

#[test]
fn coefficients_are_recovered() {
    let mut hits = 0.0;
    for driver in ["price", "promo", "holiday"] {
        let batch = ask(&format!(
            "SELECT count(*) AS series,
                    count(*) FILTER (WHERE abs(d.coefficient_of_{driver} - p.{driver}_coefficient) < 1.96 * d.coefficient_of_{driver}_se) AS hits
             FROM written_diagnostics AS d JOIN parameters AS p ON p.region = d.region AND p.product = d.product
             WHERE d.status = 'ok'"
        ));
        assert_eq!(number(&batch, "series"), 47.0);
        println!("{driver}: the truth lies in {} of 47 intervals of 95 %", number(&batch, "hits"));
        hits += number(&batch, "hits");
    }
    // 141 coefficients: three standard deviations of a binomial share of 0.95 are 0.055.
    assert!((hits / 141.0 - 0.95).abs() < 0.055, "{hits}");
}

#[test]
fn the_series_in_trouble_are_those_of_the_story() {
    let troubled = |result: &str| {
        let batch = ask(&format!(
            "SELECT DISTINCT region || ', ' || product || ': ' || status AS trouble FROM written_{result} WHERE status <> 'ok'"
        ));
        texts(&batch, "trouble").into_iter().collect::<BTreeSet<_>>()
    };
    let never_sold = "Saltmarsh, Hollow Blue: all missing".to_string();
    assert_eq!(troubled("components"), BTreeSet::from([never_sold.clone()]));
    assert_eq!(troubled("diagnostics"), BTreeSet::from([never_sold.clone()]));
    // Withdrawn in November 2024: there is no plan to be forecast under.
    let withdrawn = ["Coldwater", "Eastfell", "Marrowdale", "Saltmarsh"];
    let withdrawn = withdrawn.map(|region| format!("{region}, Larch Whey: no driver plan"));
    assert_eq!(troubled("forecast"), withdrawn.into_iter().chain([never_sold]).collect());
}

#[test]
fn gaps_and_late_starts_are_what_the_story_says() {
    let batch = ask(
        "SELECT region || ', ' || product AS series, n, missing, first_at, last_at FROM written_diagnostics
         WHERE missing > 0 OR n < 208 AND status = 'ok' AND region = 'Eastfell' ORDER BY series",
    );
    let shown = texts(&batch, "series")
        .into_iter()
        .zip(texts(&batch, "n"))
        .zip(texts(&batch, "missing"))
        .zip(texts(&batch, "first_at"))
        .zip(texts(&batch, "last_at"));
    let shown = shown
        .map(|((((series, n), missing), first), last)| format!("{series} {n} {missing} {first} {last}"))
        .collect::<Vec<_>>();
    let expected = [
        // Five weeks counted as NULL.
        "Eastfell, Dapple Yoghurt 203 5 2022-01-03 2025-12-22",
        // Launched in February 2024.
        "Eastfell, Gorse Kefir 98 0 2024-02-12 2025-12-22",
        // Withdrawn in November 2024.
        "Eastfell, Larch Whey 150 0 2022-01-03 2024-11-11",
        // Six weeks whose rows were lost.
        "Saltmarsh, Brook Milk 202 6 2022-01-03 2025-12-22",
    ];
    assert_eq!(shown, expected);
}
