//! Quasi-energies of a periodic drive: with U the propagator over one period T, its eigenvalues are exp(-2 pi i q), q in
//! (-1/2, 1/2], the quasi-energies q/T; the weights are the squared moduli of the components of the eigenvector at time zero
//! (J. H. Shirley, Physical Review 138, B979 (1965)).

use crate::problem::{Matrix, Problem, State};
use crate::propagate::Recorder;
use crate::units::{cis_turns, RAD_PER_TURN};

/// One level of the driven system.
#[derive(Debug, Clone, PartialEq)]
pub struct QuasiEnergy {
    /// q, turns per period, in (-1/2, 1/2].
    pub turns: f64,
    /// Weight of each basis state at time zero.
    pub weights: Vec<f64>,
}

/// Eigenphases and eigenvectors of a unitary matrix, ascending in q. A unitary matrix is normal, so the columns of its Schur form
/// (B. N. Parlett, The Symmetric Eigenvalue Problem, 1980, for the Hermitian parts; J. Schur, Mathematische Annalen 66, 488 (1909))
/// are its eigenvectors.
pub fn quasi_energies(u: &Matrix) -> Option<Vec<QuasiEnergy>> {
    let schur = u.clone().try_schur(1e-16, 10_000)?;
    let (vectors, triangle) = schur.unpack();
    let mut found: Vec<QuasiEnergy> = (0..u.ncols())
        .map(|k| {
            let turns = -triangle[(k, k)].arg() / RAD_PER_TURN;
            // rounding must not put 1/2 at the lower end, nor leave a zero its sign
            let turns = if turns <= -0.5 + 1e-15 { turns + 1.0 } else { turns + 0.0 };
            QuasiEnergy { turns, weights: vectors.column(k).iter().map(|z| z.norm_sqr()).collect() }
        })
        .collect();
    found.sort_by(|a, b| a.turns.total_cmp(&b.turns));
    Some(found)
}

/// Records the quasi-energies of a problem that lasts one period.
#[derive(Debug, Default)]
pub struct QuasiRecorder {
    /// What was found; none before the run has finished.
    pub found: Option<Vec<QuasiEnergy>>,
    numbers: Vec<f64>,
}

impl Recorder for QuasiRecorder {
    fn see(&mut self, _: usize, _: State, _: &[f64]) {}

    fn finish(&mut self, propagator: Option<&Matrix>) {
        self.found = propagator.and_then(quasi_energies);
        // turns near the ends of their range are one number apart by rounding: compared as points on a circle
        let point = |turns: f64| cis_turns(turns) / RAD_PER_TURN;
        let all = self.found.iter().flatten();
        self.numbers =
            all.flat_map(|level| [point(level.turns).re, point(level.turns).im].into_iter().chain(level.weights.iter().copied())).collect();
        if self.found.is_none() {
            self.numbers = vec![f64::NAN];
        }
    }

    fn numbers(&self) -> &[f64] {
        &self.numbers
    }
}

/// The moment at which H differs from what it was one period before, if there is one among evenly spread moments.
pub fn breaks_period(problem: &Problem, period_s: f64) -> Option<f64> {
    const LOOKS: u32 = 97;
    let rest = problem.length_s() - period_s;
    if rest <= 0.0 {
        return None;
    }
    let size = |h: &Matrix| h.norm();
    (0..LOOKS).map(|k| rest * (f64::from(k) + 0.5) / f64::from(LOOKS)).find_map(|t| {
        let (now, later) = (at(problem, t)?, at(problem, t + period_s)?);
        (size(&(&later - &now)) > 1e-6 * size(&now).max(size(&later))).then_some(t + period_s)
    })
}

/// H without its mean diagonal, which only turns the phase.
fn at(problem: &Problem, t_s: f64) -> Option<Matrix> {
    let index = problem.segments.partition_point(|segment| segment.start.seconds() <= t_s).checked_sub(1)?;
    let segment = &problem.segments[index];
    let mut h = problem.hamiltonian(segment, (t_s - segment.start.seconds()).clamp(0.0, segment.length_s));
    let mean = h.trace() / num_complex::Complex64::from(h.nrows() as f64);
    for j in 0..h.nrows() {
        h[(j, j)] -= mean;
    }
    Some(h)
}
