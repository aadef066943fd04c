//! Checks of the whole, in one binary: what a person who writes SQL sees.
//!
//! - [`slt`] runs the SQL records of `slt/**/*.slt`: functions, arguments, time axes, types, troubles, plans;
//! - [`published`] holds figures of the literature against the answers of queries;
//! - [`outlook`] runs the demo job once; [`truth`] holds its answers against what the demo was drawn from, and
//!   [`demo_output`] looks at the files it wrote;
//! - [`examples`] runs the example of every function;
//! - [`nightly`] runs the jobs that keep fits and advance them;
//! - [`powers`] hands the power that was estimated back as a number;
//! - [`readme`] runs the SQL of the README and holds what it shows against it;
//! - [`memory`] fits under a small memory limit.

mod demo_output;
mod examples;
mod jobs;
mod memory;
mod nightly;
mod outlook;
mod powers;
mod published;
mod readme;
mod slt;
mod support;
mod truth;
