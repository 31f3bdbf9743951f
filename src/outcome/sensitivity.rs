//! How final numbers depend on the named ones, as plain data; `crate::sensitivity` computes it.

use crate::units::Dim;

/// All of it.
#[derive(Debug, Clone, PartialEq)]
pub struct Sensitivity {
    /// What each final number may change by, over its scale.
    pub tolerance: f64,
    /// Whether the caller gave it; else it is the accuracy asked for.
    pub tolerance_given: bool,
    /// Named numbers that were moved.
    pub numbers: Vec<MovedNumber>,
    /// Final numbers with their derivatives.
    pub finals: Vec<FinalSensitivity>,
    /// Named numbers that were not moved, and why.
    pub left_out: Vec<(String, String)>,
    /// Final numbers that have no derivative here, and why.
    pub without: Vec<(String, String)>,
    /// How it was computed, in words.
    pub words: String,
    /// Time taken, s.
    pub seconds: f64,
}

/// A named number.
#[derive(Debug, Clone, PartialEq)]
pub struct MovedNumber {
    /// Its name.
    pub name: String,
    /// The unit it was written in; the SI unit where it was written as a formula, `1` for a plain number.
    pub unit: String,
    /// SI value of that unit.
    pub factor: f64,
    /// Its value in that unit.
    pub value: f64,
    /// Its dimension.
    pub dim: Dim,
}

/// A final number.
#[derive(Debug, Clone, PartialEq)]
pub struct FinalSensitivity {
    /// Named like its column.
    pub name: String,
    /// Its unit.
    pub unit: &'static str,
    /// What the tolerance is multiplied by.
    pub scale: f64,
    /// Its value.
    pub value: f64,
    /// One for each moved number, in their order.
    pub by: Vec<Derivative>,
}

/// A derivative, per unit of the number.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Derivative {
    /// First derivative.
    pub first: f64,
    /// Its measured error.
    pub error: f64,
    /// Second derivative.
    pub second: f64,
    /// The smallest change of the number, up or down, that changes the final number by its tolerance to second order, in the unit of the
    /// number; infinite where nothing changes.
    pub allowed: f64,
}

impl Derivative {
    /// With the change that costs `tolerance`: |first| x + |second| x^2/2 = tolerance, the worse of the two directions.
    pub fn new(first: f64, error: f64, second: f64, tolerance: f64) -> Derivative {
        let (a, b) = (first.abs(), 0.5 * second.abs());
        let allowed = 2.0 * tolerance / (a + (a * a + 4.0 * b * tolerance).sqrt());
        Derivative { first, error, second, allowed }
    }

    /// Whether nothing is seen of the number beyond the error of the derivative.
    pub fn is_nothing(&self) -> bool {
        self.first.abs() <= self.error && self.second == 0.0
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A parabola at its bottom, a straight line, and both: the roots of the quadratic equation.
    #[test]
    fn exact_allowed_change() {
        assert!((Derivative::new(0.0, 0.0, 2.0, 1e-4).allowed - 1e-2).abs() < 1e-17);
        assert!((Derivative::new(-4.0, 0.0, 0.0, 1e-4).allowed - 2.5e-5).abs() < 1e-20);
        let both = Derivative::new(3.0, 0.0, 8.0, 1.0);
        assert!((3.0 * both.allowed + 4.0 * both.allowed * both.allowed - 1.0).abs() < 1e-15);
        assert_eq!(Derivative::new(0.0, 0.0, 0.0, 1e-4).allowed, f64::INFINITY);
    }
}
