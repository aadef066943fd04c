//! The shell's own words: what it does that is no SQL. Each stands alone on a line, with a semicolon or without.

use clap::ValueEnum;

use crate::formats::Format;
use crate::nearest::nearest;

/// The words and what they do: for `help` in the shell and on the command line.
pub(crate) const WORDS: &str = "\
Words of the shell, each alone on a line:
  help              these words, the functions and the keys
  help NAME         the reference of a function, such as forecast
  tables            the tables and views there are
  columns of NAME   the columns of a table, a view or a file ('sales/*.parquet')
  format NAME       how rows are written: table, csv, json, ndjson or parquet
  rows N            rows that a table shows; 0 shows all
  timing on         tell rows and seconds after each statement; timing off: do not
  quit              end the shell, as Ctrl-D does
";

/// What a line asks of the shell.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) enum Word {
    Help(Option<String>),
    Tables,
    /// The columns of a table, as it is written in SQL.
    Columns(String),
    Format(Format),
    Rows(usize),
    Timing(bool),
    Quit,
}

/// The first words of the lines that are not SQL.
const FIRST: [&str; 8] = ["help", "tables", "columns", "format", "rows", "timing", "quit", "exit"];

/// Reads a line that begins with one of the shell's words; `None` for any other, which is SQL. No SQL statement begins
/// with one of them.
pub(super) fn parse(line: &str) -> Option<Result<Word, String>> {
    let line = line.trim().trim_end_matches(';').trim_end();
    let (first, rest) = line.split_once(char::is_whitespace).unwrap_or((line, ""));
    let rest = rest.trim();
    let first = first.to_ascii_lowercase();
    if !FIRST.contains(&first.as_str()) {
        return no_word(line);
    }
    Some(match (first.as_str(), rest) {
        ("help", "") => Ok(Word::Help(None)),
        ("help", name) => Ok(Word::Help(Some(name.to_string()))),
        ("tables", "") => Ok(Word::Tables),
        ("columns", rest) => columns(rest),
        ("format", name) => format(name),
        ("rows", number) => number
            .parse()
            .map(Word::Rows)
            .map_err(|_| "write rows N, as in rows 100; 0 shows all".to_string()),
        ("timing", on) if on.eq_ignore_ascii_case("on") => Ok(Word::Timing(true)),
        ("timing", off) if off.eq_ignore_ascii_case("off") => Ok(Word::Timing(false)),
        ("timing", _) => Err("write timing on or timing off".to_string()),
        ("quit" | "exit", "") => Ok(Word::Quit),
        (first, rest) => Err(format!("'{first}' stands alone on its line; what is '{rest}'?")),
    })
}

/// A line that begins as no SQL statement can: somebody looks for the words.
fn no_word(line: &str) -> Option<Result<Word, String>> {
    let sign = line.chars().next().filter(|c| matches!(c, '\\' | '.' | '!' | ':' | '?'))?;
    Some(Err(format!("the words of this shell have no '{sign}' before them; help lists them")))
}

fn columns(rest: &str) -> Result<Word, String> {
    match rest.split_once(char::is_whitespace) {
        Some((of, name)) if of.eq_ignore_ascii_case("of") && !name.trim().is_empty() => {
            Ok(Word::Columns(name.trim().to_string()))
        }
        _ => Err("write columns of NAME, as in columns of sales".to_string()),
    }
}

fn format(name: &str) -> Result<Word, String> {
    Format::from_str(name, true).map(Word::Format).map_err(|_| {
        let names = formats();
        let near = nearest(name, names.iter().map(String::as_str));
        format!(
            "there is no format '{name}'{}; the formats are {}",
            near.map(|name| format!(" (did you mean '{name}'?)")).unwrap_or_default(),
            names.join(", ")
        )
    })
}

fn formats() -> Vec<String> {
    let named = |format: &Format| format.to_possible_value().map(|value| value.get_name().to_string());
    Format::value_variants().iter().filter_map(named).collect()
}

/// What may stand next on a line that begins with `words`, all in lower case; `None` if the line is no line of the
/// shell's words. Names of tables and functions are the caller's to give.
pub(super) fn next(words: &[String]) -> Option<Next> {
    let words: Vec<&str> = words.iter().map(String::as_str).collect();
    let listed = |list: &[&str]| Next::Of(list.iter().map(|word| (*word).to_string()).collect());
    Some(match words.as_slice() {
        [] => listed(&["help", "tables", "columns of", "format", "rows", "timing", "quit"]),
        ["help"] => Next::Function,
        ["columns"] => listed(&["of"]),
        ["columns", "of"] => Next::Table,
        ["format"] => Next::Of(formats()),
        ["timing"] => listed(&["on", "off"]),
        [first, ..] if FIRST.contains(first) => Next::Of(Vec::new()),
        _ => return None,
    })
}

/// What may stand next on a line.
#[derive(Debug, PartialEq, Eq)]
pub(super) enum Next {
    Of(Vec<String>),
    Function,
    Table,
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_of_words_are_read() {
        for (line, word) in [
            ("help", Word::Help(None)),
            ("  HELP forecast ;", Word::Help(Some("forecast".to_string()))),
            ("tables;", Word::Tables),
            ("columns of \"Sales Of Butter\"", Word::Columns("\"Sales Of Butter\"".to_string())),
            ("format CSV", Word::Format(Format::Csv)),
            ("rows 0", Word::Rows(0)),
            ("timing off", Word::Timing(false)),
            ("quit", Word::Quit),
            ("exit;", Word::Quit),
        ] {
            assert_eq!(parse(line), Some(Ok(word)), "{line}");
        }
    }

    #[test]
    fn slips_say_what_to_write() {
        for (line, told) in [
            ("columns sales", "columns of NAME"),
            ("format jsn", "did you mean 'json'"),
            ("rows many", "rows N"),
            ("timing", "timing on"),
            ("quit now", "'now'"),
            ("\\d sales", "help lists them"),
            (".tables", "help lists them"),
        ] {
            let error = parse(line).expect("a word").expect_err(line);
            assert!(error.contains(told), "{line}: {error}");
        }
    }

    #[test]
    fn sql_is_left_alone() {
        for line in
            ["SELECT 1;", "", "  ", "-- help", "SHOW TABLES;", "WITH help AS (SELECT 1)", "(SELECT 1);"]
        {
            assert_eq!(parse(line), None, "{line}");
        }
    }

    #[test]
    fn the_list_names_every_word() {
        for word in FIRST.iter().filter(|word| **word != "exit") {
            assert!(WORDS.contains(&format!("\n  {word}")), "{word}");
        }
        let line = WORDS.lines().find(|line| line.contains("format NAME")).expect("the line of formats");
        for format in formats() {
            assert!(line.contains(&format), "{format}");
        }
    }
}
