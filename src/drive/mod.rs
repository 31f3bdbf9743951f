//! Envelopes and carriers on a timeline: from the checked config and the values of its numbers to pulses with exact times.
//!
//! `envelope/` holds the shapes, `chirp` the phase of a swept carrier, `signal` all three quadratures of one pulse, `coupling`
//! a drive's matrix, `timeline` the sequence laid out, `segments` its cut into stretches that a method can take whole, `detuning` carriers
//! against lines, `strength` what one pulse does: peak, area, steps at its ends.

pub mod chirp;
pub mod coupling;
pub mod curve;
pub mod detuning;
pub mod envelope;
pub mod moments;
pub mod segments;
pub mod signal;
pub mod spectrum;
pub mod strength;
pub mod timeline;
