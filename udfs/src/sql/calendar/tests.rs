//! What holds for all functions of the calendar.

use std::fs;
use std::path::Path;

use datafusion::prelude::SessionContext;

use super::*;

/// The records of these functions, which are checked by the workspace's tests.
fn records() -> String {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("../tests/slt/calendar.slt");
    fs::read_to_string(path).unwrap()
}

#[test]
fn every_example_is_a_record() {
    let records = records();
    for function in functions() {
        let documentation = function.documentation().unwrap();
        let example = documentation.sql_example.as_ref().unwrap();
        assert!(
            example.contains(&format!("{}(", function.name())),
            "the example of {} calls it",
            function.name()
        );
        assert!(records.contains(&format!("\n{example}\n----\n")), "no record of calendar.slt is\n{example}");
    }
}

#[test]
fn a_reference_can_be_written_from_the_documentation() {
    let names: Vec<String> = functions().iter().map(|function| function.name().to_string()).collect();
    for function in functions() {
        let documentation = function.documentation().unwrap();
        let parameters = function.signature().parameter_names.clone().unwrap();
        let described = documentation.arguments.clone().unwrap();
        assert_eq!(described.iter().map(|(name, _)| name.clone()).collect::<Vec<_>>(), parameters);
        for related in documentation.related_udfs.iter().flatten() {
            assert!(
                names.contains(related) && related != function.name(),
                "{} names {related}",
                function.name()
            );
        }
    }
    let syntax = |name: &str| {
        let function = functions().into_iter().find(|function| function.name() == name).unwrap();
        function.documentation().unwrap().syntax_example.clone()
    };
    assert_eq!(syntax("days_in_month"), "days_in_month(at)");
    assert_eq!(syntax("working_days"), "working_days(at, every [, holidays])");
    assert_eq!(syntax("has_date_in_period"), "has_date_in_period(at, every, dates)");
}

#[tokio::test]
async fn both_ways_into_a_session_bring_them() {
    use datafusion::execution::SessionStateBuilder;

    let registered = SessionContext::new();
    crate::register(&registered).unwrap();
    let builder = SessionStateBuilder::new().with_default_features();
    let extended = SessionContext::new_with_state(crate::extend(builder).build());
    let bare = SessionContext::new_with_state(
        crate::extend(SessionStateBuilder::new()).with_default_features().build(),
    );
    for context in [registered, extended, bare] {
        for function in functions() {
            assert!(context.state().scalar_functions().contains_key(function.name()), "{}", function.name());
        }
        let count =
            context.sql("SELECT days_in_month(DATE '2024-02-10')").await.unwrap().count().await.unwrap();
        assert_eq!(count, 1);
    }
}
