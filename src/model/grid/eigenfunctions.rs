//! Eigenfunctions on a mesh as a family whose derivatives follow from the equation they obey.
//!
//! With chi = kappa psi' and r = 1/kappa: psi' = r chi and chi' = (V - E) psi. Value and slope come from the polynomial of the element;
//! every higher Taylor coefficient is exact given these and those of V and r, so no polynomial is differentiated twice.

use super::piece::Piece;
use super::states::States;
use crate::config::taylor::Taylor;
use crate::model::differential::{Family, ORDERS};
use crate::units::kinetic_hz_m2;

/// The functions of `states` on `pieces`.
#[derive(Debug)]
pub struct Eigenfunctions<'s> {
    states: &'s States,
    pieces: &'s [Piece],
    continuous: usize,
}

impl<'s> Eigenfunctions<'s> {
    /// `states` must have been found on `pieces`.
    pub fn new(states: &'s States, pieces: &'s [Piece]) -> Eigenfunctions<'s> {
        Eigenfunctions { states, pieces, continuous: continuous(pieces, states.mesh.ring) }
    }

    /// The piece in which a stretch lies.
    pub fn piece(&self, panel: usize) -> usize {
        self.states.mesh.piece[panel]
    }
}

/// The highest derivative of an eigenfunction that is continuous: none at a step of the mass, the first at one of the potential, the
/// second at a kink of either.
fn continuous(pieces: &[Piece], ring: bool) -> usize {
    let mut least = usize::MAX / 4;
    let mut joints: Vec<(&Piece, f64, &Piece, f64)> = pieces.windows(2).map(|two| (&two[0], two[0].to_m, &two[1], two[1].from_m)).collect();
    if ring {
        let (first, last) = (&pieces[0], &pieces[pieces.len() - 1]);
        joints.push((last, last.to_m, first, first.from_m));
    }
    let whole = pieces[pieces.len() - 1].to_m - pieces[0].from_m;
    for (left, end, right, start) in joints {
        // just inside, as a formula has its kink on the end itself
        let nudge = 1e-9 * whole;
        let (x, y) = (end - nudge, start + nudge);
        let near = |a: f64, b: f64| (a - b).abs() <= 1e-6 * a.abs().max(b.abs());
        if !near(left.mass_kg.value(x), right.mass_kg.value(y)) {
            return 0;
        }
        let (a, b) = (left.energy_jet::<3>(x), right.energy_jet::<3>(y));
        let scale = kinetic_hz_m2(left.mass_kg.value(x)) / (whole * whole);
        if (a.0[0] - b.0[0]).abs() > 1e-6 * (a.0[0].abs() + b.0[0].abs()) + 1e-6 * scale {
            least = least.min(1);
        } else {
            least = least.min(2);
        }
    }
    least
}

impl Family for Eigenfunctions<'_> {
    fn count(&self) -> usize {
        self.states.values.len()
    }

    fn panels(&self) -> Vec<[f64; 2]> {
        self.states.mesh.ends.windows(2).map(|two| [two[0], two[1]]).collect()
    }

    fn jets(&self, panel: usize, x: f64, orders: usize) -> Vec<Taylor<ORDERS>> {
        let (rule, mesh) = (&self.states.rule, &self.states.mesh);
        let piece = &self.pieces[mesh.piece[panel]];
        let (from, to) = (mesh.ends[panel], mesh.ends[panel + 1]);
        let cardinals = rule.cardinals((2.0 * x - from - to) / (to - from));
        let nodes = rule.nodes.len();
        // the slope of the polynomial at x: its slopes on the nodes, interpolated
        let slopes: Vec<f64> =
            (0..nodes).map(|b| (0..nodes).map(|q| cardinals[q] * rule.slopes[q][b]).sum::<f64>() * 2.0 / (to - from)).collect();
        let higher = orders > 2;
        let energy = if higher { piece.energy_jet::<ORDERS>(x) } else { Taylor([0.0; ORDERS]) };
        let mass = if higher { piece.mass_kg.jet::<ORDERS>(x) } else { Taylor([0.0; ORDERS]) };
        let inverse_kappa = mass.0.map(|m| m / kinetic_hz_m2(1.0));
        let jet = |values: &[f64], level_hz: f64| {
            let (mut psi, mut chi) = ([0.0; ORDERS], [0.0; ORDERS]);
            for b in 0..nodes {
                psi[0] += cardinals[b] * values[b];
                psi[1] += slopes[b] * values[b];
            }
            if higher {
                chi[0] = psi[1] / inverse_kappa[0];
                let mut depth = energy.0;
                depth[0] -= level_hz;
                for k in 1..orders.min(ORDERS) {
                    chi[k] = (0..k).map(|j| depth[j] * psi[k - 1 - j]).sum::<f64>() / k as f64;
                    if k > 1 {
                        psi[k] = (0..k).map(|j| inverse_kappa[j] * chi[k - 1 - j]).sum::<f64>() / k as f64;
                    }
                }
            }
            Taylor(psi)
        };
        let at = panel * nodes;
        self.states.values.iter().zip(&self.states.levels_hz).map(|(values, level)| jet(&values[at..at + nodes], *level)).collect()
    }

    fn is_ring(&self) -> bool {
        self.states.mesh.ring
    }

    fn continuous(&self) -> usize {
        self.continuous
    }
}
