//! A gate judged with what suits it best held fixed, for derivatives: where a number is the best over some turns, its derivative is that at
//! the best turn (J. M. Danskin, SIAM Journal on Applied Mathematics 14, 641 (1966)), and with the turn held it is of second degree
//! in the propagator and linear in the channel.

use num_complex::Complex64;

use super::gate::{ordered, GateJudge};
use crate::problem::{Channel, Matrix};
use crate::units::{cis_turns, sin_cos_turns};

impl GateJudge {
    /// Two judges without anything free: the first gives the gate error and leakage of this one near `channel`; the second, of two levels
    /// alone, gives as its gate error the incoherent share.
    pub fn held(&self, channel: &Channel) -> (GateJudge, Option<GateJudge>) {
        let figures = self.judge(channel);
        let d = self.within().len();
        let turned = |target: &Matrix| {
            Matrix::from_fn(d, d, |a, b| {
                let turns: f64 = self.free().iter().zip(&figures.free_z_turns).map(|(z, phi)| z[a] * phi).sum();
                cis_turns(-turns) * target[(a, b)]
            })
        };
        let fixed = |target: Matrix| self.with_target(turned(&target));
        let behind = figures.residual.map(|(turns, axis)| {
            let (sin, cos) = sin_cos_turns(0.5 * turns);
            let [x, y, z] = axis.map(|part| part * sin);
            let c = Complex64::new;
            let turn = ordered(self.first_is_lower(), [[c(cos, -z), c(-y, -x)], [c(y, -x), c(cos, z)]]);
            fixed(turn * self.target())
        });
        (fixed(self.target().clone()), behind)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::measure::Last;
    use crate::measure::Whole;

    /// At the channel that they were made for, the judges agree with the one they come from.
    #[test]
    fn prop_held_judges_agree_where_they_were_made() {
        let c = Complex64::new;
        // a leaky gate on two of three levels, with a free turn
        let h = Matrix::from_fn(3, 3, |j, k| match j.cmp(&k) {
            std::cmp::Ordering::Less => c(0.3 + 0.2 * j as f64, 0.1 * k as f64),
            std::cmp::Ordering::Greater => c(0.3 + 0.2 * k as f64, -0.1 * j as f64),
            std::cmp::Ordering::Equal => c(0.2 * j as f64, 0.0),
        });
        let u = (h * c(0.0, -1.0)).exp();
        let target = Matrix::from_row_slice(2, 2, &[c(0.0, 0.0), c(1.0, 0.0), c(1.0, 0.0), c(0.0, 0.0)]);
        for free in [vec![], vec![vec![0.5, -0.5]]] {
            let judge = GateJudge::of(&[0, 1], target.clone(), free);
            let channel = Channel::of_propagator(&u, &[0, 1]);
            let mut wanted = Vec::new();
            judge.see(Whole::Channel(&channel), &mut wanted);
            let (held, behind) = judge.held(&channel);
            assert!((held.judge(&channel).error - wanted[0]).abs() < 1e-15);
            assert!((held.judge(&channel).leakage - wanted[1]).abs() < 1e-15);
            assert!((behind.map_or(f64::NAN, |judge| judge.judge(&channel).error) - wanted[3]).abs() < 1e-15);
        }
    }
}
