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
    let all = stillwell::functions();
    let width =
        terminal_size::terminal_size().map_or(100, |(columns, _)| usize::from(columns.0).clamp(60, 120));
    let page = match &args.name {
        _ if args.markdown => markdown::page(&all),
        None => text::list(&all, width),
        Some(name) => match all.iter().find(|doc| doc.function.name().eq_ignore_ascii_case(name)) {
            Some(doc) => text::reference(doc, width),
            None => {
                let names: Vec<&str> = all.iter().map(|doc| doc.function.name()).collect();
                let near = nearest(name, names.iter().copied());
                return Err(Failure::usage(format!(
                    "there is no function '{name}'{}; the functions are {}",
                    near.map(|name| format!(" (did you mean '{name}'?)")).unwrap_or_default(),
                    names.join(", ")
                )));
            }
        },
    };
    Out::default().say(page)?;
    Ok(Exit::Done)
}
