//! Writing to an object store: nothing appears before the whole statement has succeeded.
//!
//! When a statement fails, the engine closes the files it was writing: what has got into them by then would stand in
//! the store as complete objects that lack rows, one of them perhaps in the place of yesterday's result. So a COPY is
//! given a [`HeldStore`] to write to. It sends the bytes of large objects on as the parts of an upload, keeps small
//! objects in memory, and holds back the last request of each, the one that makes the object appear, until
//! [`Held::release`]. Objects appear one after another then, within moments, each whole; [`Held::discard`] drops them
//! all, and the objects that were there before stay.
//!
//! The engine finds a store by scheme and authority, so the held one is registered under a scheme of its own
//! (`held-3://warehouse/…`) while the statement runs.

use std::fmt;
use std::mem;
use std::sync::atomic::{AtomicU64, AtomicUsize, Ordering};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};
use std::thread;
use std::time::{Duration, Instant};

use ::url::{Position, Url};
use async_trait::async_trait;
use datafusion::common::{Result, plan_datafusion_err};
use datafusion::execution::runtime_env::RuntimeEnv;
use futures::future::{BoxFuture, ready};
use futures::stream::{self, BoxStream};
use futures::{FutureExt, StreamExt, TryStreamExt};
use object_store::path::Path;
use object_store::{
    CopyOptions, GetOptions, GetResult, ListResult, MultipartUpload, ObjectMeta, ObjectStore, PutMode,
    PutMultipartOptions, PutOptions, PutPayload, PutResult, UploadPart,
};

/// Bytes of small objects that wait in memory; beyond it they are uploaded and only their last request waits.
const IN_MEMORY: usize = 64 << 20;

/// Requests under way at the same time when objects appear.
const AT_ONCE: usize = 16;

/// The objects of one COPY, until it is clear whether they are to be.
#[derive(Debug)]
pub(crate) struct Held {
    runtime: Arc<RuntimeEnv>,
    /// The URL that the engine writes to.
    url: Url,
    inner: Arc<dyn ObjectStore>,
    waiting: Arc<Waiting>,
}

impl Held {
    /// Registers a held store for the store that `target` lies in.
    ///
    /// # Errors
    /// When there is no such store.
    pub(crate) fn open(runtime: &Arc<RuntimeEnv>, target: &Url) -> Result<Self> {
        static NUMBER: AtomicU64 = AtomicU64::new(0);
        let inner = runtime.object_store_registry.get_store(target)?;
        let number = NUMBER.fetch_add(1, Ordering::Relaxed);
        let url = format!("held-{number}://{}", &target[Position::BeforeUsername..]);
        let url =
            Url::parse(&url).map_err(|error| plan_datafusion_err!("cannot write to '{target}': {error}"))?;
        let waiting = Arc::new(Waiting { small_enough: IN_MEMORY, objects: Mutex::default() });
        let store = HeldStore { inner: Arc::clone(&inner), waiting: Arc::clone(&waiting) };
        runtime.register_object_store(&url, Arc::new(store));
        Ok(Self { runtime: Arc::clone(runtime), url, inner, waiting })
    }

    /// Where the engine is to write to.
    pub(crate) fn url(&self) -> &str {
        self.url.as_str()
    }

    /// Whether the engine has written nothing.
    pub(crate) fn is_empty(&self) -> bool {
        self.waiting.objects().is_empty()
    }

    /// Adds a small object of that name to the folder that is written.
    ///
    /// # Errors
    /// When the folder's path is no path of a store.
    pub(crate) fn add(&self, name: &str, content: Vec<u8>) -> Result<()> {
        let folder = Path::from_url_path(self.url.path())
            .map_err(|error| plan_datafusion_err!("cannot write to '{}': {error}", self.url))?;
        let (location, payload) = (folder.join(name), content.into());
        let object = Object::InMemory { location, payload, options: PutOptions::default() };
        self.waiting.objects().whole.push(object);
        Ok(())
    }

    /// Makes all objects appear.
    ///
    /// # Errors
    /// When the store refuses one; others may have appeared by then.
    pub(crate) async fn release(self) -> Result<()> {
        let objects = self.waiting.close().whole;
        let requests: Vec<_> =
            objects.into_iter().map(|object| object.appear(Arc::clone(&self.inner)).boxed()).collect();
        stream::iter(requests).buffer_unordered(AT_ONCE).try_collect::<()>().await?;
        Ok(())
    }

    /// Drops all objects, and tells the store to forget what it has of them.
    pub(crate) async fn discard(self) {
        abort(self.waiting.close()).await;
    }
}

impl Drop for Held {
    fn drop(&mut self) {
        // It was registered, so it is there; otherwise nothing is to be done either.
        let _ = self.runtime.deregister_object_store(&self.url);
        // What is left was cancelled.
        abort_behind(self.waiting.close());
    }
}

/// Uploads that have been begun and neither ended nor forgotten.
static OPEN: AtomicUsize = AtomicUsize::new(0);

/// Waits until stores have forgotten what was cancelled, for `longest` at most. Sleeps by the clock of the system, as
/// timers of the runtime may stand still. What a store has not been told by then it clears by rules of its own.
pub(crate) fn let_go(longest: Duration) {
    let begun = Instant::now();
    while OPEN.load(Ordering::Relaxed) > 0 && begun.elapsed() < longest {
        thread::sleep(Duration::from_millis(5));
    }
}

/// An upload that is counted as long as it is there.
#[derive(Debug)]
struct Upload(Box<dyn MultipartUpload>);

impl Upload {
    fn new(upload: Box<dyn MultipartUpload>) -> Self {
        OPEN.fetch_add(1, Ordering::Relaxed);
        Self(upload)
    }
}

impl Drop for Upload {
    fn drop(&mut self) {
        OPEN.fetch_sub(1, Ordering::Relaxed);
    }
}

/// Aborts uploads while the work goes on.
fn abort_behind(objects: Objects) {
    if !objects.is_empty()
        && let Ok(runtime) = tokio::runtime::Handle::try_current()
    {
        runtime.spawn(abort(objects));
    }
}

async fn abort(objects: Objects) {
    let whole = objects.whole.into_iter().filter_map(|object| match object {
        Object::Uploaded(upload) => Some(upload),
        Object::InMemory { .. } => None,
    });
    let requests: Vec<BoxFuture<'static, _>> =
        whole.chain(objects.broken).map(|mut upload| async move { upload.0.abort().await }.boxed()).collect();
    // A store that does not answer now is not asked again: its parts are no objects.
    stream::iter(requests).buffer_unordered(AT_ONCE).for_each(|_| ready(())).await;
}

/// What a held store has been given.
#[derive(Debug)]
struct Waiting {
    /// Bytes that may wait in memory.
    small_enough: usize,
    objects: Mutex<Objects>,
}

#[derive(Debug, Default)]
struct Objects {
    /// Objects that the engine has finished.
    whole: Vec<Object>,
    /// Uploads that it has let go of before their end.
    broken: Vec<Upload>,
    in_memory: usize,
    /// The statement has ended, and nobody will look here again.
    closed: bool,
}

#[derive(Debug)]
enum Object {
    InMemory { location: Path, payload: PutPayload, options: PutOptions },
    Uploaded(Upload),
}

impl Waiting {
    fn objects(&self) -> MutexGuard<'_, Objects> {
        self.objects.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// Gives what is there. What comes later is aborted at once.
    fn close(&self) -> Objects {
        mem::replace(&mut *self.objects(), Objects { closed: true, ..Objects::default() })
    }

    /// Whether an object of that size may wait in memory; if so, it counts from now on.
    fn admits(&self, bytes: usize) -> bool {
        let mut objects = self.objects();
        let admitted = objects.in_memory + bytes <= self.small_enough;
        if admitted {
            objects.in_memory += bytes;
        }
        admitted
    }
}

impl Objects {
    fn is_empty(&self) -> bool {
        self.whole.is_empty() && self.broken.is_empty()
    }
}

impl Object {
    async fn appear(self, store: Arc<dyn ObjectStore>) -> object_store::Result<()> {
        match self {
            Self::InMemory { location, payload, options } => {
                store.put_opts(&location, payload, options).await?;
            }
            Self::Uploaded(mut upload) => {
                upload.0.complete().await?;
            }
        }
        Ok(())
    }
}

/// A store whose new objects wait.
#[derive(Debug)]
struct HeldStore {
    inner: Arc<dyn ObjectStore>,
    waiting: Arc<Waiting>,
}

impl fmt::Display for HeldStore {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.inner)
    }
}

#[async_trait]
impl ObjectStore for HeldStore {
    async fn put_opts(
        &self,
        location: &Path,
        payload: PutPayload,
        options: PutOptions,
    ) -> object_store::Result<PutResult> {
        // A condition on what is there is to be checked when the object appears.
        if options.mode != PutMode::Overwrite || self.waiting.admits(payload.content_length()) {
            let location = location.clone();
            self.waiting.objects().whole.push(Object::InMemory { location, payload, options });
            return Ok(NOTHING_YET);
        }
        let PutOptions { tags, attributes, extensions, .. } = options;
        let options = PutMultipartOptions { tags, attributes, extensions };
        let mut upload = self.put_multipart_opts(location, options).await?;
        upload.put_part(payload).await?;
        upload.complete().await
    }

    async fn put_multipart_opts(
        &self,
        location: &Path,
        options: PutMultipartOptions,
    ) -> object_store::Result<Box<dyn MultipartUpload>> {
        let inner = self.inner.put_multipart_opts(location, options).await?;
        Ok(Box::new(HeldUpload { inner: Some(Upload::new(inner)), waiting: Arc::clone(&self.waiting) }))
    }

    async fn get_opts(&self, location: &Path, options: GetOptions) -> object_store::Result<GetResult> {
        self.inner.get_opts(location, options).await
    }

    fn delete_stream(
        &self,
        locations: BoxStream<'static, object_store::Result<Path>>,
    ) -> BoxStream<'static, object_store::Result<Path>> {
        self.inner.delete_stream(locations)
    }

    fn list(&self, prefix: Option<&Path>) -> BoxStream<'static, object_store::Result<ObjectMeta>> {
        self.inner.list(prefix)
    }

    async fn list_with_delimiter(&self, prefix: Option<&Path>) -> object_store::Result<ListResult> {
        self.inner.list_with_delimiter(prefix).await
    }

    async fn copy_opts(&self, from: &Path, to: &Path, options: CopyOptions) -> object_store::Result<()> {
        self.inner.copy_opts(from, to, options).await
    }
}

/// What is known of an object that waits.
const NOTHING_YET: PutResult = PutResult { e_tag: None, version: None };

/// An upload whose end waits.
#[derive(Debug)]
struct HeldUpload {
    /// `None` once the engine has finished it.
    inner: Option<Upload>,
    waiting: Arc<Waiting>,
}

#[async_trait]
impl MultipartUpload for HeldUpload {
    fn put_part(&mut self, data: PutPayload) -> UploadPart {
        match &mut self.inner {
            Some(upload) => upload.0.put_part(data),
            None => ready(Err(ended())).boxed(),
        }
    }

    async fn complete(&mut self) -> object_store::Result<PutResult> {
        let upload = self.inner.take().ok_or_else(ended)?;
        self.waiting.objects().whole.push(Object::Uploaded(upload));
        Ok(NOTHING_YET)
    }

    async fn abort(&mut self) -> object_store::Result<()> {
        match self.inner.take() {
            Some(mut upload) => upload.0.abort().await,
            None => Ok(()),
        }
    }
}

impl Drop for HeldUpload {
    fn drop(&mut self) {
        let Some(upload) = self.inner.take() else { return };
        let mut objects = self.waiting.objects();
        if objects.closed {
            drop(objects);
            abort_behind(Objects { broken: vec![upload], ..Objects::default() });
        } else {
            objects.broken.push(upload);
        }
    }
}

fn ended() -> object_store::Error {
    object_store::Error::Generic { store: "held", source: "the upload has ended".into() }
}

#[cfg(test)]
mod tests;
