//! Populations of the instantaneous eigenstates of H(t), in the frame of the run.
//!
//! At time zero each eigenstate bears the name of the level it overlaps most; from then on it is followed by its place in the
//! order of energies, as adiabatic passage does (M. Born and V. Fock, Zeitschrift fuer Physik 51, 165 (1928)).

use super::{Column, Quantity, Seen};
use crate::problem::{Matrix, Problem, Vector};

/// Populations of all instantaneous eigenstates.
pub struct AdiabaticPopulations<'a> {
    problem: &'a Problem,
    names: Vec<String>,
    /// Levels that were not eliminated.
    levels: Vec<usize>,
    /// For each of them, the place of its eigenstate in ascending energy.
    order: Vec<usize>,
}

/// Eigenvectors as columns, ascending in energy.
fn eigenstates(h: Matrix) -> Matrix {
    let eigen = h.symmetric_eigen();
    let mut order: Vec<usize> = (0..eigen.eigenvalues.len()).collect();
    order.sort_by(|a, b| eigen.eigenvalues[*a].total_cmp(&eigen.eigenvalues[*b]));
    Matrix::from_columns(&order.iter().map(|k| eigen.eigenvectors.column(*k)).collect::<Vec<_>>())
}

/// The part of H between some levels.
fn between(h: &Matrix, levels: &[usize]) -> Matrix {
    Matrix::from_fn(levels.len(), levels.len(), |j, k| h[(levels[j], levels[k])])
}

impl<'a> AdiabaticPopulations<'a> {
    /// Of the Hamiltonian of `problem` between `levels`.
    pub fn new(names: &[String], problem: &'a Problem, levels: &[usize]) -> AdiabaticPopulations<'a> {
        let states = eigenstates(between(&problem.hamiltonian(&problem.segments[0], 0.0), levels));
        let size = levels.len();
        let mut pairs: Vec<(usize, usize)> = (0..size).flat_map(|level| (0..size).map(move |state| (level, state))).collect();
        // largest overlaps first; of equal ones the first level and the lowest state
        pairs.sort_by(|(a, m), (b, n)| states[(*b, *n)].norm_sqr().total_cmp(&states[(*a, *m)].norm_sqr()));
        let mut order = vec![usize::MAX; size];
        let mut taken = vec![false; size];
        for (level, state) in pairs {
            if order[level] == usize::MAX && !taken[state] {
                order[level] = state;
                taken[state] = true;
            }
        }
        AdiabaticPopulations { problem, names: levels.iter().map(|level| names[*level].clone()).collect(), levels: levels.to_vec(), order }
    }
}

impl Quantity for AdiabaticPopulations<'_> {
    fn columns(&self) -> Vec<Column> {
        let column = |name: &String| {
            Column::plain(format!("adiabatic_population_{name}"), &["adiabatic_populations", name], "adiabatic population", name.clone())
        };
        self.names.iter().map(column).collect()
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        let h = self.problem.hamiltonian(&self.problem.segments[seen.moment.segment], seen.moment.offset_s);
        let states = eigenstates(between(&h, &self.levels));
        row.extend(self.order.iter().map(|state| {
            let mut whole = Vector::zeros(seen.state.dim());
            self.levels.iter().zip(states.column(*state).iter()).for_each(|(level, part)| whole[*level] = *part);
            seen.state.weight(&whole)
        }));
    }
}
