//! Differential operators as matrices: A = sum over k of c_k(x) d^k/dx^k, A_ab = integral of f_a (A f_b) over real functions f.
//!
//! Derivatives are those of Taylor numbers, so they are exact at each point; the integral is that of Gauss and Legendre with 20 points on
//! each panel, halved until it no longer changes. A derivative of order k is shared between both sides by parts,
//!
//! ```text
//! integral of u v^(k) = sum over r below s of (-1)^r [u^(r) v^(k-1-r)] + (-1)^s integral of u^(s) v^(k-s),   u = c_k f_a
//! ```
//!
//! which holds where f_b has a kink (a step of the mass) or its second derivative a jump (a step of the potential), so what
//! sits on the step is counted. On a ring the brackets cancel; with walls they are kept, so the operator acts inside them.
//! Units: x in m, functions 1/sqrt(m), the matrix in the unit of c_k over m^k. Errors: both resolutions are returned.

use nalgebra::DMatrix;

use super::grid::Profile;
use crate::config::taylor::Taylor;
use crate::quadrature::NODES;

/// Taylor coefficients kept at a point; derivatives of up to twice this less two can be shared between two functions.
pub const ORDERS: usize = 10;
/// The highest order of a derivative.
pub const HIGHEST: usize = 2 * (ORDERS - 1);

/// Real functions of x between two ends.
pub trait Family {
    /// How many.
    fn count(&self) -> usize;
    /// Stretches side by side in which all functions are smooth, m.
    fn panels(&self) -> Vec<[f64; 2]>;
    /// Taylor coefficients of each function at `x`, in the stretch of index `panel`; `orders` of them are read.
    fn jets(&self, panel: usize, x: f64, orders: usize) -> Vec<Taylor<ORDERS>>;
    /// Whether the last end is the first one again.
    fn is_ring(&self) -> bool;
    /// The order of the highest derivative that is continuous between the stretches.
    fn continuous(&self) -> usize;
}

/// One term c d^k/dx^k.
#[derive(Debug, Clone)]
pub struct Term {
    /// k.
    pub order: usize,
    /// c, in SI (energies in Hz).
    pub coefficient: Profile,
}

/// A matrix at two resolutions.
#[derive(Debug, Clone)]
pub struct Integrals {
    /// The answer.
    pub fine: DMatrix<f64>,
    /// With panels twice as long.
    pub coarse: DMatrix<f64>,
}

/// What is not defined.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum DifferentialFault {
    /// The order of a term is above [`HIGHEST`].
    TooHigh(usize),
    /// This order meets a step of the functions or of the coefficient where it has no meaning.
    Steps(usize),
    /// The coefficient of this order does not close on the ring.
    Open(usize),
    /// The coefficient of this order has no finite value at this x, m.
    NotFinite(usize, f64),
}

/// What may still change by halving, relative to the integral of the modulus.
const SETTLED: f64 = 2e-15;
/// Most halvings of a panel.
const DEEPEST: usize = 14;

/// The matrix of `terms` between the functions of `family`.
pub fn matrix(family: &dyn Family, terms: &[Term]) -> Result<Integrals, DifferentialFault> {
    let size = family.count();
    let mut sum = Integrals { fine: DMatrix::zeros(size, size), coarse: DMatrix::zeros(size, size) };
    for term in terms {
        if term.order > HIGHEST {
            return Err(DifferentialFault::TooHigh(term.order));
        }
        let plan = Plan::new(family, term)?;
        let (fine, coarse) = plan.integrate();
        let ends = plan.ends();
        sum.fine += fine + &ends;
        sum.coarse += coarse + ends;
    }
    Ok(sum)
}

/// Adds the integral from `from` to `to` of w(x) a(x) b(x)^T, 20 points; `at` gives a, b and w.
pub fn add_products(sum: &mut DMatrix<f64>, from: f64, to: f64, at: &dyn Fn(f64) -> (Vec<f64>, Vec<f64>, f64)) {
    let half = 0.5 * (to - from);
    let sides: Vec<(Vec<f64>, Vec<f64>)> = nodes(from, to)
        .map(|(x, weight)| {
            let (mut left, right, factor) = at(x);
            left.iter_mut().for_each(|a| *a *= weight * half * factor);
            (left, right)
        })
        .collect();
    *sum += outer(&sides);
}

/// The nodes of the rule between two ends, with their weights.
fn nodes(from: f64, to: f64) -> impl Iterator<Item = (f64, f64)> {
    let (middle, half) = (0.5 * (from + to), 0.5 * (to - from));
    NODES.iter().flat_map(|(node, weight)| [(-node, *weight), (*node, *weight)]).map(move |(node, weight)| (middle + half * node, weight))
}

/// Sum of a b^T over all sides, as one product of matrices.
fn outer(sides: &[(Vec<f64>, Vec<f64>)]) -> DMatrix<f64> {
    let rows = sides.first().map_or(0, |side| side.0.len());
    let columns = sides.first().map_or(0, |side| side.1.len());
    let left = DMatrix::from_fn(rows, sides.len(), |row, k| sides[k].0[row]);
    let right = DMatrix::from_fn(sides.len(), columns, |k, column| sides[k].1[column]);
    left * right
}

/// Functions kept at most for [`images`]: their products cost the square.
const MOST_IMAGES: usize = 100;

/// Scalar products of A f_m and A f_n, A the sum of the terms, real and imaginary part: what A makes of each function, whether or not it
/// lies in their span. None where a derivative meets a step, or where there are very many functions. Good to about 1e-10.
pub fn images(family: &dyn Family, terms: &[(Term, Option<Profile>)]) -> Option<DMatrix<f64>> {
    let highest = terms.iter().map(|(term, _)| term.order).max()?;
    let (size, orders) = (family.count(), highest + 1);
    if size > MOST_IMAGES || orders > ORDERS || highest > family.continuous().saturating_add(1) {
        return None;
    }
    let mut sum = DMatrix::zeros(size, size);
    for (panel, [from, to]) in family.panels().into_iter().enumerate() {
        let middle = 0.5 * (from + to);
        for (left, right) in [(from, middle), (middle, to)] {
            for imaginary in [false, true] {
                if imaginary && terms.iter().all(|(_, other)| other.is_none()) {
                    continue;
                }
                add_products(&mut sum, left, right, &|x| {
                    let jets = family.jets(panel, x, orders);
                    let part = |(term, other): &(Term, Option<Profile>)| match (imaginary, other) {
                        (false, _) => term.coefficient.value(x),
                        (true, Some(other)) => other.value(x),
                        (true, None) => 0.0,
                    };
                    let image = |jet: &Taylor<ORDERS>| terms.iter().map(|pair| part(pair) * jet.derivative(pair.0.order)).sum();
                    let images: Vec<f64> = jets.iter().map(image).collect();
                    (images.clone(), images, 1.0)
                });
            }
        }
    }
    Some(sum)
}

/// How one term is integrated.
struct Plan<'t> {
    family: &'t dyn Family,
    term: &'t Term,
    /// Stretches, and in which of the family's each lies.
    panels: Vec<(f64, f64, usize)>,
    /// Derivatives moved to the left function.
    shared: usize,
}

impl Plan<'_> {
    fn new<'t>(family: &'t dyn Family, term: &'t Term) -> Result<Plan<'t>, DifferentialFault> {
        let stretches = family.panels();
        let (from, to) = (stretches[0][0], stretches[stretches.len() - 1][1]);
        let kinks = term.coefficient.kinks(from, to);
        let mut panels = Vec::new();
        for (index, [left, right]) in stretches.into_iter().enumerate() {
            let mut start = left;
            for kink in kinks.iter().filter(|kink| **kink > left && **kink < right) {
                panels.push((start, *kink, index));
                start = *kink;
            }
            panels.push((start, right, index));
        }
        for (left, right, _) in &panels {
            // where a coefficient has no value somewhere it has none, or a pole, on some node of a fine comb
            for x in (0..=32).map(|k| left + (right - left) * (f64::from(k) + 0.5) / 33.0) {
                if !term.coefficient.value(x).is_finite() {
                    return Err(DifferentialFault::NotFinite(term.order, x));
                }
            }
        }
        let shared = shares(family, term, from, to, &kinks)?;
        Ok(Plan { family, term, panels, shared })
    }

    /// Both sides at `x`: u^(s) of each function, and v^(k-s).
    fn sides(&self, panel: usize, x: f64) -> (Vec<f64>, Vec<f64>) {
        let (s, rest) = (self.shared, self.term.order - self.shared);
        let jets = self.family.jets(panel, x, s.max(rest) + 1);
        let coefficient = self.term.coefficient.jet::<ORDERS>(x);
        let left = jets.iter().map(|jet| coefficient.times(*jet).derivative(s)).collect();
        (left, jets.iter().map(|jet| jet.derivative(rest)).collect())
    }

    /// The rule on one panel, and the integral of the largest modulus.
    fn rule(&self, from: f64, to: f64, panel: usize) -> (DMatrix<f64>, f64) {
        let half = 0.5 * (to - from);
        let mut modulus = 0.0;
        let sides: Vec<(Vec<f64>, Vec<f64>)> = nodes(from, to)
            .map(|(x, weight)| {
                let (mut left, right) = self.sides(panel, x);
                let largest = |side: &[f64]| side.iter().fold(0.0f64, |most, value| most.max(value.abs()));
                modulus += weight * half * largest(&left) * largest(&right);
                left.iter_mut().for_each(|a| *a *= weight * half);
                (left, right)
            })
            .collect();
        (outer(&sides), modulus)
    }

    /// (-1)^s times the integral, fine and coarse.
    fn integrate(&self) -> (DMatrix<f64>, DMatrix<f64>) {
        let size = self.family.count();
        let (mut fine, mut coarse) = (DMatrix::zeros(size, size), DMatrix::zeros(size, size));
        let mut open: Vec<(f64, f64, usize, DMatrix<f64>, usize)> = Vec::new();
        let mut modulus = 0.0;
        for (from, to, panel) in &self.panels {
            let (whole, size) = self.rule(*from, *to, *panel);
            modulus += size;
            open.push((*from, *to, *panel, whole, 0));
        }
        while let Some((from, to, panel, whole, depth)) = open.pop() {
            let middle = 0.5 * (from + to);
            let (left, right) = (self.rule(from, middle, panel).0, self.rule(middle, to, panel).0);
            let both = &left + &right;
            let change = (&both - &whole).amax();
            if depth < DEEPEST && !(change <= SETTLED * modulus) {
                open.push((from, middle, panel, left, depth + 1));
                open.push((middle, to, panel, right, depth + 1));
            } else {
                fine += both;
                coarse += whole;
            }
        }
        let sign = if self.shared.is_multiple_of(2) { 1.0 } else { -1.0 };
        (fine * sign, coarse * sign)
    }

    /// The brackets at the outer ends.
    fn ends(&self) -> DMatrix<f64> {
        let size = self.family.count();
        let mut sum = DMatrix::zeros(size, size);
        if self.family.is_ring() || self.shared == 0 {
            return sum;
        }
        let (first, last) = (self.panels[0], self.panels[self.panels.len() - 1]);
        for (x, panel, sign) in [(last.1, last.2, 1.0), (first.0, first.2, -1.0)] {
            let jets = self.family.jets(panel, x, self.term.order.min(ORDERS));
            let coefficient = self.term.coefficient.jet::<ORDERS>(x);
            let products: Vec<Taylor<ORDERS>> = jets.iter().map(|jet| coefficient.times(*jet)).collect();
            for r in 0..self.shared {
                let sign = if r % 2 == 0 { sign } else { -sign };
                for column in 0..size {
                    for row in 0..size {
                        sum[(row, column)] += sign * products[row].derivative(r) * jets[column].derivative(self.term.order - 1 - r);
                    }
                }
            }
        }
        sum
    }
}

/// How many derivatives of a term go to the left function.
fn shares(family: &dyn Family, term: &Term, from: f64, to: f64, kinks: &[f64]) -> Result<usize, DifferentialFault> {
    let (functions, order) = (family.continuous() as i64, term.order as i64);
    let mut left = functions;
    let nudge = 1e-9 * (to - from);
    for kink in kinks {
        let (before, after) = (term.coefficient.value(kink - nudge), term.coefficient.value(kink + nudge));
        let steps = (before - after).abs() > 1e-6 * before.abs().max(after.abs());
        left = left.min(if steps { -1 } else { 0 });
    }
    let mut shared = (order / 2).min(left + 1);
    if family.is_ring() {
        let (start, end) = (term.coefficient.jet::<ORDERS>(from), term.coefficient.jet::<ORDERS>(to));
        let same = |k: usize| {
            let scale = (to - from).powi(k as i32);
            let largest = (0..ORDERS).map(|j| start.0[j].abs() * (to - from).powi(j as i32)).fold(0.0, f64::max);
            (start.0[k] - end.0[k]).abs() * scale <= 1e-9 * largest
        };
        if !same(0) {
            return Err(DifferentialFault::Open(term.order));
        }
        if !same(1) {
            shared = shared.min(1);
        }
    }
    // a whole half of the order where both sides are smooth; ORDERS bounds each side
    shared = shared.max(order - (ORDERS as i64 - 1)).max(0);
    if shared > left + 1 || order - shared > functions + 1 {
        return Err(DifferentialFault::Steps(term.order));
    }
    Ok(shared as usize)
}
