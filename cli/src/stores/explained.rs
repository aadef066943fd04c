//! What a store answers when it refuses or cannot be reached, in words.
//!
//! The clients of the object_store crate tell the request, its retries and the bare reply. [`ExplainedStore`] stands
//! around each of them: it knows the place and the kind of store, and turns errors into a sentence with a remedy,
//! which [`told`] finds again at the bottom of whatever the engine has wrapped around it. A missing object stays
//! `NotFound`: the engine goes on with a list of the folder then.

use std::error::Error;
use std::fmt;
use std::sync::Arc;

use async_trait::async_trait;
use futures::stream::BoxStream;
use futures::{FutureExt, StreamExt, TryFutureExt};
use object_store::client::{HttpError, HttpErrorKind};
use object_store::path::Path;
use object_store::{
    CopyOptions, GetOptions, GetResult, ListResult, MultipartUpload, ObjectMeta, ObjectStore,
    PutMultipartOptions, PutOptions, PutPayload, PutResult, Result, UploadPart,
};

use super::kind::Kind;

/// An error of a store as a sentence.
#[derive(Debug)]
struct Explained(String);

impl fmt::Display for Explained {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

impl Error for Explained {}

/// The sentence about an error of a store that lies somewhere below `error`.
pub(crate) fn told(error: &(dyn Error + 'static)) -> Option<String> {
    chain(error).find_map(|error| error.downcast_ref::<Explained>()).map(|Explained(text)| text.clone())
}

/// An error and what lies below it.
fn chain<'a>(error: &'a (dyn Error + 'static)) -> impl Iterator<Item = &'a (dyn Error + 'static)> {
    // Dereferenced, so that what is below lives as long as the whole.
    std::iter::successors(Some(error), |error| (*error).source())
}

/// Where a store is and what kind it is.
#[derive(Debug, Clone)]
struct Place {
    kind: Kind,
    /// Scheme and authority, such as `s3://warehouse`.
    root: String,
}

impl Place {
    fn explain(&self, error: object_store::Error, path: &str) -> object_store::Error {
        let place = format!("{}/{path}", self.root);
        match error {
            object_store::Error::NotFound { .. } => {
                let source = Box::new(Explained(format!("there is no '{place}'")));
                object_store::Error::NotFound { path: place, source }
            }
            error @ (object_store::Error::AlreadyExists { .. }
            | object_store::Error::Precondition { .. }
            | object_store::Error::NotModified { .. }) => error,
            error => {
                let source = Box::new(Explained(self.sentence(&error, &place)));
                object_store::Error::Generic { store: self.kind.name(), source }
            }
        }
    }

    /// An error of writing: there what is not found is the bucket.
    fn explain_put(&self, error: object_store::Error, path: &str) -> object_store::Error {
        if !matches!(error, object_store::Error::NotFound { .. }) {
            return self.explain(error, path);
        }
        let place = format!("{}/{path}", self.root);
        let source = Box::new(Explained(self.sentence(&error, &place)));
        object_store::Error::Generic { store: self.kind.name(), source }
    }

    /// An error of listing: a web server has no lists, and says so in many ways.
    fn explain_list(&self, error: object_store::Error, path: &str) -> object_store::Error {
        if self.kind != Kind::Http || unreachable(&error).is_some() {
            return self.explain(error, path);
        }
        let text = format!(
            "there is no file '{}/{path}', and a web server gives no list of a folder; name a file that is there",
            self.root
        );
        object_store::Error::Generic { store: self.kind.name(), source: Box::new(Explained(text)) }
    }

    fn sentence(&self, error: &object_store::Error, place: &str) -> String {
        let Self { kind, .. } = self;
        if asks_for_credentials(error) {
            let trouble = match kind.lacks_credentials() {
                true => "no credentials are set, and this machine has none to give",
                false => "the credentials that are set give no access",
            };
            return format!("cannot use '{place}': {trouble} ({}); {}", reply(error), kind.credentials());
        }
        if let Some(variable) = kind.allows_http()
            && root_cause(error).contains("scheme is not allowed")
        {
            return format!(
                "cannot use '{place}': its address begins with http://, without encryption; set {variable}=true to go \
                 there all the same"
            );
        }
        if *kind == Kind::Http && matches!(error, object_store::Error::NotSupported { .. }) {
            return format!(
                "the web server of '{place}' gives no parts of a file, which Parquet is read in; download the file, or \
                 ask a server that answers range requests"
            );
        }
        if let Some(why) = unreachable(error) {
            return format!("cannot reach '{place}': {why}. Check {}", kind.address());
        }
        let reply = reply(error);
        if refuses(error) {
            return format!("{} refuses access to '{place}' ({reply}); {}", kind.name(), kind.credentials());
        }
        format!("{} answers about '{place}': {reply}. Check {}", kind.name(), kind.address())
    }
}

/// Whether it is a request for credentials that failed, made before the one to the store: to the machine's own service
/// of metadata, or to one that gives tokens.
fn asks_for_credentials(error: &object_store::Error) -> bool {
    let text = error.to_string();
    ["/latest/api/token", "/latest/meta-data", "token request"].iter().any(|sign| text.contains(sign))
}

/// Whether the store has answered that the caller may not; lists come without an error of their own for that.
fn refuses(error: &object_store::Error) -> bool {
    let refused = |error: &(dyn Error + 'static)| {
        let text = error.to_string();
        text.contains("403 Forbidden") || text.contains("401 Unauthorized")
    };
    matches!(
        error,
        object_store::Error::PermissionDenied { .. } | object_store::Error::Unauthenticated { .. }
    ) || chain(error).any(refused)
}

/// Why no answer came, if none did.
fn unreachable(error: &object_store::Error) -> Option<String> {
    let http = chain(error).find_map(|error| error.downcast_ref::<HttpError>())?;
    let why = root_cause(error);
    match http.kind() {
        HttpErrorKind::Connect => Some(why),
        HttpErrorKind::Timeout => Some(format!("no answer in time ({why})")),
        HttpErrorKind::Request | HttpErrorKind::Interrupted => Some(format!("the connection broke ({why})")),
        _ => None,
    }
}

/// The error at the bottom of the chain.
fn root_cause(error: &object_store::Error) -> String {
    chain(error).last().map(ToString::to_string).unwrap_or_default()
}

/// What the server has said: the code and message of an XML reply, or the last line of the error.
fn reply(error: &object_store::Error) -> String {
    let text = root_cause(error);
    let element = |name: &str| {
        let (_, rest) = text.split_once(&format!("<{name}>"))?;
        rest.split_once(&format!("</{name}>")).map(|(inner, _)| inner.trim())
    };
    match (element("Code"), element("Message")) {
        (Some(code), Some(message)) => {
            // Some put the number of the request below the message.
            let message = message.lines().next().unwrap_or_default().trim_end_matches('.');
            format!("{code}: {message}")
        }
        (Some(code), None) => code.to_string(),
        _ => {
            let said = text.split_whitespace().collect::<Vec<_>>().join(" ");
            said.trim_end_matches([':', '.', ' ']).to_string()
        }
    }
}

/// A store whose errors are sentences.
#[derive(Debug)]
pub(super) struct ExplainedStore {
    place: Place,
    inner: Arc<dyn ObjectStore>,
}

impl ExplainedStore {
    /// `root`: scheme and authority of the store, for messages.
    pub(super) fn new(kind: Kind, root: String, inner: Arc<dyn ObjectStore>) -> Self {
        Self { place: Place { kind, root }, inner }
    }
}

impl fmt::Display for ExplainedStore {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.place.root)
    }
}

#[async_trait]
impl ObjectStore for ExplainedStore {
    async fn put_opts(&self, location: &Path, payload: PutPayload, options: PutOptions) -> Result<PutResult> {
        let put = self.inner.put_opts(location, payload, options);
        put.await.map_err(|error| self.place.explain_put(error, location.as_ref()))
    }

    async fn put_multipart_opts(
        &self,
        location: &Path,
        options: PutMultipartOptions,
    ) -> Result<Box<dyn MultipartUpload>> {
        let place = self.place.clone();
        let path = location.to_string();
        match self.inner.put_multipart_opts(location, options).await {
            Ok(inner) => Ok(Box::new(ExplainedUpload { place, path, inner })),
            Err(error) => Err(place.explain_put(error, &path)),
        }
    }

    async fn get_opts(&self, location: &Path, options: GetOptions) -> Result<GetResult> {
        let got = self.inner.get_opts(location, options);
        got.await.map_err(|error| self.place.explain(error, location.as_ref()))
    }

    fn delete_stream(&self, locations: BoxStream<'static, Result<Path>>) -> BoxStream<'static, Result<Path>> {
        let place = self.place.clone();
        let deleted = self.inner.delete_stream(locations);
        deleted.map(move |done| done.map_err(|error| place.explain(error, ""))).boxed()
    }

    fn list(&self, prefix: Option<&Path>) -> BoxStream<'static, Result<ObjectMeta>> {
        let place = self.place.clone();
        let path = prefix.map(ToString::to_string).unwrap_or_default();
        let listed = self.inner.list(prefix);
        listed.map(move |found| found.map_err(|error| place.explain_list(error, &path))).boxed()
    }

    async fn list_with_delimiter(&self, prefix: Option<&Path>) -> Result<ListResult> {
        let path = prefix.map(ToString::to_string).unwrap_or_default();
        let listed = self.inner.list_with_delimiter(prefix);
        listed.await.map_err(|error| self.place.explain_list(error, &path))
    }

    async fn copy_opts(&self, from: &Path, to: &Path, options: CopyOptions) -> Result<()> {
        let copied = self.inner.copy_opts(from, to, options);
        copied.await.map_err(|error| self.place.explain(error, to.as_ref()))
    }
}

/// An object that is written in parts.
#[derive(Debug)]
struct ExplainedUpload {
    place: Place,
    path: String,
    inner: Box<dyn MultipartUpload>,
}

#[async_trait]
impl MultipartUpload for ExplainedUpload {
    fn put_part(&mut self, data: PutPayload) -> UploadPart {
        let (place, path) = (self.place.clone(), self.path.clone());
        self.inner.put_part(data).map_err(move |error| place.explain_put(error, &path)).boxed()
    }

    async fn complete(&mut self) -> Result<PutResult> {
        self.inner.complete().await.map_err(|error| self.place.explain_put(error, &self.path))
    }

    async fn abort(&mut self) -> Result<()> {
        self.inner.abort().await.map_err(|error| self.place.explain(error, &self.path))
    }
}

#[cfg(test)]
mod tests {
    use datafusion::common::DataFusionError;

    use super::*;

    fn place(kind: Kind, root: &str) -> Place {
        Place { kind, root: root.to_string() }
    }

    fn generic(text: &str) -> object_store::Error {
        object_store::Error::Generic { store: "S3", source: text.into() }
    }

    #[test]
    fn the_sentence_is_found_below_whatever_is_around_it() {
        let error = place(Kind::Http, "https://ostrel.example").explain(generic("odd"), "a.parquet");
        let engine = DataFusionError::ObjectStore(Box::new(error)).context("while reading");
        let told = told(&engine).expect("a sentence");
        assert!(told.contains("'https://ostrel.example/a.parquet'") && told.contains("odd"), "{told}");
        assert_eq!(super::told(&DataFusionError::Plan("other".into())), None);
    }

    #[test]
    fn a_missing_object_stays_missing() {
        let missing = object_store::Error::NotFound { path: "a".into(), source: "404".into() };
        let error = place(Kind::S3, "s3://w").explain(missing, "a");
        assert!(matches!(&error, object_store::Error::NotFound { path, .. } if path == "s3://w/a"));
        assert_eq!(told(&error).as_deref(), Some("there is no 's3://w/a'"));
    }

    #[test]
    fn replies_in_xml_are_read() {
        let xml = "Server returned non-2xx status code: 403 Forbidden: <?xml?><Error><Code>AccessDenied</Code>\
                   <Message>Access Denied.</Message></Error>";
        assert_eq!(reply(&generic(xml)), "AccessDenied: Access Denied");
        assert!(refuses(&generic(xml)) && !refuses(&generic("404 Not Found")));
        assert_eq!(reply(&generic("status code: 500 \n :")), "status code: 500");
    }

    #[test]
    fn a_web_server_without_ranges_is_told_apart() {
        let whole = object_store::Error::NotSupported { source: "no range".into() };
        let error = place(Kind::Http, "https://ostrel.example").explain(whole, "sales.parquet");
        assert!(told(&error).expect("a sentence").contains("download the file"));
    }

    #[test]
    fn a_web_server_without_lists_is_told_apart() {
        let error = place(Kind::Http, "https://ostrel.example").explain_list(generic("405"), "sales");
        assert!(told(&error).expect("a sentence").contains("name a file that is there"));
    }
}
