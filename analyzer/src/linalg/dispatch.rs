//! Choice of instruction set at run time; the only file with `unsafe`.
//!
//! The kernels are compiled three times: portable, AVX2 with fused
//! multiply-add, AVX-512. A [`Level`] can only be obtained from detection, so
//! holding one proves that its instructions exist.
#![allow(unsafe_code)]

use crate::linalg::kernel::{self, Lanes, Pass};
use crate::linalg::program::Program;
use crate::linalg::selected::Selected;
use crate::linalg::values::Values;

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Kind {
    Portable,
    #[cfg(target_arch = "x86_64")]
    Avx2,
    #[cfg(target_arch = "x86_64")]
    Avx512,
}

/// An instruction set that this machine was found to have.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Level(Kind);

impl Level {
    /// The best instruction set of this machine.
    pub fn detect() -> Self {
        Self::available()
            .last()
            .copied()
            .unwrap_or(Self(Kind::Portable))
    }

    /// All usable instruction sets, simplest first.
    pub fn available() -> Vec<Self> {
        let mut levels = vec![Self(Kind::Portable)];
        #[cfg(target_arch = "x86_64")]
        {
            let avx2 = std::arch::is_x86_feature_detected!("avx2")
                && std::arch::is_x86_feature_detected!("fma");
            let avx512 = std::arch::is_x86_feature_detected!("avx512f")
                && std::arch::is_x86_feature_detected!("avx512dq")
                && std::arch::is_x86_feature_detected!("avx512vl");
            if avx2 {
                levels.push(Self(Kind::Avx2));
            }
            if avx2 && avx512 {
                levels.push(Self(Kind::Avx512));
            }
        }
        levels
    }

    /// Lanes that fill the registers of this level: the accumulators of a
    /// complex product must not spill.
    pub(crate) fn widest_lanes(self) -> usize {
        match self.0 {
            #[cfg(target_arch = "x86_64")]
            Kind::Avx512 => 16,
            _ => 8,
        }
    }
}

/// Defines a function that runs a kernel on the instruction set of its level.
macro_rules! dispatched {
    ($(#[$doc:meta])* $name:ident($($arg:ident: $ty:ty),*)) => {
        $(#[$doc])*
        pub(crate) fn $name<const L: usize>(level: Level, $($arg: $ty),*) {
            #[cfg(target_arch = "x86_64")]
            {
                #[target_feature(enable = "avx2,fma")]
                fn avx2<const L: usize>($($arg: $ty),*) {
                    kernel::$name::<L, true>($($arg),*);
                }
                #[target_feature(enable = "avx512f,avx512dq,avx512vl,avx2,fma")]
                fn avx512<const L: usize>($($arg: $ty),*) {
                    kernel::$name::<L, true>($($arg),*);
                }
                match level.0 {
                    // SAFETY: a level of this kind exists only after detection of
                    // avx2 and fma, the features the callee is compiled for.
                    Kind::Avx2 => return unsafe { avx2::<L>($($arg),*) },
                    // SAFETY: as above for avx512f, avx512dq, avx512vl, avx2, fma.
                    Kind::Avx512 => return unsafe { avx512::<L>($($arg),*) },
                    Kind::Portable => {}
                }
            }
            let _ = level;
            kernel::$name::<L, false>($($arg),*);
        }
    };
}

dispatched! {
    /// Delayed parts at the frequencies of the lanes.
    delays(values: &Values, delay_of: &[u32], w: &mut Lanes<L>)
}
dispatched! {
    /// Factorisation and determinant.
    factor(program: &Program, values: &Values, w: &mut Lanes<L>)
}
dispatched! {
    /// Selected inverse.
    invert(selected: &Selected, w: &mut Lanes<L>)
}
dispatched! {
    /// Derivative of the logarithm of the determinant.
    trace(slopes: &[(u32, f64)], delays: &[[u32; 2]], w: &mut Lanes<L>)
}
dispatched! {
    /// Forward substitution.
    forward(pass: &Pass, scale: bool, w: &mut Lanes<L>)
}
dispatched! {
    /// Backward substitution.
    backward(pass: &Pass, scale: bool, w: &mut Lanes<L>)
}
