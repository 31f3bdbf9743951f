//! The mean energy Tr(H(t) rho)/h in Hz, with the H of the run's frame at that moment.

use super::{binary_scale, Column, Quantity, Seen};
use crate::problem::Problem;
use crate::units::RAD_PER_TURN;

/// The mean energy.
pub struct Energy<'a> {
    problem: &'a Problem,
}

impl<'a> Energy<'a> {
    /// In the Hamiltonian of `problem`.
    pub fn new(problem: &'a Problem) -> Energy<'a> {
        Energy { problem }
    }
}

impl Quantity for Energy<'_> {
    fn columns(&self) -> Vec<Column> {
        let largest = self.problem.statics.iter().map(|entry| entry.norm()).fold(0.0, f64::max) / RAD_PER_TURN;
        let drives = self.problem.terms.iter().map(|term| term.envelope.at(0.0).norm()).fold(0.0, f64::max) / RAD_PER_TURN;
        vec![Column {
            name: "energy_Hz".to_string(),
            unit: "Hz",
            scale: binary_scale(largest.max(drives)),
            path: vec!["energy_Hz".to_string()],
            panel: "energy",
            label: "energy".to_string(),
        }]
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        let h = self.problem.hamiltonian(&self.problem.segments[seen.moment.segment], seen.moment.offset_s);
        row.push(seen.state.mean(&h) / RAD_PER_TURN);
    }
}
