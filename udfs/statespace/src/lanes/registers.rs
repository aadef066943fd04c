//! Arithmetic on eight doubles in the registers of an instruction set.
//!
//! The intrinsics are here because a compiler that finds vectors in loops sometimes finds them along the wrong direction; these say which.

use std::fmt::Debug;

use super::MOST_LANES;

type Eight = [f64; MOST_LANES];

/// An instruction set that works on eight doubles. Every operation is IEEE 754's, lane by lane. All but [`Portable`] must be used
/// on processors that have the instructions alone: `Workspace` and `Likelihoods` make lanes in no others
/// ([`crate::instructions::Instructions::or_widest`]), and [`crate::instructions::Instructions::perform`] refuses.
pub(crate) trait Registers: Copy + Debug + Default + PartialEq + Send + Sync + 'static {
    fn add(a: Eight, b: Eight) -> Eight;
    fn sub(a: Eight, b: Eight) -> Eight;
    fn mul(a: Eight, b: Eight) -> Eight;
    fn div(a: Eight, b: Eight) -> Eight;
    fn neg(a: Eight) -> Eight;
    fn sqrt(a: Eight) -> Eight;
    fn abs(a: Eight) -> Eight;
    /// Bit `i`: `a > b` in lane `i`.
    fn above(a: Eight, b: Eight) -> u8;
    /// `yes` where the bit is set.
    fn select(mask: u8, yes: Eight, no: Eight) -> Eight;
}

/// What the compiler makes of plain loops: SSE2 on x86-64, NEON on aarch64.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub(crate) struct Portable;

#[inline(always)]
fn each(a: Eight, f: impl Fn(f64) -> f64) -> Eight {
    let mut out = a;
    for x in &mut out {
        *x = f(*x);
    }
    out
}

#[inline(always)]
fn both(a: Eight, b: Eight, f: impl Fn(f64, f64) -> f64) -> Eight {
    let mut out = a;
    for i in 0..MOST_LANES {
        out[i] = f(out[i], b[i]);
    }
    out
}

#[inline(always)]
fn chosen(mask: u8, yes: Eight, no: Eight) -> Eight {
    let mut out = no;
    for i in 0..MOST_LANES {
        if mask >> i & 1 == 1 {
            out[i] = yes[i];
        }
    }
    out
}

impl Registers for Portable {
    #[inline(always)]
    fn add(a: Eight, b: Eight) -> Eight {
        both(a, b, |a, b| a + b)
    }

    #[inline(always)]
    fn sub(a: Eight, b: Eight) -> Eight {
        both(a, b, |a, b| a - b)
    }

    #[inline(always)]
    fn mul(a: Eight, b: Eight) -> Eight {
        both(a, b, |a, b| a * b)
    }

    #[inline(always)]
    fn div(a: Eight, b: Eight) -> Eight {
        both(a, b, |a, b| a / b)
    }

    #[inline(always)]
    fn neg(a: Eight) -> Eight {
        each(a, |a| -a)
    }

    #[inline(always)]
    fn sqrt(a: Eight) -> Eight {
        each(a, f64::sqrt)
    }

    #[inline(always)]
    fn abs(a: Eight) -> Eight {
        each(a, f64::abs)
    }

    #[inline(always)]
    fn above(a: Eight, b: Eight) -> u8 {
        let mut bits = 0;
        for i in 0..MOST_LANES {
            bits |= u8::from(a[i] > b[i]) << i;
        }
        bits
    }

    #[inline(always)]
    fn select(mask: u8, yes: Eight, no: Eight) -> Eight {
        chosen(mask, yes, no)
    }
}

#[cfg(target_arch = "x86_64")]
pub(crate) use x86::{Avx2, Avx512};

#[cfg(target_arch = "x86_64")]
mod x86 {
    #![expect(
        unsafe_code,
        reason = "the vector instructions of a processor are unsafe to call where it may lack them"
    )]

    use std::arch::x86_64::*;
    use std::mem::transmute;

    use super::{Eight, Registers, chosen};

    /// One register of 512 bits.
    #[derive(Debug, Clone, Copy, Default, PartialEq)]
    pub(crate) struct Avx512;

    /// Two registers of 256 bits.
    #[derive(Debug, Clone, Copy, Default, PartialEq)]
    pub(crate) struct Avx2;

    // SAFETY of all calls below: the types are used on processors that have the instructions alone (see the trait), and eight doubles and
    // their registers are the same bits.
    macro_rules! in_one {
        ($function:ident($($argument:ident),+) = $intrinsic:expr) => {
            #[inline(always)]
            fn $function($($argument: Eight),+) -> Eight {
                // SAFETY: as above.
                unsafe { transmute($intrinsic($(transmute::<Eight, __m512d>($argument)),+)) }
            }
        };
    }

    impl Registers for Avx512 {
        in_one!(add(a, b) = _mm512_add_pd);
        in_one!(sub(a, b) = _mm512_sub_pd);
        in_one!(mul(a, b) = _mm512_mul_pd);
        in_one!(div(a, b) = _mm512_div_pd);
        in_one!(sqrt(a) = _mm512_sqrt_pd);
        in_one!(abs(a) = _mm512_abs_pd);
        in_one!(neg(a) = |a| _mm512_xor_pd(a, _mm512_set1_pd(-0.0)));

        #[inline(always)]
        fn above(a: Eight, b: Eight) -> u8 {
            // SAFETY: as above.
            unsafe {
                _mm512_cmp_pd_mask::<_CMP_GT_OQ>(
                    transmute::<Eight, __m512d>(a),
                    transmute::<Eight, __m512d>(b),
                )
            }
        }

        #[inline(always)]
        fn select(mask: u8, yes: Eight, no: Eight) -> Eight {
            // SAFETY: as above.
            unsafe {
                let (yes, no) = (transmute::<Eight, __m512d>(yes), transmute::<Eight, __m512d>(no));
                transmute(_mm512_mask_blend_pd(mask, no, yes))
            }
        }
    }

    macro_rules! in_two {
        ($function:ident($a:ident, $b:ident) = $intrinsic:expr) => {
            #[inline(always)]
            fn $function($a: Eight, $b: Eight) -> Eight {
                // SAFETY: as above.
                unsafe {
                    let (a, b) = (transmute::<Eight, [__m256d; 2]>($a), transmute::<Eight, [__m256d; 2]>($b));
                    transmute([$intrinsic(a[0], b[0]), $intrinsic(a[1], b[1])])
                }
            }
        };
        ($function:ident($a:ident) = $intrinsic:expr) => {
            #[inline(always)]
            fn $function($a: Eight) -> Eight {
                // SAFETY: as above.
                unsafe {
                    let a = transmute::<Eight, [__m256d; 2]>($a);
                    transmute([$intrinsic(a[0]), $intrinsic(a[1])])
                }
            }
        };
    }

    impl Registers for Avx2 {
        in_two!(add(a, b) = _mm256_add_pd);
        in_two!(sub(a, b) = _mm256_sub_pd);
        in_two!(mul(a, b) = _mm256_mul_pd);
        in_two!(div(a, b) = _mm256_div_pd);
        in_two!(sqrt(a) = _mm256_sqrt_pd);
        in_two!(abs(a) = |a| _mm256_andnot_pd(_mm256_set1_pd(-0.0), a));
        in_two!(neg(a) = |a| _mm256_xor_pd(a, _mm256_set1_pd(-0.0)));

        #[inline(always)]
        fn above(a: Eight, b: Eight) -> u8 {
            // SAFETY: as above.
            unsafe {
                let (a, b) = (transmute::<Eight, [__m256d; 2]>(a), transmute::<Eight, [__m256d; 2]>(b));
                let bits = |i: usize| _mm256_movemask_pd(_mm256_cmp_pd::<_CMP_GT_OQ>(a[i], b[i])) as u8;
                bits(0) | bits(1) << 4
            }
        }

        #[inline(always)]
        fn select(mask: u8, yes: Eight, no: Eight) -> Eight {
            chosen(mask, yes, no)
        }
    }
}
