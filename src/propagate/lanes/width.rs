//! Which instructions a kernel runs with: the widest that the processor has, or those that `NUTATE_LANES` names.

use std::sync::OnceLock;

use super::lane::Kernel;
use super::portable::Portable;
#[cfg(target_arch = "x86_64")]
use super::{avx2, avx512};

/// The environment variable that forces a width.
pub const LANES_VARIABLE: &str = "NUTATE_LANES";

/// A set of instructions.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Width {
    /// Whatever every processor of the target has.
    Portable,
    /// Four doubles at a time, with fused multiply-add.
    Avx2,
    /// Eight doubles at a time.
    Avx512,
}

/// All of them, narrowest first.
pub const WIDTHS: [Width; 3] = [Width::Portable, Width::Avx2, Width::Avx512];

impl Width {
    /// Its word in [`LANES_VARIABLE`].
    pub fn word(self) -> &'static str {
        match self {
            Width::Portable => "portable",
            Width::Avx2 => "avx2",
            Width::Avx512 => "avx512",
        }
    }

    /// The width of a word.
    pub fn from_word(word: &str) -> Option<Width> {
        WIDTHS.into_iter().find(|width| width.word() == word)
    }

    /// Whether this processor has it.
    pub fn is_here(self) -> bool {
        match self {
            Width::Portable => true,
            #[cfg(target_arch = "x86_64")]
            Width::Avx2 => is_x86_feature_detected!("avx2") && is_x86_feature_detected!("fma"),
            #[cfg(target_arch = "x86_64")]
            Width::Avx512 => is_x86_feature_detected!("avx512f") && is_x86_feature_detected!("avx512dq"),
            #[cfg(not(target_arch = "x86_64"))]
            _ => false,
        }
    }

    /// The widest that this processor has.
    pub fn widest() -> Width {
        WIDTHS.into_iter().rev().find(|width| width.is_here()).unwrap_or(Width::Portable)
    }

    /// The width that this process works with: that of [`LANES_VARIABLE`] where it is set and this processor has it, else the widest.
    pub fn chosen() -> Width {
        static CHOSEN: OnceLock<Width> = OnceLock::new();
        *CHOSEN.get_or_init(|| {
            let forced = std::env::var(LANES_VARIABLE).ok().and_then(|word| Width::from_word(word.trim()));
            forced.filter(|width| width.is_here()).unwrap_or_else(Width::widest)
        })
    }

    /// Runs a kernel with these instructions; with the portable ones where the processor lacks them.
    pub(crate) fn run<K: Kernel>(self, kernel: K) -> K::Output {
        match self {
            // SAFETY: `is_here` has asked the processor for AVX2 and FMA
            #[cfg(target_arch = "x86_64")]
            Width::Avx2 if self.is_here() => unsafe { avx2::run(kernel) },
            // SAFETY: `is_here` has asked the processor for the foundation of AVX-512 and DQ
            #[cfg(target_arch = "x86_64")]
            Width::Avx512 if self.is_here() => unsafe { avx512::run(kernel) },
            _ => kernel.run(Portable),
        }
    }
}
