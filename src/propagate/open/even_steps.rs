//! Steps of equal length where the generator changes.
//!
//! * [`slices`]: G is held at its value in the middle of each step; order 2 (W. Magnus, Communications on Pure and Applied
//!   Mathematics 7, 649 (1954), his first term with the midpoint rule).
//! * [`geometric`]: Magnus expansion of order 6 with three Gauss-Legendre nodes (S. Blanes, F. Casas, J. A. Oteo, J. Ros, Physics
//!   Reports 470, 151 (2009), section 5): with G1, G2, G3 at the nodes, a1 = h G2, a2 = sqrt(15)/3 h (G3 - G1), a3 = 10/3 h (G3 -
//!   2 G2 + G1), C1 = [a1, a2], C2 = -[a1, 2 a3 + C1]/60, the exponent is a1 + a3/12 + [-20 a1 - a3 + C1, a2 + C2]/240. Every
//!   step is an exponential of what conserves the trace exactly.

use super::super::run::Work;
use super::super::sampled::Sampled;
use super::exponential::{act, apply, dense, product, products, squarings, Room};
use super::load::rate_hz;
use super::run::{Columns, Eye, Stretch};

/// sqrt(15)/10: distance of the outer nodes from the middle, in steps.
const OUTER: f64 = 0.387_298_334_620_741_7;
/// sqrt(15)/3.
const SLOPE: f64 = 1.290_994_448_735_805_6;

/// Walks through the stretch; `step(tau, h, x, work)` does one step of h seconds from tau.
fn walk(
    stretch: &Stretch,
    doublings: u32,
    columns: &mut Columns,
    eye: &mut Eye,
    work: &mut Work,
    mut step: impl FnMut(f64, f64, &mut [f64], &mut Work),
) {
    // enough to see each turn of G and each turn of the state, roughly
    let least = 4.0 / Sampled::of(stretch.terms, stretch.length_s).busy + stretch.generator.fastest_hz * stretch.length_s;
    let rate = (least + 0.5 * rate_hz(stretch) * stretch.length_s) / stretch.length_s;
    let mut tau_s = 0.0;
    for k in 0..=stretch.moments.len() {
        let stop_s = stretch.moments.get(k).map_or(stretch.length_s, |moment| moment.offset_s.min(stretch.length_s));
        let gap_s = stop_s - tau_s;
        if gap_s > 0.0 {
            let steps = (gap_s * rate).ceil().max(1.0) * 2f64.powi(doublings as i32);
            let mut done = 0.0;
            while done < steps && !work.exhausted() {
                let from_s = tau_s + gap_s * (done / steps);
                done += 1.0;
                let to_s = tau_s + gap_s * (done / steps);
                step(from_s, to_s - from_s, &mut columns.x, work);
            }
            tau_s = stop_s;
        }
        if k < stretch.moments.len() {
            eye.see(stretch, k, &columns.x);
        }
    }
}

/// Midpoint slices.
pub(super) fn slices(stretch: &Stretch, doublings: u32, columns: &mut Columns, eye: &mut Eye, work: &mut Work) {
    let (mut values, mut sums, mut room) = (Vec::new(), Vec::new(), Room::default());
    walk(stretch, doublings, columns, eye, work, |tau_s, h, x, work| {
        stretch.generator.at(stretch.terms, stretch.start, tau_s + 0.5 * h, &mut values);
        let norm = stretch.generator.bound(&values, &mut sums) * h;
        act(stretch.generator, &values, h, norm, x, &mut room, work);
        work.steps += 1;
    });
}

/// Magnus steps of order 6.
pub(super) fn geometric(stretch: &Stretch, doublings: u32, columns: &mut Columns, eye: &mut Eye, work: &mut Work) {
    let n = columns.size;
    let count = columns.x.len() / n;
    let mut magnus = Magnus::new(n);
    walk(stretch, doublings, columns, eye, work, |tau_s, h, x, work| {
        for node in 0..3 {
            let at_s = tau_s + h * (0.5 + OUTER * (node as f64 - 1.0));
            stretch.generator.at(stretch.terms, stretch.start, at_s, &mut magnus.values);
            magnus.nodes[node].fill(0.0);
            stretch.generator.dense(&magnus.values, h, &mut magnus.nodes[node]);
        }
        magnus.exponent();
        let norm = magnus.norm();
        let taken = magnus.act(norm, x, (count as f64) * products(norm) > f64::from(6 + squarings(norm)) * n as f64);
        work.step(6 * n as u64 + taken, n * n);
    });
}

/// Scratch of the exponent, dense matrices column after column.
struct Magnus {
    n: usize,
    values: Vec<f64>,
    nodes: [Vec<f64>; 3],
    a2: Vec<f64>,
    a3: Vec<f64>,
    c1: Vec<f64>,
    c2: Vec<f64>,
    left: Vec<f64>,
    right: Vec<f64>,
    exponent: Vec<f64>,
    room: Vec<f64>,
    image: Vec<f64>,
}

impl Magnus {
    fn new(n: usize) -> Magnus {
        let zero = || vec![0.0; n * n];
        Magnus {
            n,
            values: Vec::new(),
            nodes: [zero(), zero(), zero()],
            a2: zero(),
            a3: zero(),
            c1: zero(),
            c2: zero(),
            left: zero(),
            right: zero(),
            exponent: zero(),
            room: zero(),
            image: Vec::new(),
        }
    }

    /// The exponent from h G at the nodes.
    fn exponent(&mut self) {
        let n = self.n;
        let [g1, a1, g3] = &self.nodes;
        for i in 0..n * n {
            self.a2[i] = SLOPE * (g3[i] - g1[i]);
            self.a3[i] = 10.0 / 3.0 * (g3[i] - 2.0 * a1[i] + g1[i]);
        }
        bracket(n, a1, &self.a2, &mut self.room, &mut self.c1);
        for i in 0..n * n {
            self.left[i] = -(2.0 * self.a3[i] + self.c1[i]) / 60.0;
        }
        bracket(n, a1, &self.left, &mut self.room, &mut self.c2);
        for i in 0..n * n {
            self.left[i] = -20.0 * a1[i] - self.a3[i] + self.c1[i];
            self.right[i] = self.a2[i] + self.c2[i];
        }
        bracket(n, &self.left, &self.right, &mut self.room, &mut self.c1);
        for i in 0..n * n {
            self.exponent[i] = a1[i] + self.a3[i] / 12.0 + self.c1[i] / 240.0;
        }
    }

    /// Sum norm of the exponent.
    fn norm(&self) -> f64 {
        let sum = |column: &[f64]| column.iter().map(|entry| entry.abs()).sum::<f64>();
        self.exponent.chunks_exact(self.n).map(sum).fold(0.0, |most, sum| if sum > most || sum.is_nan() { sum } else { most })
    }

    /// x becomes exp(exponent) x; gives the products of matrix and column that it took.
    fn act(&mut self, norm: f64, x: &mut [f64], by_matrix: bool) -> u64 {
        let n = self.n;
        self.image.resize(x.len(), 0.0);
        if by_matrix || !(norm < 2.0) {
            apply(n, &dense(n, &self.exponent, norm, None), x, &mut self.image);
            x.copy_from_slice(&self.image);
            return (6 + squarings(norm)) as u64 * n as u64;
        }
        self.room.clear();
        self.room.extend_from_slice(x);
        let mut taken = 0;
        for order in 1..=60 {
            apply(n, &self.exponent, &self.room, &mut self.image);
            taken += (x.len() / n) as u64;
            let scale = 1.0 / f64::from(order);
            let mut largest: f64 = 0.0;
            for ((sum, term), next) in x.iter_mut().zip(&mut self.room).zip(&self.image) {
                *term = next * scale;
                *sum += *term;
                largest = largest.max(term.abs());
            }
            if largest < 1e-20 {
                break;
            }
        }
        self.room.resize(n * n, 0.0);
        taken
    }
}

/// x y - y x.
fn bracket(n: usize, x: &[f64], y: &[f64], room: &mut [f64], into: &mut [f64]) {
    product(n, x, y, into);
    product(n, y, x, room);
    into.iter_mut().zip(room.iter()).for_each(|(entry, other)| *entry -= other);
}
