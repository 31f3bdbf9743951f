//! What a scan shows as plots: a map where two axes run, lines along one axis, and cuts through the best point.

use super::plots::{Drawn, PlotError};
use super::scan_json::Finished;

/// A plot by its file name, or why it could not be drawn.
pub type NamedScan = (String, Result<Drawn, PlotError>);

/// The numbers that plots need.
#[derive(Debug, Clone, Default)]
pub struct Points {}

/// The plots of a scan.
pub fn of_scan(_finished: &Finished, _points: &Points) -> Vec<NamedScan> {
    Vec::new()
}
