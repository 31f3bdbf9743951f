//! Envelopes and carriers on a timeline.
pub mod envelope;
