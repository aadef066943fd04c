//! Buffers that are reused from series to series.

/// Makes `buffer` hold `len` zeros; allocates only when it has never been that long.
#[inline(always)]
pub(crate) fn refill<T: Copy + Default>(buffer: &mut Vec<T>, len: usize) {
    buffer.clear();
    buffer.resize(len, T::default());
}
