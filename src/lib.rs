//! nutate: settle the pulses that drive a few-level quantum system.
#![deny(unsafe_code)]

pub mod drive;
pub mod problem;
pub mod report;
pub mod units;
