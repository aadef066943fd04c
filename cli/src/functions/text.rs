//! The reference for a terminal.

use stillwell::{ColumnDoc, FunctionDoc, ValueFunctionDoc};

/// All functions with what a row of each is, or what it gives.
pub(super) fn list(relations: &[FunctionDoc], values: &[ValueFunctionDoc], width: usize) -> String {
    let mut text = String::from("Functions that stand in the FROM clause of a statement:\n\n");
    for doc in relations {
        entry(&mut text, doc.function.name(), &format!("One row is {}.", doc.one_row_is), width);
    }
    for section in values.chunk_by(|a, b| a.section == b.section) {
        if let Some(first) = section.first() {
            text.push_str(&format!("\n{}:\n\n", first.section));
        }
        for doc in section {
            entry(&mut text, &doc.name, &plain(doc.summary()), width);
        }
    }
    text
}

/// Everything about one function that stands in expressions.
pub(super) fn value_reference(doc: &ValueFunctionDoc, width: usize) -> String {
    let mut text = format!("{}\n\n", doc.name);
    wrapped(&mut text, &plain(&doc.description), "", width);
    if let Some(description) = doc.section_description {
        wrapped(&mut text, &plain(description), "", width);
    }
    text.push_str(&format!("\nWritten ({} function):\n\n", doc.kind.name()));
    for syntax in &doc.syntax {
        text.push_str(&format!("    {syntax}\n"));
    }
    text.push_str("\nArguments:\n\n");
    for (name, meaning) in &doc.arguments {
        entry(&mut text, name, &plain(meaning), width);
    }
    example(&mut text, &doc.example);
    if !doc.related.is_empty() {
        text.push_str(&format!("\nSee also: {}\n", doc.related.join(", ")));
    }
    text
}

fn example(text: &mut String, example: &str) {
    text.push_str("\nExample:\n\n");
    for line in example.lines() {
        text.push_str(&format!("    {line}\n"));
    }
}

/// Markdown without its links: `[words](#place)` becomes `words`.
fn plain(markdown: &str) -> String {
    let mut text = String::with_capacity(markdown.len());
    let mut rest = markdown;
    while let Some((before, link)) = rest.split_once('[') {
        let words = link.split_once("](").and_then(|(words, after)| Some((words, after.split_once(')')?.1)));
        match words.filter(|(words, _)| !words.contains(['[', ']'])) {
            Some((words, after)) => {
                text.push_str(before);
                text.push_str(words);
                rest = after;
            }
            None => {
                text.push_str(before);
                text.push('[');
                rest = link;
            }
        }
    }
    text + rest
}

/// Everything about one function that stands in FROM.
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
    example(&mut text, doc.example);
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
    fn links_become_their_words() {
        assert_eq!(plain("as [`components`](#components) has [them](#x)."), "as `components` has them.");
        assert_eq!(plain("f(at [, every]) and x[1] (or not)"), "f(at [, every]) and x[1] (or not)");
    }

    #[test]
    fn the_list_names_every_function() {
        let (relations, values) = (stillwell::functions(), stillwell::value_functions());
        let text = list(&relations, &values, 80);
        for doc in &values {
            assert!(text.contains(&format!("\n  {}", doc.name)), "{text}");
            let one = value_reference(doc, 80);
            assert!(doc.arguments.iter().all(|(name, _)| one.contains(&format!("\n  {name}"))), "{one}");
            assert!(!one.contains("](#"), "{one}");
        }
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
