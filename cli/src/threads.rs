//! The threads the engine works on.

use std::io;
use std::num::NonZeroUsize;
use std::thread;

use tokio::runtime::{Builder, Runtime};

use crate::args::EngineArgs;

/// Stack of a worker, in bytes. The engine walks plans and expressions by recursion; a statement with some hundreds
/// of nested terms needs more than the 2 MiB that a thread has otherwise. It is address space, not memory.
const STACK: usize = 64 << 20;

/// How many threads to work with: as asked for, or one per processor.
pub(crate) fn number(options: &EngineArgs) -> usize {
    options.threads.map_or_else(|| thread::available_parallelism().map_or(1, NonZeroUsize::get), Into::into)
}

/// Threads for the engine, as many as asked for.
///
/// # Errors
/// When the system gives none.
pub(crate) fn runtime(options: &EngineArgs) -> io::Result<Runtime> {
    Builder::new_multi_thread().worker_threads(number(options)).thread_stack_size(STACK).enable_all().build()
}
