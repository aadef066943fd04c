//! The demo job, run once for all who look at what it wrote.

use std::fs;
use std::path::PathBuf;
use std::sync::LazyLock;

use datafusion::prelude::SessionContext;
use tempfile::TempDir;

use crate::jobs::{Detour, run};
use crate::support::{ROOT, rows, session_over_files};

/// The job.
pub(crate) const JOB: &str = "parquet-samples/weekly_outlook.sql";

/// What the job wrote.
#[derive(Debug)]
pub(crate) struct Outlook {
    /// Stands for the current directory of the job: `outlook/…` lies below it.
    pub(crate) folder: TempDir,
}

static OUTLOOK: LazyLock<Outlook> = LazyLock::new(|| {
    let job = fs::read_to_string(ROOT.join(JOB)).expect("the demo job");
    let folder = tempfile::tempdir().expect("a temporary folder");
    let mut detour = Detour::default();
    detour.add(&job, folder.path());
    let runtime = tokio::runtime::Builder::new_multi_thread().enable_all().build().expect("a runtime");
    if let Err(error) = runtime.block_on(run(&session_over_files(), &job, &detour)) {
        panic!("{JOB}: {error}");
    }
    Outlook { folder }
});

impl Outlook {
    /// The one run of this process. Not to be called inside a runtime.
    pub(crate) fn get() -> &'static Self {
        &OUTLOOK
    }

    /// Folder of one of the three results.
    pub(crate) fn result(&self, name: &str) -> PathBuf {
        self.folder.path().join("outlook").join(name)
    }

    /// A session with the results as `written_components`, `written_forecast` and `written_diagnostics`, the
    /// sales as `sales`, and the truth as `states` and `parameters`.
    pub(crate) async fn session(&self) -> SessionContext {
        let context = session_over_files();
        for name in ["components", "forecast", "diagnostics"] {
            let location = format!("{}/", self.result(name).display());
            create(&context, &format!("written_{name}"), "PARTITIONED BY (region)", &location).await;
        }
        create(&context, "sales", "PARTITIONED BY (region)", "parquet-samples/sales/").await;
        create(&context, "states", "", "parquet-samples/truth/states.parquet").await;
        create(&context, "parameters", "", "parquet-samples/truth/parameters.parquet").await;
        context
    }
}

async fn create(context: &SessionContext, name: &str, partitions: &str, location: &str) {
    let sql = format!("CREATE EXTERNAL TABLE {name} STORED AS PARQUET {partitions} LOCATION '{location}'");
    rows(context, &sql).await;
}
