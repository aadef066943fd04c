//! The threads that statements of a shell run on.
//!
//! A statement that is stopped lets go where it next waits for something. Work that computes for minutes without
//! waiting (a join of millions of rows with themselves) holds its thread until then; in a job the process ends, but a
//! shell goes on. So the statements of a shell have threads apart from the shell's own, and new ones after each that was
//! stopped. Rows and tables of the session do not live on them.

use tokio::runtime::{Handle, Runtime};

use crate::args::EngineArgs;
use crate::exit::{Exit, Failure, Outcome};
use crate::threads;

/// Threads that can be exchanged for new ones.
pub(super) struct Workers {
    options: EngineArgs,
    runtime: Option<Runtime>,
}

impl Workers {
    /// For threads as many as `options` ask for; they start when they are needed.
    pub(super) fn new(options: EngineArgs) -> Self {
        Self { options, runtime: None }
    }

    /// Where to run a statement.
    ///
    /// # Errors
    /// When the system gives no threads.
    pub(super) fn handle(&mut self) -> Outcome<Handle> {
        let runtime = match self.runtime.take() {
            Some(runtime) => runtime,
            None => threads::runtime(&self.options).map_err(|error| Failure {
                exit: Exit::Internal,
                message: format!("cannot start the threads of the engine: {error}"),
            })?,
        };
        Ok(self.runtime.insert(runtime).handle().clone())
    }

    /// Leaves the threads to what they still hold.
    pub(super) fn abandon(&mut self) {
        if let Some(runtime) = self.runtime.take() {
            runtime.shutdown_background();
        }
    }
}

impl Drop for Workers {
    fn drop(&mut self) {
        self.abandon();
    }
}

#[cfg(test)]
mod tests {
    use std::sync::mpsc;
    use std::time::Duration;

    use clap::Parser;

    use super::*;
    use crate::args::{Cli, Verb};

    #[test]
    fn new_threads_answer_while_the_old_ones_are_held() {
        let cli = Cli::parse_from(["stillwell", "shell", "--threads", "1"]);
        let Verb::Shell(args) = cli.verb else { panic!("not the shell") };
        let mut workers = Workers::new(args.engine);
        let (release, held) = mpsc::channel::<()>();
        workers.handle().expect("threads").spawn(async move { held.recv() });
        workers.abandon();
        let (answer, answered) = mpsc::channel();
        workers.handle().expect("threads").spawn(async move { answer.send("here") });
        assert_eq!(answered.recv_timeout(Duration::from_secs(20)), Ok("here"));
        // The first thread waits for this; its receiver may be gone if it never started.
        let _ = release.send(());
    }
}
