//! Conditions that may not go below the function although they read nothing but keys.
//!
//! The optimizer asks which columns keep a predicate above a node, and pushes whatever reads none of these. So
//! `WHERE random() < 0.1`, which reads no column at all, ends up below the function and takes nine tenths of each
//! history away instead of nine tenths of the rows of the result. The node therefore looks at what was pushed and
//! keeps such conditions; the planner puts them back above the operator.

use std::sync::Arc;

use datafusion::error::Result;
use datafusion::logical_expr::utils::{conjunction, split_conjunction_owned};
use datafusion::logical_expr::{Expr, Filter, LogicalPlan};

/// The input without the conditions that answer anew for each row, if `input` is `before` under a filter that the
/// optimizer has put there; and these conditions.
///
/// # Errors
/// None that a query could cause; the engine's own signature.
pub(super) fn separate(input: LogicalPlan, before: &LogicalPlan) -> Result<(LogicalPlan, Vec<Expr>)> {
    let LogicalPlan::Filter(Filter { predicate, input: below, .. }) = &input else {
        return Ok((input, Vec::new()));
    };
    if !predicate.is_volatile() || below.as_ref() != before {
        return Ok((input, Vec::new()));
    }
    let (kept, pushed): (Vec<_>, Vec<_>) =
        split_conjunction_owned(predicate.clone()).into_iter().partition(Expr::is_volatile);
    let input = match conjunction(pushed) {
        Some(predicate) => LogicalPlan::Filter(Filter::try_new(predicate, Arc::clone(below))?),
        None => before.clone(),
    };
    Ok((input, kept))
}

#[cfg(test)]
mod tests {
    use datafusion::functions::math::expr_fn::random;
    use datafusion::logical_expr::{LogicalPlanBuilder, col, lit};

    use super::*;

    fn values() -> LogicalPlan {
        LogicalPlanBuilder::values(vec![vec![lit(1)], vec![lit(2)]]).unwrap().build().unwrap()
    }

    fn filtered(predicate: Expr) -> LogicalPlan {
        LogicalPlanBuilder::from(values()).filter(predicate).unwrap().build().unwrap()
    }

    #[test]
    fn what_answers_anew_for_each_row_is_kept() {
        let of_key = col("column1").gt(lit(1));
        let of_chance = random().lt(lit(0.5));
        let (input, kept) = separate(filtered(of_chance.clone().and(of_key.clone())), &values()).unwrap();
        assert_eq!((input, kept), (filtered(of_key), vec![of_chance.clone()]));
        let (input, kept) = separate(filtered(of_chance.clone()), &values()).unwrap();
        assert_eq!((input, kept), (values(), vec![of_chance]));
    }

    #[test]
    fn a_filter_of_the_query_itself_stays_where_it_is() {
        let own = filtered(random().lt(lit(0.5)));
        assert_eq!(separate(own.clone(), &own).unwrap(), (own, Vec::new()));
    }
}
