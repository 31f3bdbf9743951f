//! Envelopes: real functions of the time since the start of their pulse, whose largest value is 1 where the formula has no
//! size of its own. One file per family; [`FAMILIES`] is the table and [`build`] looks a word up in it.
//!
//! Comes in: [`Parameters`], plain SI numbers under the words of the config. Leaves: a [`Curve`], or a [`ShapeFault`] that
//! names the key at fault. With t from the start of the pulse, L the length, c the cut (the pulse then lasts 2 c), u = t - c:
//!
//! | file | envelope |
//! |---|---|
//! | `square` | 1 |
//! | `raised_cosine` | sin^2(pi t/L), also called sine squared |
//! | `blackman` | 0.42 - 0.5 cos(2 pi t/L) + 0.08 cos(4 pi t/L) |
//! | `cosine_edges`, `trapezoid` | flat, with edges sin^2(pi t/(2 rise)) or t/rise inside L |
//! | `gaussian` | exp(-u^2/(2 sigma^2)) |
//! | `sech` | 1/cosh(u/T) |
//! | `error_function_edges` | (erf((u + L/2)/w) - erf((u - L/2)/w))/2 |
//! | `exponential_edges` | 1 - exp(-t/tau), then (1 - exp(-L/tau)) exp(-(t - L)/tau) |
//! | `formula` | ordinary arithmetic in t |
//! | `samples` | reads a list, then one of `held`, `linear`, `band_limited` |
//!
//! `parameters` holds what a builder reads and refuses, `lift` the rule of a lifted edge, `flat` a curve with its shape put aside.

mod band_limited;
mod blackman;
mod cosine_edges;
mod error_function_edges;
mod exponential_edges;
mod flat;
mod formula;
mod gaussian;
mod held;
#[cfg(test)]
mod law_tests;
mod lift;
mod linear;
mod parameters;
mod raised_cosine;
#[cfg(test)]
mod reference_tests;
#[cfg(test)]
mod refusal_tests;
mod samples;
mod sech;
mod square;
mod trapezoid;

use std::fmt::Debug;
use std::sync::Arc;

pub use flat::Flat;
pub use formula::FormulaCurve;
pub use parameters::{Between, Edge, Parameters, ShapeFault};

/// How a curve is cut into stretches that a method can take whole.
#[derive(Debug, Clone, PartialEq)]
pub enum Pieces {
    /// One value from start to end.
    Constant(f64),
    /// Held values: `values[k]` from `starts_s[k]` to the next start (the last one to the end); `starts_s[0]` is 0.
    Held {
        /// Start of each value, s.
        starts_s: Arc<[f64]>,
        /// The values.
        values: Arc<[f64]>,
    },
    /// Smooth between the kinks, which are ascending times strictly inside the pulse, s.
    Smooth {
        /// Times at which the curve or one of its derivatives jumps.
        kinks_s: Arc<[f64]>,
    },
}

/// A real envelope; `t_s` runs from 0 to [`Curve::length_s`], outside it is not asked for.
pub trait Curve: Debug + Send + Sync {
    /// Value at `t_s` (no dimension).
    fn at(&self, t_s: f64) -> f64;
    /// d/dt of the value, 1/s; at a kink the one-sided value from the right.
    fn slope(&self, t_s: f64) -> f64;
    /// How long the pulse lasts, s.
    fn length_s(&self) -> f64;
    /// Signed integral of the value from start to end, s.
    fn area_s(&self) -> f64;
    /// Integral of the same curve and peak without the cut, s (the same as the area where nothing is cut).
    fn uncut_area_s(&self) -> f64 {
        self.area_s()
    }
    /// Largest modulus of the value.
    fn largest(&self) -> f64;
    /// Where it is constant, held or smooth.
    fn pieces(&self) -> Pieces;
    /// Values at `t_s` (s) into `out`, which is as long.
    fn fill(&self, t_s: &[f64], out: &mut [f64]) {
        for (value, t) in out.iter_mut().zip(t_s) {
            *value = self.at(*t);
        }
    }
}

/// Makes a curve of its parameters, or says what is wrong with them.
pub type Build = fn(&Parameters) -> Result<Arc<dyn Curve>, ShapeFault>;

/// A row of the table of shapes.
#[derive(Debug, Clone, Copy)]
pub struct Family {
    /// The word after `shape:`.
    pub word: &'static str,
    /// The keys that `build` reads, `file` standing for a list with times; any other key beside them has no meaning.
    pub keys: &'static [&'static str],
    /// The builder.
    pub build: Build,
}

const fn family(word: &'static str, keys: &'static [&'static str], build: Build) -> Family {
    Family { word, keys, build }
}

/// Every shape that is known by its name; `formula` needs the arithmetic of the config and is made there.
pub const FAMILIES: &[Family] = &[
    family("square", &["length"], square::build),
    family("raised cosine", &["length"], raised_cosine::build),
    family("sine squared", &["length"], raised_cosine::build),
    family("blackman", &["length"], blackman::build),
    family("cosine edges", &["length", "rise"], cosine_edges::build),
    family("trapezoid", &["length", "rise"], trapezoid::build),
    family("gaussian", &["field_sigma", "field_fwhm", "intensity_fwhm", "cut_at", "edge"], gaussian::build),
    family("sech", &["sech_time", "cut_at", "edge"], sech::build),
    family("error-function edges", &["length", "rise_10_90", "cut_at", "edge"], error_function_edges::build),
    family("exponential edges", &["length", "rise_10_90", "cut_at", "edge"], exponential_edges::build),
    family("samples", &["samples", "file", "length", "between"], samples::build),
];

/// The curve of the shape called `word`.
pub fn build(word: &str, parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    match FAMILIES.iter().find(|family| family.word == word) {
        Some(family) => (family.build)(parameters),
        None => Err(ShapeFault::UnknownShape { word: word.to_string() }),
    }
}
