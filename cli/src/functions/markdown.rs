//! The reference as the page `udfs/docs/functions.md`.

use std::fmt::Write;

use stillwell::{ARGUMENTS, Argument, ColumnDoc, ColumnKind, Function, FunctionDoc};

/// The whole page.
pub(super) fn page(all: &[FunctionDoc]) -> String {
    let mut page = String::from(
        "<!-- Printed by `stillwell functions --markdown`; to change it, change the tables it is made from. -->\n\n\
         # SQL reference\n\n\
         The functions stand in FROM and take a query. Arguments are named (`=>`) and may stand in any order. An \
         unknown argument or value is an error that lists the valid ones.\n\n\
         | function | one row is |\n|---|---|\n",
    );
    for doc in all {
        let name = doc.function.name();
        row(&mut page, &[&format!("[`{name}`](#{name})"), doc.one_row_is]);
    }
    arguments(&mut page);
    for doc in all {
        function(&mut page, doc);
    }
    trouble(&mut page);
    page
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
        let page = page(&stillwell::functions());
        for function in Function::ALL {
            assert!(page.contains(&format!("\n## {}\n", function.name())));
        }
        for argument in ARGUMENTS {
            assert!(page.contains(&format!("\n| `{}` |", argument.name)));
        }
    }

    #[test]
    fn every_row_has_the_cells_of_its_head() {
        let page = page(&stillwell::functions());
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
