//! What the user reads: every trouble has a listed status and a sentence with its value, place and remedy.

use super::*;

#[test]
fn every_trouble_has_a_listed_status_and_a_sentence() {
    let name = || "price".to_owned();
    let all = [
        Trouble::AllMissing,
        Trouble::TooShort { needed: 5, got: 2 },
        Trouble::Constant { value: 3.25 },
        Trouble::NotFinite { index: 7 },
        Trouble::TooLarge { index: 7, value: 1e300 },
        Trouble::NotPositive { index: 7, value: -3.25, transform: Transform::Log },
        Trouble::DriverGap { driver: name(), index: 7 },
        Trouble::NoDriverPlan { driver: name(), step: 7 },
        Trouble::CollinearDrivers { driver: name() },
        Trouble::UndeterminedState { state: 2 },
        Trouble::ExactFit,
        Trouble::Numerical { what: "a sentence" },
        Trouble::DuplicateTime { at: "2020-02-03".to_owned() },
        Trouble::MissingTime { rows: 7 },
        Trouble::OffGrid { at: "2020-02-03".to_owned(), grid: "weeks".to_owned() },
        Trouble::NotAfter { at: "2020-02-03".to_owned(), last: "2020-02-10".to_owned() },
        Trouble::UnequalLists { name: "price".to_owned(), got: 3, times: 2 },
        Trouble::DamagedFit { what: "a reason".to_owned() },
        Trouble::NoGrid { why: "because".to_owned() },
    ];
    let statuses: Vec<&str> = std::iter::once("ok").chain(all.iter().map(Trouble::status)).collect();
    assert_eq!(statuses, Trouble::STATUSES);
    let has = |trouble: &Trouble, words: &[&str]| {
        let text = trouble.to_string();
        assert!(words.iter().all(|w| text.contains(w)), "{text}: {words:?}");
    };
    has(&all[1], &["2 observed", "at least 5", "simpler trend"]);
    has(&all[2], &["3.25"]);
    has(&all[3], &["grid point 7", "infinite"]);
    has(&all[4], &["1e300", "grid point 7", "rescale"]);
    has(&all[5], &["-3.25", "grid point 7", "transform => 'none'"]);
    has(&all[6], &["'price'", "grid point 7", "fill it in"]);
    has(&all[7], &["'price'", "step 7", "append rows"]);
    has(&all[8], &["'price'", "leave it out"]);
    has(&all[12], &["2020-02-03", "aggregate"]);
    has(&all[13], &["7 row"]);
    has(&all[14], &["2020-02-03", "weeks", "every =>"]);
    has(&all[15], &["2020-02-03", "2020-02-10", "new rows"]);
    has(&all[16], &["price has 3", "2 times"]);
    has(&all[17], &["a reason", "fit the series again"]);
    has(&all[18], &["because", "every =>"]);
}
