//! What may stand where the cursor is.
//!
//! [`complete`] looks at the tokens before the cursor: inside a call of a function of the library it offers the
//! arguments not given yet and, after `=>`, their words or the columns; after FROM and the like the tables and those
//! functions; after a dot the columns of that table; elsewhere columns, tables, functions and keywords. Columns are those
//! of the tables that the statement mentions, on either side of the cursor.

use datafusion::common::utils::quote_identifier;
use datafusion::sql::sqlparser::keywords::{ALL_KEYWORDS, Keyword, RESERVED_FOR_TABLE_ALIAS};
use datafusion::sql::sqlparser::tokenizer::Token;
use stillwell::Takes;

use super::names::{ArgumentName, Names, RelationFunction, TableNames};
use super::tokens::{Open, Piece, Scan, scan};
use super::words::{self, Next};

/// Something that may stand at the cursor.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Candidate {
    /// As shown in a list of several.
    pub(super) shown: String,
    /// As written into the line.
    pub(super) text: String,
}

impl Candidate {
    fn plain(text: impl Into<String>) -> Self {
        let text = text.into();
        Self { shown: text.trim_end().to_string(), text }
    }
}

/// What can replace the bytes from `from` to the cursor.
#[derive(Debug, Default, PartialEq, Eq)]
pub(super) struct Completion {
    pub(super) from: usize,
    pub(super) candidates: Vec<Candidate>,
}

/// What may stand at byte `cursor` of `text`, the whole statement as far as it is typed.
pub(super) fn complete(text: &str, cursor: usize, names: &Names) -> Completion {
    let Some(before) = text.get(..cursor) else { return Completion::default() };
    let scan = scan(before);
    let statement = Statement { tables: mentioned(text, cursor, names), names };
    match scan.open {
        Some((Open::Text, at)) => {
            let words = statement.words(&place(scan.last_statement(), names));
            return closed_by(text, cursor, '\'', offer(before, at, words));
        }
        Some((Open::Name(quote), at)) => {
            let all = statement.candidates(&place(scan.last_statement(), names), "", true);
            let all = all.iter().map(|candidate| requoted(candidate, quote)).collect();
            return closed_by(text, cursor, quote, offer(before, at, all));
        }
        Some((Open::Comment | Open::Other, _)) => return Completion::default(),
        None => {}
    }
    let (pieces, from) = typed_word(&scan, before.len());
    if before[..from].ends_with(|c: char| c.is_alphanumeric() || "_'\"`)]}$".contains(c)) {
        // A number, a string or a bracket that ends here is finished.
        return Completion::default();
    }
    if let Some(completion) = of_shell(before, pieces, &scan, from, names) {
        return completion;
    }
    offer(before, from, statement.candidates(&place(pieces, names), &before[from..], false))
}

/// The candidates without their last quote where it stands behind the cursor already.
fn closed_by(text: &str, cursor: usize, quote: char, mut completion: Completion) -> Completion {
    if text[cursor..].starts_with(quote) {
        for candidate in &mut completion.candidates {
            candidate.text.pop();
        }
    }
    completion
}

/// The tokens before the word that ends at the cursor, and where that word begins (at the cursor, if there is none).
fn typed_word(scan: &Scan, cursor: usize) -> (&[Piece], usize) {
    let pieces = scan.last_statement();
    match pieces.split_last() {
        Some((last, before)) if last.range.end == cursor && is_bare_word(&last.token) => {
            (before, last.range.start)
        }
        _ => (pieces, cursor),
    }
}

fn is_bare_word(token: &Token) -> bool {
    matches!(token, Token::Word(word) if word.quote_style.is_none())
}

/// Lines of the shell's own words.
fn of_shell(before: &str, pieces: &[Piece], scan: &Scan, from: usize, names: &Names) -> Option<Completion> {
    // They stand on the first line of what has been typed.
    if before.contains('\n') || scan.pieces.iter().any(|piece| piece.token == Token::SemiColon) {
        return None;
    }
    let line: Vec<String> =
        pieces.iter().map(|piece| before[piece.range.clone()].to_ascii_lowercase()).collect();
    let listed = |list: Vec<String>| list.into_iter().map(Candidate::plain).collect::<Vec<_>>();
    let candidates = match words::next(&line)? {
        // The first word may be one of SQL too.
        Next::Of(list) if line.is_empty() => {
            let mut all = listed(list);
            if !before[from..].is_empty() {
                all.extend(keywords(&before[from..]));
            }
            all
        }
        Next::Of(list) => listed(list),
        Next::Function => listed(names.relations.iter().map(|function| function.name.clone()).collect()),
        Next::Table => names.tables.iter().map(table).collect(),
    };
    Some(offer(before, from, candidates))
}

/// Where the cursor stands.
#[derive(Debug)]
enum Place<'a> {
    /// Before `=>` in a call: a name of an argument, those left that are not given yet.
    Argument(Vec<&'a ArgumentName>),
    /// Behind `=>`.
    Value(&'a ArgumentName),
    /// After FROM, JOIN and the like.
    Relation,
    /// After `name.`
    Within(String),
    /// Anywhere else.
    Expression,
}

fn place<'a>(pieces: &[Piece], names: &'a Names) -> Place<'a> {
    if let [.., of, last] = pieces
        && last.token == Token::Period
        && let Token::Word(word) = &of.token
    {
        return Place::Within(word.value.clone());
    }
    if let Some((function, arguments)) = enclosing_call(pieces, names) {
        let (given, current) = split_arguments(arguments);
        match current {
            [] => {
                let left =
                    function.arguments.iter().filter(|argument| !given.contains(&argument.name.as_str()));
                return Place::Argument(left.collect());
            }
            [name, arrow] if arrow.token == Token::RArrow => {
                let named = function.arguments.iter().find(|argument| is_named(name, &argument.name));
                return named.map_or(Place::Expression, Place::Value);
            }
            _ => {}
        }
    }
    match pieces.last().map(|piece| &piece.token) {
        Some(Token::Word(word)) if takes_relation(word.keyword) => Place::Relation,
        _ => Place::Expression,
    }
}

fn takes_relation(keyword: Keyword) -> bool {
    matches!(
        keyword,
        Keyword::FROM
            | Keyword::JOIN
            | Keyword::INTO
            | Keyword::TABLE
            | Keyword::VIEW
            | Keyword::DESCRIBE
            | Keyword::COPY
            | Keyword::UPDATE
    )
}

/// The call of one of the library's functions whose brackets the cursor is directly inside, and the tokens of its
/// arguments so far.
fn enclosing_call<'p, 'a>(
    pieces: &'p [Piece],
    names: &'a Names,
) -> Option<(&'a RelationFunction, &'p [Piece])> {
    let mut closed = 0;
    let bracket = pieces.iter().rposition(|piece| match piece.token {
        Token::RParen | Token::RBracket | Token::RBrace => {
            closed += 1;
            false
        }
        Token::LParen | Token::LBracket | Token::LBrace if closed > 0 => {
            closed -= 1;
            false
        }
        Token::LParen | Token::LBracket | Token::LBrace => true,
        _ => false,
    })?;
    if pieces[bracket].token != Token::LParen {
        return None;
    }
    let name = &pieces[bracket.checked_sub(1)?];
    let function = names.relations.iter().find(|function| is_named(name, &function.name))?;
    Some((function, &pieces[bracket + 1..]))
}

/// The names of the arguments given, and the tokens after the last comma.
fn split_arguments(arguments: &[Piece]) -> (Vec<&str>, &[Piece]) {
    let mut given = Vec::new();
    let mut depth = 0;
    let mut begin = 0;
    for (at, piece) in arguments.iter().enumerate() {
        match &piece.token {
            Token::LParen | Token::LBracket | Token::LBrace => depth += 1,
            Token::RParen | Token::RBracket | Token::RBrace => depth -= 1,
            Token::Comma if depth == 0 => begin = at + 1,
            Token::RArrow if depth == 0 && at == begin + 1 => {
                if let Token::Word(word) = &arguments[begin].token {
                    given.push(word.value.as_str());
                }
            }
            _ => {}
        }
    }
    (given, &arguments[begin..])
}

fn is_named(piece: &Piece, name: &str) -> bool {
    matches!(&piece.token, Token::Word(word) if match word.quote_style {
        None => word.value.eq_ignore_ascii_case(name),
        Some(_) => word.value == name,
    })
}

/// A table that the statement mentions, and the name it has there.
type Mention<'a> = (&'a TableNames, Option<String>);

/// The tables that the statement around the cursor mentions, before or after it: people write FROM before they go back
/// for the columns.
fn mentioned<'a>(text: &str, cursor: usize, names: &'a Names) -> Vec<Mention<'a>> {
    let begin = scan(&text[..cursor]).last_statement().first().map_or(cursor, |piece| piece.range.start);
    let whole = scan(&text[begin..]);
    let end = whole.pieces.iter().position(|piece| piece.token == Token::SemiColon);
    let pieces = &whole.pieces[..end.unwrap_or(whole.pieces.len())];
    let mut found: Vec<Mention<'a>> = Vec::new();
    for (at, piece) in pieces.iter().enumerate() {
        let is_meant = |table: &&TableNames| table.path.last().is_some_and(|name| is_named(piece, name));
        let Some(table) = names.tables.iter().find(is_meant) else { continue };
        let alias = alias(&pieces[at + 1..]);
        if !found.iter().any(|(known, name)| std::ptr::eq(*known, table) && *name == alias) {
            found.push((table, alias));
        }
    }
    found
}

/// `AS s` or `s` after the name of a table.
fn alias(after: &[Piece]) -> Option<String> {
    let word = |piece: &Piece| match &piece.token {
        Token::Word(word)
            if word.quote_style.is_some() || !RESERVED_FOR_TABLE_ALIAS.contains(&word.keyword) =>
        {
            Some(word.value.clone())
        }
        _ => None,
    };
    match after {
        [first, second, ..] if matches!(&first.token, Token::Word(w) if w.keyword == Keyword::AS) => {
            word(second)
        }
        [first, ..] => word(first),
        [] => None,
    }
}

/// The names a statement can use.
struct Statement<'a> {
    tables: Vec<Mention<'a>>,
    names: &'a Names,
}

impl Statement<'_> {
    /// What fits to `place`. `quoted`: a quoted name is being typed, which no keyword or function is.
    fn candidates(&self, place: &Place<'_>, word: &str, quoted: bool) -> Vec<Candidate> {
        match place {
            Place::Argument(_) | Place::Value(_) if quoted => self.columns(),
            Place::Argument(left) => {
                left.iter().map(|argument| Candidate::plain(format!("{} => ", argument.name))).collect()
            }
            Place::Value(argument) => match argument.takes {
                Takes::Relation => self.names.tables.iter().map(table).collect(),
                Takes::Column | Takes::Columns => self.columns(),
                Takes::Value | Takes::Constant => self.words(place),
            },
            Place::Relation => {
                let mut all: Vec<Candidate> = self.tables_to_name(quoted);
                if !quoted {
                    all.extend(self.names.relations.iter().map(|function| call(&function.name)));
                }
                all
            }
            Place::Within(name) => self.within(name),
            Place::Expression => {
                let mut all = self.columns();
                all.extend(self.tables_to_name(quoted));
                // Without a letter to go by, a thousand keywords are no help.
                if !word.is_empty() {
                    all.extend(self.names.functions.iter().map(|name| call(name)));
                    all.extend(keywords(word));
                }
                all
            }
        }
    }

    /// The tables, without those in other schemas where one quoted name is typed.
    fn tables_to_name(&self, quoted: bool) -> Vec<Candidate> {
        self.names.tables.iter().filter(|table| !quoted || table.path.len() == 1).map(table).collect()
    }

    /// The words that the argument takes whose value is being typed.
    fn words(&self, place: &Place<'_>) -> Vec<Candidate> {
        match place {
            Place::Value(argument) => argument.words.iter().map(Candidate::plain).collect(),
            _ => Vec::new(),
        }
    }

    /// The columns of the tables mentioned; of all, while none is.
    fn columns(&self) -> Vec<Candidate> {
        let all: Vec<&TableNames> = match self.tables.is_empty() {
            true => self.names.tables.iter().collect(),
            false => self.tables.iter().map(|(table, _)| *table).collect(),
        };
        all.iter().flat_map(|table| &table.columns).map(|column| Candidate::plain(quoted(column))).collect()
    }

    /// What stands after `name.`: the columns of a table or its alias, the tables of a schema.
    fn within(&self, name: &str) -> Vec<Candidate> {
        let is = |other: &str| other.eq_ignore_ascii_case(name);
        let aliased =
            self.tables.iter().find(|(_, alias)| alias.as_deref().is_some_and(is)).map(|(table, _)| *table);
        let named = || self.names.tables.iter().find(|table| table.path.last().is_some_and(|last| is(last)));
        if let Some(table) = aliased.or_else(named) {
            return table.columns.iter().map(|column| Candidate::plain(quoted(column))).collect();
        }
        let below = |table: &TableNames| {
            let at = table.path.iter().position(|part| is(part))?;
            let rest = table.path.get(at + 1..).filter(|rest| !rest.is_empty())?;
            Some(Candidate::plain(rest.iter().map(|part| quoted(part)).collect::<Vec<_>>().join(".")))
        };
        self.names.tables.iter().filter_map(below).collect()
    }
}

fn table(names: &TableNames) -> Candidate {
    Candidate::plain(names.path.iter().map(|part| quoted(part)).collect::<Vec<_>>().join("."))
}

fn call(name: &str) -> Candidate {
    Candidate { shown: format!("{name}()"), text: format!("{name}(") }
}

/// A name as SQL wants it: in double quotes where capital letters or blanks would be lost.
fn quoted(name: &str) -> String {
    quote_identifier(name).into_owned()
}

fn requoted(candidate: &Candidate, quote: char) -> Candidate {
    let bare = candidate.text.trim_matches('"').replace("\"\"", "\"");
    let doubled = bare.replace(quote, &format!("{quote}{quote}"));
    Candidate::plain(format!("{quote}{doubled}{quote}"))
}

/// The keywords that begin as `word` does, in its letters.
fn keywords(word: &str) -> Vec<Candidate> {
    let upper = word.to_ascii_uppercase();
    let small = word.chars().all(|c| !c.is_ascii_uppercase());
    ALL_KEYWORDS
        .iter()
        .filter(|keyword| keyword.starts_with(&upper))
        .map(|keyword| {
            Candidate::plain(if small { keyword.to_ascii_lowercase() } else { (*keyword).to_string() })
        })
        .collect()
}

/// Those of `candidates` that begin with what stands from `from` to the end of `before`, each once.
fn offer(before: &str, from: usize, candidates: Vec<Candidate>) -> Completion {
    let typed = &before[from..];
    let begins = |text: &str| {
        // Quotes are added where somebody has typed none.
        let plain =
            if typed.starts_with(['"', '`', '\'']) { text } else { text.trim_start_matches(['"', '\'']) };
        plain.get(..typed.len()).is_some_and(|start| start.eq_ignore_ascii_case(typed))
    };
    let mut offered: Vec<Candidate> = Vec::new();
    for candidate in candidates {
        if begins(&candidate.text) && !offered.iter().any(|known| known.text == candidate.text) {
            offered.push(candidate);
        }
    }
    Completion { from, candidates: offered }
}

#[cfg(test)]
mod tests;
