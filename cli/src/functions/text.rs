//! The reference for a terminal.

use stillwell::{ColumnDoc, FunctionDoc};

/// All functions with what a row of each is.
pub(super) fn list(all: &[FunctionDoc], width: usize) -> String {
    let mut text = String::from("Functions that stand in the FROM clause of a statement:\n\n");
    for doc in all {
        entry(&mut text, doc.function.name(), &format!("One row is {}.", doc.one_row_is), width);
    }
    text
}

/// Everything about one function.
pub(super) fn reference(doc: &FunctionDoc, width: usize) -> String {
    let mut text = format!("{}\n\n", doc.function.name());
    wrapped(&mut text, doc.description, "", width);
    wrapped(&mut text, &format!("One row is {}.", doc.one_row_is), "", width);
    text.push_str("\nArguments, written name => value:\n\n");
    for argument in &doc.arguments {
        let default = match argument.default {
            "required" => "required".to_string(),
            default => format!("default: {default}"),
        };
        let told = format!("{} Takes: {}; {default}.", argument.description, argument.values);
        entry(&mut text, argument.name, &told, width);
    }
    text.push_str("\nColumns, after those of per:\n\n");
    for column in &doc.columns {
        entry(&mut text, column.spec.name, &about(column), width);
    }
    text.push_str("\nExample:\n\n");
    for line in doc.example.lines() {
        text.push_str(&format!("    {line}\n"));
    }
    text
}

fn about(column: &ColumnDoc) -> String {
    let mut told = column.spec.description.to_string();
    if let Some(condition) = column.condition {
        told.push_str(&format!(" ({condition})"));
    }
    match column.units {
        Some((data, log)) if data == log => told.push_str(&format!(" Unit: {data}.")),
        Some((data, log)) => told.push_str(&format!(" Unit: {data}; on the log scale: {log}.")),
        None => {}
    }
    told
}

/// A name, and what there is to say about it beside or below.
fn entry(text: &mut String, name: &str, told: &str, width: usize) {
    const COLUMN: usize = 22;
    if name.len() + 4 > COLUMN {
        text.push_str(&format!("  {name}\n"));
        wrapped(text, told, &" ".repeat(COLUMN), width);
    } else {
        let begin = text.len();
        wrapped(text, told, &" ".repeat(COLUMN), width);
        text.replace_range(begin..begin + COLUMN, &format!("  {name:<width$}", width = COLUMN - 2));
    }
}

/// Appends `told`, its lines broken between words to `width` and led by `indent`.
fn wrapped(text: &mut String, told: &str, indent: &str, width: usize) {
    let mut line = indent.to_string();
    for word in told.split_whitespace() {
        if line.len() > indent.len() {
            if line.chars().count() + 1 + word.chars().count() > width {
                text.push_str(&line);
                text.push('\n');
                line = indent.to_string();
            } else {
                line.push(' ');
            }
        }
        line.push_str(word);
    }
    text.push_str(&line);
    text.push('\n');
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_are_broken_between_words() {
        let mut text = String::new();
        wrapped(&mut text, "each series in its own row", "  ", 14);
        assert_eq!(text, "  each series\n  in its own\n  row\n");
    }

    #[test]
    fn a_reference_names_every_argument_and_column() {
        for doc in stillwell::functions() {
            let text = reference(&doc, 100);
            let names = doc.arguments.iter().map(|a| a.name).chain(doc.columns.iter().map(|c| c.spec.name));
            for name in names {
                assert!(text.contains(&format!("\n  {name}")), "{} lacks {name}", doc.function.name());
            }
            assert!(text.lines().all(|line| line.chars().count() <= 120), "{text}");
        }
    }
}
