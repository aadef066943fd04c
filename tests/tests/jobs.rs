//! SQL texts of several statements, run as the command would, with everything they write kept out of the tree.

use std::path::Path;

use arrow::array::RecordBatch;
use datafusion::prelude::SessionContext;
use datafusion::sql::parser::{DFParser, Statement};

/// Where the folders that jobs write really go.
#[derive(Debug, Default)]
pub(crate) struct Detour {
    /// Target as written in SQL, and the folder that stands for it.
    targets: Vec<(String, String)>,
}

impl Detour {
    /// Sends the relative COPY targets of `sql` below `folder`.
    pub(crate) fn add(&mut self, sql: &str, folder: &Path) {
        for statement in parse(sql).unwrap_or_default() {
            if let Statement::CopyTo(copy) = statement
                && Path::new(&copy.target).is_relative()
            {
                let instead = format!("{}/{}", folder.display(), copy.target);
                self.targets.push((copy.target, instead));
            }
        }
    }

    /// The text with every target replaced, in COPY and wherever it is read again.
    fn apply(&self, sql: &str) -> String {
        self.targets.iter().fold(sql.to_string(), |sql, (target, instead)| {
            sql.replace(&format!("'{target}"), &format!("'{instead}"))
        })
    }
}

/// Runs the statements of `sql` one after another and returns the rows of the last.
///
/// # Errors
/// The number of the statement, from 1, and what the engine said.
pub(crate) async fn run(
    context: &SessionContext,
    sql: &str,
    detour: &Detour,
) -> Result<Vec<RecordBatch>, String> {
    let mut rows = Vec::new();
    let statements = parse(&detour.apply(sql))?;
    for (number, statement) in statements.into_iter().enumerate() {
        rows = one(context, statement).await.map_err(|error| format!("statement {}: {error}", number + 1))?;
    }
    Ok(rows)
}

async fn one(context: &SessionContext, statement: Statement) -> Result<Vec<RecordBatch>, String> {
    let said = |error: datafusion::error::DataFusionError| error.strip_backtrace();
    let plan = context.state().statement_to_plan(statement).await.map_err(said)?;
    context.execute_logical_plan(plan).await.map_err(said)?.collect().await.map_err(said)
}

fn parse(sql: &str) -> Result<Vec<Statement>, String> {
    let statements = DFParser::parse_sql(sql).map_err(|error| error.strip_backtrace())?;
    Ok(statements.into_iter().collect())
}
