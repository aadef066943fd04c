//! A call as written: which argument got which piece of SQL.
//!
//! Named arguments arrive in two shapes, depending on the dialect of the session; one unnamed argument may
//! stand first and is `data`. Lists are tuples, `(a, b)`, or arrays, `[a, b]`; `{'name': expression}`,
//! `named_struct('name', expression)` and `struct(expression AS name)` name their items.

use datafusion::error::Result;
use datafusion::sql::sqlparser::ast::{
    Array, DictionaryField, Expr, Function as SqlFunction, FunctionArg, FunctionArgExpr, FunctionArguments,
    Ident, ObjectName, ObjectNamePart, Value, ValueWithSpan,
};

use super::suggest::valid_and_nearest;
use super::{ARGUMENTS, Argument, REQUIRED, Takes, arguments_of};
use crate::sql::error::{bad_argument, bad_call};
use crate::sql::function::Function;

/// The arguments of one call, each at most once.
#[derive(Debug)]
pub(crate) struct Call {
    function: Function,
    given: Vec<(&'static Argument, Expr)>,
}

impl Call {
    /// Sorts the arguments. `normalize` spells an identifier as the session does (unquoted: lower case).
    ///
    /// # Errors
    /// Unknown names, names given twice, unnamed arguments after the first, missing ones.
    pub(crate) fn read(
        function: Function,
        args: Vec<FunctionArg>,
        normalize: &dyn Fn(Ident) -> String,
    ) -> Result<Self> {
        let mut call = Self { function, given: Vec::new() };
        for (at, arg) in args.into_iter().enumerate() {
            let (name, value) = match arg {
                FunctionArg::Named { name, arg, .. } => (normalize(name), arg),
                FunctionArg::ExprNamed { name: Expr::Identifier(name), arg, .. } => (normalize(name), arg),
                FunctionArg::ExprNamed { name, .. } => {
                    return Err(bad_call(function, format!("'{name}' is not the name of an argument")));
                }
                FunctionArg::Unnamed(arg) if at == 0 => ("data".to_string(), arg),
                FunctionArg::Unnamed(arg) => {
                    let what = format!(
                        "'{arg}' has no name; only data may stand first without one, write name => value"
                    );
                    return Err(bad_call(function, what));
                }
            };
            let argument = find(function, &name)?;
            let FunctionArgExpr::Expr(value) = value else {
                return Err(bad_argument(function, argument.name, format!("does not take '{value}'")));
            };
            if call.given.iter().any(|(other, _)| other.name == argument.name) {
                return Err(bad_argument(function, argument.name, "is given twice"));
            }
            call.given.push((argument, value));
        }
        let given = |argument: &Argument| call.given.iter().any(|(other, _)| other.name == argument.name);
        let mut missing =
            arguments_of(function).filter(|argument| argument.default == REQUIRED && !given(argument));
        match missing.next() {
            Some(Argument { name, values, .. }) => {
                Err(bad_argument(function, name, format!("is required: {name} => {values}")))
            }
            None => Ok(call),
        }
    }

    /// Takes the SQL of one argument out.
    pub(crate) fn take(&mut self, name: &str) -> Option<Expr> {
        let at = self.given.iter().position(|(argument, _)| argument.name == name)?;
        Some(self.given.remove(at).1)
    }

    /// Takes the SQL of an argument out that [`Call::read`] has seen.
    pub(crate) fn take_required(&mut self, name: &str) -> Result<Expr> {
        self.take(name).ok_or_else(|| bad_argument(self.function, name, "is required"))
    }

    /// The values, in the order of [`ARGUMENTS`], each as one expression or a list.
    pub(crate) fn values(self) -> Result<Vec<(&'static Argument, Shape)>> {
        let mut values = Vec::new();
        for (argument, expr) in self.given {
            if matches!(argument.takes, Takes::Value | Takes::Constant) {
                if let Expr::Identifier(word) = &expr {
                    // Quotes help only where the argument knows words.
                    let quoted = match argument.values.contains('\'') {
                        true => format!("{} => '{word}' with quotes, if that text is meant; ", argument.name),
                        false => String::new(),
                    };
                    let what = format!(
                        "takes a value, not a column such as {word} ({quoted}it takes {})",
                        argument.values
                    );
                    return Err(bad_argument(self.function, argument.name, what));
                }
                values.push((argument, Shape::of(expr)));
            }
        }
        values.sort_by_key(|(argument, _)| ARGUMENTS.iter().position(|other| other.name == argument.name));
        Ok(values)
    }
}

/// The argument of this name, or an error that helps.
fn find(function: Function, name: &str) -> Result<&'static Argument> {
    if let Some(argument) = arguments_of(function).find(|argument| argument.name == name) {
        return Ok(argument);
    }
    if let Some(argument) = ARGUMENTS.iter().find(|argument| argument.name == name) {
        let homes = argument.functions.iter().map(|home| home.name()).collect::<Vec<_>>().join(", ");
        return Err(bad_argument(function, name, format!("belongs to {homes}; leave it out here")));
    }
    let valid = arguments_of(function).map(|argument| argument.name).collect::<Vec<_>>();
    Err(bad_call(function, format!("there is no argument '{name}'; {}", valid_and_nearest(name, &valid))))
}

/// One value, or several in a list.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Shape {
    pub(crate) exprs: Vec<Expr>,
    /// Written as a list, be it of one item.
    pub(crate) list: bool,
}

impl Shape {
    fn of(expr: Expr) -> Self {
        match expr {
            Expr::Tuple(exprs) | Expr::Array(Array { elem: exprs, .. }) => Self { exprs, list: true },
            Expr::Nested(inner) => Self::of(*inner),
            one => Self { exprs: vec![one], list: false },
        }
    }
}

/// An item of a list of columns, with the name it was given, if any.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Item {
    pub(crate) name: Option<String>,
    pub(crate) expr: Expr,
}

/// The items of a list of columns.
///
/// # Errors
/// A malformed list, as text that continues "argument 'x' …".
pub(crate) fn items(expr: Expr, normalize: &dyn Fn(Ident) -> String) -> Result<Vec<Item>, String> {
    let plain = |exprs: Vec<Expr>| exprs.into_iter().map(|expr| Item { name: None, expr }).collect();
    match expr {
        Expr::Dictionary(fields) => Ok(fields
            .into_iter()
            .map(|DictionaryField { key, value }| Item { name: Some(key.value), expr: *value })
            .collect()),
        Expr::Struct { values, .. } => Ok(values
            .into_iter()
            .map(|value| match value {
                Expr::Named { expr, name } => Item { name: Some(normalize(name)), expr: *expr },
                expr => Item { name: None, expr },
            })
            .collect()),
        Expr::Function(function) if is_named(&function.name, "named_struct") => named_struct(function),
        other => Ok(plain(Shape::of(other).exprs)),
    }
}

/// `named_struct('a', x, 'b', y)`.
fn named_struct(function: SqlFunction) -> Result<Vec<Item>, String> {
    let wrong = || "needs names and expressions in turn: named_struct('name', expression, …)".to_string();
    let mut exprs = arguments(function.args).ok_or_else(wrong)?.into_iter();
    let mut items = Vec::new();
    while let Some(name) = exprs.next() {
        let name = text_of(&name).ok_or_else(wrong)?;
        items.push(Item { name: Some(name), expr: exprs.next().ok_or_else(wrong)? });
    }
    Ok(items)
}

/// True if `name` is this single identifier, in any case.
pub(crate) fn is_named(name: &ObjectName, wanted: &str) -> bool {
    matches!(name.0.as_slice(), [ObjectNamePart::Identifier(ident)] if ident.value.eq_ignore_ascii_case(wanted))
}

/// Unnamed arguments of a call in an expression.
pub(crate) fn arguments(args: FunctionArguments) -> Option<Vec<Expr>> {
    match args {
        FunctionArguments::List(list) => list
            .args
            .into_iter()
            .map(|arg| match arg {
                FunctionArg::Unnamed(FunctionArgExpr::Expr(expr)) => Some(expr),
                _ => None,
            })
            .collect(),
        FunctionArguments::None | FunctionArguments::Subquery(_) => None,
    }
}

/// The text of a string literal.
pub(crate) fn text_of(expr: &Expr) -> Option<String> {
    match expr {
        Expr::Value(ValueWithSpan { value: Value::SingleQuotedString(text), .. }) => Some(text.clone()),
        _ => None,
    }
}
