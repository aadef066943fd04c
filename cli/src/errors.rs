//! Engine errors as one readable message.
//!
//! The engine nests its errors (a context around a shared error around an Arrow error around an error of a
//! function) and prints some of them as Rust debug text. [`text`] walks down to what a person can act on and
//! adds a remedy where the engine has none. Texts of the library's own functions pass unchanged: they carry
//! their remedy already.

use std::error::Error;

use datafusion::arrow::error::ArrowError;
use datafusion::common::{DataFusionError, SchemaError};
use datafusion::sql::sqlparser::parser::ParserError;

use crate::exit::{Exit, Failure};
use crate::nearest::nearest;
use crate::panics;
use crate::stores;

/// The failure that `error` means: exit code 1, or 70 where a panic of the program is behind it.
pub(crate) fn failure(error: &DataFusionError) -> Failure {
    let exit = if is_fault(error) { Exit::Internal } else { Exit::Failed };
    Failure { exit, message: text(error) }
}

/// The message of `error`, without wrappers, debug quoting or back traces.
pub(crate) fn text(error: &DataFusionError) -> String {
    match error {
        DataFusionError::SQL(parser, _) => syntax(parser),
        DataFusionError::Plan(message) => unknown_table(message).unwrap_or_else(|| message.clone()),
        DataFusionError::SchemaError(schema, _) => {
            unknown_column(schema).unwrap_or_else(|| schema.to_string())
        }
        DataFusionError::ArrowError(arrow, _) => arrow_text(arrow),
        DataFusionError::External(inner) => foreign(inner.as_ref()),
        DataFusionError::Context(what, inner) if is_location_noise(what) => text(inner),
        DataFusionError::Context(what, inner) => format!("{what}: {}", text(inner)),
        DataFusionError::Diagnostic(diagnostic, inner) => {
            let helps: Vec<&str> = diagnostic.helps.iter().map(|help| help.message.as_str()).collect();
            let told = text(inner);
            if helps.is_empty() || helps.iter().any(|help| told.contains(help)) {
                told
            } else {
                format!("{told} ({})", helps.join("; "))
            }
        }
        DataFusionError::Collection(errors) => {
            let mut told: Vec<String> = errors.iter().map(text).collect();
            told.dedup();
            told.join("\n")
        }
        DataFusionError::Shared(inner) => text(inner),
        DataFusionError::ResourcesExhausted(message) => format!(
            "out of memory under the limit that was set: {message}. Raise --memory-limit, or lower --threads \
             so that each thread has more of it"
        ),
        DataFusionError::Internal(message) => {
            format!("the engine met a case it did not expect: {}", first_line(message))
        }
        DataFusionError::ExecutionJoin(join) if join.is_panic() => panics::calm_line(),
        DataFusionError::NotImplemented(message) => format!("not supported by the engine: {message}"),
        DataFusionError::ObjectStore(store) => store_text(store.as_ref()),
        DataFusionError::ParquetError(parquet) => {
            stores::told(parquet.as_ref()).unwrap_or_else(|| error.message().into_owned())
        }
        other => other.message().into_owned(),
    }
}

fn is_fault(error: &DataFusionError) -> bool {
    match error {
        DataFusionError::ExecutionJoin(join) => join.is_panic(),
        DataFusionError::Context(_, inner) | DataFusionError::Diagnostic(_, inner) => is_fault(inner),
        DataFusionError::Shared(inner) => is_fault(inner),
        _ => false,
    }
}

/// The text of an error that may be an engine error behind a trait object.
fn foreign(error: &(dyn Error + 'static)) -> String {
    if let Some(engine) = error.downcast_ref::<DataFusionError>() {
        text(engine)
    } else if let Some(arrow) = error.downcast_ref::<ArrowError>() {
        arrow_text(arrow)
    } else {
        store_text(error)
    }
}

/// The text of an error that a store of files may lie at the bottom of.
fn store_text(error: &(dyn Error + 'static)) -> String {
    stores::told(error).unwrap_or_else(|| error.to_string())
}

fn arrow_text(error: &ArrowError) -> String {
    match error {
        ArrowError::ExternalError(inner) => foreign(inner.as_ref()),
        ArrowError::IoError(message, _) => stores::told(error).unwrap_or_else(|| message.clone()),
        other => other.to_string(),
    }
}

fn syntax(error: &ParserError) -> String {
    match error {
        ParserError::TokenizerError(message) | ParserError::ParserError(message) => {
            format!("syntax error: {message}")
        }
        ParserError::RecursionLimitExceeded => {
            "syntax error: the expression is nested too deeply; split it with WITH or a view".to_string()
        }
    }
}

/// The engine's names for optimizer and analyzer passes mean nothing to the writer of a job.
fn is_location_noise(what: &str) -> bool {
    ["type_coercion", "resolve_grouping_function", "Optimizer rule", "Analyzer rule", "Check optimizer"]
        .iter()
        .any(|noise| what.contains(noise))
}

/// `table 'datafusion.public.sales' not found` with what can be done about it.
fn unknown_table(message: &str) -> Option<String> {
    let name = message.strip_prefix("table '")?.strip_suffix("' not found")?;
    let name = name.strip_prefix("datafusion.public.").unwrap_or(name);
    Some(format!(
        "table '{name}' is not known here: make it with CREATE EXTERNAL TABLE or CREATE VIEW earlier in the \
         job, or name files directly, as in FROM 'folder/' or FROM 'folder/*.parquet'"
    ))
}

/// `No field named x` with the columns there are by their bare names, and the one that was meant.
fn unknown_column(error: &SchemaError) -> Option<String> {
    let SchemaError::FieldNotFound { field, valid_fields } = error else { return None };
    let mut known: Vec<&str> = Vec::new();
    for column in valid_fields {
        if !known.contains(&column.name()) {
            known.push(column.name());
        }
    }
    let field = field.name();
    let near = nearest(field, known.iter().copied()).map(|name| match name.eq_ignore_ascii_case(field) {
        // SQL lowers the letters of a name that is not quoted.
        true => format!(" (write \"{name}\", in double quotes, to keep its capital letters)"),
        false => format!(" (did you mean '{name}'?)"),
    });
    Some(match known.as_slice() {
        [] => format!("there is no column '{field}' here, and no other either"),
        _ => format!(
            "there is no column '{field}' here{}; the columns are {}",
            near.unwrap_or_default(),
            known.join(", ")
        ),
    })
}

fn first_line(message: &str) -> &str {
    message.lines().next().unwrap_or(message).trim_end_matches('.')
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use datafusion::common::Column;

    use super::*;

    #[test]
    fn wrappers_are_peeled_off() {
        let inner = DataFusionError::Execution("forecast: horizon must be at least 1 (got 0)".into());
        let wrapped = DataFusionError::Shared(Arc::new(DataFusionError::External(Box::new(
            DataFusionError::ArrowError(Box::new(ArrowError::ExternalError(Box::new(inner))), None),
        ))));
        assert_eq!(text(&wrapped), "forecast: horizon must be at least 1 (got 0)");
    }

    #[test]
    fn syntax_errors_keep_their_place_and_lose_the_debug_quotes() {
        let error =
            ParserError::ParserError("Expected: an expression, found: FROM at Line: 3, Column: 8".into());
        let told = text(&DataFusionError::SQL(Box::new(error), None));
        assert_eq!(told, "syntax error: Expected: an expression, found: FROM at Line: 3, Column: 8");
    }

    #[test]
    fn an_unknown_table_comes_with_a_remedy() {
        let told = text(&DataFusionError::Plan("table 'datafusion.public.sales' not found".into()));
        assert!(told.starts_with("table 'sales' is not known here"), "{told}");
        assert!(told.contains("CREATE EXTERNAL TABLE"), "{told}");
    }

    #[test]
    fn an_unknown_column_comes_with_those_there_are() {
        let column = |name: &str| Column::new(Some("sales"), name);
        let error = SchemaError::FieldNotFound {
            field: Box::new(Column::from_name("litre")),
            valid_fields: vec![column("week"), column("litres"), Column::from_name("week")],
        };
        let told = text(&DataFusionError::SchemaError(Box::new(error), Box::new(None)));
        assert_eq!(
            told,
            "there is no column 'litre' here (did you mean 'litres'?); the columns are week, litres"
        );
    }

    #[test]
    fn memory_pressure_names_the_options() {
        let told = text(&DataFusionError::ResourcesExhausted("need 3 MB more".into()));
        assert!(told.contains("--memory-limit") && told.contains("--threads"), "{told}");
    }

    #[test]
    fn several_errors_are_said_once_each() {
        let same = || DataFusionError::Plan("column x is unknown".into());
        let told =
            text(&DataFusionError::Collection(vec![same(), same(), DataFusionError::Plan("other".into())]));
        assert_eq!(told, "column x is unknown\nother");
    }
}
