//! The reference as the page `udfs/docs/functions.md`.

use std::fmt::Write;

use stillwell::{
    ARGUMENTS, Argument, ColumnDoc, ColumnKind, FIT_LAYOUT, Function, FunctionDoc, ValueFunctionDoc,
};

/// The whole page.
pub(super) fn page(relations: &[FunctionDoc], values: &[ValueFunctionDoc]) -> String {
    let mut page = String::from(
        "<!-- Printed by `stillwell functions --markdown`; to change it, change the tables it is made from. -->\n\n\
         # SQL reference\n\n\
         Some functions stand in FROM and take a query. Their [arguments](#arguments) are named (`=>`) and may stand \
         in any order. An unknown argument or value is an error that lists the valid ones.\n\n\
         | function | one row is |\n|---|---|\n",
    );
    for doc in relations {
        let name = doc.function.name();
        row(&mut page, &[&format!("[`{name}`](#{name})"), doc.one_row_is]);
    }
    page.push_str(
        "\nOthers stand in expressions. Their arguments go by position, or by name (`=>`) as long as none before them is \
         left out.\n\n| function | kind | what it gives |\n|---|---|---|\n",
    );
    for doc in values {
        row(&mut page, &[&format!("[`{0}`](#{0})", doc.name), doc.kind.name(), doc.summary()]);
    }
    arguments(&mut page);
    page.push_str(
        "\nUnits of columns: those on an untransformed model, and those on a logarithmic one ('log', 'log1p'). With Box-Cox what is a factor \
         there stands on the transformed scale, unit 'transformed'; with transform => 'auto' each series decides. The `unit` in the metadata of a \
         field says which.\n",
    );
    for doc in relations {
        function(&mut page, doc);
    }
    trouble(&mut page);
    for section in values.chunk_by(|a, b| a.section == b.section) {
        if let Some(first) = section.first() {
            let _ = write!(page, "\n## {}\n", first.section);
            if let Some(description) = first.section_description {
                let _ = write!(page, "\n{description}\n");
            }
        }
        section.iter().for_each(|doc| value_function(&mut page, doc));
    }
    layout(&mut page);
    page
}

fn layout(page: &mut String) {
    page.push_str(
        "\n## The layout of a fit\n\nA fit is a struct with these fields, each NULL where it has nothing to say. Keep fits in \
         Parquet: CSV has no structs, and JSON forgets the types of times. Fields are found by name.\n\n| field | holds |\n|---|---|\n",
    );
    for (name, meaning) in FIT_LAYOUT {
        row(page, &[&format!("`{}`", name.replace(", ", "`, `")), meaning]);
    }
}

fn value_function(page: &mut String, doc: &ValueFunctionDoc) {
    let _ = write!(
        page,
        "\n### {}\n\n```text\n{}\n```\n\n{}\n\n",
        doc.name,
        doc.syntax.join("\n"),
        doc.description
    );
    page.push_str("| argument | takes |\n|---|---|\n");
    for (name, meaning) in &doc.arguments {
        row(page, &[&format!("`{name}`"), meaning]);
    }
    let _ = write!(page, "\n```sql\n{}\n```\n", doc.example);
    if !doc.related.is_empty() {
        let related = doc.related.iter().map(|name| format!("[`{name}`](#{name})")).collect::<Vec<_>>();
        let _ = write!(page, "\nSee also {}.\n", related.join(", "));
    }
}

fn arguments(page: &mut String) {
    page.push_str("\n## Arguments\n\n| argument | takes | default | meaning |\n|---|---|---|---|\n");
    for argument in ARGUMENTS {
        let meaning = format!("{}{}", argument.description, only_in(argument));
        row(page, &[&format!("`{}`", argument.name), argument.values, argument.default, &meaning]);
    }
}

fn only_in(argument: &Argument) -> String {
    if argument.functions.len() == Function::ALL.len() {
        return String::new();
    }
    let names: Vec<_> = argument.functions.iter().map(|function| format!("`{}`", function.name())).collect();
    format!(" Only in {}.", names.join(", "))
}

fn function(page: &mut String, doc: &FunctionDoc) {
    let name = doc.function.name();
    let _ = write!(
        page,
        "\n## {name}\n\n{}\n\nOne row is {}. The key columns come first, with their names and types; then:\n\n\
         | column | type | unit | meaning |\n|---|---|---|---|\n",
        doc.description, doc.one_row_is
    );
    for column in &doc.columns {
        let spec = column.spec;
        row(page, &[&format!("`{}`", spec.name), kind(spec.kind), &unit(column), &meaning(column)]);
    }
    let _ = write!(page, "\n```sql\n{}\n```\n", doc.example);
}

fn kind(kind: ColumnKind) -> &'static str {
    match kind {
        ColumnKind::Time => "as `at`",
        ColumnKind::Number => "DOUBLE",
        ColumnKind::Count => "BIGINT",
        ColumnKind::Text => "VARCHAR",
        ColumnKind::Flag => "BOOLEAN",
    }
}

fn unit(column: &ColumnDoc) -> String {
    match column.units {
        Some((data, log)) if data == log => data.to_string(),
        Some((data, log)) => format!("{data}; log scale: {log}"),
        None => String::new(),
    }
}

fn meaning(column: &ColumnDoc) -> String {
    let condition = column.condition.map(|condition| format!(" ({condition})")).unwrap_or_default();
    format!("{}{condition}", column.spec.description)
}

fn trouble(page: &mut String) {
    let statuses: Vec<_> = stillwell::statuses().iter().map(|status| format!("`{status}`")).collect();
    let _ = write!(
        page,
        "\n## Status\n\nA series that cannot be fitted is reported in its rows and never stops the others. `status` is \
         one of {}. The sentence about it is `message` in [`diagnostics`](#diagnostics).\n",
        statuses.join(", ")
    );
}

/// A row of a table; a bar in a cell must not end it.
fn row(page: &mut String, cells: &[&str]) {
    for cell in cells {
        let _ = write!(page, "| {} ", cell.replace('|', "\\|"));
    }
    page.push_str("|\n");
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_page_has_a_section_for_every_function_and_a_row_for_every_argument() {
        let values = stillwell::value_functions();
        let page = page(&stillwell::functions(), &values);
        for doc in values {
            assert!(page.contains(&format!("\n### {}\n", doc.name)));
        }
        for function in Function::ALL {
            assert!(page.contains(&format!("\n## {}\n", function.name())));
        }
        for argument in ARGUMENTS {
            assert!(page.contains(&format!("\n| `{}` |", argument.name)));
        }
    }

    #[test]
    fn every_link_has_a_place() {
        let page = page(&stillwell::functions(), &stillwell::value_functions());
        // A heading's place is its words in small letters, joined by dashes.
        let places = page
            .lines()
            .filter_map(|line| line.strip_prefix('#'))
            .map(|heading| heading.trim_start_matches('#').trim().to_lowercase().replace(' ', "-"));
        let places = places.collect::<Vec<_>>();
        for link in page.split("](#").skip(1) {
            let place = link.split(')').next().unwrap_or_default();
            assert!(places.iter().any(|other| other == place), "there is no {place} in {places:?}");
        }
    }

    #[test]
    fn every_row_has_the_cells_of_its_head() {
        let page = page(&stillwell::functions(), &stillwell::value_functions());
        let mut cells = 0;
        for line in page.lines() {
            let bars = line.replace("\\|", "").matches('|').count();
            match line.starts_with('|') {
                true if cells == 0 => cells = bars,
                true => assert_eq!(bars, cells, "{line}"),
                false => cells = 0,
            }
        }
    }
}
