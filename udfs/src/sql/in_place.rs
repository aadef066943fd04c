//! Where fits are done.

/// Put into a session's configuration, has a partition with one worker do its fits on the engine's own threads, instead of on
/// blocking threads beside them.
///
/// For a host whose runtime does nothing but run queries: with one thread, one thread is then really all that works. In a
/// server that answers others on the same threads, leave it out; a chunk of long series can take a second.
///
/// ```
/// use std::sync::Arc;
/// use datafusion::prelude::SessionConfig;
///
/// let config = SessionConfig::new().with_target_partitions(1).with_extension(Arc::new(stillwell::InPlace));
/// assert!(config.get_extension::<stillwell::InPlace>().is_some());
/// ```
#[derive(Debug, Clone, Copy, Default)]
pub struct InPlace;
