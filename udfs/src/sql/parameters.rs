//! Types for the parameters of prepared statements.
//!
//! `PREPARE p AS SELECT … horizon => $1` gives no types, and the engine drops parameters whose type it
//! cannot infer. The argument knows what it takes.

use std::sync::Arc;

use datafusion::arrow::datatypes::{DataType, Field, IntervalUnit};
use datafusion::common::tree_node::{Transformed, TreeNode};
use datafusion::logical_expr::Expr;
use datafusion::logical_expr::expr::Placeholder;

use super::arguments::Argument;

/// The same expression, with untyped parameters given the type that the argument takes most often.
pub(crate) fn typed(expr: Expr, argument: &Argument) -> Expr {
    let Some(data_type) = usual_type(argument.name) else { return expr };
    expr.clone()
        .transform(|part| {
            Ok(match part {
                Expr::Placeholder(Placeholder { id, field: None }) => {
                    let field = Arc::new(Field::new(&id, data_type.clone(), true));
                    Transformed::yes(Expr::Placeholder(Placeholder::new_with_field(id, Some(field))))
                }
                other => Transformed::no(other),
            })
        })
        .map_or(expr, |transformed| transformed.data)
}

/// A prepared statement that wants another type can say so: `PREPARE p(VARCHAR) AS …`.
fn usual_type(argument: &str) -> Option<DataType> {
    Some(match argument {
        "horizon" | "harmonics" | "autoregression" => DataType::Int64,
        "season" | "period" | "coverage" | "h" | "d" => DataType::Float64,
        "trend" | "on_trouble" | "estimate" => DataType::Utf8,
        "fixed_season" | "cycle" => DataType::Boolean,
        "every" => DataType::Interval(IntervalUnit::MonthDayNano),
        _ => return None,
    })
}
