//! COPY and `--to` on the local file system: the whole result or nothing.
//!
//! The engine writes a COPY file by file into the target folder, beside what is there: a job that fails leaves
//! half of its result, and a job that runs twice leaves its rows twice. Here the engine is given another place
//! to write to:
//!
//! 1. a hidden folder beside the target, on the same file system (`.outlook.stillwell-Xy3k9Q`), holds the new
//!    content while the statement runs; readers of the target see the old content. A statement that reads what it
//!    would replace is refused (`sources`): its source would be gone;
//! 2. when the statement has succeeded, the content is given stable names (`part_names`), flushed to the disk
//!    (`disk`) and put in the target's place by a rename (`swap`); an existing folder is replaced whole, and only if it
//!    holds nothing but files of the format that is written (`contents`);
//! 3. the hidden folder is removed, with the old content in it: also when the statement fails, at Ctrl-C and at
//!    a panic. A process that is killed outright leaves it behind; it is recognised (nobody holds its lock) and
//!    cleared by the next job that writes to the same target (`staging`).
//!
//! In an object store a set of objects has no rename. A COPY to a URL is checked to add to nothing and to replace nothing
//! it reads, and its objects are held back until the statement has succeeded (`remote`).

mod conflicts;
mod contents;
mod disk;
mod part_names;
mod plain_columns;
mod remote;
mod sources;
mod staging;
mod swap;
mod target;

use std::sync::Arc;

use arrow::datatypes::SchemaRef;
use datafusion::common::DataFusionError;
use datafusion::execution::context::SessionContext;
use datafusion::logical_expr::dml::CopyTo;
use datafusion::logical_expr::{Analyze, LogicalPlan};

use parquet::arrow::ArrowWriter;
use parquet::errors::ParquetError;

pub(crate) use conflicts::refuse_conflicts;
pub(crate) use plain_columns::plain_type;
pub(crate) use staging::{Staging, clear_leftovers, remove_all_unfinished};
pub(crate) use target::{Kind, Target};

use crate::errors;
use crate::exit::{Failure, Outcome};
use crate::stores::Held;

/// What a statement has written.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Written {
    /// The target as the statement names it.
    pub(crate) target: String,
    /// One file, a folder of files, or a place the engine wrote to by itself.
    pub(crate) kind: Option<Kind>,
    /// Rows, where the engine counted them.
    pub(crate) rows: Option<u64>,
    /// Number and bytes of the files, where they are local.
    pub(crate) files: Option<Files>,
}

/// How much lies in a place.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub(crate) struct Files {
    pub(crate) number: usize,
    pub(crate) bytes: u64,
}

/// A plan ready to run, and where its COPY (if it has one) is staged.
#[derive(Debug)]
pub(crate) struct Prepared {
    pub(crate) plan: LogicalPlan,
    copy: Option<Copy>,
}

#[derive(Debug)]
struct Copy {
    target: String,
    output: Output,
}

/// What waits for the end of a statement.
#[derive(Debug)]
enum Output {
    Local(Staging),
    Remote(Held),
}

/// Points the COPY of `plan` (itself a COPY, or EXPLAIN ANALYZE of one) at a staging folder, or looks at its target
/// in an object store. Other plans pass unchanged.
///
/// # Errors
/// When the target cannot or must not be replaced; nothing has been touched then.
pub(crate) async fn prepare(plan: LogicalPlan, context: &SessionContext) -> Outcome<Prepared> {
    match plan {
        LogicalPlan::Copy(copy) => {
            let (copy, staged) = stage(copy, context).await?;
            Ok(Prepared { plan: LogicalPlan::Copy(copy), copy: Some(staged) })
        }
        LogicalPlan::Analyze(analyze) => match analyze.input.as_ref() {
            LogicalPlan::Copy(copy) => {
                let (copy, staged) = stage(copy.clone(), context).await?;
                let analyze = Analyze { input: Arc::new(LogicalPlan::Copy(copy)), ..analyze };
                Ok(Prepared { plan: LogicalPlan::Analyze(analyze), copy: Some(staged) })
            }
            _ => Ok(Prepared { plan: LogicalPlan::Analyze(analyze), copy: None }),
        },
        plan => Ok(Prepared { plan, copy: None }),
    }
}

async fn stage(copy: CopyTo, context: &SessionContext) -> Outcome<(CopyTo, Copy)> {
    let shown = copy.output_url.clone();
    let output = match Target::of_copy(&copy)? {
        Some(target) => {
            sources::refuse(&copy.input, &target)?;
            Output::Local(Staging::open(target)?)
        }
        None => Output::Remote(remote::open(&copy, context).await?),
    };
    let keeps_keys = context.state().config_options().execution.keep_partition_by_columns;
    let mut copy = plain_columns::simplify(copy, keeps_keys).map_err(|error| errors::failure(&error))?;
    copy.output_url = match &output {
        Output::Local(staging) => staging.url()?,
        Output::Remote(held) => held.url().to_string(),
    };
    Ok((copy, Copy { target: shown, output }))
}

impl Prepared {
    /// Whether the plan writes files.
    pub(crate) fn writes(&self) -> bool {
        self.copy.is_some()
    }

    /// Puts the finished output of a successful statement in its place. `rows`: as counted by the engine.
    ///
    /// # Errors
    /// When the file system refuses, and the old content is in its place then; when a store refuses.
    pub(crate) async fn finish(self, rows: Option<u64>) -> Outcome<Option<Written>> {
        let Some(Copy { target, output }) = self.copy else { return Ok(None) };
        let staging = match output {
            Output::Local(staging) => staging,
            Output::Remote(held) => {
                let engine = |error: DataFusionError| errors::failure(&error);
                if let Some(schema) = copied_schema(&self.plan)
                    && held.is_empty()
                {
                    let bytes = without_rows(&schema).map_err(|error| engine(error.into()))?;
                    held.add("part-0.parquet", bytes).map_err(engine)?;
                }
                held.release().await.map_err(engine)?;
                return Ok(Some(Written { target, kind: None, rows, files: None }));
            }
        };
        let kind = staging.kind();
        let schema = copied_schema(&self.plan);
        if rows == Some(0) && kind == Kind::Folder && schema.is_none() && staging.replaces_files() {
            return Err(Failure::failed(format!(
                "the statement gave no rows, and an empty result would have emptied '{target}'; it was left as it is. \
                 Look at the source, or remove the folder yourself"
            )));
        }
        let files = staging.put_in_place(schema.as_ref())?;
        Ok(Some(Written { target, kind: Some(kind), rows, files: Some(files) }))
    }
}

impl Prepared {
    /// Drops the output of a statement that has failed.
    pub(crate) async fn discard(self) {
        if let Some(Copy { output: Output::Remote(held), .. }) = self.copy {
            held.discard().await;
        }
    }
}

/// A Parquet file with columns and without rows.
fn without_rows(schema: &SchemaRef) -> Result<Vec<u8>, ParquetError> {
    ArrowWriter::try_new(Vec::new(), Arc::clone(schema), None)?.into_inner()
}

/// The schema of an unpartitioned Parquet COPY: an empty result still leaves one file that carries it, so that
/// the next job finds its columns.
fn copied_schema(plan: &LogicalPlan) -> Option<SchemaRef> {
    let copy = match plan {
        LogicalPlan::Copy(copy) => copy,
        LogicalPlan::Analyze(analyze) => match analyze.input.as_ref() {
            LogicalPlan::Copy(copy) => copy,
            _ => return None,
        },
        _ => return None,
    };
    let parquet = copy.file_type.get_ext().trim_start_matches('.') == "parquet";
    (parquet && copy.partition_by.is_empty()).then(|| Arc::clone(copy.input.schema().inner()))
}
