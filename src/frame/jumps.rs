//! Jump operators in a rotating frame. With psi_lab = exp(-2 pi i integral F dt) psi_rot, entry (a, b) of L turns at F_b - F_a.
//!
//! What all entries of one L have in common is no more than a phase of L and drops out, so a jump between two levels and a diagonal
//! one stand still in every frame. Entries that turn differently beat against each other: beats up to the limit of the frame are
//! kept and turn, faster ones are dropped, which leaves jumps of their own (the secular approximation: C. Cohen-Tannoudji, J.
//! Dupont-Roc, G. Grynberg, Atom-Photon Interactions, Wiley (1992), chapter IV).

use num_complex::Complex64;

use super::follow::LevelTurning;
use crate::config::tape::Wide;
use crate::problem::{Jump, Matrix, TurningPart};

/// Two groups of entries of one jump operator that turn differently.
#[derive(Debug, Clone, PartialEq)]
pub struct JumpBeat {
    /// Which of the jumps of the laboratory frame.
    pub jump: usize,
    /// How fast they beat, without sign, Hz.
    pub turns_hz: f64,
    /// Whether the beat is kept.
    pub kept: bool,
    /// Whether its frequency stays the same through the whole sequence.
    pub even: bool,
}

/// Entries of one operator that turn alike.
struct Group {
    counts: Vec<i32>,
    table_hz: f64,
    matrix: Matrix,
    turns_hz: f64,
}

/// How the levels turn, and with which carriers.
pub(super) struct Carriers<'a> {
    pub turning: &'a LevelTurning,
    /// Carrier of each drive at time zero, Hz.
    pub first_hz: &'a [Wide],
    /// Drives whose carrier is set anew or swept.
    pub moved: &'a [bool],
    /// Beats that turn faster are dropped, Hz.
    pub limit_hz: f64,
}

impl Carriers<'_> {
    /// The jumps in the frame; the beats of those that are not the same in every frame.
    pub fn rotate(&self, jumps: &[Jump]) -> (Vec<Jump>, Vec<JumpBeat>) {
        let (mut rotated, mut beats) = (Vec::with_capacity(jumps.len()), Vec::new());
        for (index, jump) in jumps.iter().enumerate() {
            let mut groups = self.groups(&jump.matrix);
            if groups.len() <= 1 {
                rotated.push(jump.clone());
                continue;
            }
            groups.sort_by(|a, b| a.turns_hz.total_cmp(&b.turns_hz));
            let mut start = 0;
            for k in 1..=groups.len() {
                let Some(next) = groups.get(k) else {
                    rotated.push(joined(jump, &groups[start..]));
                    break;
                };
                let before = &groups[k - 1];
                let turns_hz = next.turns_hz - before.turns_hz;
                let kept = turns_hz <= self.limit_hz;
                let moved = |d: usize| self.moved[d] && next.counts[d] != before.counts[d];
                let even = !(0..self.moved.len()).any(moved);
                if turns_hz > 0.0 || !even {
                    beats.push(JumpBeat { jump: index, turns_hz, kept, even });
                }
                if !kept {
                    rotated.push(joined(jump, &groups[start..k]));
                    start = k;
                }
            }
        }
        (rotated, beats)
    }

    /// The entries sorted by how they turn.
    fn groups(&self, l: &Matrix) -> Vec<Group> {
        let size = l.nrows();
        let mut groups: Vec<Group> = Vec::new();
        for column in 0..size {
            for row in (0..size).filter(|row| l[(*row, column)] != Complex64::default()) {
                let counts: Vec<i32> = self.turning.counts[column].iter().zip(&self.turning.counts[row]).map(|(b, a)| b - a).collect();
                let table_hz = self.turning.table_hz[column] - self.turning.table_hz[row];
                let at = groups.iter().position(|group| group.counts == counts && group.table_hz == table_hz).unwrap_or_else(|| {
                    let turns_hz = self.turns_hz(&counts, table_hz);
                    groups.push(Group { counts, table_hz, matrix: Matrix::zeros(size, size), turns_hz });
                    groups.len() - 1
                });
                groups[at].matrix[(row, column)] = l[(row, column)];
            }
        }
        groups
    }

    fn turns_hz(&self, counts: &[i32], table_hz: f64) -> f64 {
        let start = Wide { high: table_hz, low: 0.0 };
        counts.iter().zip(self.first_hz).fold(start, |sum, (count, carrier)| sum.plus(carrier.times(f64::from(*count)))).value()
    }
}

/// One jump of several groups, the first of which stands still.
fn joined(jump: &Jump, groups: &[Group]) -> Jump {
    let mut made = Jump { matrix: groups[0].matrix.clone(), turning: Vec::new(), ..jump.clone() };
    for group in &groups[1..] {
        let turns_hz = group.turns_hz - groups[0].turns_hz;
        // differences of carriers that are rounding
        let largest = group.turns_hz.abs().max(groups[0].turns_hz.abs());
        if turns_hz.abs() <= 8.0 * f64::EPSILON * largest {
            made.matrix += &group.matrix;
        } else {
            made.turning.push(TurningPart { matrix: group.matrix.clone(), turns_hz, phase_turns: 0.0 });
        }
    }
    made
}

#[cfg(test)]
mod tests {
    use super::*;

    fn turning(rows: &[(&[i32], f64)]) -> LevelTurning {
        LevelTurning { counts: rows.iter().map(|(c, _)| c.to_vec()).collect(), table_hz: rows.iter().map(|(_, t)| *t).collect() }
    }

    fn lowering(size: usize) -> Jump {
        Jump::new(Matrix::from_fn(size, size, |j, k| Complex64::from(if j + 1 == k { (k as f64).sqrt() } else { 0.0 })), 3.0)
    }

    /// The lowering operator of a ladder that follows one carrier keeps its shape.
    #[test]
    fn exact_ladder_stands_still() {
        let turning = turning(&[(&[0], 0.0), (&[1], 0.0), (&[2], 0.0)]);
        let first = [Wide { high: 5.1e9, low: 0.0 }];
        let carriers = Carriers { turning: &turning, first_hz: &first, moved: &[true], limit_hz: 0.0 };
        let (jumps, beats) = carriers.rotate(&[lowering(3)]);
        assert_eq!(jumps, [lowering(3)]);
        assert!(beats.is_empty());
    }

    /// In a table frame with gaps of 7, 5 and 5.5 Hz the second and third step beat at 0.5 Hz, the first at 1.5 Hz with the third.
    #[test]
    fn exact_beats_are_kept_or_dropped_by_speed() {
        let turning = turning(&[(&[], 0.0), (&[], 7.0), (&[], 12.0), (&[], 17.5)]);
        let carriers = |limit_hz| Carriers { turning: &turning, first_hz: &[], moved: &[], limit_hz };
        let (jumps, beats) = carriers(1.0).rotate(&[lowering(4)]);
        assert_eq!(jumps.len(), 2);
        assert_eq!(beats.iter().map(|beat| (beat.turns_hz, beat.kept)).collect::<Vec<_>>(), [(0.5, true), (1.5, false)]);
        assert_eq!(jumps[0].turning.len(), 1);
        assert_eq!(jumps[0].turning[0].turns_hz, 0.5);
        assert_eq!(jumps[0].matrix[(1, 2)].re, 2f64.sqrt());
        assert_eq!(jumps[1].matrix[(0, 1)].re, 1.0);
        let (jumps, _) = carriers(f64::INFINITY).rotate(&[lowering(4)]);
        assert_eq!((jumps.len(), jumps[0].turning.len()), (1, 2));
        let (jumps, beats) = carriers(0.1).rotate(&[lowering(4)]);
        assert_eq!((jumps.len(), beats.len()), (3, 2));
    }
}
