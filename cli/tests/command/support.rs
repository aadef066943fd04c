//! A folder to run the command in, and what came of it.

use std::fs;
use std::io::Write;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Output, Stdio};

/// A fresh folder, removed at the end of the test.
pub(crate) struct Place(tempfile::TempDir);

/// How a run of the command ended.
#[derive(Debug)]
pub(crate) struct Ran {
    pub code: Option<i32>,
    pub out: String,
    pub err: String,
}

impl Place {
    pub(crate) fn new() -> Self {
        Self(tempfile::tempdir().expect("a folder"))
    }

    pub(crate) fn path(&self) -> &Path {
        self.0.path()
    }

    pub(crate) fn at(&self, name: &str) -> PathBuf {
        self.path().join(name)
    }

    /// Writes a file, and the folders it lies in.
    pub(crate) fn write(&self, name: &str, text: &str) {
        let path = self.at(name);
        fs::create_dir_all(path.parent().expect("inside")).expect("folders");
        fs::write(path, text).expect("written");
    }

    pub(crate) fn read(&self, name: &str) -> String {
        fs::read_to_string(self.at(name)).unwrap_or_else(|error| panic!("{name}: {error}"))
    }

    /// The command with `args`, to run here.
    pub(crate) fn command(&self, args: &[&str]) -> Command {
        let mut command = Command::new(env!("CARGO_BIN_EXE_stillwell"));
        command.args(args).current_dir(self.path()).stdin(Stdio::null()).env_remove("RUST_BACKTRACE");
        command
    }

    pub(crate) fn stillwell(&self, args: &[&str]) -> Ran {
        self.command(args).output().expect("runs").into()
    }

    /// Runs a job that is made of `sql`.
    pub(crate) fn run(&self, sql: &str) -> Ran {
        self.write("job.sql", sql);
        self.stillwell(&["run", "job.sql"])
    }

    /// The rows of a statement as CSV without the line of names.
    pub(crate) fn rows(&self, sql: &str) -> Vec<String> {
        let ran = self.stillwell(&["query", sql, "--format", "csv"]);
        assert_eq!(ran.code, Some(0), "{sql}: {}", ran.err);
        ran.out.lines().skip(1).map(str::to_string).collect()
    }

    /// All files and empty folders here but the job, sorted, hidden ones too.
    pub(crate) fn files(&self) -> Vec<String> {
        let mut found = Vec::new();
        list(self.path(), "", &mut found);
        found.retain(|name| name != "job.sql");
        found.sort();
        found
    }

    /// Starts the command with its output in pipes.
    pub(crate) fn start(&self, args: &[&str]) -> Child {
        self.command(args).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().expect("starts")
    }

    /// Runs the command with `input` on its standard input.
    pub(crate) fn fed(&self, args: &[&str], input: &str) -> Ran {
        let mut command = self.command(args);
        let mut child = command
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .expect("starts");
        child.stdin.take().expect("a pipe").write_all(input.as_bytes()).expect("fed");
        child.wait_with_output().expect("ends").into()
    }
}

impl From<Output> for Ran {
    fn from(output: Output) -> Self {
        Self {
            code: output.status.code(),
            out: String::from_utf8_lossy(&output.stdout).into_owned(),
            err: String::from_utf8_lossy(&output.stderr).into_owned(),
        }
    }
}

fn list(folder: &Path, shown: &str, found: &mut Vec<String>) {
    let mut entries = fs::read_dir(folder).expect("readable").peekable();
    if entries.peek().is_none() && !shown.is_empty() {
        found.push(shown.to_string());
    }
    for entry in entries {
        let entry = entry.expect("an entry");
        let name = format!("{shown}{}", entry.file_name().to_string_lossy());
        match entry.path().is_dir() {
            true => list(&entry.path(), &format!("{name}/"), found),
            false => found.push(name),
        }
    }
}
