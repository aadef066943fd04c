//! `stillwell functions [NAME]`: the SQL reference, from the tables that the functions themselves work with.

mod markdown;
mod text;

use crate::args::FunctionsArgs;
use crate::exit::{Exit, Failure, Outcome};
use crate::nearest::nearest;
use crate::streams::Out;

/// Prints the list of the functions, the reference of one, or the whole page as Markdown.
///
/// # Errors
/// For a name that is no function's, with those that are.
pub(crate) fn functions(args: &FunctionsArgs) -> Outcome<Exit> {
    let page = match &args.name {
        _ if args.markdown => markdown::page(&stillwell::functions(), &stillwell::value_functions()),
        None => format!(
            "{}\nstillwell functions NAME tells the arguments, the columns and an example of one.\n",
            list()
        ),
        Some(name) => reference(name)?,
    };
    Out::default().say(page)?;
    Ok(Exit::Done)
}

/// The list of all functions, for a terminal.
pub(crate) fn list() -> String {
    text::list(&stillwell::functions(), &stillwell::value_functions(), width())
}

/// The reference of one function, for a terminal.
///
/// # Errors
/// For a name that is no function's, with those that are.
pub(crate) fn reference(name: &str) -> Outcome<String> {
    let relations = stillwell::functions();
    if let Some(doc) = relations.iter().find(|doc| doc.function.name().eq_ignore_ascii_case(name)) {
        return Ok(text::reference(doc, width()));
    }
    let values = stillwell::value_functions();
    if let Some(doc) = values.iter().find(|doc| doc.name.eq_ignore_ascii_case(name)) {
        return Ok(text::value_reference(doc, width()));
    }
    let names = relations.iter().map(|doc| doc.function.name());
    let names: Vec<&str> = names.chain(values.iter().map(|doc| doc.name.as_str())).collect();
    let near = nearest(name, names.iter().copied());
    Err(Failure::usage(format!(
        "there is no function '{name}'{}; the functions are {}",
        near.map(|name| format!(" (did you mean '{name}'?)")).unwrap_or_default(),
        names.join(", ")
    )))
}

fn width() -> usize {
    terminal_size::terminal_size().map_or(100, |(columns, _)| usize::from(columns.0).clamp(60, 120))
}
