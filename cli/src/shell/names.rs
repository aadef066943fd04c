//! The names that can be completed: those of the session, and those of the functions and their arguments.
//!
//! Nothing is copied by hand: functions and arguments come from the tables the functions themselves work with, tables
//! and columns from the session's catalogs.

use datafusion::execution::context::SessionContext;
use stillwell::Takes;

/// What can be named.
#[derive(Debug, Default)]
pub(super) struct Names {
    /// The functions that stand in FROM.
    pub(super) relations: Vec<RelationFunction>,
    /// The functions of expressions.
    pub(super) functions: Vec<String>,
    pub(super) tables: Vec<TableNames>,
}

/// A function that stands in FROM.
#[derive(Debug)]
pub(super) struct RelationFunction {
    pub(super) name: String,
    pub(super) arguments: Vec<ArgumentName>,
}

/// An argument of such a function.
#[derive(Debug)]
pub(super) struct ArgumentName {
    pub(super) name: String,
    pub(super) takes: Takes,
    /// The values that are words, as written in SQL: `'local level'`, `true`.
    pub(super) words: Vec<String>,
}

/// A table or a view.
#[derive(Debug)]
pub(super) struct TableNames {
    /// Catalog and schema where they are not the session's own, and the name.
    pub(super) path: Vec<String>,
    pub(super) columns: Vec<String>,
}

impl Names {
    /// The functions of the library.
    pub(super) fn of_library() -> Self {
        let relations = stillwell::functions()
            .into_iter()
            .map(|doc| RelationFunction {
                name: doc.function.name().to_string(),
                arguments: stillwell::arguments_of(doc.function)
                    .map(|argument| ArgumentName {
                        name: argument.name.to_string(),
                        takes: argument.takes,
                        words: words_of(argument.values),
                    })
                    .collect(),
            })
            .collect();
        Self { relations, ..Self::default() }
    }

    /// The same with the functions, tables and columns that `context` has now.
    pub(super) async fn of_session(context: &SessionContext) -> Self {
        let state = context.state();
        let mut functions: Vec<String> = state
            .scalar_functions()
            .keys()
            .chain(state.aggregate_functions().keys())
            .chain(state.window_functions().keys())
            .cloned()
            .collect();
        functions.sort_unstable();
        functions.dedup();
        Self { functions, tables: tables_of(context).await, ..Self::of_library() }
    }
}

async fn tables_of(context: &SessionContext) -> Vec<TableNames> {
    let state = context.state();
    let defaults = &state.config_options().catalog;
    let mut tables = Vec::new();
    for catalog_name in context.catalog_names() {
        let Some(catalog) = context.catalog(&catalog_name) else { continue };
        for schema_name in catalog.schema_names() {
            let Some(schema) = catalog.schema(&schema_name) else { continue };
            let mut names = schema.table_names();
            names.sort_unstable();
            for name in names {
                // A table that cannot be looked at now has no columns to offer.
                let provider = schema.table(&name).await.ok().flatten();
                let columns = provider
                    .map(|table| table.schema().fields().iter().map(|field| field.name().clone()).collect())
                    .unwrap_or_default();
                let mut path = vec![name];
                if catalog_name != defaults.default_catalog || schema_name != defaults.default_schema {
                    path.insert(0, schema_name.clone());
                }
                if catalog_name != defaults.default_catalog {
                    path.insert(0, catalog_name.clone());
                }
                tables.push(TableNames { path, columns });
            }
        }
    }
    tables
}

/// The words among the accepted values of an argument: what stands in quotes, and true and false. What stands in
/// brackets is an example of a longer value, not a word.
fn words_of(values: &str) -> Vec<String> {
    let mut words: Vec<String> = Vec::new();
    let mut depth = 0;
    let mut rest = values;
    while let Some(at) = rest.find(|c: char| "'({[)}]".contains(c) || c.is_alphabetic()) {
        let sign = rest[at..].chars().next().unwrap_or(' ');
        let mut end = at + sign.len_utf8();
        match sign {
            '(' | '{' | '[' => depth += 1,
            ')' | '}' | ']' => depth -= 1,
            '\'' => {
                let Some(length) = rest[end..].find('\'') else { break };
                end += length + 1;
                if depth == 0 {
                    words.push(rest[at..end].to_string());
                }
            }
            _ => {
                end =
                    rest[at..].find(|c: char| !c.is_alphanumeric()).map_or(rest.len(), |length| at + length);
                if depth == 0 && matches!(&rest[at..end], "true" | "false") {
                    words.push(rest[at..end].to_string());
                }
            }
        }
        rest = &rest[end..];
    }
    words.dedup();
    words
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn words_are_those_in_quotes_and_the_two_truths() {
        assert_eq!(words_of("'local level', 'smooth', 'auto'"), ["'local level'", "'smooth'", "'auto'"]);
        assert_eq!(words_of("a period in steps, 0 for none, or 'auto'"), ["'auto'"]);
        assert_eq!(words_of("true, or (shortest, longest) period in steps"), ["true"]);
        assert!(words_of("{'parameter': value, …} or named_struct('parameter', value, …)").is_empty());
        assert!(words_of("untrue").is_empty());
    }

    #[test]
    fn every_argument_of_the_library_is_there() {
        let names = Names::of_library();
        for doc in stillwell::functions() {
            let found = names.relations.iter().find(|f| f.name == doc.function.name()).expect("the function");
            let found: Vec<&str> = found.arguments.iter().map(|argument| argument.name.as_str()).collect();
            let expected: Vec<&str> = doc.arguments.iter().map(|argument| argument.name).collect();
            assert_eq!(found, expected);
        }
        let of_trend =
            |f: &RelationFunction| f.arguments.iter().find(|a| a.name == "trend").map(|a| a.words.clone());
        let trend = names.relations.iter().find_map(of_trend).expect("trend");
        assert!(
            trend.contains(&"'local linear'".to_string()) && trend.contains(&"'auto'".to_string()),
            "{trend:?}"
        );
    }

    #[tokio::test]
    async fn tables_and_columns_are_those_of_the_session() {
        let context = SessionContext::new();
        for sql in [
            "CREATE TABLE sales AS SELECT 1 AS week, 2.5 AS \"Litres\"",
            "CREATE SCHEMA depot",
            "CREATE VIEW depot.milk AS SELECT 1 AS a",
        ] {
            context.sql(sql).await.expect("plans").collect().await.expect("runs");
        }
        let names = Names::of_session(&context).await;
        let mut found: Vec<_> =
            names.tables.iter().map(|table| (table.path.join("."), table.columns.join(","))).collect();
        found.sort();
        assert_eq!(found, [("depot.milk".into(), "a".into()), ("sales".into(), "week,Litres".into())]);
        assert!(
            names.functions.contains(&"date_trunc".to_string())
                || names.functions.contains(&"round".to_string())
        );
    }
}
