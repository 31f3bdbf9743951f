//! nutate: settle the pulses that drive a few-level quantum system.
#![deny(unsafe_code)]

pub mod cli;
pub mod compare;
pub mod config;
pub mod drive;
pub mod frame;
pub mod known;
pub mod measure;
pub mod model;
pub mod outcome;
pub mod plan;
pub mod problem;
pub mod propagate;
pub mod report;
pub mod units;
