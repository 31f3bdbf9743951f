//! Many points side by side: the same arithmetic on eight points at a time, with the widest instructions that the processor has.
//!
//! Comes in: the matrices of eight points ([`Group`]) and the stretches of time that they share ([`Stretch`], its [`Steps`] made from a
//! [`Profile`] at any fineness), rad/s and s. Leaves: their columns at the end.
//!
//! | file | what it does |
//! |---|---|
//! | `lane.rs` | what a kernel may ask of eight doubles |
//! | `portable.rs`, `avx2.rs`, `avx512.rs` | three answers |
//! | `width.rs` | which of them runs |
//! | `elementary.rs` | sine and cosine |
//! | `moments.rs` | from profiles in time to steps |
//! | `steps.rs`, `stretch.rs` | where a kernel finds its steps, shared by all points or of each its own |
//! | `two_levels.rs`, `three_levels.rs` | kernels in closed form |
//! | `generator.rs`, `linear.rs` | sparse generators of more levels and of density matrices, and their kernel |
//! | `conjugation.rs`, `controlled.rs` | slices forwards and their gradient backwards, and for which numbers of levels |
//! | `trial.rs` | how fast they are here |
//! | `carry.rs` | [`Group`]: points through stretches |
//!
//! This is the only folder with `unsafe`: calls of the processor's instructions, each behind a witness that it has them. All
//! arithmetic of a kernel stands in functions that are always inlined: what the compiler leaves as a call loses the
//! instructions, closures and adapters of iterators among them.
#![allow(unsafe_code)]
// an iterator that is not inlined loses the instructions, see above
#![allow(clippy::needless_range_loop)]

#[cfg(target_arch = "x86_64")]
mod avx2;
#[cfg(target_arch = "x86_64")]
mod avx512;
mod carry;
mod conjugation;
mod controlled;
mod elementary;
mod generator;
mod lane;
mod linear;
mod moments;
mod portable;
mod steps;
mod stretch;
#[cfg(test)]
mod tests;
mod three_levels;
mod trial;
mod two_levels;
mod width;

pub use carry::{has_kernel, place_of, Group, Packed};
pub use controlled::Conjugation;
pub(crate) use elementary::sin_cos;
pub use generator::Recipe;
pub use lane::Eight;
pub(crate) use lane::{Kernel, Lane, Simd};
pub use moments::{parabola, Profile, Steps, GAUSS};
pub use stretch::{OwnStretch, Stretch, Summed};
pub use trial::{trials, Trial};
pub use width::{Width, LANES_VARIABLE, WIDTHS};
