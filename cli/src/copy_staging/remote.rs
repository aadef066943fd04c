//! A COPY to an object store: what is refused before the engine writes, and where it writes to.
//!
//! The engine puts objects under names of its own beside those that are there. A folder that holds some already would
//! hold the rows of both, so it must be empty; one object (`…/outlook.parquet`) is replaced whole by the store. Nothing
//! appears before the statement has succeeded ([`Held`]).

use datafusion::common::plan_datafusion_err;
use datafusion::datasource::listing::ListingTableUrl;
use datafusion::execution::context::SessionContext;
use datafusion::logical_expr::dml::CopyTo;
use futures::StreamExt;

use super::sources;
use super::target::Kind;
use crate::errors;
use crate::exit::{Failure, Outcome};
use crate::stores::{self, Held, RemotePlace};

/// Looks at the target of a COPY that is a URL, and opens the place that the engine is to write to.
///
/// # Errors
/// When no store serves it, it cannot be written to, is read by the same statement, or is a folder that holds
/// something.
pub(super) async fn open(copy: &CopyTo, context: &SessionContext) -> Outcome<Held> {
    let shown = &copy.output_url;
    let engine = |error| errors::failure(&error);
    let url = stores::listing_url(shown).map_err(engine)?;
    let (Some(url), Some(target)) = (url, RemotePlace::parse(shown).map_err(engine)?) else {
        return Err(engine(plan_datafusion_err!("cannot write to '{shown}': it is no place in a store")));
    };
    if stores::Kind::of_scheme(url.scheme()) == Some(stores::Kind::Http) {
        return Err(Failure::failed(format!(
            "cannot write to '{shown}': web servers are for reading; write to a folder or to a bucket"
        )));
    }
    for read in sources::read_by(&copy.input)? {
        let Some(source) = RemotePlace::of(read.get_url()) else { continue };
        // A pattern reads some of what is there, so only what lies in the target counts.
        let whole = read.get_glob().is_none();
        if target.holds(&source) || (whole && source.holds(&target)) {
            return Err(Failure::failed(format!(
                "COPY to '{shown}' would write to '{}', which the same statement reads. Write to a place of its own",
                read.as_str()
            )));
        }
    }
    if Kind::of_copy(copy)? == Kind::Folder {
        refuse_filled(shown, &url, target.path(), context).await?;
    }
    Held::open(&context.runtime_env(), url.get_url()).map_err(engine)
}

async fn refuse_filled(
    shown: &str,
    url: &ListingTableUrl,
    folder: &object_store::path::Path,
    context: &SessionContext,
) -> Outcome<()> {
    let store = context.runtime_env().object_store(url).map_err(|error| errors::failure(&error))?;
    let mut listed = store.list(Some(folder));
    while let Some(found) = listed.next().await {
        let found = match found {
            Ok(found) => found,
            // Some stores have no folder where there is no object.
            Err(object_store::Error::NotFound { .. }) => return Ok(()),
            Err(error) => return Err(errors::failure(&error.into())),
        };
        // The empty object that some tools put in the place of a folder.
        if found.size == 0 && (found.location == *folder || found.location.as_ref().is_empty()) {
            continue;
        }
        return Err(Failure::failed(format!(
            "will not write to the folder '{shown}': it holds '{}' already, and in an object store a COPY adds to what is \
             there, so that its rows would be there twice. Write to a new folder, such as one for each run, or to one \
             object ('….parquet'), or remove the old objects first",
            found.location
        )));
    }
    Ok(())
}
