//! Numbers into files, plots and text for people.
pub mod plots;
