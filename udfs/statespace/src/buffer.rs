//! Buffers that are reused from series to series.

/// Makes `buffer` hold `len` zeros; allocates only when it has never been that long.
pub(crate) fn refill(buffer: &mut Vec<f64>, len: usize) {
    buffer.clear();
    buffer.resize(len, 0.0);
}
