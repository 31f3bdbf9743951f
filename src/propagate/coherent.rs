//! Which levels can be coherent with each other, and so how far the rounding of H can matter.
//!
//! An entry of H is known to one part in 2^53; over a time t that turns the phase between two levels by up to epsilon times entry
//! times t. Nothing sees this phase while no coherence between them can exist: a wait of a millisecond at 300 THz leaves the
//! populations of a mixture exact. So levels are kept in groups that grow: those that the start makes coherent, those that a term
//! of H joins from its segment on, and those between which a jump operator of several entries can make a coherence.

use crate::problem::{Matrix, Problem, State, Term};

/// Groups of levels between which a coherence can exist so far.
#[derive(Debug, Clone)]
pub(super) struct Groups {
    /// The group of each level, named after one of its levels.
    of: Vec<usize>,
    /// Pairs that each matrix of the problem joins.
    pairs: Vec<Vec<[usize; 2]>>,
}

impl Groups {
    /// The groups at time zero; one of all levels where `all`, as a propagator sees each pair.
    pub(super) fn at_start(problem: &Problem, all: bool) -> Groups {
        let n = problem.dim();
        let pairs = problem.matrices.iter().map(off_diagonal).collect();
        let mut groups = Groups { of: (0..n).collect(), pairs };
        if all {
            groups.of = vec![0; n];
            return groups;
        }
        let state = problem.start.state();
        for j in 0..n {
            for k in 0..j {
                let coherent = match state {
                    State::Pure(amplitudes) => amplitudes[j].norm() > 0.0 && amplitudes[k].norm() > 0.0,
                    State::Mixed(density) => density[(j, k)].norm() > 0.0,
                };
                if coherent {
                    groups.join(j, k);
                }
            }
        }
        for [j, k] in off_diagonal(&problem.statics) {
            groups.join(j, k);
        }
        for jump in problem.jumps.iter() {
            // |to><from| moves populations alone, and a diagonal operator makes no coherence
            let parts = || std::iter::once(&jump.matrix).chain(jump.turning.iter().map(|part| &part.matrix));
            let entries: Vec<[usize; 2]> = parts().flat_map(entries).collect();
            if entries.len() > 1 && entries.iter().any(|[row, column]| row != column) {
                let first = entries[0][0];
                entries.iter().flatten().for_each(|level| groups.join(first, *level));
            }
        }
        groups
    }

    /// From a segment with these terms on.
    pub(super) fn meet(&mut self, terms: &[Term]) {
        if self.of.iter().all(|group| *group == self.of[0]) {
            return;
        }
        for term in terms {
            for pair in 0..self.pairs[term.matrix].len() {
                let [j, k] = self.pairs[term.matrix][pair];
                self.join(j, k);
            }
        }
    }

    fn join(&mut self, j: usize, k: usize) {
        let (kept, gone) = (self.of[j], self.of[k]);
        if kept != gone {
            self.of.iter_mut().filter(|group| **group == gone).for_each(|group| *group = kept);
        }
    }

    /// The largest modulus of a diagonal entry whose phase another level can see, in the unit of `matrix`.
    pub(super) fn largest_diagonal(&self, matrix: &Matrix) -> f64 {
        let seen = |level: &usize| self.of.iter().filter(|group| **group == self.of[*level]).count() > 1;
        (0..self.of.len()).filter(seen).map(|level| matrix[(level, level)].re.abs()).fold(0.0, f64::max)
    }
}

fn entries(matrix: &Matrix) -> Vec<[usize; 2]> {
    let mut found = Vec::new();
    for column in 0..matrix.ncols() {
        found.extend((0..matrix.nrows()).filter(|row| matrix[(*row, column)].norm() > 0.0).map(|row| [row, column]));
    }
    found
}

fn off_diagonal(matrix: &Matrix) -> Vec<[usize; 2]> {
    entries(matrix).into_iter().filter(|[row, column]| row != column).collect()
}
