//! Symmetric matrices in packed storage: the lower triangle, row after row.

use crate::lanes::Real;

/// Numbers in a packed symmetric `m x m` matrix.
#[inline(always)]
pub(crate) const fn packed_len(m: usize) -> usize {
    m * (m + 1) / 2
}

/// Position of element `(i, j)`, in any order.
#[inline(always)]
pub(crate) const fn packed_at(i: usize, j: usize) -> usize {
    if i >= j { i * (i + 1) / 2 + j } else { j * (j + 1) / 2 + i }
}

/// `out <- out + load * (column j of p)`.
#[inline(always)]
pub(crate) fn add_column<V: Real>(p: &[V], j: usize, load: V, out: &mut [V]) {
    let (above, below) = out.split_at_mut(j);
    for (to, from) in above.iter_mut().zip(&p[packed_at(j, 0)..]) {
        *to += load * *from;
    }
    let mut at = packed_at(j, j);
    for (k, to) in below.iter_mut().enumerate() {
        *to += load * p[at];
        at += j + k + 1;
    }
}

/// `out <- p x`.
#[inline(always)]
pub(crate) fn times_vector<V: Real>(p: &[V], x: &[V], out: &mut [V]) {
    out.fill(V::zero());
    let mut start = 0;
    for i in 0..x.len() {
        let row = &p[start..start + i];
        let (mut sum, xi) = (p[start + i] * x[i], x[i]);
        for ((from, x), to) in row.iter().zip(x).zip(out.iter_mut()) {
            sum += *from * *x;
            *to += *from * xi;
        }
        out[i] += sum;
        start += i + 1;
    }
}
