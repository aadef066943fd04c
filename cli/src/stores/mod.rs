//! Places by URL: `s3://bucket/…`, `gs://…`, `az://…`, `abfs[s]://…`, `http[s]://…`.
//!
//! [`Stores`] is the engine's registry of object stores. Whatever a statement does with a URL (FROM, LOCATION,
//! COPY) ends with the engine asking the registry for the store of that URL, so the registry is where a store is made, at
//! its first use, and kept for the session. Looking for URLs in the text of a statement instead would have to know
//! every place where one may stand, views and prepared statements included.
//!
//! - [`kind`]: the kinds of stores, their schemes, and the environment variables that people set for them,
//! - [`build`]: a store of each kind, from the environment, with bounded patience,
//! - [`explained`]: what a store answers when it refuses or cannot be reached, in words,
//! - [`held`]: writing to a store so that nothing appears before the whole statement has succeeded,
//! - [`url`]: a place as written in a statement, with a pattern or without.

mod build;
mod explained;
mod held;
mod kind;
mod url;

#[cfg(test)]
mod tests;

use std::collections::HashMap;
use std::sync::{Arc, PoisonError, RwLock};

use ::url::Url;
use datafusion::common::{Result, plan_datafusion_err};
use datafusion::execution::object_store::{DefaultObjectStoreRegistry, ObjectStoreRegistry};
use object_store::ObjectStore;

pub(crate) use explained::told;
pub(crate) use held::{Held, let_go};
pub(crate) use kind::Kind;
pub(crate) use url::{RemotePlace, check_location, listing_url};

/// The stores of a session: the local file system, and those that statements have named so far.
#[derive(Debug, Default)]
pub(crate) struct Stores {
    local: DefaultObjectStoreRegistry,
    remote: RwLock<HashMap<String, Arc<dyn ObjectStore>>>,
}

impl ObjectStoreRegistry for Stores {
    fn register_store(&self, url: &Url, store: Arc<dyn ObjectStore>) -> Option<Arc<dyn ObjectStore>> {
        if url.scheme() == "file" {
            return self.local.register_store(url, store);
        }
        self.remote.write().unwrap_or_else(PoisonError::into_inner).insert(url::store_of(url), store)
    }

    fn deregister_store(&self, url: &Url) -> Result<Arc<dyn ObjectStore>> {
        if url.scheme() == "file" {
            return self.local.deregister_store(url);
        }
        let removed = self.remote.write().unwrap_or_else(PoisonError::into_inner).remove(&url::store_of(url));
        removed.ok_or_else(|| plan_datafusion_err!("no store is registered for '{}'", url::shown(url)))
    }

    fn get_store(&self, url: &Url) -> Result<Arc<dyn ObjectStore>> {
        if url.scheme() == "file" {
            return self.local.get_store(url);
        }
        let key = url::store_of(url);
        if let Some(known) = self.remote.read().unwrap_or_else(PoisonError::into_inner).get(&key) {
            return Ok(Arc::clone(known));
        }
        let store = build::store(Kind::of(url)?, url)?;
        // Two threads may have made one each: both use the first.
        let mut remote = self.remote.write().unwrap_or_else(PoisonError::into_inner);
        Ok(Arc::clone(remote.entry(key).or_insert(store)))
    }
}
