//! The SQL in the README runs, and what it shows is what is answered.
//!
//! A block marked `sql` is run, all of a document in one session from the root of the repository; a block marked `text`
//! straight after it is the answer of its last statement.
//!
//!     STILLWELL_README=complete cargo test -p stillwell-tests readme
//!
//! writes the answers into README.md instead of comparing: read the difference before keeping it.

use std::env;
use std::fs;
use std::path::Path;

use arrow::array::RecordBatch;
use arrow::util::display::FormatOptions;
use arrow::util::pretty::pretty_format_batches_with_options;

use crate::jobs::{Detour, run};
use crate::nightly;
use crate::outlook::{JOB, Outlook};
use crate::support::{ROOT, session_over_files};

/// A fenced block of a Markdown document.
#[derive(Debug, PartialEq, Eq)]
struct Block {
    /// What stands behind the opening fence.
    language: String,
    /// Line of the opening fence, from 1.
    line: usize,
    text: String,
}

/// All fenced blocks.
fn blocks(document: &str) -> Vec<Block> {
    let mut blocks = Vec::new();
    let mut open: Option<Block> = None;
    for (at, line) in document.lines().enumerate() {
        match (line.strip_prefix("```"), open.take()) {
            (Some(_), Some(block)) => blocks.push(block),
            (Some(language), None) => {
                open =
                    Some(Block { language: language.trim().to_string(), line: at + 1, text: String::new() });
            }
            (None, Some(mut block)) => {
                block.text.push_str(line);
                block.text.push('\n');
                open = Some(block);
            }
            (None, None) => {}
        }
    }
    assert!(open.is_none(), "a block is not closed: {open:?}");
    blocks
}

/// The cells of a table, without the spaces and rules that only make it pretty.
fn cells(table: &str) -> Vec<Vec<&str>> {
    let rows = table.lines().filter(|line| line.starts_with('|'));
    rows.map(|row| row.trim_matches('|').split('|').map(str::trim).collect()).collect()
}

/// A block that shows something else than the answer.
#[derive(Debug)]
struct Stale {
    /// Line of the opening fence of what is shown, and how many lines it has.
    shown: (usize, usize),
    answer: String,
}

/// Where a document fails.
#[derive(Debug, Default)]
struct Found {
    failures: Vec<String>,
    stale: Vec<Stale>,
}

/// The answer, if the document shows another one.
fn other(rows: &[RecordBatch], shown: &str) -> Result<Option<String>, String> {
    let options = FormatOptions::default().with_null("NULL");
    let answer =
        pretty_format_batches_with_options(rows, &options).map_err(|error| error.to_string())?.to_string();
    Ok((cells(&answer) != cells(shown)).then_some(answer))
}

/// Runs the SQL of a document; what fails, each with the number and line of its block.
async fn check(name: &str, document: &str, detour: &mut Detour, folder: &Path) -> Found {
    let context = session_over_files();
    let blocks = blocks(document);
    let mut found = Found::default();
    let mut number = 0;
    for (at, block) in blocks.iter().enumerate().filter(|(_, block)| block.language == "sql") {
        number += 1;
        detour.add(&block.text, folder);
        let shown = blocks.get(at + 1).filter(|next| next.language == "text");
        let outcome = match (run(&context, &block.text, detour).await, shown) {
            (Ok(rows), Some(shown)) => other(&rows, &shown.text).map(|answer| answer.zip(Some(shown))),
            (outcome, _) => outcome.map(|_| None),
        };
        let failure = match outcome {
            Ok(None) => continue,
            Ok(Some((answer, shown))) => {
                let failure = format!("the document shows another answer:\n{answer}");
                found.stale.push(Stale { shown: (shown.line, shown.text.lines().count()), answer });
                failure
            }
            Err(failure) => failure,
        };
        found.failures.push(format!("{name}, SQL block {number} (line {}): {failure}", block.line));
    }
    assert!(number > 0, "{name} has no block marked sql");
    found
}

/// The document with the answers in place of what it shows.
fn completed(document: &str, stale: &[Stale]) -> String {
    let mut lines = document.lines().map(str::to_string).collect::<Vec<_>>();
    // From the end, so that the lines before keep their numbers.
    for Stale { shown: (fence, count), answer } in stale.iter().rev() {
        lines.splice(*fence..fence + count, answer.lines().map(str::to_string));
    }
    lines.join("\n") + "\n"
}

fn runtime() -> tokio::runtime::Runtime {
    tokio::runtime::Builder::new_multi_thread().enable_all().build().expect("a runtime")
}

#[test]
fn the_readme_says_what_the_program_does() {
    let outlook = Outlook::get();
    let folder = tempfile::tempdir().expect("a temporary folder");
    let mut detour = Detour::default();
    // The README begins with the demo job, whose results it may read.
    detour.add(&fs::read_to_string(ROOT.join(JOB)).expect("the demo job"), outlook.folder.path());
    let readme = fs::read_to_string(ROOT.join("README.md")).expect("README.md");
    let found = runtime().block_on(check("README.md", &readme, &mut detour, folder.path()));
    if env::var("STILLWELL_README").is_ok_and(|word| word == "complete") {
        fs::write(ROOT.join("README.md"), completed(&readme, &found.stale))
            .expect("README.md can be written");
        return;
    }
    assert!(found.failures.is_empty(), "\n\n{}", found.failures.join("\n\n"));
}

#[test]
fn the_jobs_of_the_demo_run() {
    // The main one has run already, for those who look at what it wrote.
    Outlook::get();
    let folder = tempfile::tempdir().expect("a temporary folder");
    // The nightly ones run one after the other, in a test of their own.
    let elsewhere = [JOB, nightly::SUNDAY, nightly::MONDAY];
    for entry in fs::read_dir(ROOT.join("parquet-samples")).expect("the demo") {
        let path = entry.expect("an entry").path();
        let run_elsewhere = elsewhere.iter().any(|job| path.ends_with(job));
        if path.extension().is_none_or(|extension| extension != "sql") || run_elsewhere {
            continue;
        }
        let job = fs::read_to_string(&path).expect("a job");
        let mut detour = Detour::default();
        detour.add(&job, folder.path());
        if let Err(failure) = runtime().block_on(run(&session_over_files(), &job, &detour)) {
            panic!("{}: {failure}", path.display());
        }
    }
}

#[test]
fn blocks_know_their_language_and_line() {
    let document = "# A\n\n```sql\nSELECT 1;\n```\ntext\n```text\n| 1 |\n```\n";
    let found = blocks(document);
    assert_eq!(
        found.iter().map(|b| (b.language.as_str(), b.line)).collect::<Vec<_>>(),
        [("sql", 3), ("text", 7)]
    );
    assert_eq!(found[0].text, "SELECT 1;\n");
}

#[test]
fn a_wrong_answer_and_a_broken_statement_are_found() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let document = "```sql\nSELECT 1 AS one;\n```\n\n```text\n| one |\n| 2   |\n```\n\n```sql\nSELECT 1;\nSELECT nothing;\n```\n\
                    ```sql\nSELECT 3 AS three\n```\n```text\n+---+\n| three |\n+---+\n|     3 |\n```\n";
    let found = runtime().block_on(check("x.md", document, &mut Detour::default(), folder.path()));
    let [first, second] = found.failures.as_slice() else { panic!("{found:?}") };
    assert!(first.starts_with("x.md, SQL block 1 (line 1): the document shows another answer"), "{first}");
    assert!(second.starts_with("x.md, SQL block 2 (line 10): statement 2: "), "{second}");
    let now = completed(document, &found.stale);
    assert_eq!(cells(&blocks(&now)[1].text), [["one"], ["1"]]);
    assert_eq!(blocks(&now).len(), blocks(document).len());
}
