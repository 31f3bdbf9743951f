//! Several systems beside each other: the leftmost varies slowest, |a, b> = |a> times |b>.
//!
//! H = sum of H_part + interactions. Two moments m1, m2 at distance r from the first to the second have the energy
//! mu0/(4 pi r^3) (m1 . m2 - 3 (m1 . n)(m2 . n)), n = r/|r| (J. H. Van Vleck, Physical Review 74, 1168 (1948)); with m = -dE/dB
//! = -h c S, c in Hz/T, that is mu0 h/(4 pi r^3) c1 c2 (S1 . S2 - 3 (S1 . n)(S2 . n)) in Hz. Errors: roundings, and those of the parts.

use num_complex::Complex64;

use super::built::{Acting, Block, Built};
use crate::config::messages::{Fault, Mistake};
use crate::config::system::parts::{How, Interaction, Part, Parts};
use crate::config::system::Physics;
use crate::problem::Matrix;
use crate::units::DIPOLAR_HZ;

/// Builds a joint system.
pub fn build(parts: &Parts, values: &[f64]) -> Result<Built, Mistake> {
    let field = parts.field.as_ref().map_or([0.0; 3], |field| field.tesla(values));
    let single: Vec<Built> = parts.parts.iter().map(|part| build_part(part, values, field)).collect::<Result<_, _>>()?;
    let sizes: Vec<usize> = single.iter().map(Built::size).collect();
    let size: usize = sizes.iter().product();
    let mut statics = Matrix::zeros(size, size);
    let mut joint = Built::new(Matrix::zeros(0, 0));
    let one = Complex64::from(1.0);
    for (k, (part, built)) in parts.parts.iter().zip(single).enumerate() {
        let (before, after) = (sizes[..k].iter().product(), sizes[k + 1..].iter().product());
        Block::new("", "Hz", built.statics_hz).within("", before, after).add_to(&mut statics, one);
        joint.operators.extend(built.operators.iter().map(|block| block.within(&part.name, before, after)));
        joint.acting.extend(built.acting.into_iter().map(|acting| Acting {
            name: part.name.clone(),
            quanta: acting.quanta.map(|block| block.within("", before, after)),
            moment: acting.moment.map(|blocks| blocks.map(|block| block.within("", before, after))),
            light: acting.light.map(|blocks| blocks.map(|block| block.within("", before, after))),
        }));
        joint.error_hz += built.error_hz;
        joint.notes.extend(built.notes);
    }
    for interaction in &parts.interactions {
        couple(parts, interaction, &mut joint, &mut statics, values)?;
    }
    Ok(Built { operators: joint.operators, acting: joint.acting, error_hz: joint.error_hz, notes: joint.notes, ..Built::new(statics) })
}

fn build_part(part: &Part, values: &[f64], field: [f64; 3]) -> Result<Built, Mistake> {
    match &part.system.physics {
        Physics::Spin(spin) => Ok(super::spin::build_in(spin, values, field)),
        Physics::Atom(atom) => Ok(super::atom::build_in(atom, values, field)),
        _ => super::build_system(&part.system, &part.system.names, &[], values),
    }
}

/// Adds an interaction to the static matrix, Hz.
fn couple(parts: &Parts, interaction: &Interaction, joint: &mut Built, statics: &mut Matrix, values: &[f64]) -> Result<(), Mistake> {
    let [a, b] = interaction.between.map(|part| &parts.parts[part]);
    let value = |register: u32| values[register as usize];
    let of = |part: &Part, names: &[&str]| -> Option<Block> {
        names.iter().find_map(|name| joint.operators.iter().find(|block| block.name == format!("{}.{name}", part.name))).cloned()
    };
    let mut add = |names: [&[&str]; 2], factor: f64| {
        // reading has seen to it that both have the operator
        if let (Some(left), Some(right)) = (of(a, names[0]), of(b, names[1])) {
            add_product(statics, &left, &right, factor.into());
        }
    };
    const SPIN: [&str; 3] = ["spin_x", "spin_y", "spin_z"];
    match &interaction.how {
        How::Isotropic(size) => SPIN.iter().for_each(|axis| add([&[axis], &[axis]], value(size.register))),
        How::Axial(along, across) => {
            let sizes = [across, across, along];
            SPIN.iter().zip(sizes).for_each(|(axis, size)| add([&[axis], &[axis]], value(size.register)));
        }
        How::Tensor(entries) => {
            entries.iter().for_each(|entry| add([&[SPIN[entry.row]], &[SPIN[entry.column]]], value(entry.value.re)));
        }
        How::Longitudinal(size) => add([&["spin_z", "quanta"], &["spin_z", "quanta"]], value(size.register)),
        How::Exchange(size) => {
            add([&["spin_down", "lower"], &["spin_up", "raise"]], value(size.register));
            add([&["spin_up", "raise"], &["spin_down", "lower"]], value(size.register));
        }
        How::Dipolar(distance) => {
            let distance = distance.map(|component| value(component.register));
            let squared: f64 = distance.iter().map(|component| component * component).sum();
            if !(squared > 0.0) {
                let fault =
                    Fault::NotPositive { what: "distance of two moments".to_string(), value: squared.sqrt(), unit: "m".to_string() };
                return Err(Mistake::error(interaction.place, fault));
            }
            dipolar(joint, [&a.name, &b.name], distance, statics);
        }
        How::Product(names, size) => {
            let size = Complex64::new(value(size.re), size.im.map_or(0.0, value));
            if let (Some(left), Some(right)) = (of(a, &[&names[0]]), of(b, &[&names[1]])) {
                let mut term = Matrix::zeros(statics.nrows(), statics.nrows());
                add_product(&mut term, &left, &right, size);
                if !super::is_hermitian(&term, 1e-14) {
                    let adjoint = term.adjoint();
                    term += adjoint;
                    joint.notes.push(format!("{} times {} is not Hermitian: its adjoint is added", left.name, right.name));
                }
                *statics += term;
            }
        }
    }
    Ok(())
}

/// The dipolar coupling of two moments at a distance, m.
fn dipolar(joint: &Built, names: [&str; 2], distance: [f64; 3], statics: &mut Matrix) {
    let moment = |name: &str| joint.acting.iter().find(|acting| acting.name == name).and_then(|acting| acting.moment.as_ref());
    let [Some(first), Some(second)] = names.map(moment) else { return };
    let squared: f64 = distance.iter().map(|component| component * component).sum();
    let size = DIPOLAR_HZ / (squared * squared.sqrt());
    for (i, left) in first.iter().enumerate() {
        for (j, right) in second.iter().enumerate() {
            let same = if i == j { 1.0 } else { 0.0 };
            let factor = size * (same - 3.0 * distance[i] * distance[j] / squared);
            add_product(statics, left, right, factor.into());
        }
    }
}

/// Adds `factor` times the product of two blocks of different parts, the first one further left.
fn add_product(sum: &mut Matrix, left: &Block, right: &Block, factor: Complex64) {
    let (p, q) = (left.matrix.nrows(), right.matrix.nrows());
    let middle = right.before / (left.before * p);
    let entries = |block: &Block| -> Vec<(usize, usize, Complex64)> {
        let size = block.matrix.nrows();
        let all = (0..size).flat_map(|column| (0..size).map(move |row| (row, column)));
        all.map(|(row, column)| (row, column, block.matrix[(row, column)])).filter(|(.., entry)| *entry != Complex64::from(0.0)).collect()
    };
    let (of_left, of_right) = (entries(left), entries(right));
    for (row, column, a) in &of_left {
        for (low, high, b) in &of_right {
            let entry = a * b * factor;
            for outer in 0..left.before {
                for between in 0..middle {
                    for last in 0..right.after {
                        let at = |k: usize, l: usize| (((outer * p + k) * middle + between) * q + l) * right.after + last;
                        sum[(at(*row, *low), at(*column, *high))] += entry;
                    }
                }
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A product of blocks equals the product of the whole matrices, with parts between, before and behind.
    #[test]
    fn prop_product_of_blocks() {
        let [x, y, ..] = super::super::spin::angular_momentum(2);
        let [_, b, ..] = super::super::spin::angular_momentum(1);
        let left = Block::new("", "1", &x + &y * Complex64::from(0.3)).within("", 2, 4 * 2 * 3);
        let right = Block::new("", "1", b).within("", 2 * 3 * 4, 3);
        let mut sum = Matrix::zeros(144, 144);
        add_product(&mut sum, &left, &right, Complex64::new(0.7, -0.2));
        let wanted = left.dense() * right.dense() * Complex64::new(0.7, -0.2);
        assert!((sum - wanted).iter().all(|z| z.norm() < 1e-15));
    }
}
