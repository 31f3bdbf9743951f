//! An atom: one or two manifolds |(J I) F m>, in a field of any strength.
//!
//! H/h = A I.J + B (3 (I.J)^2 + 3/2 I.J - I(I+1) J(J+1))/(2I(2I-1) J(2J-1)) + (magneton/h) B . (g_electron J + g_nucleus I), Hz
//! (G. Breit and I. I. Rabi, Physical Review 38, 2082 (1931); H. B. G. Casimir, On the Interaction between Atomic Nuclei and
//! Electrons (1936); sign of g_nucleus as in E. Arimondo, M. Inguscio, P. Violino, Reviews of Modern Physics 49, 31 (1977)). In the
//! states F, m the first two are diagonal, with I.J = K/2, K = F(F+1) - I(I+1) - J(J+1); the field is taken over from the states
//! mJ, mI by Clebsch-Gordan coefficients <J mJ I mI|F m>. The electric dipole between the manifolds is that of the electron,
//! <J' mJ'|d_q|J mJ> = (-1)^(J' - mJ') (J' 1 J; -mJ' q mJ), the nucleus looks on. Errors: roundings.

use num_complex::Complex64;

use super::angular_momentum::{clebsch_gordan, three_j};
use super::built::{Acting, Block, Built};
use super::spin::angular_momentum;
use crate::config::system::atom::{Atom, Manifold};
use crate::config::system::ATOM_OPERATORS;
use crate::config::tape::Wide;
use crate::problem::Matrix;
use crate::units::BOHR_HZ_PER_TESLA;

/// Builds an atom in its own field, or in another where it has none, T.
pub fn build_in(atom: &Atom, values: &[f64], field: [f64; 3]) -> Built {
    let field = atom.field.as_ref().map_or(field, |own| own.tesla(values));
    let lower = Levels::of(&atom.lower, values);
    let upper = atom.upper.as_ref().map(|(upper, line)| (Levels::of(upper, values), values[line.register as usize]));
    let line_hz = upper.as_ref().map_or(0.0, |(_, line)| *line);
    let beside = |pick: &dyn Fn(&Levels) -> Matrix| match &upper {
        None => pick(&lower),
        Some((upper, _)) => direct_sum(&pick(&lower), &pick(upper)),
    };
    let moment = [0, 1, 2].map(|axis| beside(&|levels: &Levels| levels.moment[axis].clone()));
    let own = |levels: &Levels| -> Matrix {
        let mut sum = Matrix::from_diagonal(&nalgebra::DVector::from_iterator(
            levels.hyperfine.len(),
            levels.hyperfine.iter().map(|e| Complex64::from(*e)),
        ));
        for (axis, strength) in field.iter().enumerate() {
            sum += &levels.moment[axis] * Complex64::from(*strength);
        }
        sum
    };
    let mut statics = beside(&own);
    let first = lower.hyperfine.len();
    // with the line apart, a gap within the upper manifold keeps its digits
    let energies: Vec<Wide> = (0..statics.nrows())
        .map(|k| Wide { high: if k < first { 0.0 } else { line_hz }, low: 0.0 }.plus(Wide { high: statics[(k, k)].re, low: 0.0 }))
        .collect();
    for (k, energy) in energies.iter().enumerate() {
        statics[(k, k)] = energy.value().into();
    }
    let mut built = Built { energies, ..Built::new(statics) };
    built.operators = (0..3)
        .map(|axis| Block::new(ATOM_OPERATORS[axis], "1", beside(&|levels: &Levels| levels.electron[axis].clone())))
        .chain((0..3).map(|axis| Block::new(ATOM_OPERATORS[3 + axis], "1", beside(&|levels: &Levels| levels.nucleus[axis].clone()))))
        .collect();
    built.grown = grown(atom, &lower, upper.as_ref().map(|(upper, _)| upper));
    let light = upper.as_ref().map(|_| [1, -1, 0].map(|q| Block::new("", "1", dipole(atom, 2 * q))));
    built.acting =
        vec![Acting { name: "atom".to_string(), quanta: None, moment: Some(moment.map(|matrix| Block::new("", "Hz/T", matrix))), light }];
    built
}

/// Manifold and m of each state as one label, and its energy without a field.
fn grown(atom: &Atom, lower: &Levels, upper: Option<&Levels>) -> Vec<(i32, f64)> {
    let of = |manifold: &Manifold, levels: &Levels, from: i32| -> Vec<(i32, f64)> {
        manifold.states().into_iter().zip(&levels.hyperfine).map(|([_, m], energy)| (from + m, *energy)).collect()
    };
    let mut found = of(&atom.lower, lower, 0);
    if let (Some((manifold, _)), Some(levels)) = (&atom.upper, upper) {
        // beyond every m of the lower manifold
        found.extend(of(manifold, levels, 1 << 20));
    }
    found
}

/// One manifold in the states F, m.
struct Levels {
    hyperfine: Vec<f64>,
    electron: [Matrix; 3],
    nucleus: [Matrix; 3],
    moment: [Matrix; 3],
}

impl Levels {
    fn of(manifold: &Manifold, values: &[f64]) -> Levels {
        let value = |register: u32| values[register as usize];
        let to_f = to_states_of_f(manifold);
        let (i_size, j_size) = (manifold.twice_i as usize + 1, manifold.twice_j as usize + 1);
        let [jx, jy, jz, ..] = angular_momentum(manifold.twice_j);
        let [ix, iy, iz, ..] = angular_momentum(manifold.twice_i);
        let turn = |matrix: Matrix| to_f.adjoint() * matrix * &to_f;
        let electron = [jx, jy, jz].map(|matrix| turn(Block::new("", "1", matrix).within("", 1, i_size).dense()));
        let nucleus = [ix, iy, iz].map(|matrix| turn(Block::new("", "1", matrix).within("", j_size, 1).dense()));
        let (g_j, g_i) = (value(manifold.g_electron.register), value(manifold.g_nucleus.register));
        let moment = [0, 1, 2].map(|axis| {
            &electron[axis] * Complex64::from(g_j * BOHR_HZ_PER_TESLA) + &nucleus[axis] * Complex64::from(g_i * BOHR_HZ_PER_TESLA)
        });
        let (a, b) = (value(manifold.dipole.register), manifold.quadrupole.map_or(0.0, |b| value(b.register)));
        let hyperfine = manifold.states().into_iter().map(|[f, _]| casimir(f, manifold, a, b)).collect();
        Levels { hyperfine, electron, nucleus, moment }
    }
}

/// The energy of a level F (doubled) without a field, Hz.
fn casimir(f: i32, manifold: &Manifold, a: f64, b: f64) -> f64 {
    let square = |twice: f64| twice / 2.0 * (twice / 2.0 + 1.0);
    let (i, j) = (f64::from(manifold.twice_i), f64::from(manifold.twice_j));
    // four times K is whole, so that K is exact
    let k = square(f64::from(f)) - square(i) - square(j);
    let dipole = a * k / 2.0;
    if b == 0.0 {
        return dipole;
    }
    let over = 0.75 * k * k + 0.75 * k - square(i) * square(j);
    // 2I(2I - 1) J(2J - 1) with I and J doubled
    dipole + b * over / (i * (i - 1.0) * 0.5 * j * (j - 1.0))
}

/// Columns: the states F, m in the states mJ, mI, both from highest to lowest, mJ slower.
fn to_states_of_f(manifold: &Manifold) -> Matrix {
    let (i, j) = (manifold.twice_i as i32, manifold.twice_j as i32);
    let states = manifold.states();
    let size = states.len();
    let mut columns = Matrix::zeros(size, size);
    for (column, [f, m]) in states.into_iter().enumerate() {
        for (a, m_j) in (-j..=j).rev().step_by(2).enumerate() {
            let m_i = m - m_j;
            if m_i.abs() <= i {
                let b = ((i - m_i) / 2) as usize;
                columns[(a * (i as usize + 1) + b, column)] = clebsch_gordan([j, m_j], [i, m_i], [f, m]).into();
            }
        }
    }
    columns
}

/// The dipole with d_q upwards and its adjoint downwards, q doubled; no dimension, of the size that the 3j coefficient has.
fn dipole(atom: &Atom, q: i32) -> Matrix {
    let lower = &atom.lower;
    let Some((upper, _)) = &atom.upper else { return Matrix::zeros(0, 0) };
    let (j, j_up) = (lower.twice_j as i32, upper.twice_j as i32);
    let element = |m_up: i32, m: i32| {
        let sign = if ((j_up - m_up) / 2) % 2 == 0 { 1.0 } else { -1.0 };
        sign * three_j([j_up, 2, j], [-m_up, q, m])
    };
    let electron =
        Matrix::from_fn(j_up as usize + 1, j as usize + 1, |row, column| element(j_up - 2 * row as i32, j - 2 * column as i32).into());
    let nuclear = lower.twice_i as usize + 1;
    let uncoupled = electron.kronecker(&Matrix::identity(nuclear, nuclear));
    let up = to_states_of_f(upper).adjoint() * uncoupled * to_states_of_f(lower);
    let (low, high) = (up.ncols(), up.nrows());
    let largest = up.iter().map(|z| z.norm()).fold(0.0, f64::max);
    let mut whole = Matrix::zeros(low + high, low + high);
    for column in 0..low {
        for row in 0..high {
            // what the algebra makes zero is zero, not a rounding that opens a line
            let entry = if up[(row, column)].norm() <= 1e-14 * largest { 0.0.into() } else { up[(row, column)] };
            whole[(low + row, column)] = entry;
            whole[(column, low + row)] = entry.conj();
        }
    }
    whole
}

fn direct_sum(a: &Matrix, b: &Matrix) -> Matrix {
    let (first, second) = (a.nrows(), b.nrows());
    let mut whole = Matrix::zeros(first + second, first + second);
    whole.view_mut((0, 0), (first, first)).copy_from(a);
    whole.view_mut((first, first), (second, second)).copy_from(b);
    whole
}
