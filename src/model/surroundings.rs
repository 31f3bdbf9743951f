//! What surrounds the system, as jumps with rates and as the times of the trade: decays, what a warm bath adds by detailed
//! balance, dephasing, and the coherence time of every pair.
//!
//! Population leaves a level by L = |to><from| at rate = share / lifetime. A bath of temperature T has n = 1/(exp(gap/kT) - 1)
//! quanta at the gap: down goes n + 1 times, up n times the rate stated for zero temperature (A. Einstein, Physikalische
//! Zeitschrift 18, 121 (1917)). Dephasing by weights w is L = diag(w) at rate 2 / pure time, so that the coherence of m and n
//! decays at (w_m - w_n)^2 / pure time.

use num_complex::Complex64;

use super::built::Built;
use crate::config::decay::{leaving, Decay, Leaves, Shares};
use crate::config::dephasing::{pure_time_s, too_long, Dephasing, Fading, Weights};
use crate::config::document::Document;
use crate::config::messages::{Fault, Mistake, OpenFault};
use crate::config::place::Place;
use crate::config::record::Cause;
use crate::problem::{Jump, Matrix};
use crate::units::HZ_PER_KELVIN;

/// One way out of a level.
#[derive(Debug, Clone, PartialEq)]
pub struct WayOut {
    /// The level that is left.
    pub from: usize,
    /// Where population goes; none for outside.
    pub to: Option<usize>,
    /// Rate, 1/s.
    pub rate_per_s: f64,
    /// The operator (index) by which it jumps together with other levels, if it does.
    pub operator: Option<usize>,
}

/// One dephasing.
#[derive(Debug, Clone, PartialEq)]
pub struct Fade {
    /// Weight of each level.
    pub weights: Vec<f64>,
    /// 1/e time for a weight difference of 1, s; infinite where nothing is left for it.
    pub pure_time_s: f64,
}

/// Everything that surrounds the system.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Surroundings {
    /// Ways out of levels, in the order written, what a bath excites after what it takes.
    pub ways: Vec<WayOut>,
    /// Dephasings, in the order written.
    pub fades: Vec<Fade>,
    /// The jumps of all of it, in the laboratory frame.
    pub jumps: Vec<Jump>,
    /// The cause of each jump.
    pub causes: Vec<Cause>,
    /// Sum of rate (L+ L) on the diagonal, decays alone, 1/s.
    leaving: Vec<f64>,
    /// Rates and diagonals of jump operators that have one, decays alone.
    diagonals: Vec<(f64, Vec<Complex64>)>,
}

impl Surroundings {
    /// Those of a config with the numbers of one point; `energies_hz` is the diagonal of the static Hamiltonian.
    pub fn new(document: &Document, built: &Built, values: &[f64], energies_hz: &[f64]) -> Result<Surroundings, Mistake> {
        let mut found = Surroundings::default();
        for decay in &document.decays {
            if let Some(fault) = decay.speed.fault(values) {
                return Err(Mistake::error(decay.speed.size.place, fault));
            }
            match &decay.leaves {
                Leaves::Level { from, to } => found.leave(document, values, energies_hz, decay, *from, to)?,
                Leaves::Operator(operator) => {
                    let matrix = super::operator(document, built, *operator, values);
                    found.jump_together(document, values, energies_hz, decay, (*operator, matrix))?;
                }
            }
        }
        found.fade(document, built, values)?;
        Ok(found)
    }

    /// The rate at which a level is left, all ways together, 1/s.
    pub fn rate_out(&self, level: usize) -> f64 {
        self.ways.iter().filter(|way| way.from == level).map(|way| way.rate_per_s).sum()
    }

    /// Decay rate of the coherence of two levels, 1/s: -Re of the factor of rho_ab in its own equation.
    pub fn coherence_rate(&self, a: usize, b: usize) -> f64 {
        let of = |level: usize| self.leaving.get(level).copied().unwrap_or(0.0);
        let kept = self.diagonals.iter().map(|(rate, diagonal)| rate * (diagonal[a] * diagonal[b].conj()).re);
        // dephasing from its weights, so that equal ones leave exactly nothing
        let fades = self.fades.iter().map(|fade| (fade.weights[a] - fade.weights[b]).powi(2) / fade.pure_time_s);
        0.5 * (of(a) + of(b)) - kept.sum::<f64>() + fades.sum::<f64>()
    }

    /// The longest lifetime, s; none where nothing decays.
    pub fn longest_lifetime_s(&self, levels: usize) -> Option<f64> {
        (0..levels).map(|level| self.rate_out(level)).filter(|rate| *rate > 0.0).map(|rate| 1.0 / rate).reduce(f64::max)
    }

    fn push(&mut self, jump: Jump, cause: Cause) {
        if cause == Cause::Decay {
            self.leaving.resize(jump.matrix.ncols(), 0.0);
            for (leaving, column) in self.leaving.iter_mut().zip(jump.matrix.column_iter()) {
                *leaving += jump.rate_per_s * column.norm_squared();
            }
            let diagonal: Vec<Complex64> = jump.matrix.diagonal().iter().copied().collect();
            if jump.keeps && diagonal.iter().any(|entry| entry.norm() > 0.0) {
                self.diagonals.push((jump.rate_per_s, diagonal));
            }
        }
        self.jumps.push(jump);
        self.causes.push(cause);
    }

    /// A level that is left, by shares.
    fn leave(
        &mut self,
        document: &Document,
        values: &[f64],
        energies_hz: &[f64],
        decay: &Decay,
        from: usize,
        to: &Shares,
    ) -> Result<(), Mistake> {
        let names = &document.system.names;
        let shares = to.numbers(Some(&names[from]), "to", values).map_err(|fault| Mistake::error(to.place, fault))?;
        let whole = decay.speed.rate_per_s(values);
        let (mut ways, mut excited) = (Vec::new(), Vec::new());
        for ((target, ..), share) in to.parts.iter().zip(shares) {
            let mut rate_per_s = whole * share;
            if let Some(bath) = decay.temperature {
                let Some(target) = *target else {
                    return Err(open(bath.place, OpenFault::BathOutside { from: names[from].clone() }));
                };
                let gap_hz = gap_down(names, energies_hz, from, target).map_err(|fault| open(bath.place, fault))?;
                let quanta = quanta(bath.place, gap_hz, values[bath.register as usize])?;
                if quanta > 0.0 {
                    excited.push(WayOut { from: target, to: Some(from), rate_per_s: rate_per_s * quanta, operator: None });
                }
                rate_per_s *= quanta + 1.0;
            }
            ways.push(WayOut { from, to: *target, rate_per_s, operator: None });
        }
        for way in ways.into_iter().chain(excited) {
            let jump = match way.to {
                Some(to) => Jump::between(names.len(), way.from, to, way.rate_per_s),
                None => Jump::out_of(names.len(), way.from, way.rate_per_s),
            };
            self.push(jump, Cause::Decay);
            self.ways.push(way);
        }
        Ok(())
    }

    /// A named matrix as jump operator; with a bath its adjoint jumps too.
    fn jump_together(
        &mut self,
        document: &Document,
        values: &[f64],
        energies_hz: &[f64],
        decay: &Decay,
        (operator, matrix): (usize, Matrix),
    ) -> Result<(), Mistake> {
        let mut rate_per_s = decay.speed.rate_per_s(values);
        let mut adjoint = None;
        if let Some(bath) = decay.temperature {
            let gap_hz = gap_of(document, &matrix, energies_hz, operator).map_err(|fault| open(bath.place, fault))?;
            let quanta = quanta(bath.place, gap_hz, values[bath.register as usize])?;
            adjoint = (quanta > 0.0).then(|| (matrix.adjoint(), rate_per_s * quanta));
            rate_per_s *= quanta + 1.0;
        }
        for (matrix, rate_per_s) in std::iter::once((matrix, rate_per_s)).chain(adjoint) {
            for (from, to) in off_diagonal(&matrix) {
                let rate_per_s = rate_per_s * matrix[(to, from)].norm_sqr();
                self.ways.push(WayOut { from, to: Some(to), rate_per_s, operator: Some(operator) });
            }
            self.push(Jump::new(matrix, rate_per_s), Cause::Decay);
        }
        Ok(())
    }

    /// All dephasings; total times last, as the decays and the other dephasings of their pair are taken out of them.
    fn fade(&mut self, document: &Document, built: &Built, values: &[f64]) -> Result<(), Mistake> {
        let size = document.system.names.len();
        let weights: Vec<Vec<f64>> =
            document.dephasings.iter().map(|one| weights(document, built, one, values)).collect::<Result<_, _>>()?;
        let mut times = vec![f64::INFINITY; weights.len()];
        for (time, one) in times.iter_mut().zip(&document.dephasings) {
            let value = values[one.size().register as usize];
            let (what, unit, good) = match one.fading {
                Fading::Linewidth(_) => ("dephasing / linewidth", "Hz", value >= 0.0),
                Fading::Pure(_) => ("dephasing / pure_time", "s", value > 0.0),
                Fading::Total(..) => ("dephasing / total_time", "s", value > 0.0),
            };
            if !good {
                return Err(Mistake::error(one.size_place, Fault::NotPositive { what: what.to_string(), value, unit: unit.to_string() }));
            }
            match one.fading {
                Fading::Pure(_) => *time = value,
                Fading::Linewidth(_) => *time = pure_time_s(value),
                Fading::Total(..) => {}
            }
        }
        for (k, one) in document.dephasings.iter().enumerate() {
            if let Fading::Total(time, pair) = one.fading {
                let alone = self.pure_part(document, &weights, &times, k, pair, values[time.register as usize]);
                times[k] = alone.map_err(|fault| Mistake::error(one.size_place, fault))?;
            }
        }
        for (weights, pure_time_s) in weights.into_iter().zip(times) {
            let diagonal = nalgebra::DVector::from_iterator(size, weights.iter().map(|weight| Complex64::from(*weight)));
            self.push(Jump::new(Matrix::from_diagonal(&diagonal), 2.0 / pure_time_s), Cause::Dephasing);
            self.fades.push(Fade { weights, pure_time_s });
        }
        Ok(())
    }

    /// The pure time that dephasing `k` must have for its pair to fade in `total_s` altogether.
    fn pure_part(
        &self,
        document: &Document,
        weights: &[Vec<f64>],
        times: &[f64],
        k: usize,
        [a, b]: [usize; 2],
        total_s: f64,
    ) -> Result<f64, Fault> {
        let names = &document.system.names;
        let pair = || [names[a].clone(), names[b].clone()];
        let square = |weights: &[f64]| (weights[a] - weights[b]).powi(2);
        if square(&weights[k]) == 0.0 {
            return Err(Fault::Open(OpenFault::EqualWeights { pair: pair() }));
        }
        let line = |level: usize| leaving(&document.decays, level).next().map_or(0, |decay| decay.place.line);
        let by_decay = self.coherence_rate(a, b);
        if document.decays.iter().all(|decay| matches!(decay.leaves, Leaves::Level { .. })) {
            if let Some(fault) = too_long(names, [a, b], [self.rate_out(a), self.rate_out(b)], total_s, line) {
                return Err(fault);
            }
        }
        let mut others = by_decay;
        for (j, other) in document.dephasings.iter().enumerate().filter(|(j, _)| *j != k) {
            if square(&weights[j]) == 0.0 {
                continue;
            }
            if let Fading::Total(..) = other.fading {
                return Err(Fault::Open(OpenFault::TwoTotals { pair: pair(), other: other.place.line }));
            }
            others += square(&weights[j]) / times[j];
        }
        // a total time at its limit leaves no dephasing, up to the rounding of 1/total
        let left = 1.0 / total_s - others;
        if left < -1e-12 / total_s {
            return Err(Fault::Open(OpenFault::AlreadyFaster { total_s, pair: pair(), others_s: 1.0 / others }));
        }
        Ok(square(&weights[k]) / left.max(0.0))
    }
}

fn open(place: Place, fault: OpenFault) -> Mistake {
    Mistake::error(place, Fault::Open(fault))
}

/// The weights of a dephasing: as written, or the diagonal of an operator.
fn weights(document: &Document, built: &Built, dephasing: &Dephasing, values: &[f64]) -> Result<Vec<f64>, Mistake> {
    let size = document.system.names.len();
    let Weights::Operator(index) = dephasing.weights else {
        return Ok(dephasing.written_weights(size, values).unwrap_or_default());
    };
    let matrix = super::operator(document, built, index, values);
    let diagonal = matrix.diagonal();
    if !off_diagonal(&matrix).is_empty() || diagonal.iter().any(|entry| entry.im != 0.0) {
        let fault = Fault::NotDiagonal { operator: document.operators[index].name.clone() };
        return Err(Mistake::error(dephasing.place, fault));
    }
    Ok(diagonal.iter().map(|entry| entry.re).collect())
}

/// Rows and columns of what stands off the diagonal, as (from, to).
fn off_diagonal(matrix: &Matrix) -> Vec<(usize, usize)> {
    let all = (0..matrix.ncols()).flat_map(|from| (0..matrix.nrows()).map(move |to| (from, to)));
    all.filter(|(from, to)| from != to && matrix[(*to, *from)].norm() > 0.0).collect()
}

/// The gap that population falls through, Hz; equal energies and ways up are refused.
fn gap_down(names: &[String], energies_hz: &[f64], from: usize, to: usize) -> Result<f64, OpenFault> {
    let gap_hz = energies_hz[from] - energies_hz[to];
    let (from_name, to_name) = (names[from].clone(), names[to].clone());
    if gap_hz.abs() <= 1e-14 * energies_hz[from].abs().max(energies_hz[to].abs()) {
        return Err(OpenFault::BathBetweenEqual { from: from_name, to: to_name });
    }
    if gap_hz < 0.0 {
        return Err(OpenFault::BathUpwards { from: from_name, to: to_name });
    }
    Ok(gap_hz)
}

/// The one gap that all entries of a jump operator fall through, Hz.
fn gap_of(document: &Document, matrix: &Matrix, energies_hz: &[f64], operator: usize) -> Result<f64, OpenFault> {
    let names = &document.system.names;
    let mut found: Option<f64> = None;
    let diagonal = (0..matrix.nrows()).filter(|k| matrix[(*k, *k)].norm() > 0.0).map(|k| (k, k));
    for (from, to) in off_diagonal(matrix).into_iter().chain(diagonal) {
        let gap_hz = gap_down(names, energies_hz, from, to)?;
        match found {
            Some(first) if (gap_hz - first).abs() > 1e-9 * first => {
                return Err(OpenFault::BathOfOperator { operator: document.operators[operator].name.clone(), gaps_hz: [first, gap_hz] });
            }
            Some(_) => {}
            None => found = Some(gap_hz),
        }
    }
    Ok(found.unwrap_or(f64::INFINITY))
}

/// Mean number of thermal quanta of a gap, 1/(exp(gap/kT) - 1) (M. Planck, Annalen der Physik 309, 553 (1901)).
fn quanta(place: Place, gap_hz: f64, kelvin: f64) -> Result<f64, Mistake> {
    if kelvin < 0.0 {
        return Err(open(place, OpenFault::BelowZeroKelvin { found: kelvin }));
    }
    Ok(if kelvin == 0.0 { 0.0 } else { 1.0 / (gap_hz / (kelvin * HZ_PER_KELVIN)).exp_m1() })
}

/// Thermal equilibrium exp(-H/kT)/Z of a Hamiltonian in Hz.
pub fn thermal(hz: &Matrix, kelvin: f64) -> Matrix {
    let eigen = hz.clone().symmetric_eigen();
    let lowest = eigen.eigenvalues.min();
    let size = eigen.eigenvalues.amax();
    let weights = eigen.eigenvalues.map(|energy| {
        let above = energy - lowest;
        if kelvin == 0.0 {
            // levels within rounding of the lowest share it
            f64::from(u8::from(above <= 1e-14 * size))
        } else {
            (-above / (kelvin * HZ_PER_KELVIN)).exp()
        }
    });
    let sum = weights.sum();
    let diagonal = Matrix::from_diagonal(&weights.map(|weight| Complex64::from(weight / sum)));
    &eigen.eigenvectors * diagonal * eigen.eigenvectors.adjoint()
}
