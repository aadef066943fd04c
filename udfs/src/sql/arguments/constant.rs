//! Arguments that are values: literals, constant expressions, parameters of prepared statements.
//!
//! Constants are evaluated while the query is planned, so that mistakes in them come early. A parameter
//! (`$1`) stays an expression until the statement is executed.

use datafusion::arrow::array::Array;
use datafusion::arrow::datatypes::{DataType, IntervalMonthDayNano};
use datafusion::common::tree_node::TreeNode;
use datafusion::common::{DFSchema, ScalarValue};
use datafusion::error::Result;
use datafusion::logical_expr::Expr;
use datafusion::logical_expr::simplify::SimplifyContext;
use datafusion::optimizer::simplify_expressions::ExprSimplifier;

/// The value of an argument as written: one expression, or a list of them in parentheses or brackets.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Hash)]
pub(crate) struct Given {
    exprs: Vec<Expr>,
    list: bool,
}

impl Given {
    /// `list`: written as a list, be it of one item.
    pub(crate) fn new(exprs: Vec<Expr>, list: bool) -> Self {
        Self { exprs, list }
    }

    /// Its expressions.
    pub(crate) fn exprs(&self) -> &[Expr] {
        &self.exprs
    }

    /// The same shape with the next expressions of `exprs`, as many as there were.
    pub(crate) fn with_exprs(&self, exprs: &mut impl Iterator<Item = Expr>) -> Self {
        Self { exprs: exprs.take(self.exprs.len()).collect(), list: self.list }
    }

    /// Everything that can be evaluated already, evaluated.
    ///
    /// # Errors
    /// Expressions that are neither constant nor a parameter.
    pub(crate) fn fold(self) -> Result<Self, NotConstant> {
        let exprs = self.exprs.into_iter().map(fold).collect::<Result<_, _>>()?;
        Ok(Self { exprs, list: self.list })
    }

    /// The value; `None` while it depends on a parameter. Only for folded arguments.
    pub(crate) fn value(&self) -> Option<Value> {
        let value = |expr: &Expr| match expr {
            Expr::Literal(scalar, _) => Some(Value::from_scalar(scalar)),
            _ => None,
        };
        let mut values = self.exprs.iter().map(value).collect::<Option<Vec<_>>>()?;
        if self.list { Some(Value::List(values)) } else { values.pop() }
    }
}

/// An expression that was to be a constant and is not.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct NotConstant {
    /// The expression as text.
    pub(crate) expr: String,
}

/// A literal, if the expression is constant; itself, if it holds a parameter.
fn fold(expr: Expr) -> Result<Expr, NotConstant> {
    let expr = expr.unalias();
    if matches!(expr, Expr::Literal(..)) {
        return Ok(expr);
    }
    let parameter = expr.exists(|part| Ok(matches!(part, Expr::Placeholder(_))));
    if parameter.unwrap_or(false) {
        return Ok(expr);
    }
    let not_constant = || NotConstant { expr: expr.human_display().to_string() };
    let simplifier = ExprSimplifier::new(SimplifyContext::default());
    let folded = simplifier
        .coerce(expr.clone(), &DFSchema::empty())
        .and_then(|coerced| simplifier.simplify(coerced))
        .map_err(|_| not_constant())?;
    if matches!(folded, Expr::Literal(..)) { Ok(folded) } else { Err(not_constant()) }
}

/// A value as far as arguments care.
#[derive(Debug, Clone, PartialEq)]
pub(crate) enum Value {
    Null,
    Flag(bool),
    Whole(i64),
    Number(f64),
    Text(String),
    Interval(IntervalMonthDayNano),
    List(Vec<Self>),
    Fields(Vec<(String, Self)>),
    /// Anything else, by the name of its type.
    Other(String),
}

impl Value {
    fn from_scalar(scalar: &ScalarValue) -> Self {
        if scalar.is_null() {
            return Self::Null;
        }
        match scalar {
            ScalarValue::Boolean(Some(flag)) => Self::Flag(*flag),
            ScalarValue::Utf8(Some(text))
            | ScalarValue::LargeUtf8(Some(text))
            | ScalarValue::Utf8View(Some(text)) => Self::Text(text.clone()),
            ScalarValue::IntervalMonthDayNano(Some(interval)) => Self::Interval(*interval),
            ScalarValue::IntervalYearMonth(Some(months)) => {
                Self::Interval(IntervalMonthDayNano::new(*months, 0, 0))
            }
            ScalarValue::IntervalDayTime(Some(span)) => Self::Interval(IntervalMonthDayNano::new(
                0,
                span.days,
                i64::from(span.milliseconds) * 1_000_000,
            )),
            ScalarValue::Dictionary(_, value) => Self::from_scalar(value),
            ScalarValue::List(list) => Self::from_items(&list.value(0)),
            ScalarValue::LargeList(list) => Self::from_items(&list.value(0)),
            ScalarValue::FixedSizeList(list) => Self::from_items(&list.value(0)),
            ScalarValue::Struct(fields) => fields
                .fields()
                .iter()
                .zip(fields.columns())
                .map(|(field, column)| Some((field.name().clone(), Self::from_item(column, 0)?)))
                .collect::<Option<_>>()
                .map_or_else(|| Self::Other("struct".to_string()), Self::Fields),
            other => Self::from_number(other),
        }
    }

    fn from_number(scalar: &ScalarValue) -> Self {
        let data_type = scalar.data_type();
        let cast = |to: &DataType| scalar.cast_to(to).ok();
        if data_type.is_integer()
            && let Some(ScalarValue::Int64(Some(whole))) = cast(&DataType::Int64)
        {
            return Self::Whole(whole);
        }
        match cast(&DataType::Float64) {
            Some(ScalarValue::Float64(Some(number))) if data_type.is_numeric() => Self::Number(number),
            _ => Self::Other(data_type.to_string()),
        }
    }

    fn from_items(items: &dyn Array) -> Self {
        let values = (0..items.len()).map(|at| Self::from_item(items, at)).collect::<Option<Vec<_>>>();
        values.map_or_else(|| Self::Other(items.data_type().to_string()), Self::List)
    }

    fn from_item(items: &dyn Array, at: usize) -> Option<Self> {
        ScalarValue::try_from_array(items, at).ok().map(|scalar| Self::from_scalar(&scalar))
    }

    /// As a number, from a whole number too.
    pub(crate) fn as_number(&self) -> Option<f64> {
        match self {
            Self::Whole(whole) => Some(*whole as f64),
            Self::Number(number) => Some(*number),
            _ => None,
        }
    }

    /// As a count, from a number without fraction too (`12.0`).
    pub(crate) fn as_count(&self) -> Option<usize> {
        match self {
            Self::Whole(whole) => usize::try_from(*whole).ok(),
            Self::Number(number) if *number >= 0.0 && number.fract() == 0.0 && *number < 1e15 => {
                Some(*number as usize)
            }
            _ => None,
        }
    }

    /// The items of a list, or the value itself as the only one.
    pub(crate) fn as_items(&self) -> &[Self] {
        match self {
            Self::List(items) => items,
            one => std::slice::from_ref(one),
        }
    }
}

/// An interval as it may be written again: `1 month`, `7 days`, `15 minutes`.
fn in_words(interval: IntervalMonthDayNano) -> String {
    let mut parts = Vec::new();
    let mut part = |count: i64, unit: &str| {
        if count != 0 {
            parts.push(format!("{count} {unit}{}", if count.abs() == 1 { "" } else { "s" }));
        }
    };
    part(interval.months.into(), "month");
    part(interval.days.into(), "day");
    let mut rest = interval.nanoseconds;
    for (nanoseconds, unit) in [
        (3_600_000_000_000, "hour"),
        (60_000_000_000, "minute"),
        (1_000_000_000, "second"),
        (1, "nanosecond"),
    ] {
        part(rest / nanoseconds, unit);
        rest %= nanoseconds;
    }
    if parts.is_empty() { "0 days".to_string() } else { parts.join(" ") }
}

impl std::fmt::Display for Value {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let list = |items: &mut dyn Iterator<Item = String>| items.collect::<Vec<_>>().join(", ");
        match self {
            Self::Null => write!(f, "NULL"),
            Self::Flag(flag) => write!(f, "{flag}"),
            Self::Whole(whole) => write!(f, "{whole}"),
            Self::Number(number) => write!(f, "{number}"),
            Self::Text(text) => write!(f, "'{text}'"),
            Self::Interval(interval) => write!(f, "{}", in_words(*interval)),
            Self::List(items) => write!(f, "({})", list(&mut items.iter().map(ToString::to_string))),
            Self::Fields(fields) => {
                write!(
                    f,
                    "{{{}}}",
                    list(&mut fields.iter().map(|(name, value)| format!("'{name}': {value}")))
                )
            }
            Self::Other(data_type) => write!(f, "of type {data_type}"),
        }
    }
}

#[cfg(test)]
mod tests {
    use datafusion::common::Column;
    use datafusion::logical_expr::{lit, placeholder};
    use datafusion::prelude::named_struct;

    use super::*;

    fn value(expr: Expr) -> Option<Value> {
        Given::new(vec![expr], false).fold().unwrap().value()
    }

    #[test]
    fn constants_are_evaluated() {
        assert_eq!(value(lit(6_i64) + lit(7_i64)), Some(Value::Whole(13)));
        assert_eq!(value(lit(1_i64) + lit(0.5)), Some(Value::Number(1.5)));
        assert_eq!(value(lit("log")), Some(Value::Text("log".to_string())));
        assert_eq!(value(lit(ScalarValue::Decimal128(Some(5218), 4, 2))), Some(Value::Number(52.18)));
    }

    #[test]
    fn a_struct_is_a_list_of_names_and_values() {
        let known = named_struct(vec![lit("irregular"), lit(0.0), lit("level"), lit(2_i64)]);
        let fields =
            vec![("irregular".to_string(), Value::Number(0.0)), ("level".to_string(), Value::Whole(2))];
        assert_eq!(value(known), Some(Value::Fields(fields)));
    }

    #[test]
    fn a_parameter_waits() {
        let given = Given::new(vec![lit(7_i64), placeholder("$1")], true).fold().unwrap();
        assert_eq!(given.value(), None);
        let given = given.with_exprs(&mut vec![lit(7_i64), lit(52.18)].into_iter());
        assert_eq!(given.value(), Some(Value::List(vec![Value::Whole(7), Value::Number(52.18)])));
    }

    #[test]
    fn a_column_is_not_a_constant() {
        let column = Expr::Column(Column::from_name("week"));
        assert_eq!(Given::new(vec![column], false).fold().unwrap_err().expr, "week");
    }

    #[test]
    fn numbers_without_fraction_are_counts() {
        assert_eq!(Value::Number(12.0).as_count(), Some(12));
        assert_eq!(Value::Number(12.5).as_count(), None);
        assert_eq!(Value::Whole(-1).as_count(), None);
    }

    #[test]
    fn intervals_read_like_sql() {
        let shown = |months, days, nanoseconds| {
            Value::Interval(IntervalMonthDayNano::new(months, days, nanoseconds)).to_string()
        };
        assert_eq!(shown(1, 0, 0), "1 month");
        assert_eq!(shown(0, 7, 0), "7 days");
        assert_eq!(shown(0, 0, 5_400_000_000_000), "1 hour 30 minutes");
        assert_eq!(shown(0, 0, 0), "0 days");
    }

    #[test]
    fn values_read_like_sql() {
        let list = Value::List(vec![Value::Whole(7), Value::Number(52.18), Value::Text("auto".to_string())]);
        assert_eq!(list.to_string(), "(7, 52.18, 'auto')");
    }
}
