//! A job's text as statements, each with its number and the line it begins on.
//!
//! The engine's own parser reads the text, comments included, so a job means here what it means in any other
//! session of the engine. The whole text is parsed before anything runs: a slip in the last statement must not
//! be found after an hour of fitting.

use std::fmt;

use datafusion::sql::parser::{CopyToStatement, DFParserBuilder, Statement};
use datafusion::sql::sqlparser::tokenizer::Token;

use crate::errors;
use crate::exit::{Failure, Outcome};

/// Nested expressions deeper than this are refused by the parser; the engine's default of 50 is met by long
/// chains of CASE that generators write.
const RECURSION_LIMIT: usize = 128;

/// One statement of a job.
#[derive(Debug, Clone)]
pub(crate) struct JobStatement {
    /// Where the statement stands in the job.
    pub(crate) place: Place,
    /// The statement itself.
    pub(crate) statement: Statement,
}

/// The place of a statement in its job; both count from 1.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Place {
    pub(crate) number: usize,
    pub(crate) line: u64,
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "statement {} (line {})", self.number, self.line)
    }
}

impl JobStatement {
    /// The COPY this statement runs, be it under EXPLAIN ANALYZE.
    pub(crate) fn copy(&self) -> Option<&CopyToStatement> {
        copy_of(&self.statement)
    }

    /// A few words for the progress line.
    pub(crate) fn label(&self) -> String {
        label(&self.statement)
    }
}

fn copy_of(statement: &Statement) -> Option<&CopyToStatement> {
    match statement {
        Statement::CopyTo(copy) => Some(copy),
        Statement::Explain(explain) if explain.options.analyze => match explain.statement.as_ref() {
            Statement::CopyTo(copy) => Some(copy),
            _ => None,
        },
        _ => None,
    }
}

/// A few words for the progress line: the beginning of the statement on one line.
pub(crate) fn label(statement: &Statement) -> String {
    if let Some(copy) = copy_of(statement) {
        return format!("COPY to '{}'", copy.target);
    }
    const LONGEST: usize = 40;
    let words = statement.to_string().split_whitespace().collect::<Vec<_>>().join(" ");
    match words.char_indices().nth(LONGEST) {
        Some((end, _)) => format!("{}…", &words[..end]),
        None => words,
    }
}

/// Splits `sql` into statements. Empty statements (`;;`) are skipped.
///
/// # Errors
/// The first syntax error, led by the statement's number and line; nothing has run then.
pub(crate) fn parse(sql: &str) -> Outcome<Vec<JobStatement>> {
    // Some editors put a mark of the byte order before the text.
    let sql = sql.trim_start_matches('\u{feff}');
    let broken = |error| errors::failure(&error);
    let mut parser =
        DFParserBuilder::new(sql).with_recursion_limit(RECURSION_LIMIT).build().map_err(broken)?;
    let mut statements: Vec<JobStatement> = Vec::new();
    let mut delimited = true;
    loop {
        while parser.parser.consume_token(&Token::SemiColon) {
            delimited = true;
        }
        let next = parser.parser.peek_token();
        if next.token == Token::EOF {
            return Ok(statements);
        }
        if !delimited {
            let message = format!("syntax error: expected ';' or the end of the job, found '{next}'");
            let place = statements.last().map_or(Place { number: 1, line: 1 }, |last| last.place);
            return Err(Failure::failed(format!("{message} at line {}", next.span.start.line)).at(place));
        }
        let place = Place { number: statements.len() + 1, line: next.span.start.line };
        let statement = parser.parse_statement().map_err(|error| broken(error).at(place))?;
        statements.push(JobStatement { place, statement });
        delimited = false;
    }
}

/// The one statement that `sql` is, with or without its semicolon.
///
/// # Errors
/// For a syntax error, or when `sql` is not one statement.
pub(crate) fn parse_one(sql: &str) -> Outcome<Statement> {
    let broken = |error| errors::failure(&error);
    let mut parser =
        DFParserBuilder::new(sql).with_recursion_limit(RECURSION_LIMIT).build().map_err(broken)?;
    let statement = parser.parse_statement().map_err(broken)?;
    let _ = parser.parser.consume_token(&Token::SemiColon);
    let next = parser.parser.peek_token();
    if next.token != Token::EOF {
        let message = format!("syntax error: expected ';' or the end of the statement, found '{next}'");
        return Err(Failure::failed(format!("{message} at line {}", next.span.start.line)));
    }
    Ok(statement)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn places(sql: &str) -> Vec<(usize, u64)> {
        parse(sql).expect("parses").iter().map(|s| (s.place.number, s.place.line)).collect()
    }

    #[test]
    fn statements_know_their_number_and_line() {
        let sql = "-- weekly outlook; a comment with a semicolon\nSELECT 1;\n\n/* two\nlines */\nSELECT ';' AS a\n;;\nSET datafusion.execution.batch_size = 10;\n-- end";
        assert_eq!(places(sql), [(1, 2), (2, 6), (3, 8)]);
    }

    #[test]
    fn nothing_but_comments_is_an_empty_job() {
        assert!(places(" -- nothing\n ;; /* here */").is_empty());
    }

    #[test]
    fn a_mark_of_the_byte_order_is_no_syntax() {
        assert_eq!(places("\u{feff}SELECT 1"), [(1, 1)]);
    }

    #[test]
    fn a_syntax_error_names_statement_and_line() {
        let told = parse("SELECT 1;\n\nSELECT 1 + ;").expect_err("bad").message;
        assert!(told.starts_with("statement 2 (line 3): syntax error: "), "{told}");
    }

    #[test]
    fn a_missing_semicolon_is_said() {
        let told = parse("SELECT 1\nCOPY t TO 'x.parquet'").expect_err("bad").message;
        assert!(told.contains("statement 1 (line 1)") && told.contains("line 2"), "{told}");
    }

    #[test]
    fn the_copy_under_explain_analyze_is_seen() {
        let statements =
            parse("EXPLAIN COPY t TO 'a.csv'; EXPLAIN ANALYZE COPY t TO 'b.csv'; COPY t TO 'c.csv'")
                .expect("parses");
        let targets: Vec<_> = statements.iter().map(|s| s.copy().map(|c| c.target.as_str())).collect();
        assert_eq!(targets, [None, Some("b.csv"), Some("c.csv")]);
    }

    #[test]
    fn one_statement_is_one() {
        assert!(parse_one("SELECT 1 -- the only one").is_ok());
        assert!(parse_one("SELECT 1;").is_ok() && parse_one("SELECT 1; SELECT 2").is_err());
        assert!(parse_one("SELECT 1 COPY").is_ok(), "an alias");
        let told = parse_one("SELECT 1\nCOPY t TO 'x.parquet'").expect_err("two").message;
        assert!(told.contains("found 't'") || told.contains("found 'TO'"), "{told}");
        assert!(parse_one("SELECT 1 +").expect_err("bad").message.starts_with("syntax error: "));
    }

    #[test]
    fn labels_stay_short() {
        let statements =
            parse("SELECT 'a very long literal that nobody wants to see', 1, 2").expect("parses");
        assert_eq!(statements[0].label().chars().count(), 41);
    }
}
