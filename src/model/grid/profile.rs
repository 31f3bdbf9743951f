//! How a quantity runs along x: the potential, the mass, the coefficient of a derivative.

use crate::config::tape::{BoundFormula, Real};
use crate::config::taylor::Taylor;

/// A quantity along x, in SI (energies in Hz).
#[derive(Debug, Clone)]
pub enum Profile {
    /// The same everywhere.
    Constant(f64),
    /// A straight line through `value` at `at`.
    Line {
        /// x of the known point, m.
        at: f64,
        /// Value there.
        value: f64,
        /// Slope, per m.
        slope: f64,
    },
    /// A formula that was typed.
    Formula(BoundFormula),
}

impl Profile {
    /// The value at `x`.
    pub fn value(&self, x: f64) -> f64 {
        match self {
            Profile::Constant(value) => *value,
            Profile::Line { at, value, slope } => value + slope * (x - at),
            Profile::Formula(formula) => formula.at(x),
        }
    }

    /// The Taylor coefficients at `x`.
    pub fn jet<const N: usize>(&self, x: f64) -> Taylor<N> {
        match self {
            Profile::Constant(value) => Taylor::constant(*value),
            Profile::Line { at, value, slope } => {
                let mut jet = Taylor::constant(value + slope * (x - at));
                jet.0[1] = *slope;
                jet
            }
            Profile::Formula(formula) => formula.jet(x),
        }
    }

    /// Where between `from` and `to` it has a kink or a jump.
    pub fn kinks(&self, from: f64, to: f64) -> Vec<f64> {
        match self {
            Profile::Formula(formula) => formula.kinks_between(from, to),
            _ => Vec::new(),
        }
    }
}
