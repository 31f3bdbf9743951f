//! A mode or ladder: states 0, 1, 2 .. quanta, cut at a number of levels.
//!
//! Level n of a mode lies at n f + n(n - 1)/2 anharmonicity, without zero-point energy. <n| lower |n + 1> is the rung n: sqrt(n + 1),
//! or what `couplings_grow` says. position = (lower + raise)/sqrt 2, momentum = (lower - raise)/(i sqrt 2). Errors: roundings;
//! what the cut costs a run is seen by more levels.

use num_complex::Complex64;

use super::built::{Acting, Block, Built};
use crate::config::system::mode::Mode;
use crate::config::tape::Register;
use crate::problem::Matrix;

/// Builds a mode.
pub fn build(mode: &Mode, values: &[f64]) -> Built {
    let frequency = values[mode.frequency.register as usize];
    let bend = mode.anharmonicity.map_or(0.0, |bend| values[bend.register as usize]);
    let statics = Matrix::from_fn(mode.levels, mode.levels, |row, column| {
        let n = row as f64;
        if row == column {
            (n * frequency + 0.5 * n * (n - 1.0) * bend).into()
        } else {
            0.0.into()
        }
    });
    let rungs: Vec<f64> = (1..mode.levels).map(|n| (n as f64).sqrt()).collect();
    let mut built = with_operators("mode", statics, &rungs);
    // the next rung leads from the last kept state to the first that is cut
    let next = mode.levels as f64;
    for block in &mut built.operators {
        let share = match block.name.as_str() {
            "raise" => next,
            "position" | "momentum" => 0.5 * next,
            _ => continue,
        };
        let mut beyond = Matrix::zeros(mode.levels, mode.levels);
        beyond[(mode.levels - 1, mode.levels - 1)] = share.into();
        block.beyond = Some(std::sync::Arc::new(beyond));
    }
    built
}

/// Adds the operators of a ladder to its static matrix, Hz.
pub fn ladder(kind: &str, statics: Matrix, rungs: &[Register], values: &[f64]) -> Built {
    let rungs: Vec<f64> = rungs.iter().map(|rung| values[*rung as usize]).collect();
    with_operators(kind, statics, &rungs)
}

fn with_operators(kind: &str, statics: Matrix, rungs: &[f64]) -> Built {
    let size = statics.nrows();
    let mut lower = Matrix::zeros(size, size);
    for (n, rung) in rungs.iter().enumerate() {
        lower[(n, n + 1)] = (*rung).into();
    }
    let raise = lower.adjoint();
    let root = 0.5f64.sqrt();
    let both = &lower + &raise;
    let position = &both * Complex64::from(root);
    let momentum = (&lower - &raise) * Complex64::new(0.0, -root);
    let quanta = Matrix::from_fn(size, size, |row, column| if row == column { (row as f64).into() } else { 0.0.into() });
    let mut built = Built::new(statics);
    let named = [("lower", lower), ("raise", raise), ("quanta", quanta), ("position", position), ("momentum", momentum)];
    built.operators = named.into_iter().map(|(name, matrix)| Block::new(name, "1", matrix)).collect();
    built.acting = vec![Acting { name: kind.to_string(), quanta: Some(Block::new("", "1", both)), moment: None, light: None }];
    built
}

/// <m| exp(a raise - a* lower) |n> of the whole mode, cut to `size` states: for m = n + k it is (a/|a|)^k f_n(|a|^2), f_n =
/// sqrt(n!/m!) x^(k/2) exp(-x/2) L_n^k(x) (K. E. Cahill, R. J. Glauber, Physical Review 177, 1857 (1969)). f_n follows from its
/// three-term recurrence, which is stable upwards; errors: a few roundings times the number of states. Near the cut the matrix is
/// not unitary: what it moves beyond is left out.
pub fn displacement(size: usize, by: Complex64) -> Matrix {
    let x = by.norm_sqr();
    let unit = if x > 0.0 { by / by.norm() } else { Complex64::from(1.0) };
    let mut whole = Matrix::zeros(size, size);
    // the logarithm of f_0, which by itself may be too small for a double
    let mut log_first = -0.5 * x;
    for k in 0..size {
        if k > 0 {
            log_first += 0.5 * (x / k as f64).ln();
        }
        let (mut before, mut here) = (0.0, log_first.exp());
        let (up, down) = (unit.powi(k as i32), (-unit.conj()).powi(k as i32));
        for n in 0..size - k {
            whole[(n + k, n)] = up * here;
            whole[(n, n + k)] = down * here;
            let (order, shift) = (n as f64, k as f64);
            let next = (2.0 * order + 1.0 + shift - x) * here - (order * (order + shift)).sqrt() * before;
            before = here;
            here = next / ((order + 1.0) * (order + 1.0 + shift)).sqrt();
        }
    }
    whole
}

/// Shares of 0, 1, 2 .. quanta of a mode in thermal equilibrium with `mean` quanta, p_n proportional to (mean/(1 + mean))^n; what
/// lies beyond the cut is shared out among the kept levels.
pub fn thermal(mean: f64, levels: usize) -> Vec<f64> {
    let ratio = mean / (1.0 + mean);
    let raw: Vec<f64> = (0..levels).map(|n| ratio.powi(n as i32)).collect();
    let sum: f64 = raw.iter().sum();
    raw.into_iter().map(|share| share / sum).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The column of 0 quanta is a coherent state (R. J. Glauber, Physical Review 131, 2766 (1963)), and two displacements by a and
    /// b make one by a + b, times exp((a b* - a* b)/2).
    #[test]
    fn exact_displacements() {
        let (a, b) = (Complex64::new(1.1, -0.4), Complex64::new(-0.3, 0.7));
        let d = displacement(60, a);
        let mut wanted = Complex64::from((-0.5 * a.norm_sqr()).exp());
        for n in 0..20 {
            assert!((d[(n, 0)] - wanted).norm() < 1e-15, "{n}");
            wanted *= a / ((n + 1) as f64).sqrt();
        }
        let product = &d * displacement(60, b);
        let phase = ((a * b.conj() - a.conj() * b) / 2.0).exp();
        let whole = displacement(60, a + b) * phase;
        for m in 0..25 {
            for n in 0..25 {
                assert!((product[(m, n)] - whole[(m, n)]).norm() < 2e-14, "{m} {n}");
            }
        }
        assert_eq!(displacement(3, Complex64::from(0.0)), Matrix::identity(3, 3));
    }

    /// [lower, raise] = 1 on every state but the last, where the cut makes it 1 - n, so that the trace vanishes.
    #[test]
    fn exact_commutator_of_a_cut_mode() {
        let built = with_operators("mode", Matrix::zeros(7, 7), &(1..7).map(|n| f64::from(n).sqrt()).collect::<Vec<_>>());
        let (x, p) = (built.operator("position"), built.operator("momentum"));
        let commutator = &x * &p - &p * &x;
        assert!(commutator.trace().norm() < 1e-14);
        for n in 0..7 {
            let wanted = if n < 6 { 1.0 } else { -6.0 };
            assert!((commutator[(n, n)] - Complex64::new(0.0, wanted)).norm() < 4e-15, "{n}");
        }
    }
}
