//! The command as a process: what it prints, what it writes, how it ends.

mod answers;
mod copies;
mod files;
mod jobs;
mod queries;
mod shell;
mod signals;
mod stores;
mod support;
