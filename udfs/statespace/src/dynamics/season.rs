//! A dummy season on a packed covariance: sums and differences of rows.

use super::packed::packed_at;
use crate::lanes::Real;

/// `p <- E p E'` for a season of `len` states from `first` on, shifted already. Forward the first row becomes minus the sum of all; backward the
/// last is taken from all others and negated.
#[inline(always)]
pub(super) fn congruence<V: Real>(
    p: &mut [V],
    first: usize,
    len: usize,
    m: usize,
    spare: &mut [V],
    forward: bool,
) {
    if forward { sums(p, first, len, m, spare) } else { differences(p, first, len, m) }
}

#[inline(always)]
fn sums<V: Real>(p: &mut [V], first: usize, len: usize, m: usize, spare: &mut [V]) {
    // The columns before the season.
    let start = packed_at(first, 0);
    let (row, below) = p[start..].split_at_mut(first + 1);
    let mut at = 0;
    for i in 1..len {
        for (sum, x) in row[..first].iter_mut().zip(&below[at..]) {
            *sum += *x;
        }
        at += first + i + 1;
    }
    row[..first].iter_mut().for_each(|x| *x = -*x);
    // The season itself.
    let sums = &mut spare[..len];
    sums.fill(V::zero());
    for i in 0..len {
        let start = packed_at(first + i, first);
        let (above, own) = sums.split_at_mut(i);
        let mut sum = p[start + i];
        for (to, x) in above.iter_mut().zip(&p[start..]) {
            *to += *x;
            sum += *x;
        }
        own[0] += sum;
    }
    let mut total = sums[0];
    for sum in &sums[1..] {
        total += *sum;
    }
    p[packed_at(first, first)] = total;
    for (j, sum) in sums.iter().enumerate().skip(1) {
        p[packed_at(first + j, first)] = -*sum;
    }
    // The rows behind it.
    for other in first + len..m {
        let start = packed_at(other, first);
        let row = &mut p[start..start + len];
        let mut sum = row[0];
        for x in &row[1..] {
            sum += *x;
        }
        row[0] = -sum;
    }
}

#[inline(always)]
fn differences<V: Real>(p: &mut [V], first: usize, len: usize, m: usize) {
    let (before, rest) = p.split_at_mut(packed_at(first + len - 1, 0));
    let (last, behind) = rest.split_at_mut(first + len);
    let corner = last[first + len - 1];
    for i in 0..len - 1 {
        let start = packed_at(first + i, 0);
        let row = &mut before[start..=start + first + i];
        let shared = last[first + i] - corner;
        let (columns, own) = row.split_at_mut(first);
        for (x, from) in columns.iter_mut().zip(last.iter()) {
            *x -= *from;
        }
        for (x, from) in own.iter_mut().zip(&last[first..]) {
            *x -= *from + shared;
        }
    }
    last[..first].iter_mut().for_each(|x| *x = -*x);
    last[first..first + len - 1].iter_mut().for_each(|x| *x = corner - *x);
    let mut rest = behind;
    for other in first + len..m {
        let (row, next) = rest.split_at_mut(other + 1);
        let own = row[first + len - 1];
        row[first..first + len - 1].iter_mut().for_each(|x| *x -= own);
        row[first + len - 1] = -own;
        rest = next;
    }
}
