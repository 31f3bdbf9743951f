//! nutate: settle the pulses that drive a few-level quantum system.
//!
//! One direction of flow; each room knows only those before it:
//!
//! ```text
//! config -> model -> drive -> frame -> propagate -> measure -> report
//! ```
//!
//! [`config`] turns text into a checked document with a place on every value, [`model`] makes matrices of it, [`drive`] lays
//! envelopes and carriers out in time, [`frame`] chooses the picture and lists what it drops, [`propagate`] evolves a
//! [`problem::Problem`] and measures its own error, [`measure`] forms the recorded numbers, [`report`] writes files and plots.
//! [`plan`] joins the rooms before `propagate`, [`outcome`] the rest; [`sensitivity`] carries the end of a run back for derivatives; [`units`] holds units and every 2 pi; [`cli`] is thin.
//!
//! hbar = 1, matrices in rad/s, times in s; energies are held over h, in Hz.
#![deny(unsafe_code)]

pub mod bundle;
pub mod cli;
pub mod compare;
pub mod config;
pub mod drive;
pub mod frame;
pub mod known;
pub mod matrices;
pub mod measure;
pub mod model;
pub mod noise;
pub mod outcome;
pub mod plan;
pub mod problem;
pub mod propagate;
pub mod quadrature;
pub mod random;
pub mod report;
pub mod scan;
pub mod sensitivity;
pub mod units;
