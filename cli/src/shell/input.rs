//! What has been typed, cut into statements.
//!
//! A statement ends at a semicolon that stands in no string, quoted name or comment; it may take several lines.

use std::ops::Range;

use datafusion::sql::sqlparser::tokenizer::Token;

use super::tokens::{Open, Piece, Scan, scan};

/// The prompt for a new statement.
pub(super) const PROMPT: &str = "stillwell> ";

/// One complete statement.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Typed {
    pub(super) sql: String,
    /// The line its first word stands on, counted from 1 over everything typed.
    pub(super) line: u64,
}

/// What has been typed and not been run.
#[derive(Debug, Default)]
pub(super) struct Input {
    /// Lines of a statement that has no end yet.
    text: String,
    /// Whether a word stands in `text`: a comment alone begins no statement.
    begun: bool,
    /// The lines before `text`.
    before: u64,
}

impl Input {
    /// Takes one more line, without its line break; gives the statements that are complete now.
    pub(super) fn push(&mut self, line: &str) -> Vec<Typed> {
        self.text.push_str(line);
        self.text.push('\n');
        // Nothing but a semicolon ends a statement: a long one need not be read anew with each of its lines.
        if self.begun && !line.contains(';') {
            return Vec::new();
        }
        let Cut { statements, rest, begun } = cut(&self.text);
        self.begun = begun;
        let line_at = |at: usize| self.before + 1 + breaks(&self.text[..at]);
        let typed = statements
            .into_iter()
            .map(|range| Typed { line: line_at(range.start), sql: self.text[range].to_string() })
            .collect();
        self.before += breaks(&self.text[..rest]);
        self.text.drain(..rest);
        typed
    }

    /// Passes over a line that is no SQL; gives its number.
    pub(super) fn skip_line(&mut self) -> u64 {
        self.before += 1;
        self.before
    }

    /// The statement that was begun, for want of a semicolon: what is left at the end of a file.
    pub(super) fn finish(&mut self) -> Option<Typed> {
        let text = std::mem::take(&mut self.text);
        self.begun = false;
        let scan = scan(&text);
        let begin =
            scan.pieces.first().map(|piece| piece.range.start).or_else(|| scan.open.map(|(_, at)| at))?;
        let line = self.before + 1 + breaks(&text[..begin]);
        self.before += breaks(&text);
        Some(Typed { sql: text[begin..].trim_end().to_string(), line })
    }

    /// Forgets what was begun.
    pub(super) fn drop_begun(&mut self) {
        self.before += breaks(&self.text);
        self.text.clear();
        self.begun = false;
    }

    /// Whether a statement has been begun.
    pub(super) fn is_open(&self) -> bool {
        !self.text.trim().is_empty()
    }

    /// What has been typed of a statement that has no end yet.
    pub(super) fn begun(&self) -> &str {
        &self.text
    }

    /// The prompt for the next line. Within a statement it tells what is open: a string, a name, a comment, a bracket.
    pub(super) fn prompt(&self) -> String {
        if !self.is_open() {
            return PROMPT.to_string();
        }
        let scan = scan(&self.text);
        let sign = match scan.open {
            Some((Open::Text, _)) => "'".to_string(),
            Some((Open::Name(quote), _)) => quote.to_string(),
            Some((Open::Comment, _)) => "/*".to_string(),
            Some((Open::Other, _)) => "$".to_string(),
            None if brackets(&scan) > 0 => "(".to_string(),
            None => "-".to_string(),
        };
        format!("{sign:>width$}> ", width = PROMPT.len() - 2)
    }
}

fn breaks(text: &str) -> u64 {
    text.matches('\n').count() as u64
}

/// Brackets that were opened and not closed.
fn brackets(scan: &Scan) -> i64 {
    let step = |piece: &Piece| match piece.token {
        Token::LParen | Token::LBracket | Token::LBrace => 1,
        Token::RParen | Token::RBracket | Token::RBrace => -1,
        _ => 0,
    };
    scan.last_statement().iter().map(step).sum()
}

/// A text, cut at its semicolons.
struct Cut {
    /// The complete statements, their semicolons included.
    statements: Vec<Range<usize>>,
    /// Where the rest begins. One without a word (white space, comments) is none: it begins at the end then.
    rest: usize,
    /// Whether a word stands in the rest.
    begun: bool,
}

fn cut(text: &str) -> Cut {
    let scan = scan(text);
    let mut statements = Vec::new();
    let mut begin: Option<usize> = None;
    let mut rest = 0;
    for piece in &scan.pieces {
        if piece.token == Token::SemiColon {
            statements.extend(begin.take().map(|begin| begin..piece.range.end));
            rest = piece.range.end;
        } else {
            begin.get_or_insert(piece.range.start);
        }
    }
    let begun = begin.is_some();
    Cut { statements, rest: if begun || scan.open.is_some() { rest } else { text.len() }, begun }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statements;

    fn typed(lines: &[&str]) -> Vec<(String, u64)> {
        let mut input = Input::default();
        lines.iter().flat_map(|line| input.push(line)).map(|typed| (typed.sql, typed.line)).collect()
    }

    #[test]
    fn a_semicolon_ends_a_statement_wherever_it_is_one() {
        let one = |sql: &str, line| vec![(sql.to_string(), line)];
        assert_eq!(typed(&["SELECT 1;"]), one("SELECT 1;", 1));
        assert_eq!(typed(&["", "SELECT", "  1", ";"]), one("SELECT\n  1\n;", 2));
        assert_eq!(typed(&["SELECT ';' AS \";\" -- ;", "/* ; */;"]).len(), 1);
        assert_eq!(typed(&["SELECT 1; SELECT 2;;", "SELECT 3;"]).len(), 3);
        assert_eq!(typed(&["SELECT 'a", "b;", "c';"]), one("SELECT 'a\nb;\nc';", 1));
        assert!(typed(&["-- only a comment;", ";"]).is_empty());
        assert_eq!(typed(&["/* a comment", "of two lines; */", "SELECT 1;"]), one("SELECT 1;", 3));
    }

    #[test]
    fn lines_are_those_of_everything_typed() {
        let lines: Vec<u64> =
            typed(&["SELECT 1;", "-- two", "SELECT 2; SELECT", "3;"]).iter().map(|t| t.1).collect();
        assert_eq!(lines, [1, 3, 3]);
    }

    #[test]
    fn what_is_cut_is_what_the_engine_finds() {
        let job = "-- a;\nSELECT ';', $$;$$, \"a;b\" /* ; /* ; */ ; */ FROM t;;\nSELECT E'\\';' AS a;\n\nSELECT 1 -- ;\n;";
        let found: Vec<_> = statements::parse(job).expect("parses").iter().map(|s| s.place.line).collect();
        let cut: Vec<_> = typed(&job.lines().collect::<Vec<_>>()).iter().map(|typed| typed.1).collect();
        assert_eq!(cut, found);
    }

    #[test]
    fn the_rest_at_the_end_of_a_file_is_a_statement() {
        let mut input = Input::default();
        assert_eq!(input.push("SELECT 1; SELECT 2").len(), 1);
        assert!(input.push("-- end").is_empty());
        let rest = input.finish().expect("begun");
        assert_eq!((rest.sql.as_str(), rest.line), ("SELECT 2\n-- end", 1));
        assert_eq!(input.finish(), None);
    }

    #[test]
    fn the_prompt_tells_what_is_open() {
        for (line, sign) in [
            ("SELECT", "        -> "),
            ("SELECT f(", "        (> "),
            ("SELECT 'a", "        '> "),
            ("SELECT \"a", "        \"> "),
            ("SELECT /* a", "       /*> "),
            ("SELECT $$", "        $> "),
            ("SELECT 1;", PROMPT),
            ("-- nothing", PROMPT),
        ] {
            let mut input = Input::default();
            input.push(line);
            assert_eq!(input.prompt(), sign, "{line}");
        }
    }

    #[test]
    fn what_was_begun_can_be_dropped() {
        let mut input = Input::default();
        input.push("SELECT 'never");
        input.drop_begun();
        assert_eq!(input.push("SELECT 1;"), [Typed { sql: "SELECT 1;".to_string(), line: 2 }]);
    }
}
