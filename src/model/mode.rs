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
    with_operators("mode", statics, &rungs)
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
