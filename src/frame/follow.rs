//! How fast each level of a rotating frame turns.
//!
//! With `follows: drives` each drive in the order written ties every pair that its matrix couples, the reference pair first, then
//! in basis order: the upper level of the pair turns faster by the carrier than the lower one. A pair already joined is not tied
//! again; each group of joined levels starts at 0 on its first level; a level no drive touches stands still. So each level
//! frequency is a sum of carriers with whole coefficients, which this file finds; what a carrier is at a moment, its sweep
//! included, is put in later. With a table the frequencies are taken as written.

use crate::config::document::Document;
use crate::config::drives::Form;
use crate::config::settings::{Follows, Rotating};
use crate::drive::coupling::Coupling;

/// The frequencies of the levels: F_j = table_j + sum over drives of counts_jd times the carrier of drive d.
#[derive(Debug, Clone, PartialEq)]
pub struct LevelTurning {
    /// Whole coefficients, level by level, one for each drive.
    pub counts: Vec<Vec<i32>>,
    /// Fixed frequencies, Hz.
    pub table_hz: Vec<f64>,
}

/// The turning of the levels in the frame that a config asks for.
pub fn level_turning(document: &Document, frame: &Rotating, couplings: &[Coupling], energies_hz: &[f64], values: &[f64]) -> LevelTurning {
    let size = energies_hz.len();
    let drives = document.drives.len();
    let mut turning = LevelTurning { counts: vec![vec![0; drives]; size], table_hz: vec![0.0; size] };
    match &frame.follows {
        Follows::Table(table) => {
            for (level, frequency) in table {
                turning.table_hz[*level] = values[frequency.register as usize];
            }
        }
        Follows::Drives => {
            let ties: Vec<Tie> = document
                .drives
                .iter()
                .enumerate()
                .filter(|(_, drive)| drive.form != Form::Direct)
                .flat_map(|(d, _)| pairs(&couplings[d], energies_hz).into_iter().map(move |[lower, upper]| Tie { lower, upper, drive: d }))
                .collect();
            follow(&ties, &mut turning.counts);
        }
    }
    turning
}

struct Tie {
    lower: usize,
    upper: usize,
    drive: usize,
}

/// Pairs that a drive couples, [lower, upper], the reference pair first, then in basis order.
fn pairs(coupling: &Coupling, energies_hz: &[f64]) -> Vec<[usize; 2]> {
    let size = energies_hz.len();
    let mut found: Vec<[usize; 2]> = coupling.reference.into_iter().collect();
    for a in 0..size {
        for b in a + 1..size {
            let coupled = coupling.matrix[(a, b)].norm() > 0.0 || coupling.matrix[(b, a)].norm() > 0.0;
            let pair = if energies_hz[a] <= energies_hz[b] { [a, b] } else { [b, a] };
            if coupled && !found.contains(&pair) && !found.contains(&[pair[1], pair[0]]) {
                found.push(pair);
            }
        }
    }
    found
}

/// Joins levels tie by tie; each group ends with 0 on its first level.
fn follow(ties: &[Tie], counts: &mut [Vec<i32>]) {
    let size = counts.len();
    let mut group: Vec<usize> = (0..size).collect();
    for tie in ties {
        let (from, to) = (group[tie.upper], group[tie.lower]);
        if from == to {
            continue;
        }
        // move the whole group of the upper level so that upper - lower is the carrier
        let mut shift: Vec<i32> = counts[tie.lower].iter().zip(&counts[tie.upper]).map(|(lower, upper)| lower - upper).collect();
        shift[tie.drive] += 1;
        for level in 0..size {
            if group[level] == from {
                group[level] = to;
                counts[level].iter_mut().zip(&shift).for_each(|(count, shift)| *count += shift);
            }
        }
    }
    for level in 0..size {
        let first = (0..size).find(|other| group[*other] == group[level]).unwrap_or(level);
        if first == level {
            let zero = counts[level].clone();
            for other in (level..size).filter(|other| group[*other] == group[level]) {
                counts[other].iter_mut().zip(&zero).for_each(|(count, zero)| *count -= zero);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn tie(lower: usize, upper: usize, drive: usize) -> Tie {
        Tie { lower, upper, drive }
    }

    /// Lambda: near 0, far 1, upper 2; pump 0-2 (drive 0), dump 1-2 (drive 1): F = 0, pump - dump, pump.
    #[test]
    fn exact_lambda_follows_both_drives() {
        let mut counts = vec![vec![0, 0]; 3];
        follow(&[tie(0, 2, 0), tie(1, 2, 1)], &mut counts);
        assert_eq!(counts, [vec![0, 0], vec![1, -1], vec![1, 0]]);
    }

    /// A closed ring: the third drive finds its pair joined.
    #[test]
    fn exact_ring_is_tied_by_its_first_two_drives() {
        let mut counts = vec![vec![0, 0, 0]; 3];
        follow(&[tie(0, 1, 0), tie(1, 2, 1), tie(0, 2, 2)], &mut counts);
        assert_eq!(counts, [vec![0, 0, 0], vec![1, 0, 0], vec![1, 1, 0]]);
    }

    /// Two groups that a later tie joins, with the first level not the lowest: it still stands still.
    #[test]
    fn exact_first_level_of_a_group_stands_still() {
        let mut counts = vec![vec![0, 0]; 3];
        follow(&[tie(2, 0, 0), tie(1, 2, 1)], &mut counts);
        assert_eq!(counts, [vec![0, 0], vec![-1, -1], vec![-1, 0]]);
    }
}
