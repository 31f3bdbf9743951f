//! Every factor between a unit and SI, and every 2 pi, lives here and nowhere else.
//!
//! Angle is a dimension whose base unit is the turn: a frequency is turns per second, so `Hz` has the factor 1 and
//! `rad/s` the factor 1/(2 pi). Energies are held as energy over h, that is in Hz.

use num_complex::Complex64;

/// Radians in one turn.
pub const RAD_PER_TURN: f64 = std::f64::consts::TAU;

/// Angular frequency in rad/s of a cyclic frequency in Hz.
pub fn rad_s(hz: f64) -> f64 {
    hz * RAD_PER_TURN
}

/// exp(2 pi i `turns`); the whole turns are taken off before 2 pi is applied, so no digits are lost at large arguments.
pub fn cis_turns(turns: f64) -> Complex64 {
    let (sin, cos) = sin_cos_turns(turns);
    Complex64::new(cos, sin)
}

/// Sine and cosine of an angle in turns, reduced to an eighth of a turn before 2 pi is applied.
pub fn sin_cos_turns(turns: f64) -> (f64, f64) {
    let within = turns - turns.round();
    let quarter = (within * 4.0).round();
    let (sin, cos) = ((within - quarter / 4.0) * RAD_PER_TURN).sin_cos();
    match quarter as i32 & 3 {
        0 => (sin, cos),
        1 => (cos, -sin),
        2 => (-sin, -cos),
        _ => (-cos, sin),
    }
}
