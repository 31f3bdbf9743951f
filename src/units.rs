//! Every factor between a unit and SI, and every 2 pi, lives here and nowhere else.
//!
//! Angle is a dimension whose base unit is the turn: a frequency is turns per second, so `Hz` has the factor 1 and
//! `rad/s` the factor 1/(2 pi). Energies are held as energy over h, that is in Hz.

use num_complex::Complex64;

/// Radians in one turn.
pub const RAD_PER_TURN: f64 = std::f64::consts::TAU;
/// A quarter of a turn, rad, in two parts of 33 bits and a rest, so that each part times a whole number below 2^20 is exact.
pub const QUARTER_TURN_RAD: [f64; 3] = [1.570_796_326_734_125_6, 6.077_100_506_303_966e-11, 2.022_266_248_795_950_7e-21];

/// Angular frequency in rad/s of a cyclic frequency in Hz.
pub fn rad_s(hz: f64) -> f64 {
    hz * RAD_PER_TURN
}

/// Reduced Planck constant, J s.
pub const HBAR_J_S: f64 = constants::PLANCK / RAD_PER_TURN;

/// hbar^2/(2 m h) in Hz m^2: the kinetic energy over h is minus this times the second derivative, `mass_kg` in kg.
pub fn kinetic_hz_m2(mass_kg: f64) -> f64 {
    constants::PLANCK / (2.0 * mass_kg * RAD_PER_TURN * RAD_PER_TURN)
}

/// exp(2 pi i `turns`); the whole turns are taken off before 2 pi is applied, so no digits are lost at large arguments.
pub fn cis_turns(turns: f64) -> Complex64 {
    let (sin, cos) = sin_cos_turns(turns);
    Complex64::new(cos, sin)
}

/// Sine and cosine of an angle in turns, reduced to an eighth of a turn before 2 pi is applied.
pub fn sin_cos_turns(turns: f64) -> (f64, f64) {
    let within = turns - nearest(turns);
    let quarter = nearest(within * 4.0);
    let (sin, cos) = ((within - quarter / 4.0) * RAD_PER_TURN).sin_cos();
    match quarter as i32 & 3 {
        0 => (sin, cos),
        1 => (cos, -sin),
        2 => (-sin, -cos),
        _ => (-cos, sin),
    }
}

/// The nearest whole number, ties to even; two sums instead of a call, as not every processor of the target has an instruction for it.
pub fn nearest(number: f64) -> f64 {
    // beside it the last bit of a double is 1
    const ONES: f64 = 6_755_399_441_055_744.0;
    if number.abs() < ONES / 6.0 {
        (number + ONES) - ONES
    } else {
        number.round()
    }
}

/// Constants of the SI and CODATA 2022 (P. J. Mohr, D. B. Newell, B. N. Taylor, E. Tiesinga, Reviews of Modern Physics 97,
/// 025002 (2025)); h, e, k and c are exact by definition.
pub mod constants {
    /// Planck constant, J s.
    pub const PLANCK: f64 = 6.626_070_15e-34;
    /// Elementary charge, C.
    pub const CHARGE: f64 = 1.602_176_634e-19;
    /// Boltzmann constant, J/K.
    pub const BOLTZMANN: f64 = 1.380_649e-23;
    /// Speed of light in vacuum, m/s.
    pub const LIGHT: f64 = 299_792_458.0;
    /// Electron mass, kg.
    pub const ELECTRON_MASS: f64 = 9.109_383_713_9e-31;
    /// Unified atomic mass unit, kg.
    pub const DALTON: f64 = 1.660_539_068_92e-27;
    /// Bohr magneton, J/T.
    pub const BOHR_MAGNETON: f64 = 9.274_010_065_7e-24;
    /// Nuclear magneton, J/T.
    pub const NUCLEAR_MAGNETON: f64 = 5.050_783_739_3e-27;
    /// Magnetic constant, N/A^2.
    pub const MAGNETIC: f64 = 1.256_637_061_27e-6;
}

use constants::{BOHR_MAGNETON, BOLTZMANN, CHARGE, DALTON, ELECTRON_MASS, LIGHT, MAGNETIC, NUCLEAR_MAGNETON, PLANCK};

/// Hz per kelvin: k/h, for energies given as temperatures.
pub const HZ_PER_KELVIN: f64 = BOLTZMANN / PLANCK;
/// Hz per electronvolt: e/h.
pub const HZ_PER_EV: f64 = CHARGE / PLANCK;
/// Hz per reciprocal centimetre: 100 c.
pub const HZ_PER_CM: f64 = LIGHT * 100.0;
/// Hz per tesla of a Bohr magneton: mu_B/h.
pub const BOHR_HZ_PER_TESLA: f64 = BOHR_MAGNETON / PLANCK;
/// Hz per tesla of a nuclear magneton: mu_N/h.
pub const NUCLEAR_HZ_PER_TESLA: f64 = NUCLEAR_MAGNETON / PLANCK;
/// Energy over h of two moments, mu0 h/(4 pi): times Hz/T, Hz/T and /m^3.
pub const DIPOLAR_HZ: f64 = MAGNETIC * PLANCK / (2.0 * RAD_PER_TURN);
/// Vacuum wavelength in m of a gap in Hz, and back: c over it.
pub const WAVELENGTH_M_HZ: f64 = LIGHT;
/// Radians per turn in the ratio of a linewidth (full width in Hz) and a rate: rate = 2 pi linewidth.
pub const RATE_PER_LINEWIDTH: f64 = RAD_PER_TURN;

/// Base dimensions, in the order of the exponents of [`Dim`].
const BASES: [&str; 9] = ["s", "turn", "K", "V", "W", "T", "m", "kg", "samples"];

/// Exponents are kept in twelfths, so that square, cube and fourth roots stay whole.
const TWELFTHS: i16 = 12;

/// A dimension: exponents of second, turn, kelvin, volt, watt, tesla, metre, kilogram and sample, in twelfths.
///
/// An energy is held as energy over h and so has the dimension of a frequency, turn/s; a charge is energy per volt.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Default)]
pub struct Dim([i16; 9]);

impl Dim {
    /// A plain number.
    pub const NONE: Dim = Dim([0; 9]);
    /// s.
    pub const TIME: Dim = Dim::base(0, 1);
    /// turn.
    pub const ANGLE: Dim = Dim::base(1, 1);
    /// turn/s, written Hz; energies over h too.
    pub const FREQUENCY: Dim = Dim([-TWELFTHS, TWELFTHS, 0, 0, 0, 0, 0, 0, 0]);
    /// 1/s, without angle.
    pub const RATE: Dim = Dim::base(0, -1);
    /// K.
    pub const TEMPERATURE: Dim = Dim::base(2, 1);
    /// V.
    pub const VOLTAGE: Dim = Dim::base(3, 1);
    /// W.
    pub const POWER: Dim = Dim::base(4, 1);
    /// T.
    pub const MAGNETIC_FIELD: Dim = Dim::base(5, 1);
    /// m.
    pub const LENGTH: Dim = Dim::base(6, 1);
    /// kg.
    pub const MASS: Dim = Dim::base(7, 1);
    /// samples.
    pub const SAMPLES: Dim = Dim::base(8, 1);
    /// V/m.
    pub const ELECTRIC_FIELD: Dim = Dim([0, 0, 0, TWELFTHS, 0, 0, -TWELFTHS, 0, 0]);
    /// W/m^2.
    pub const INTENSITY: Dim = Dim([0, 0, 0, 0, TWELFTHS, 0, -2 * TWELFTHS, 0, 0]);

    const fn base(which: usize, power: i16) -> Dim {
        let mut exponents = [0; 9];
        exponents[which] = power * TWELFTHS;
        Dim(exponents)
    }

    /// Dimension of a product.
    pub fn times(self, other: Dim) -> Dim {
        Dim(std::array::from_fn(|k| self.0[k].saturating_add(other.0[k])))
    }

    /// Dimension of a quotient.
    pub fn over(self, other: Dim) -> Dim {
        Dim(std::array::from_fn(|k| self.0[k].saturating_sub(other.0[k])))
    }

    /// Dimension of a power, if its exponents are whole twelfths and small enough to be meant.
    pub fn power(self, exponent: f64) -> Option<Dim> {
        let mut exponents = [0; 9];
        for (to, from) in exponents.iter_mut().zip(self.0) {
            let wanted = f64::from(from) * exponent;
            if wanted.abs() > 1200.0 || (wanted - wanted.round()).abs() > 1e-9 {
                return None;
            }
            *to = wanted.round() as i16;
        }
        Some(Dim(exponents))
    }

    /// What a person calls it: "a time", "a frequency" ..
    pub fn words(self) -> String {
        let known = [
            (Dim::NONE, "a plain number"),
            (Dim::TIME, "a time"),
            (Dim::ANGLE, "an angle"),
            (Dim::FREQUENCY, "a frequency"),
            (Dim::RATE, "a rate"),
            (Dim::TEMPERATURE, "a temperature"),
            (Dim::VOLTAGE, "a voltage"),
            (Dim::POWER, "a power"),
            (Dim::MAGNETIC_FIELD, "a magnetic field"),
            (Dim::LENGTH, "a length"),
            (Dim::MASS, "a mass"),
            (Dim::ELECTRIC_FIELD, "an electric field"),
            (Dim::INTENSITY, "an intensity"),
            (Dim::SAMPLES, "a count of samples"),
            (Dim::TIME.over(Dim::ANGLE), "a time per turn"),
            (Dim::FREQUENCY.times(Dim::RATE), "a sweep rate"),
        ];
        match known.iter().find(|(dim, _)| *dim == self) {
            Some((_, words)) => (*words).to_string(),
            None => format!("a quantity in {}", self.unit()),
        }
    }

    /// Units that a message proposes.
    pub fn proposals(self) -> &'static str {
        match self {
            Dim::TIME => "fs, ps, ns, us, ms, s, min, h",
            Dim::FREQUENCY => "Hz, kHz, MHz, GHz, THz, rad/us",
            Dim::ANGLE => "deg, turn, rad",
            Dim::RATE => "/s, /ms, /us, /ns",
            Dim::TEMPERATURE => "K, mK",
            Dim::VOLTAGE => "V peak, V rms, V peak_to_peak",
            Dim::MAGNETIC_FIELD => "T, mT, uT, G",
            Dim::ELECTRIC_FIELD => "V/m, V/cm",
            Dim::LENGTH => "m, um, nm, angstrom",
            Dim::MASS => "electron_mass, kg, dalton",
            _ => "a unit that fits",
        }
    }

    /// The unit most likely meant, for a line to paste.
    pub fn example(self) -> &'static str {
        match self {
            Dim::TIME => "us",
            Dim::FREQUENCY => "MHz",
            Dim::ANGLE => "deg",
            Dim::RATE => "/us",
            Dim::TEMPERATURE => "mK",
            Dim::VOLTAGE => "V peak",
            Dim::MAGNETIC_FIELD => "mT",
            Dim::ELECTRIC_FIELD => "V/cm",
            Dim::LENGTH => "nm",
            Dim::MASS => "electron_mass",
            _ => "",
        }
    }

    /// The SI unit, angles in turns: `s`, `Hz`, `/s`, `turn`, `Hz/T` .., `1` for a plain number.
    pub fn unit(self) -> String {
        let mut left = self.0;
        let hertz = left[1];
        let mut over = Vec::new();
        let mut under = Vec::new();
        let mut put = |name: &str, twelfths: i16| {
            let power = f64::from(twelfths.abs()) / f64::from(TWELFTHS);
            let text = if power == 1.0 { name.to_string() } else { format!("{name}^{power}") };
            if twelfths > 0 {
                over.push(text)
            } else if twelfths < 0 {
                under.push(text)
            }
        };
        if hertz != 0 && left[0].signum() == -hertz.signum() {
            put("Hz", hertz);
            left[0] += hertz;
            left[1] = 0;
        }
        for order in [1, 3, 4, 5, 2, 6, 7, 8, 0] {
            put(BASES[order], left[order]);
        }
        let mut text = over.join("*");
        if text.is_empty() && under.is_empty() {
            text.push('1');
        }
        for unit in under {
            text.push('/');
            text.push_str(&unit);
        }
        text
    }
}

/// The same text for as long as the program runs; each name of a unit is kept once.
pub fn lasting(unit: String) -> &'static str {
    static NAMES: std::sync::Mutex<Vec<&'static str>> = std::sync::Mutex::new(Vec::new());
    let mut names = NAMES.lock().unwrap_or_else(std::sync::PoisonError::into_inner);
    if let Some(known) = names.iter().find(|known| **known == unit) {
        return known;
    }
    let kept: &'static str = Box::leak(unit.into_boxed_str());
    names.push(kept);
    kept
}

/// A unit that a value may bear: dimension, factor to SI (turns for angles, Hz for energies), and whether it belongs to the Hz family.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Unit {
    /// Dimension.
    pub dim: Dim,
    /// SI value of one such unit.
    pub factor: f64,
    /// Written in Hz: an angle is already counted in turns.
    pub cyclic: bool,
}

/// Symbols that take the prefixes f p n u m k M G T.
const PREFIXED: [(&str, Dim, f64); 12] = [
    ("s", Dim::TIME, 1.0),
    ("Hz", Dim::FREQUENCY, 1.0),
    ("eV", Dim::FREQUENCY, HZ_PER_EV),
    ("J", Dim::FREQUENCY, 1.0 / PLANCK),
    ("K", Dim::TEMPERATURE, 1.0),
    ("T", Dim::MAGNETIC_FIELD, 1.0),
    ("G", Dim::MAGNETIC_FIELD, 1e-4),
    ("V", Dim::VOLTAGE, 1.0),
    ("W", Dim::POWER, 1.0),
    ("m", Dim::LENGTH, 1.0),
    ("Sa", Dim::SAMPLES, 1.0),
    ("S", Dim::SAMPLES, 1.0),
];

/// Symbols that stand as they are.
const PLAIN: [(&str, Dim, f64); 17] = [
    ("min", Dim::TIME, 60.0),
    ("h", Dim::TIME, 3600.0),
    ("turn", Dim::ANGLE, 1.0),
    ("turns", Dim::ANGLE, 1.0),
    ("deg", Dim::ANGLE, 1.0 / 360.0),
    ("rad", Dim::ANGLE, 1.0 / RAD_PER_TURN),
    ("mrad", Dim::ANGLE, 1e-3 / RAD_PER_TURN),
    ("cm", Dim::LENGTH, 1e-2),
    ("angstrom", Dim::LENGTH, 1e-10),
    ("electron_mass", Dim::MASS, ELECTRON_MASS),
    ("kg", Dim::MASS, 1.0),
    ("dalton", Dim::MASS, DALTON),
    ("samples", Dim::SAMPLES, 1.0),
    ("quanta", Dim::NONE, 1.0),
    ("%", Dim::NONE, 0.01),
    ("ohm", Dim::NONE, 1.0),
    ("e", Dim::NONE, 1.0),
];

/// The unit called `symbol` alone, prefix included; `None` if there is none. `ohm` and `e` are no units by themselves.
pub fn unit(symbol: &str) -> Option<Unit> {
    if symbol == "ohm" || symbol == "e" {
        return None;
    }
    if symbol == "debye" {
        // 1e-21 C m^2/s over c; in Hz per V/m
        let dim = Dim::FREQUENCY.over(Dim::ELECTRIC_FIELD);
        return Some(Unit { dim, factor: 1e-21 / LIGHT / PLANCK, cyclic: false });
    }
    if let Some((name, dim, factor)) = PLAIN.iter().find(|(name, ..)| *name == symbol) {
        return Some(Unit { dim: *dim, factor: *factor, cyclic: *name == "turn" });
    }
    let found = |name: &str, power: f64| {
        let (_, dim, factor) = PREFIXED.iter().find(|(known, ..)| *known == name)?;
        // "S" is a sample only with a prefix or per second: a lone S is no unit
        Some(Unit { dim: *dim, factor: factor * power, cyclic: *dim == Dim::FREQUENCY && name == "Hz" })
    };
    if symbol != "S" {
        if let Some(unit) = found(symbol, 1.0) {
            return Some(unit);
        }
    }
    let first = symbol.chars().next()?;
    let power = match first {
        'f' => 1e-15,
        'p' => 1e-12,
        'n' => 1e-9,
        'u' | '\u{b5}' | '\u{3bc}' => 1e-6,
        'm' => 1e-3,
        'k' => 1e3,
        'M' => 1e6,
        'G' => 1e9,
        'T' => 1e12,
        _ => return None,
    };
    found(&symbol[first.len_utf8()..], power)
}

/// A known unit that differs from `symbol` only in case, for messages.
pub fn unit_of_other_case(symbol: &str) -> Option<String> {
    let lower = symbol.to_lowercase();
    let symbols =
        PREFIXED.iter().flat_map(|(name, ..)| ["", "f", "p", "n", "u", "m", "k", "M", "G", "T"].map(|prefix| format!("{prefix}{name}")));
    let plain = PLAIN.iter().map(|(name, ..)| (*name).to_string());
    let mut near: Vec<String> = symbols.chain(plain).filter(|known| known.to_lowercase() == lower && unit(known).is_some()).collect();
    // of milli and mega, the one a drive is more likely to have
    near.sort_by_key(|known| usize::from(known.starts_with('m') && known.len() > 2 && lower.ends_with("hz")));
    near.into_iter().next()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_turns_are_reduced_before_two_pi() {
        // 1e15 + 1/4 turns: sine 1, cosine 0, which a product with 2 pi would lose
        let z = cis_turns(1e15 + 0.25);
        assert!((z.im - 1.0).abs() < 1e-16 && z.re.abs() < 1e-16, "{z}");
        assert_eq!(sin_cos_turns(-0.5).1, -1.0);
    }

    #[test]
    fn units_are_named_by_dimension() {
        assert_eq!(Dim::FREQUENCY.unit(), "Hz");
        assert_eq!(Dim::FREQUENCY.times(Dim::RATE).unit(), "Hz/s");
        assert_eq!(Dim::FREQUENCY.over(Dim::MAGNETIC_FIELD).unit(), "Hz/T");
        assert_eq!(Dim::INTENSITY.unit(), "W/m^2");
        assert_eq!(Dim::RATE.unit(), "/s");
        assert_eq!(Dim::NONE.unit(), "1");
        assert_eq!(Dim::FREQUENCY.power(0.5).map(Dim::unit).as_deref(), Some("Hz^0.5"));
    }

    #[test]
    fn prefixes_and_cases() {
        assert_eq!(unit("MHz").map(|u| u.factor), Some(1e6));
        assert_eq!(unit("\u{b5}s").map(|u| u.factor), Some(1e-6));
        assert_eq!(unit("mT").map(|u| u.dim), Some(Dim::MAGNETIC_FIELD));
        assert_eq!(unit("GS").map(|u| u.factor), Some(1e9));
        assert!(unit("Mhz").is_none() && unit("S").is_none() && unit("e").is_none());
        assert_eq!(unit_of_other_case("Mhz").as_deref(), Some("MHz"));
        assert_eq!(unit_of_other_case("mhz").as_deref(), Some("MHz"));
    }
}
