//! Text that is being typed, as the tokens of the engine's own tokenizer.
//!
//! A text that is not finished may end within a string, a quoted name or a comment. The tokenizer then gives the tokens
//! before it and an error; [`Scan::open`] tells where that unfinished token begins and what it is.

use std::ops::Range;

use datafusion::sql::sqlparser::dialect::GenericDialect;
use datafusion::sql::sqlparser::tokenizer::{Location, Token, TokenWithSpan, Tokenizer, Whitespace};

/// What a text ends within.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Open {
    /// `'…`
    Text,
    /// `"…` or `` `… ``
    Name(char),
    /// `/*…`, or `--…` at the very end
    Comment,
    /// `$$…`, or something the tokenizer knows no end of
    Other,
}

/// A token and the bytes of the text it stands on.
#[derive(Debug, Clone)]
pub(super) struct Piece {
    pub(super) token: Token,
    pub(super) range: Range<usize>,
}

/// The tokens of a text.
#[derive(Debug)]
pub(super) struct Scan {
    /// All finished tokens, white space and comments left out.
    pub(super) pieces: Vec<Piece>,
    /// What the text ends within, and the byte that begins it: that of the quote, for strings and names.
    pub(super) open: Option<(Open, usize)>,
}

impl Scan {
    /// The tokens after the last semicolon.
    pub(super) fn last_statement(&self) -> &[Piece] {
        let begin =
            self.pieces.iter().rposition(|piece| piece.token == Token::SemiColon).map_or(0, |at| at + 1);
        &self.pieces[begin..]
    }
}

/// Reads `text` as far as it goes.
pub(super) fn scan(text: &str) -> Scan {
    let mut tokens: Vec<TokenWithSpan> = Vec::new();
    let whole = Tokenizer::new(&GenericDialect {}, text).tokenize_with_location_into_buf(&mut tokens);
    let lines = Lines::of(text);
    let mut open = None;
    if let Some(TokenWithSpan {
        token: Token::Whitespace(Whitespace::SingleLineComment { comment, .. }),
        span,
    }) = tokens.last()
        && !comment.ends_with('\n')
    {
        open = Some((Open::Comment, lines.byte(span.start)));
    }
    if whole.is_err() {
        let begin = tokens.last().map_or(0, |last| lines.byte(last.span.end));
        open = Some(opened(text, begin));
    }
    let pieces = tokens
        .into_iter()
        .filter(|token| !matches!(token.token, Token::Whitespace(_)))
        .map(|token| {
            let range = lines.byte(token.span.start)..lines.byte(token.span.end);
            Piece { token: token.token, range }
        })
        .collect();
    Scan { pieces, open }
}

/// What the unfinished token at `begin` is. A letter may stand before its quote, as in `E'…`.
fn opened(text: &str, begin: usize) -> (Open, usize) {
    let rest = text.get(begin..).unwrap_or_default();
    let Some(at) = rest.find(['\'', '"', '`', '$', '/']) else { return (Open::Other, begin) };
    let kind = match rest[at..].chars().next() {
        Some('\'') => Open::Text,
        Some(quote @ ('"' | '`')) => Open::Name(quote),
        Some('/') => Open::Comment,
        _ => Open::Other,
    };
    (kind, begin + at)
}

/// Where the lines of a text begin, to find the byte of a line and column.
struct Lines<'a> {
    text: &'a str,
    begins: Vec<usize>,
}

impl<'a> Lines<'a> {
    fn of(text: &'a str) -> Self {
        let begins = std::iter::once(0).chain(text.match_indices('\n').map(|(at, _)| at + 1)).collect();
        Self { text, begins }
    }

    /// The byte at `location`, whose lines and columns count characters from 1.
    fn byte(&self, location: Location) -> usize {
        let line = usize::try_from(location.line).unwrap_or(1).saturating_sub(1);
        let column = usize::try_from(location.column).unwrap_or(1).saturating_sub(1);
        let begin = self.begins.get(line).copied().unwrap_or(self.text.len());
        let rest = &self.text[begin..];
        // Columns are bytes where there are no other characters than ASCII before them.
        if rest.get(..column).is_some_and(str::is_ascii) {
            return begin + column;
        }
        rest.char_indices().nth(column).map_or(self.text.len(), |(at, _)| begin + at)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn words(text: &str) -> Vec<&str> {
        scan(text).pieces.into_iter().map(|piece| &text[piece.range]).collect()
    }

    #[test]
    fn tokens_stand_where_they_are_written() {
        assert_eq!(
            words("SELECT 'ä;' AS \"ö\",\n  x -- no;\n;"),
            ["SELECT", "'ä;'", "AS", "\"ö\"", ",", "x", ";"]
        );
    }

    #[test]
    fn what_is_open_is_known() {
        for (text, open) in [
            ("SELECT 'a''b", Some((Open::Text, 7))),
            ("SELECT E'a", Some((Open::Text, 8))),
            ("SELECT \"a", Some((Open::Name('"'), 7))),
            ("SELECT `a", Some((Open::Name('`'), 7))),
            ("SELECT /* a /* b */", Some((Open::Comment, 7))),
            ("SELECT -- a", Some((Open::Comment, 7))),
            ("SELECT -- a\n", None),
            ("SELECT $$ a", Some((Open::Other, 7))),
            ("SELECT $tag$ a $$", Some((Open::Other, 7))),
            ("SELECT 'a' /* b */ \"c\"", None),
        ] {
            assert_eq!(scan(text).open, open, "{text}");
        }
    }
}
