//! The verb `samples`: the demo warehouse, written by [`crate::samples`].

use crate::args::SamplesArgs;
use crate::exit::{Exit, Failure, Outcome};
use crate::samples::{self, SampleError, SampleOptions};
use crate::streams::Out;

/// Writes the warehouse that `args` ask for and tells what it is.
///
/// # Errors
/// For options out of range, a folder that holds something else, or a file system that refuses.
pub(crate) fn samples(args: &SamplesArgs) -> Outcome<Exit> {
    let options = SampleOptions { series: args.series, weeks: args.weeks, seed: args.seed };
    let summary = samples::write(&args.dir, &options).map_err(|error| match error {
        SampleError::Weeks { .. } | SampleError::Series { .. } => Failure::usage(error.to_string()),
        _ => Failure::failed(error.to_string()),
    })?;
    Out::default().say(format_args!("{summary}\n"))?;
    Ok(Exit::Done)
}
