//! Ctrl-C and SIGTERM: the work stops within a second and leaves no half-written file.
//!
//! A thread of its own waits for the signals, so that busy workers cannot delay it. It tells the verb through
//! an [`Interrupt`]; the verb drops what it was doing, which cancels the engine's tasks and removes the staging
//! folders, reports what was finished, and ends with 130 (or 143). Should the verb not have ended after
//! [`PATIENCE`] (a planner that computes without pause), or at a second signal, the thread removes the staging
//! folders itself and ends the process.
//!
//! In a shell ([`Habit::GoOn`]) Ctrl-C stops the statement that runs and nothing else; SIGTERM ends it as it ends the
//! other verbs.

use std::io;
use std::thread;
use std::time::{Duration, Instant};

use tokio::runtime;
use tokio::sync::watch;
use tokio::task::JoinSet;

use crate::copy_staging;
use crate::exit::{Exit, Failure, Outcome};
use crate::panics;
use crate::stores;
use crate::streams;

/// How long the verb has to end by itself. Together with the clean-up this stays below a second.
const PATIENCE: Duration = Duration::from_millis(700);

/// How long cancelled work has to let go of what it holds.
const CANCELLATION: Duration = Duration::from_millis(250);

/// What Ctrl-C means to a verb.
#[derive(Debug, Clone, Copy)]
pub(crate) enum Habit {
    /// The verb ends.
    End,
    /// What the verb is doing ends, and the verb goes on. The function is called before the thread of the signals has
    /// to end the process.
    GoOn(fn()),
}

/// Tells a verb that the user wants it to stop. Clones hear the same signal.
#[derive(Debug, Clone)]
pub(crate) struct Interrupt {
    signal: watch::Receiver<Option<Exit>>,
}

impl Interrupt {
    /// Starts to listen for signals.
    ///
    /// # Errors
    /// When the system gives no thread or refuses the signal handlers.
    pub(crate) fn listen(habit: Habit) -> io::Result<Self> {
        let (told, signal) = watch::channel(None);
        let runtime = runtime::Builder::new_current_thread().enable_all().build()?;
        let mut signals = {
            let _inside = runtime.enter();
            Signals::install()?
        };
        thread::Builder::new().name("signals".to_string()).spawn(move || {
            runtime.block_on(async {
                let exit = loop {
                    let exit = signals.next().await;
                    // A verb that has just ended listens no longer; the process is about to end by itself.
                    let _ = told.send(Some(exit));
                    if !matches!((habit, exit), (Habit::GoOn(_), Exit::Interrupted)) {
                        break exit;
                    }
                };
                // A second signal or the end of patience: either way it is time to go.
                let _ = tokio::time::timeout(PATIENCE, signals.next()).await;
                copy_staging::remove_all_unfinished();
                if let Habit::GoOn(before_the_end) = habit {
                    before_the_end();
                }
                streams::tell("stopped; what was not finished is removed");
                std::process::exit(i32::from(exit.code()));
            });
        })?;
        Ok(Self { signal })
    }

    /// Waits until a signal comes that nobody has acted on; the exit code it asks for.
    pub(crate) async fn received(&mut self) -> Exit {
        match self.signal.changed().await {
            Ok(()) => self.signal.borrow_and_update().unwrap_or(Exit::Interrupted),
            // The listening thread is gone only while the process ends.
            Err(_) => std::future::pending().await,
        }
    }

    /// Lets a Ctrl-C pass that came while nothing was running.
    pub(crate) fn forget(&mut self) {
        self.signal.mark_unchanged();
    }
}

impl Interrupt {
    /// Does `work` on the engine's threads, until it is done or a signal comes. At a signal the work is cancelled,
    /// and what it has not finished writing is removed.
    ///
    /// # Errors
    /// Those of the work, or the end that the signal asks for.
    pub(crate) async fn unless_stopped<T: Send + 'static>(
        &mut self,
        work: impl Future<Output = Outcome<T>> + Send + 'static,
    ) -> Outcome<T> {
        self.unless_stopped_on(&runtime::Handle::current(), work).await
    }

    /// The same on threads of the caller's choice.
    ///
    /// # Errors
    /// Those of the work, or the end that the signal asks for.
    pub(crate) async fn unless_stopped_on<T: Send + 'static>(
        &mut self,
        threads: &runtime::Handle,
        work: impl Future<Output = Outcome<T>> + Send + 'static,
    ) -> Outcome<T> {
        let mut tasks = JoinSet::new();
        tasks.spawn_on(work, threads);
        tokio::select! {
            biased;
            exit = self.received() => {
                tasks.abort_all();
                wait_a_moment(&mut tasks);
                copy_staging::remove_all_unfinished();
                stores::let_go(CANCELLATION);
                Err(Failure::stopped(exit))
            }
            done = tasks.join_next() => match done {
                Some(Ok(outcome)) => outcome,
                // The one task was not aborted: it has panicked.
                Some(Err(_)) | None => Err(Failure { exit: Exit::Internal, message: panics::calm_line() }),
            },
        }
    }
}

/// Gives cancelled tasks time to let go of what they hold. Sleeps by the clock of the system: timers of the runtime
/// stand still while all its workers compute. A task that computes without pause is not waited for any longer; what
/// it writes is removed all the same.
fn wait_a_moment<T: 'static>(tasks: &mut JoinSet<T>) {
    let begun = Instant::now();
    while begun.elapsed() < CANCELLATION && tasks.try_join_next().is_none() {
        thread::sleep(Duration::from_millis(5));
    }
}

/// The two signals that ask a process to end.
struct Signals {
    #[cfg(unix)]
    interrupt: tokio::signal::unix::Signal,
    #[cfg(unix)]
    terminate: tokio::signal::unix::Signal,
}

impl Signals {
    #[cfg(unix)]
    fn install() -> io::Result<Self> {
        use tokio::signal::unix::{SignalKind, signal};
        Ok(Self { interrupt: signal(SignalKind::interrupt())?, terminate: signal(SignalKind::terminate())? })
    }

    #[cfg(unix)]
    async fn next(&mut self) -> Exit {
        tokio::select! {
            _ = self.interrupt.recv() => Exit::Interrupted,
            _ = self.terminate.recv() => Exit::Terminated,
        }
    }

    #[cfg(not(unix))]
    fn install() -> io::Result<Self> {
        Ok(Self {})
    }

    #[cfg(not(unix))]
    async fn next(&mut self) -> Exit {
        if tokio::signal::ctrl_c().await.is_err() {
            std::future::pending::<()>().await;
        }
        Exit::Interrupted
    }
}
