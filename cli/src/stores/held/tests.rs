//! Objects that wait, on an in-memory store.

use object_store::ObjectStoreExt;
use object_store::memory::InMemory;

use super::*;

fn held(small_enough: usize) -> (Arc<InMemory>, HeldStore, Held) {
    let inner = Arc::new(InMemory::new());
    let runtime = Arc::new(RuntimeEnv::default());
    let url = Url::parse("s3://warehouse/out/").expect("a URL");
    runtime.register_object_store(&url, Arc::clone(&inner) as Arc<dyn ObjectStore>);
    let mut held = Held::open(&runtime, &url).expect("opens");
    let waiting = Arc::new(Waiting { small_enough, objects: Mutex::default() });
    held.waiting = Arc::clone(&waiting);
    let store = HeldStore { inner: Arc::clone(&inner) as Arc<dyn ObjectStore>, waiting };
    (inner, store, held)
}

async fn names(store: &InMemory) -> Vec<String> {
    let found: Vec<_> = store.list(None).try_collect().await.expect("listed");
    found.into_iter().map(|object| object.location.to_string()).collect()
}

async fn write_both(store: &HeldStore) {
    store.put(&"small".into(), "a".into()).await.expect("put");
    store.put(&"large".into(), "abcdefgh".into()).await.expect("put");
    let mut parts = store.put_multipart(&"parts".into()).await.expect("begun");
    parts.put_part("ab".into()).await.expect("put");
    parts.put_part("cd".into()).await.expect("put");
    parts.complete().await.expect("completed");
}

#[tokio::test]
async fn objects_appear_when_they_are_released() {
    let (inner, store, held) = held(4);
    write_both(&store).await;
    assert!(names(&inner).await.is_empty());
    held.release().await.expect("released");
    let mut found = names(&inner).await;
    found.sort();
    assert_eq!(found, ["large", "parts", "small"]);
    let parts = inner.get(&"parts".into()).await.expect("there").bytes().await.expect("read");
    assert_eq!(&parts[..], b"abcd");
}

#[tokio::test]
async fn nothing_is_left_of_objects_that_are_not_to_be() {
    let (inner, store, held) = held(4);
    write_both(&store).await;
    let mut broken = store.put_multipart(&"broken".into()).await.expect("begun");
    broken.put_part("ab".into()).await.expect("put");
    drop(broken);
    assert_eq!(held.waiting.objects().broken.len(), 1);
    held.discard().await;
    assert!(names(&inner).await.is_empty());
}

#[tokio::test]
async fn the_store_is_registered_as_long_as_it_is_held() {
    let (_, _, held) = held(4);
    let (runtime, url) = (Arc::clone(&held.runtime), held.url.clone());
    assert!(url.as_str().starts_with("held-") && url.as_str().ends_with("://warehouse/out/"), "{url}");
    assert!(runtime.object_store_registry.get_store(&url).is_ok());
    drop(held);
    assert!(runtime.object_store_registry.get_store(&url).is_err());
}
