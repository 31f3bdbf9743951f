//! The lowest states of one particle on a mesh of spectral elements.
//!
//! -(d/dx) kappa (d psi/dx) + V psi = E psi with kappa = hbar^2/(2 m h) in Hz m^2, V and E in Hz. The weak form
//!
//! ```text
//! integral of kappa u' psi' + V u psi  =  E integral of u psi      for every u
//! ```
//!
//! holds psi and kappa psi' continuous where mass or potential jump, which is the condition of D. J. BenDaniel and C. B. Duke, Physical
//! Review 152, 683 (1966). psi is a polynomial of degree p in each element, integrals are those of Gauss and Lobatto on its nodes
//! (A. T. Patera, Journal of Computational Physics 54, 468 (1984)): the error falls faster than any power of p where V is smooth.
//! The levels are Rayleigh quotients of sums of squares, so they bear the rounding of the levels themselves, not of the largest
//! entry of the matrix: about 1e-14 of the highest kept level, counted from the bottom of the potential.

use nalgebra::SymmetricEigen;

use super::krylov::{lowest, mixed, orthonormalise, Vectors};
use super::lobatto::Lobatto;
use super::mesh::Mesh;
use super::piece::Piece;
use super::skyline::Skyline;
use crate::units::kinetic_hz_m2;

/// States found beyond the kept ones, so that the last kept one has neighbours above.
const GUARD: usize = 4;

/// The lowest states.
#[derive(Debug, Clone)]
pub struct States {
    /// Energies over h, ascending, Hz.
    pub levels_hz: Vec<f64>,
    /// Of each state the values on the nodes, element by element, 1/sqrt(m).
    pub values: Vectors,
    /// The elements.
    pub mesh: Mesh,
    /// The nodes within an element.
    pub rule: Lobatto,
}

/// What cannot be computed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum GridFault {
    /// The potential has no finite value at this x, m.
    Potential(f64),
    /// The mass is not positive at this x, m.
    Mass(f64),
    /// More states are asked for than the grid carries.
    TooMany(usize),
}

/// Values of potential and kappa on all nodes, and the weight of each node, element by element.
struct Fields {
    potential: Vec<f64>,
    kappa: Vec<f64>,
    weight: Vec<f64>,
    bottom: f64,
}

fn fields(pieces: &[Piece], mesh: &Mesh, rule: &Lobatto) -> Result<Fields, GridFault> {
    let mut out = Fields { potential: Vec::new(), kappa: Vec::new(), weight: Vec::new(), bottom: f64::INFINITY };
    for (element, piece) in mesh.piece.iter().enumerate() {
        let (from, to) = (mesh.ends[element], mesh.ends[element + 1]);
        for (node, weight) in rule.nodes.iter().zip(&rule.weights) {
            let x = 0.5 * ((1.0 - node) * from + (1.0 + node) * to);
            let (energy, mass) = (pieces[*piece].energy_hz(x), pieces[*piece].mass_kg.value(x));
            if !energy.is_finite() {
                return Err(GridFault::Potential(x));
            }
            if !(mass > 0.0 && mass.is_finite()) {
                return Err(GridFault::Mass(x));
            }
            out.potential.push(energy);
            out.kappa.push(kinetic_hz_m2(mass));
            out.weight.push(0.5 * (to - from) * weight);
            out.bottom = out.bottom.min(energy);
        }
    }
    Ok(out)
}

/// Which unknown stands on a node; none on a wall.
struct Numbering {
    degree: usize,
    elements: usize,
    ring: bool,
}

impl Numbering {
    fn size(&self) -> usize {
        self.degree * self.elements - usize::from(!self.ring)
    }

    fn of(&self, element: usize, node: usize) -> Option<usize> {
        let place = element * self.degree + node;
        if place == 0 || place == self.degree * self.elements {
            return self.ring.then(|| self.size() - 1);
        }
        Some(place - 1)
    }

    /// The first unknown to which each one is tied.
    fn first(&self) -> Vec<usize> {
        let size = self.size();
        (0..size).map(|k| if self.ring && k + 1 == size { 0 } else { (k / self.degree * self.degree).saturating_sub(1) }).collect()
    }
}

/// The lowest `keep` states on `mesh` with polynomials of degree `degree`.
pub fn states(pieces: &[Piece], mesh: &Mesh, degree: usize, keep: usize) -> Result<States, GridFault> {
    let rule = Lobatto::new(degree);
    let fields = fields(pieces, mesh, &rule)?;
    let numbering = Numbering { degree, elements: mesh.count(), ring: mesh.ring };
    let size = numbering.size();
    if keep > size {
        return Err(GridFault::TooMany(size));
    }
    // below every level by a tenth of the lowest level of a box, so that the matrix is positive
    let length = mesh.ends[mesh.count()] - mesh.ends[0];
    let shift = fields.bottom - fields.kappa.iter().fold(f64::INFINITY, |least, k| least.min(*k)) / (length * length);
    let mut mass = vec![0.0; size];
    for element in 0..mesh.count() {
        for node in 0..=degree {
            if let Some(k) = numbering.of(element, node) {
                mass[k] += fields.weight[element * (degree + 1) + node];
            }
        }
    }
    let root: Vec<f64> = mass.iter().map(|m| m.sqrt()).collect();
    let factor = factor(&numbering, mesh, &rule, &fields, shift, &root);
    let invert = |v: &mut [f64]| factor.solve(v);
    let mut found: Vectors = Vec::new();
    for mut vector in lowest(size, keep + GUARD, &invert) {
        // one more step of inverse iteration takes out what rounding left of the high states
        invert(&mut vector);
        if orthonormalise(&mut vector, &found) {
            found.push(vector);
        }
    }
    let spread = |vector: &Vec<f64>| -> Vec<f64> {
        let on = |element: usize, node: usize| numbering.of(element, node).map_or(0.0, |k| vector[k] / root[k]);
        (0..mesh.count()).flat_map(|element| (0..=degree).map(move |node| on(element, node)).collect::<Vec<_>>()).collect()
    };
    let nodal: Vectors = found.iter().map(spread).collect();
    let (levels, shares) = quotients(&nodal, mesh, &rule, &fields, shift);
    let values = shares.iter().take(keep).map(|share| mixed(&nodal, share)).collect();
    let mut states = States { levels_hz: levels.into_iter().take(keep).collect(), values, mesh: mesh.clone(), rule };
    states.settle_pairs();
    states.settle_signs();
    Ok(states)
}

/// The factor of the matrix in the unknowns scaled by the root of their mass.
fn factor(numbering: &Numbering, mesh: &Mesh, rule: &Lobatto, fields: &Fields, shift: f64, root: &[f64]) -> Skyline {
    let nodes = rule.nodes.len();
    let assemble = |shift: f64| {
        let mut matrix = Skyline::zeros(numbering.first());
        for element in 0..mesh.count() {
            let at = element * nodes;
            let per_length = 2.0 / (mesh.ends[element + 1] - mesh.ends[element]);
            let weights: Vec<f64> = (0..nodes).map(|q| fields.weight[at + q] * fields.kappa[at + q] * per_length * per_length).collect();
            for a in 0..nodes {
                let Some(i) = numbering.of(element, a) else { continue };
                matrix.add(i, i, fields.weight[at + a] * (fields.potential[at + a] - shift) / (root[i] * root[i]));
                for b in 0..nodes {
                    let Some(j) = numbering.of(element, b) else { continue };
                    let stiff: f64 = (0..nodes).map(|q| weights[q] * rule.slopes[q][a] * rule.slopes[q][b]).sum();
                    matrix.add(i, j, stiff / (root[i] * root[j]));
                }
            }
        }
        matrix
    };
    let mut shift = shift;
    loop {
        let mut matrix = assemble(shift);
        if matrix.factor() {
            return matrix;
        }
        // rounding of a very high wall can eat the small shift; a larger one changes no eigenvector
        shift -= (fields.bottom - shift).abs().max(fields.bottom.abs() * 1e-12) * 10.0;
    }
}

/// Rayleigh quotients of `nodal` as sums of squares: levels ascending, and the shares of each state.
fn quotients(nodal: &Vectors, mesh: &Mesh, rule: &Lobatto, fields: &Fields, shift: f64) -> (Vec<f64>, Vectors) {
    let nodes = rule.nodes.len();
    let rows: Vectors = nodal
        .iter()
        .map(|values| {
            let mut row = Vec::with_capacity(2 * values.len());
            for element in 0..mesh.count() {
                let (at, per_length) = (element * nodes, 2.0 / (mesh.ends[element + 1] - mesh.ends[element]));
                for q in 0..nodes {
                    let slope: f64 = (0..nodes).map(|b| rule.slopes[q][b] * values[at + b]).sum::<f64>() * per_length;
                    row.push(slope * (fields.weight[at + q] * fields.kappa[at + q]).sqrt());
                    row.push(values[at + q] * (fields.weight[at + q] * (fields.potential[at + q] - shift)).sqrt());
                }
            }
            row
        })
        .collect();
    let count = nodal.len();
    let small = super::krylov::symmetric(count, &|i, j| super::krylov::dot(&rows[i], &rows[j]));
    let eigen = SymmetricEigen::new(small);
    let mut order: Vec<usize> = (0..count).collect();
    order.sort_by(|a, b| eigen.eigenvalues[*a].total_cmp(&eigen.eigenvalues[*b]));
    let levels = order.iter().map(|k| eigen.eigenvalues[*k] + shift).collect();
    let shares = order.iter().map(|k| eigen.eigenvectors.column(*k).iter().copied().collect()).collect();
    (levels, shares)
}

/// Two levels count as one where they differ by less than this share of the spread of the levels.
const SAME: f64 = 1e-12;
/// What is smaller than this share of the largest value is no lobe.
const LOBE: f64 = 1e-7;

impl States {
    /// Of two states of one energy on a ring the first takes the whole value at the joint, the second vanishes there.
    fn settle_pairs(&mut self) {
        let count = self.levels_hz.len();
        let scale = self.levels_hz.iter().fold(0.0f64, |most, level| most.max((level - self.levels_hz[0]).abs()));
        let mut k = 0;
        while self.mesh.ring && k + 1 < count {
            if (self.levels_hz[k + 1] - self.levels_hz[k]).abs() > SAME * scale {
                k += 1;
                continue;
            }
            let (a, b) = (self.values[k][0], self.values[k + 1][0]);
            let norm = a.hypot(b);
            if norm > 0.0 {
                let (cos, sin) = (a / norm, b / norm);
                let pair = vec![self.values[k].clone(), self.values[k + 1].clone()];
                self.values[k] = mixed(&pair, &[cos, sin]);
                self.values[k + 1] = mixed(&pair, &[-sin, cos]);
            }
            k += 2;
        }
    }

    /// Each function is positive at its first lobe from the left.
    fn settle_signs(&mut self) {
        for values in &mut self.values {
            let largest = values.iter().fold(0.0f64, |most, value| most.max(value.abs()));
            if values.iter().find(|value| value.abs() > LOBE * largest).is_some_and(|value| *value < 0.0) {
                values.iter_mut().for_each(|value| *value = -*value);
            }
        }
    }

    /// Which elements some state fills with more than the degree carries, relative to the largest value of that state.
    pub fn unresolved(&self, share: f64) -> Vec<bool> {
        let nodes = self.rule.nodes.len();
        let mut asks = vec![false; self.mesh.count()];
        for values in &self.values {
            let largest = values.iter().fold(0.0f64, |most, value| most.max(value.abs()));
            for (element, asks) in asks.iter_mut().enumerate() {
                *asks |= self.rule.tail(&values[element * nodes..(element + 1) * nodes]) > share * largest;
            }
        }
        asks
    }
}
