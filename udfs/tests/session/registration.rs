//! Sessions have the functions however they were made.

use datafusion::execution::SessionStateBuilder;
use datafusion::prelude::SessionContext;

use crate::support::*;

const STATES: &str = "SELECT structural_components(week, units, {'season': 4}) OVER (PARTITION BY region, product) AS s FROM sales";

#[tokio::test]
async fn a_session_that_is_extended_has_them() {
    let state = stillwell::extend(SessionStateBuilder::new().with_default_features()).build();
    let context = SessionContext::new_with_state(state);
    add_table(&context, "sales", vec![vec![sales(24)]]);
    assert_eq!(rows(&context, STATES).await.num_rows(), 6 * 24);
}

#[tokio::test]
async fn the_order_of_building_does_not_matter() {
    let state = stillwell::extend(SessionStateBuilder::new()).with_default_features().build();
    let context = SessionContext::new_with_state(state);
    add_table(&context, "sales", vec![vec![sales(24)]]);
    assert_eq!(rows(&context, STATES).await.num_rows(), 6 * 24);
}

#[tokio::test]
async fn a_host_with_a_planner_of_its_own_has_them() {
    let context = SessionContext::new();
    stillwell::register_relations(&context).unwrap();
    add_table(&context, "sales", vec![vec![sales(24)]]);
    assert_eq!(rows(&context, STATES).await.num_rows(), 6 * 24);
}

#[tokio::test]
async fn registering_twice_adds_nothing() {
    let context = session();
    let count = |context: &SessionContext| {
        let state = context.state();
        (state.scalar_functions().len(), state.aggregate_functions().len(), state.window_functions().len())
    };
    let before = count(&context);
    stillwell::register(&context).unwrap();
    assert_eq!(count(&context), before);
}
