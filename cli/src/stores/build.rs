//! A store of each kind, from the environment.
//!
//! The builders of the object_store crate read the variables `AWS_…`, `GOOGLE_…` and `AZURE_…`; nothing is read in
//! any other way. A store that does not answer is given up after a few tries: a job that waits for minutes before it
//! says why looks as if it worked.

use std::sync::Arc;
use std::time::Duration;

use ::url::{Position, Url};
use datafusion::common::{Result, plan_datafusion_err};
use object_store::aws::{AmazonS3Builder, AmazonS3ConfigKey};
use object_store::azure::{AzureConfigKey, MicrosoftAzureBuilder};
use object_store::gcp::{GoogleCloudStorageBuilder, GoogleConfigKey};
use object_store::http::HttpBuilder;
use object_store::{BackoffConfig, ClientConfigKey, ObjectStore, RetryConfig};

use super::explained::ExplainedStore;
use super::kind::Kind;
use super::url;

/// Tries after the first, for connections that fail and servers in trouble.
const RETRIES: usize = 3;

/// No further try once this much time has gone by.
const RETRY_TIMEOUT: Duration = Duration::from_secs(20);

/// The longest pause between two tries.
const LONGEST_PAUSE: Duration = Duration::from_secs(2);

/// How long a connection may take to come about, unless a variable such as `AWS_CONNECT_TIMEOUT` says otherwise.
const CONNECT_TIMEOUT: &str = "5s";

/// Makes the store that `url` lies in. Nothing is asked of it yet.
///
/// # Errors
/// When the environment does not say enough, with the variables that do.
pub(super) fn store(kind: Kind, url: &Url) -> Result<Arc<dyn ObjectStore>> {
    let root = url[..Position::BeforePath].to_string();
    let built = match kind {
        Kind::S3 => s3(&root),
        Kind::Google => google(&root),
        Kind::Azure => azure(&root),
        Kind::Http => http(&root, url.scheme()),
    };
    let store = built.map_err(|error| {
        plan_datafusion_err!("cannot use '{}': {}; {}", url::shown(url), cause(&error), kind.credentials())
    })?;
    Ok(Arc::new(ExplainedStore::new(kind, url::shown_store(url), store)))
}

type Built = object_store::Result<Arc<dyn ObjectStore>>;

fn s3(root: &str) -> Built {
    let connect = AmazonS3ConfigKey::Client(ClientConfigKey::ConnectTimeout);
    let mut builder = AmazonS3Builder::from_env();
    if std::env::var_os("AWS_CONNECT_TIMEOUT").is_none() {
        builder = builder.with_config(connect, CONNECT_TIMEOUT);
    }
    Ok(Arc::new(builder.with_retry(patience()).with_url(root).build()?))
}

fn google(root: &str) -> Built {
    let connect = GoogleConfigKey::Client(ClientConfigKey::ConnectTimeout);
    let mut builder = GoogleCloudStorageBuilder::from_env();
    if std::env::var_os("GOOGLE_CONNECT_TIMEOUT").is_none() {
        builder = builder.with_config(connect, CONNECT_TIMEOUT);
    }
    Ok(Arc::new(builder.with_retry(patience()).with_url(root).build()?))
}

fn azure(root: &str) -> Built {
    let connect = AzureConfigKey::Client(ClientConfigKey::ConnectTimeout);
    let mut builder = MicrosoftAzureBuilder::from_env();
    if std::env::var_os("AZURE_CONNECT_TIMEOUT").is_none() {
        builder = builder.with_config(connect, CONNECT_TIMEOUT);
    }
    Ok(Arc::new(builder.with_retry(patience()).with_url(root).build()?))
}

fn http(root: &str, scheme: &str) -> Built {
    let builder = HttpBuilder::new()
        .with_config(ClientConfigKey::ConnectTimeout, CONNECT_TIMEOUT)
        // Whoever writes http:// means it.
        .with_config(ClientConfigKey::AllowHttp, (scheme == "http").to_string());
    Ok(Arc::new(builder.with_retry(patience()).with_url(root).build()?))
}

fn patience() -> RetryConfig {
    let backoff = BackoffConfig { max_backoff: LONGEST_PAUSE, ..BackoffConfig::default() };
    RetryConfig { backoff, max_retries: RETRIES, retry_timeout: RETRY_TIMEOUT }
}

/// The reason in an error of a builder, without the name of the crate's own error around it.
fn cause(error: &object_store::Error) -> String {
    match error {
        object_store::Error::Generic { source, .. } => source.to_string(),
        other => other.to_string(),
    }
}
