//! The scalar, aggregate and window functions of this crate: the lists from which sessions get them and from
//! which the reference is made. The order is that of the reference.
//!
//! Functions that fit report to the counter of their session through a [`Watch`].
//!
//! Relation functions are not here: they are [`Function`](super::function::Function), and a planner knows them.

use std::sync::Arc;

use datafusion::logical_expr::{AggregateUDF, ScalarUDF, WindowUDF};
use datafusion::prelude::SessionContext;

use super::progress::Progress;
use super::structural_components::StructuralComponents;
use super::watch::Watch;
use super::{calendar, fits};

/// Scalar functions, one line per folder that has some.
pub(crate) fn scalars(watch: &Watch) -> Vec<ScalarUDF> {
    let folders: Vec<Vec<ScalarUDF>> = vec![fits::scalars(watch), calendar::functions()];
    folders.into_iter().flatten().collect()
}

/// Aggregate functions.
pub(crate) fn aggregates(watch: &Watch) -> Vec<AggregateUDF> {
    fits::aggregates(watch)
}

/// Window functions.
pub(crate) fn windows(watch: &Watch) -> Vec<WindowUDF> {
    vec![WindowUDF::from(StructuralComponents::new(watch.clone()))]
}

/// Puts all of them into a session; those that are there already are replaced by themselves.
pub(crate) fn register_functions(context: &SessionContext) {
    let watch = Watch::new(context.state().config().get_extension::<Progress>());
    scalars(&watch).into_iter().for_each(|function| context.register_udf(function));
    aggregates(&watch).into_iter().for_each(|function| context.register_udaf(function));
    windows(&watch).into_iter().for_each(|function| context.register_udwf(function));
}

/// Adds `functions` to a list of a session that is still being built.
pub(crate) fn add_to<F>(list: &mut Option<Vec<Arc<F>>>, functions: Vec<F>) {
    list.get_or_insert_default().extend(functions.into_iter().map(Arc::new));
}

#[cfg(test)]
mod tests {
    use std::collections::BTreeSet;

    use super::*;

    #[test]
    fn names_are_ours_alone() {
        let watch = Watch::default();
        let names = (scalars(&watch).iter().map(|function| function.name().to_string()))
            .chain(aggregates(&watch).iter().map(|function| function.name().to_string()))
            .chain(windows(&watch).iter().map(|function| function.name().to_string()))
            .collect::<Vec<_>>();
        assert_eq!(names.iter().collect::<BTreeSet<_>>().len(), names.len(), "{names:?}");
        let state = SessionContext::new().state();
        for name in names {
            assert!(!state.scalar_functions().contains_key(&name), "the engine has a scalar {name}");
            assert!(!state.aggregate_functions().contains_key(&name), "the engine has an aggregate {name}");
            assert!(!state.window_functions().contains_key(&name), "the engine has a window function {name}");
        }
    }
}
