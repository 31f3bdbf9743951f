//! A spin in a field: states m from highest to lowest, H/h = magneton B . (g S)/h + splittings, Hz.
//!
//! <m +- 1| S+- |m> = sqrt(S(S+1) - m(m +- 1)) (E. U. Condon, G. H. Shortley, The Theory of Atomic Spectra (1935), chapter III).
//! The moment of an electron is negative: energy +g mu_B B . S; with `magneton: nuclear` -g mu_N B . I; with a gyromagnetic
//! ratio -gyromagnetic B . I. Errors: a few roundings.

use num_complex::Complex64;

use super::built::{Acting, Block, Built};
use crate::config::system::spin::{Moment, Quadrupole, Spin};
use crate::problem::Matrix;
use crate::units::{BOHR_HZ_PER_TESLA, NUCLEAR_HZ_PER_TESLA};

/// The matrices of an angular momentum of `twice`/2 in the states of m from highest to lowest: x, y, z, up, down; no dimension.
pub fn angular_momentum(twice: u32) -> [Matrix; 5] {
    let size = twice as usize + 1;
    let j = f64::from(twice) / 2.0;
    let m = |k: usize| j - k as f64;
    // (j - m)(j + m + 1) is exact in halves, where j(j + 1) - m(m + 1) is not
    let rise = |k: usize| ((j - m(k)) * (j + m(k) + 1.0)).sqrt();
    let mut up = Matrix::zeros(size, size);
    for k in 1..size {
        up[(k - 1, k)] = rise(k).into();
    }
    let down = up.adjoint();
    let half = Complex64::from(0.5);
    let x = (&up + &down) * half;
    let y = (&up - &down) * Complex64::new(0.0, -0.5);
    let z = Matrix::from_fn(size, size, |row, column| if row == column { m(row).into() } else { 0.0.into() });
    [x, y, z, up, down]
}

/// D (Sz^2 - S(S+1)/3) + E (Sx^2 - Sy^2), in the unit of D and E; Sx^2 - Sy^2 = (S+^2 + S-^2)/2.
pub fn splitting(twice: u32, axial: f64, rhombic: f64) -> Matrix {
    let [_, _, z, up, down] = angular_momentum(twice);
    let size = z.nrows();
    let j = f64::from(twice) / 2.0;
    let mut sum = (&up * &up + &down * &down) * Complex64::from(0.5 * rhombic);
    for k in 0..size {
        sum[(k, k)] += axial * (z[(k, k)].re.powi(2) - j * (j + 1.0) / 3.0);
    }
    sum
}

/// Energy per tesla along x, y and z, Hz/T: the factors before S.
fn per_tesla(moment: &Moment, values: &[f64]) -> [f64; 3] {
    match moment {
        Moment::Factor { g, nuclear } => {
            let magneton = if *nuclear { -NUCLEAR_HZ_PER_TESLA } else { BOHR_HZ_PER_TESLA };
            [0, 1, 2].map(|k| magneton * values[g[k].register as usize])
        }
        Moment::Gyromagnetic(ratio) => [-values[ratio.register as usize]; 3],
    }
}

/// Builds a spin.
pub fn build(spin: &Spin, values: &[f64]) -> Built {
    build_in(spin, values, [0.0; 3])
}

/// Builds a spin in its own field and another, T.
pub fn build_in(spin: &Spin, values: &[f64], field: [f64; 3]) -> Built {
    let value = |register: u32| values[register as usize];
    let own = spin.field.as_ref().map_or([0.0; 3], |field| field.tesla(values));
    let [x, y, z, up, down] = angular_momentum(spin.twice);
    let factors = per_tesla(&spin.moment, values);
    let moment = [&x * Complex64::from(factors[0]), &y * Complex64::from(factors[1]), &z * Complex64::from(factors[2])];
    let mut statics = Matrix::zeros(x.nrows(), x.nrows());
    for k in 0..3 {
        statics += &moment[k] * Complex64::from(own[k] + field[k]);
    }
    if let Some([axial, rhombic]) = spin.zero_field {
        statics += splitting(spin.twice, value(axial.register), value(rhombic.register));
    }
    match &spin.quadrupole {
        Some(Quadrupole::Gradient { coupling, asymmetry }) => {
            let i = f64::from(spin.twice) / 2.0;
            // 3 Iz^2 - I(I+1) is three times the axial form
            let size = value(coupling.register) / (4.0 * i * (2.0 * i - 1.0));
            statics += splitting(spin.twice, 3.0 * size, size * value(asymmetry.register));
        }
        Some(Quadrupole::Splitting([axial, rhombic])) => {
            statics += splitting(spin.twice, value(axial.register), value(rhombic.register));
        }
        None => {}
    }
    let mut built = Built::new(statics);
    let named = [("spin_x", x), ("spin_y", y), ("spin_z", z), ("spin_up", up), ("spin_down", down)];
    built.operators = named.into_iter().map(|(name, matrix)| Block::new(name, "1", matrix)).collect();
    let moment = moment.map(|matrix| Block::new("", "Hz/T", matrix));
    built.acting = vec![Acting { name: "spin".to_string(), quanta: None, moment: Some(moment), light: None }];
    built
}

#[cfg(test)]
mod tests {
    use super::*;

    fn largest(matrix: &Matrix) -> f64 {
        matrix.iter().map(|z| z.norm()).fold(0.0, f64::max)
    }

    /// [Sx, Sy] = i Sz and S^2 = S(S+1), for every size up to 10; the trace of each component is 0.
    #[test]
    fn prop_commutation_of_spins() {
        let i = Complex64::new(0.0, 1.0);
        for twice in 1..=20 {
            let [x, y, z, up, down] = angular_momentum(twice);
            let j = f64::from(twice) / 2.0;
            for (a, b, c) in [(&x, &y, &z), (&y, &z, &x), (&z, &x, &y)] {
                let off = largest(&(a * b - b * a - c * i));
                assert!(off <= 8.0 * f64::EPSILON * j * (j + 1.0), "{twice}/2: {off}");
            }
            let square = &x * &x + &y * &y + &z * &z - Matrix::identity(x.nrows(), x.nrows()) * Complex64::from(j * (j + 1.0));
            assert!(largest(&square) <= 8.0 * f64::EPSILON * j * (j + 1.0), "{twice}/2");
            assert_eq!(up.adjoint(), down);
            assert!([&x, &y, &z].iter().all(|matrix| matrix.trace().norm() < 1e-13));
        }
    }

    /// Without a field D (Sz^2 - 2/3) + E (Sx^2 - Sy^2) of spin 1 has the levels D/3 +- E and -2D/3 (A. Abragam, B. Bleaney,
    /// Electron Paramagnetic Resonance of Transition Ions (1970), from memory).
    #[test]
    fn exact_zero_field_levels_of_spin_one() {
        let (axial, rhombic) = (2.87e9, 4.1e6);
        let mut levels: Vec<f64> = splitting(2, axial, rhombic).symmetric_eigenvalues().iter().copied().collect();
        levels.sort_by(f64::total_cmp);
        for (level, wanted) in levels.iter().zip([-2.0 * axial / 3.0, axial / 3.0 - rhombic, axial / 3.0 + rhombic]) {
            assert!((level - wanted).abs() < 4e-16 * axial * 4.0, "{level} {wanted}");
        }
    }
}
