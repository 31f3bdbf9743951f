//! The final numbers of a point as functions of the columns at the end, and the seeds of their derivatives.
//!
//! Columns: first the state (amplitudes, or the density matrix of an open system), then what the gate sees (columns of the propagator, or
//! the images of |j><k| side by side). Numbers of the state are of first or second degree in the density matrix, those of a gate held fixed
//! of second degree in the propagator and linear in the channel: so a symmetric difference over a whole unit is exact.

use num_complex::Complex64;

use crate::config::document::Document;
use crate::measure::{observables, GateJudge, Last, Observables, Seen, Whole};
use crate::plan::Point;
use crate::problem::{Channel, Matrix, Problem, State, Vector};
use crate::propagate::gradient::Seed;

/// The numbers of one point.
pub(super) struct Finals<'a> {
    problem: &'a Problem,
    observables: Observables<'a>,
    open: bool,
}

impl<'a> Finals<'a> {
    pub fn new(document: &Document, point: &'a Point, open: bool) -> Finals<'a> {
        let problem = point.problem();
        Finals { problem, observables: observables(document, &point.built, &point.values, &point.energies_hz, problem), open }
    }

    /// Levels of the gate; empty where none is judged.
    fn within(&self) -> &[usize] {
        self.observables.gate.as_ref().map_or(&[], |gate| gate.within())
    }

    /// Columns of the state.
    fn of_state(&self) -> usize {
        if self.open {
            self.problem.dim()
        } else {
            1
        }
    }

    /// All columns at the start.
    pub fn start(&self) -> Matrix {
        let dim = self.problem.dim();
        let state = match self.problem.start.amplitudes().filter(|_| !self.open) {
            Some(amplitudes) => Matrix::from_columns(std::slice::from_ref(amplitudes)),
            None => self.problem.start.density(),
        };
        let within = self.within();
        let one = Complex64::from(1.0);
        let of_gate = if self.open { dim * within.len() * within.len() } else { within.len() };
        let mut start = Matrix::zeros(dim, state.ncols() + of_gate);
        start.columns_mut(0, state.ncols()).copy_from(&state);
        for (j, level) in within.iter().enumerate() {
            if self.open {
                for (k, other) in within.iter().enumerate() {
                    start[(*level, state.ncols() + dim * (j + within.len() * k) + other)] = one;
                }
            } else {
                start[(*level, 1 + j)] = one;
            }
        }
        start
    }

    /// Numbers of the state, in the order of the columns of the traces.
    fn of(&self, state: State) -> Vec<f64> {
        let mut row = Vec::new();
        if let Some(moment) = self.problem.moments.last() {
            let seen = Seen { moment, state, time_in_s: &[] };
            self.observables.quantities.iter().for_each(|quantity| quantity.see(&seen, &mut row));
        }
        row
    }

    /// The gate's figures by some judge.
    fn judged(&self, judge: &GateJudge, columns: &Matrix) -> Vec<f64> {
        let (dim, within) = (self.problem.dim(), self.within());
        let mut numbers = Vec::new();
        if self.open {
            let images = (0..within.len() * within.len()).map(|k| columns.columns(dim * k, dim).into_owned()).collect();
            judge.see(Whole::Channel(&Channel { within: within.to_vec(), images }), &mut numbers);
        } else {
            let mut u = Matrix::zeros(dim, dim);
            within.iter().enumerate().for_each(|(k, level)| u.set_column(*level, &columns.column(k)));
            judge.see(Whole::Propagator(&u), &mut numbers);
        }
        numbers
    }

    fn gate_columns(&self, end: &Matrix) -> Matrix {
        end.columns(self.of_state(), end.ncols() - self.of_state()).into_owned()
    }

    /// All final numbers of the columns at the end.
    pub fn values(&self, end: &Matrix) -> Vec<f64> {
        let first = end.columns(0, self.of_state()).into_owned();
        let mut numbers = if self.open { self.of(State::Mixed(&first)) } else { self.of(State::Pure(&Vector::from(first.column(0)))) };
        if let Some(judge) = &self.observables.gate {
            numbers.extend(self.judged(judge, &self.gate_columns(end)));
        }
        numbers
    }

    /// Their seeds at `end`.
    pub fn seeds(&self, end: &Matrix) -> Vec<Seed> {
        let mut seeds = self.state_seeds(end);
        if let Some(judge) = &self.observables.gate {
            seeds.extend(self.gate_seeds(judge, &self.gate_columns(end)));
        }
        seeds
    }

    /// With O the derivative by the density matrix, df = Tr(O d(rho)): O itself, or 2 O psi.
    fn state_seeds(&self, end: &Matrix) -> Vec<Seed> {
        let dim = self.problem.dim();
        let first = end.columns(0, self.of_state()).into_owned();
        let rho = if self.open { first.clone() } else { &first * first.adjoint() };
        let numbers = |changes: &[(usize, usize, Complex64)], sign: f64| {
            let mut moved = rho.clone();
            changes.iter().for_each(|(j, k, by)| moved[(*j, *k)] += by * sign);
            self.of(State::Mixed(&moved))
        };
        let slopes = |changes: &[(usize, usize, Complex64)]| -> Vec<f64> {
            let slope = |(up, down): (&f64, f64)| 0.5 * (up - down);
            // a number that is not made of the state alone (time spent in a level) is none here
            numbers(changes, 1.0)
                .iter()
                .zip(numbers(changes, -1.0))
                .map(slope)
                .map(|slope| if slope.is_finite() { slope } else { 0.0 })
                .collect()
        };
        let (one, i) = (Complex64::from(1.0), Complex64::i());
        let mut operators = vec![Matrix::zeros(dim, dim); self.of(State::Mixed(&rho)).len()];
        for j in 0..dim {
            for (operator, slope) in operators.iter_mut().zip(slopes(&[(j, j, one)])) {
                operator[(j, j)] = slope.into();
            }
            for k in j + 1..dim {
                let (re, im) = (slopes(&[(j, k, one), (k, j, one)]), slopes(&[(j, k, i), (k, j, -i)]));
                for ((operator, re), im) in operators.iter_mut().zip(re).zip(im) {
                    let entry = Complex64::new(0.5 * re, 0.5 * im);
                    operator[(j, k)] = entry;
                    operator[(k, j)] = entry.conj();
                }
            }
        }
        let seed = |operator: Matrix| if self.open { operator } else { operator * &first * Complex64::from(2.0) };
        operators.into_iter().map(|operator| Seed { first: 0, seed: seed(operator) }).collect()
    }

    fn gate_seeds(&self, judge: &GateJudge, columns: &Matrix) -> Vec<Seed> {
        let channel = self.channel(columns);
        let (held, behind) = judge.held(&channel);
        // gate error and leakage; then the incoherent share, and the coherent one as the rest
        let mut seeds = self.slopes(&held, columns, &[0, 1]);
        if let Some(behind) = behind {
            let incoherent = self.slopes(&behind, columns, &[0]).remove(0);
            seeds.push(&seeds[0] - &incoherent);
            seeds.push(incoherent);
        }
        seeds.into_iter().map(|seed| Seed { first: self.of_state(), seed }).collect()
    }

    fn channel(&self, columns: &Matrix) -> Channel {
        let (dim, within) = (self.problem.dim(), self.within());
        if self.open {
            let images = (0..within.len() * within.len()).map(|k| columns.columns(dim * k, dim).into_owned()).collect();
            return Channel { within: within.to_vec(), images };
        }
        let mut u = Matrix::zeros(dim, dim);
        within.iter().enumerate().for_each(|(k, level)| u.set_column(*level, &columns.column(k)));
        Channel::of_propagator(&u, within)
    }

    /// Seeds of some figures of a judge with nothing free.
    fn slopes(&self, judge: &GateJudge, columns: &Matrix, figures: &[usize]) -> Vec<Matrix> {
        let mut seeds = vec![Matrix::zeros(columns.nrows(), columns.ncols()); figures.len()];
        for j in 0..columns.nrows() {
            for k in 0..columns.ncols() {
                for unit in [Complex64::from(1.0), Complex64::i()] {
                    let at = |sign: f64| {
                        let mut moved = columns.clone();
                        moved[(j, k)] += unit * sign;
                        self.judged(judge, &moved)
                    };
                    let (up, down) = (at(1.0), at(-1.0));
                    for (seed, figure) in seeds.iter_mut().zip(figures) {
                        seed[(j, k)] += unit * (0.5 * (up[*figure] - down[*figure]));
                    }
                }
            }
        }
        seeds
    }
}
