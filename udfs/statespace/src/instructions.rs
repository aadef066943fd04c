//! Which vector instructions of the processor the kernel uses, found when the program runs.
//!
//! The kernel is compiled once for what every processor of
//! the architecture has (SSE2 on x86-64, NEON on aarch64) and on x86-64 twice more, for AVX2 and for AVX-512 ([`crate::lanes`]). All give the
//! same bits: fused multiply-add, the one instruction that would change a rounding, is not enabled.

/// A set of vector instructions.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
#[non_exhaustive]
pub enum Instructions {
    /// What every processor of the architecture has.
    Baseline,
    /// 256-bit registers (x86-64 only).
    Avx2,
    /// 512-bit registers (x86-64 only).
    Avx512,
}

impl Instructions {
    /// The sets that this processor has, the widest last.
    pub fn available() -> Vec<Self> {
        [Self::Baseline, Self::Avx2, Self::Avx512].into_iter().filter(|set| set.is_available()).collect()
    }

    /// The widest set that this processor has.
    pub fn widest() -> Self {
        if Self::Avx512.is_available() {
            Self::Avx512
        } else if Self::Avx2.is_available() {
            Self::Avx2
        } else {
            Self::Baseline
        }
    }

    fn is_available(self) -> bool {
        match self {
            Self::Baseline => true,
            #[cfg(target_arch = "x86_64")]
            Self::Avx2 => std::is_x86_feature_detected!("avx2"),
            #[cfg(target_arch = "x86_64")]
            Self::Avx512 => {
                std::is_x86_feature_detected!("avx512f")
                    && std::is_x86_feature_detected!("avx512vl")
                    && std::is_x86_feature_detected!("avx512dq")
                    && std::is_x86_feature_detected!("avx512bw")
            }
            #[cfg(not(target_arch = "x86_64"))]
            Self::Avx2 | Self::Avx512 => false,
        }
    }

    /// These, or the widest that the processor has where it lacks them.
    pub(crate) fn or_widest(self) -> Self {
        if self.is_available() { self } else { Self::widest() }
    }

    /// Does the work compiled for these instructions, which the processor must have: see [`Self::or_widest`].
    #[inline]
    pub(crate) fn perform<T: Task>(self, task: T) -> T::Output {
        #[cfg(target_arch = "x86_64")]
        {
            // Work on registers that the processor lacks must not go on in any way.
            assert!(self.is_available(), "the processor has no {self:?}");
            match self {
                Self::Avx512 => {
                    #[expect(
                        unsafe_code,
                        reason = "a function with target features is called from one without"
                    )]
                    // SAFETY: the processor has just been found to have the features that `avx512` enables.
                    return unsafe { avx512(task) };
                }
                Self::Avx2 => {
                    #[expect(
                        unsafe_code,
                        reason = "a function with target features is called from one without"
                    )]
                    // SAFETY: the processor has just been found to have the feature that `avx2` enables.
                    return unsafe { avx2(task) };
                }
                Self::Baseline => {}
            }
        }
        task.run()
    }
}

/// Work to be compiled for several instruction sets. `run` and all it calls in its loops must be `#[inline(always)]`: what is not inlined
/// is compiled for the baseline.
pub(crate) trait Task {
    type Output;
    fn run(self) -> Self::Output;
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx2")]
fn avx2<T: Task>(task: T) -> T::Output {
    task.run()
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx512f,avx512vl,avx512dq,avx512bw")]
fn avx512<T: Task>(task: T) -> T::Output {
    task.run()
}
