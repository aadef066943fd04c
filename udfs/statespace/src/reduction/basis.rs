//! The white basis: what a row of responses says when the elements are written so that their posterior covariance is I.

use super::Reduction;
use crate::lanes::{Mask, Real};

impl<V: Real> Reduction<V> {
    /// Rewrites a row of responses `[data, first elements, others]` in the basis of `e`: `[mean, e, others given e]`, in the lanes
    /// where the first elements have been eliminated.
    #[inline(always)]
    pub(crate) fn condition(&self, row: &mut [V]) {
        let gone = &self.eliminated;
        if (gone.lanes & self.live).is_none() {
            return;
        }
        let everywhere = (gone.lanes | !self.live).is_all::<V>();
        for j in 0..gone.count {
            let r = &gone.triangle[j * gone.width..(j + 1) * gone.width];
            let mut x = row[1 + j] * gone.inverse[j];
            if everywhere {
                row[1 + j] = x;
            } else {
                row[1 + j] = V::select(gone.lanes, x, row[1 + j]);
                x = V::select(gone.lanes, x, V::zero());
            }
            for (to, from) in row[2 + j..].iter_mut().zip(&r[j + 1..gone.width - 1]) {
                *to -= x * *from;
            }
            row[0] += x * r[gone.width - 1];
        }
    }

    /// Rewrites a row of responses `[data, elements]`, all of them still open or all of them before the collapse of some lane, as mean and
    /// white columns (`x R = row`). Columns of eliminated elements stand in the basis of [`Self::condition`].
    #[inline(always)]
    pub(crate) fn whiten(&self, row: &mut [V]) {
        let gone = &self.eliminated;
        if row.len() == self.elements + 1 {
            let skipped = if gone.taken_out { Mask::NONE } else { gone.lanes & self.live };
            if !skipped.is_none() {
                self.condition(row);
            }
            let (mean, columns) = row.split_at_mut(1);
            self.whiten_columns(&mut mean[0], columns, skipped);
        } else {
            // A row from before the collapse: whitening wants the others' columns behind the mean.
            self.condition(row);
            let (head, others) = row.split_at_mut(1 + gone.count);
            self.whiten_columns(&mut head[0], others, Mask::NONE);
        }
    }

    /// `skipped`: lanes whose eliminated elements keep their columns.
    #[inline(always)]
    fn whiten_columns(&self, mean: &mut V, columns: &mut [V], skipped: Mask) {
        let width = self.elements + 1;
        for j in 0..self.elements {
            let r = &self.triangle[j * width..(j + 1) * width];
            let mut x = columns[j] * self.inverse[j];
            if j < self.eliminated.count && !skipped.is_none() {
                columns[j] = V::select(skipped, columns[j], x);
                x = V::select(skipped, V::zero(), x);
            } else {
                columns[j] = x;
            }
            for (to, from) in columns[j + 1..].iter_mut().zip(&r[j + 1..]) {
                *to -= x * *from;
            }
            *mean += x * r[self.elements];
        }
    }
}
