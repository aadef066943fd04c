//! The arguments that name columns of `data`.

use datafusion::arrow::datatypes::DataType;
use datafusion::common::tree_node::TreeNode;
use datafusion::common::{Column, DFSchema};
use datafusion::error::Result;
use datafusion::logical_expr::planner::RelationPlannerContext;
use datafusion::logical_expr::{Expr, ExprSchemable, LogicalPlan, LogicalPlanBuilder};
use datafusion::sql::sqlparser::ast;

use crate::columns::numbers;
use crate::columns::time::TimeKind;
use crate::sql::arguments::call::{self, Item};
use crate::sql::error::bad_argument;
use crate::sql::function::Function;
use crate::sql::node::Driver;

/// Reads expressions over one input and collects what has to be computed below the node.
pub(super) struct ColumnReader<'a> {
    function: Function,
    input: LogicalPlan,
    context: &'a mut dyn RelationPlannerContext,
    /// Bare columns of the input that are used.
    bare: Vec<Column>,
    /// Computed columns, aliased.
    computed: Vec<(Expr, String)>,
}

impl<'a> ColumnReader<'a> {
    pub(super) fn new(
        function: Function,
        input: LogicalPlan,
        context: &'a mut dyn RelationPlannerContext,
    ) -> Self {
        Self { function, input, context, bare: Vec::new(), computed: Vec::new() }
    }

    /// `per`: keys of any type that can be sorted.
    pub(super) fn keys(&mut self, per: Option<ast::Expr>) -> Result<Vec<Column>> {
        let mut keys = Vec::new();
        for item in self.items("per", per)? {
            let (expr, _) = self.resolve("per", &item)?;
            let key = match (item.name, &expr) {
                (Some(name), Expr::Column(column)) if column.name != name => self.computed_column(expr, name),
                (Some(name), _) => self.column(expr, name),
                (None, _) => self.column(expr, plain_name(&item.expr)),
            };
            if keys.contains(&key) {
                return Err(bad_argument(self.function, "per", format!("names '{}' twice", key.name)));
            }
            keys.push(key);
        }
        Ok(keys)
    }

    /// `at`: a date, a timestamp or an integer.
    pub(super) fn at(&mut self, at: ast::Expr) -> Result<Column> {
        self.one("at", at, |data_type| {
            TimeKind::try_new(data_type).map(drop).map_err(|error| error.to_string())
        })
    }

    /// `observed`: a number.
    pub(super) fn observed(&mut self, observed: ast::Expr) -> Result<Column> {
        self.one("observed", observed, |data_type| match numbers::is_number(data_type) {
            true => Ok(()),
            false => Err(format!("takes {}, but has type {data_type}", numbers::OBSERVED_TYPES)),
        })
    }

    /// `drivers` or `drifting_drivers`: numbers and flags, each with a name.
    pub(super) fn drivers(
        &mut self,
        argument: &'static str,
        drivers: Option<ast::Expr>,
    ) -> Result<Vec<Driver>> {
        let mut read = Vec::new();
        for item in self.items(argument, drivers)? {
            let (expr, data_type) = self.resolve(argument, &item)?;
            let name = match (&item.name, &expr) {
                (Some(name), _) => name.clone(),
                (None, Expr::Column(column)) => column.name.clone(),
                (None, _) => plain_name(&item.expr),
            };
            if !numbers::is_driver(&data_type) {
                let what = format!("takes {}, but '{name}' has type {data_type}", numbers::DRIVER_TYPES);
                return Err(bad_argument(self.function, argument, what));
            }
            let column = self.column(expr, item.expr.to_string());
            read.push(Driver { name, column });
        }
        Ok(read)
    }

    /// The input with the computed columns; itself, if there are none.
    pub(super) fn input(self) -> Result<LogicalPlan> {
        if self.computed.is_empty() {
            return Ok(self.input);
        }
        let bare = self.bare.into_iter().map(Expr::Column);
        let computed = self.computed.into_iter().map(|(expr, name)| expr.alias(name));
        LogicalPlanBuilder::from(self.input).project(bare.chain(computed))?.build()
    }

    fn items(&self, argument: &str, list: Option<ast::Expr>) -> Result<Vec<Item>> {
        let Some(list) = list else { return Ok(Vec::new()) };
        let items = call::items(list, &|ident| self.context.normalize_ident(ident));
        items.map_err(|what| bad_argument(self.function, argument, what))
    }

    /// One column of a type that `check` accepts.
    fn one(
        &mut self,
        argument: &'static str,
        expr: ast::Expr,
        check: impl FnOnce(&DataType) -> Result<(), String>,
    ) -> Result<Column> {
        let label = expr.to_string();
        let (expr, data_type) = self.resolve(argument, &Item { name: None, expr })?;
        check(&data_type).map_err(|what| bad_argument(self.function, argument, what))?;
        Ok(self.column(expr, label))
    }

    /// The logical expression and its type.
    fn resolve(&mut self, argument: &str, item: &Item) -> Result<(Expr, DataType)> {
        if matches!(item.expr, ast::Expr::Tuple(_) | ast::Expr::Array(_)) {
            let what = format!("takes one column here, not the list {}", item.expr);
            return Err(bad_argument(self.function, argument, what));
        }
        let schema: &DFSchema = self.input.schema();
        let expr = self.context.sql_to_expr(item.expr.clone(), schema)?;
        let foreign = |part: &Expr| {
            Ok(matches!(
                part,
                Expr::AggregateFunction(_)
                    | Expr::WindowFunction(_)
                    | Expr::ScalarSubquery(_)
                    | Expr::Exists(_)
                    | Expr::InSubquery(_)
                    | Expr::OuterReferenceColumn(..)
                    | Expr::Unnest(_)
            ))
        };
        if expr.exists(foreign)? {
            let what = format!("takes columns of data; compute '{}' inside the query of data", item.expr);
            return Err(bad_argument(self.function, argument, what));
        }
        let data_type = expr.get_type(schema)?;
        Ok((expr, data_type))
    }

    /// The column the node sees: the bare one, or a computed one with this name.
    fn column(&mut self, expr: Expr, name: String) -> Column {
        if let Expr::Column(column) = expr {
            if !self.bare.contains(&column) {
                self.bare.push(column.clone());
            }
            return column;
        }
        self.computed_column(expr, name)
    }

    fn computed_column(&mut self, expr: Expr, name: String) -> Column {
        if !self.computed.iter().any(|(_, other)| *other == name) {
            self.computed.push((expr, name.clone()));
        }
        Column::from_name(name)
    }
}

/// A name for an expression that was given none: its letters and digits, `ln(price)` becoming `ln_price`.
fn plain_name(expr: &ast::Expr) -> String {
    let text = match expr {
        ast::Expr::CompoundIdentifier(parts) => {
            parts.last().map_or_else(String::new, |last| last.value.clone())
        }
        other => other.to_string(),
    };
    let plain = text.split(|c: char| !c.is_alphanumeric()).filter(|word| !word.is_empty());
    plain.collect::<Vec<_>>().join("_").to_lowercase()
}

#[cfg(test)]
mod tests {
    use datafusion::sql::sqlparser::dialect::GenericDialect;
    use datafusion::sql::sqlparser::parser::Parser;

    use super::*;

    fn name(sql: &str) -> String {
        plain_name(&Parser::new(&GenericDialect {}).try_with_sql(sql).unwrap().parse_expr().unwrap())
    }

    #[test]
    fn expressions_get_plain_names() {
        assert_eq!(name("ln(price)"), "ln_price");
        assert_eq!(name("price / list_price"), "price_list_price");
        assert_eq!(name("Temperature - 18.5"), "temperature_18_5");
    }
}
