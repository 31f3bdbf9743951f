//! One element of collocation: the amplitudes of all waves at its eight nodes, by fixed-point iteration.
//!
//! Slow waves: u = exp(-i z x) u(0) - i integral of exp(-i z (x - s)) f(s) ds (`turning.rs`), f the couplings from the other waves at
//! the nodes; waves that follow: u = -f/z + ... Each sweep goes through the waves one after the other and uses what is newest, so
//! that it gains up to two powers of the coupling times the length. The slow waves start at the given state less the waves that
//! follow there, and at the end the sum of all is handed on: no condition is laid on how an envelope goes on from element to element.
//!
//! The eight nodes stand side by side in lanes.

use num_complex::Complex64;

use super::gauss::{legendre, Table, NODES, RULE};
use super::lanes::{sin_cos, Eight, Kernel, Lane, Simd, Width};
use super::picture::{turns, Picture};
use super::turning::{following, moments_at, Block, Square, Turning};
use super::waves::Waves;
use crate::problem::Term;
use crate::units::{cis_turns, rad_s, RAD_PER_TURN};

/// Sweeps after which an element counts as too long.
const MOST_SWEEPS: usize = 30;

/// Share of the largest wave that follows, below which one is left out at first.
const SMALL: f64 = 0.03;

/// What acts on the couplings of a wave that follows.
#[derive(Debug, Clone, Copy)]
enum Response {
    /// Index of a matrix.
    Matrix(usize),
    /// The leading order alone, where the next is too small to be seen.
    Scale(f64),
}

/// An element of a segment with room for its iteration.
#[derive(Debug)]
pub(super) struct Element<'w> {
    waves: &'w Waves,
    width: Width,
    length_s: f64,
    /// z of the slow waves, rad.
    z: Vec<f64>,
    turnings: Vec<Turning>,
    squares: Vec<Square>,
    /// Of the waves that follow.
    responses: Vec<Response>,
    /// What these turn by over the length.
    ends: Vec<Complex64>,
    coefficients: Vec<Block>,
    /// What coefficients turn by themselves at the nodes, for those that do.
    rests: Vec<Option<Box<Block>>>,
    /// Envelopes of the terms at the nodes.
    envelopes: Vec<Block>,
    /// Phases of the groups at the start.
    phases: Vec<Complex64>,
    u: Vec<Block>,
    /// u(0) of the slow waves.
    starts: Vec<Complex64>,
    /// The state at the start of the element.
    from: Vec<Complex64>,
    /// Rest of the diagonal, rad/s.
    diagonal: Vec<f64>,
    /// Couplings into the slow waves, kept for moments within.
    f: Vec<Block>,
    prepared_for: f64,
}

/// What a coarser run found in an element of twice the length.
#[derive(Debug, Clone, Copy)]
pub(super) struct Seed<'a> {
    /// Its waves in their order: couplings into the slow ones, amplitudes of the others.
    pub sown: &'a [Block],
    /// For each wave here its number there, `usize::MAX` for one that is new.
    pub places: &'a [usize],
    /// Whether the second half is wanted.
    pub second: bool,
}

/// How an element came out.
#[derive(Debug, Clone, Copy)]
pub(super) struct Found {
    pub sweeps: usize,
    /// Waves worked out in all sweeps.
    pub updates: usize,
    pub converged: bool,
    /// Estimated error of the state at the end.
    pub at_end: f64,
    /// Estimated error of the state within.
    pub within: f64,
}

impl<'w> Element<'w> {
    pub fn new(waves: &'w Waves, picture: &Picture) -> Self {
        Element {
            waves,
            width: Width::chosen(),
            length_s: f64::NAN,
            z: vec![0.0; waves.slow],
            turnings: vec![Turning::default(); waves.slow],
            squares: Vec::new(),
            responses: Vec::new(),
            ends: Vec::new(),
            coefficients: vec![Block::default(); waves.coefficients.len()],
            rests: waves.coefficients.iter().map(|coefficient| (coefficient.rest_hz != 0.0).then(Box::default)).collect(),
            envelopes: Vec::with_capacity(picture.turnings.len()),
            phases: Vec::with_capacity(picture.turnings.len()),
            u: vec![Block::default(); waves.list.len()],
            starts: vec![Complex64::default(); waves.slow],
            from: vec![Complex64::default(); waves.dim],
            diagonal: picture.diagonal.clone(),
            f: vec![Block::default(); waves.slow],
            prepared_for: f64::NAN,
        }
    }

    /// Moves the element to start at `tau_s` of its segment and last `length_s`.
    pub fn place(&mut self, picture: &Picture, terms: &[Term], tau_s: f64, length_s: f64, tolerance: f64) {
        self.length_s = length_s;
        if self.prepared_for != length_s {
            self.prepared_for = length_s;
            self.width.run(Prepare { element: self, tolerance });
        }
        let nodes = &RULE.nodes.0;
        self.envelopes.clear();
        for term in terms {
            let mut block = Block::default();
            if term.is_constant() {
                let value = term.slow(tau_s) * length_s;
                block = Block { re: Eight::all(value.re), im: Eight::all(value.im) };
            } else {
                for (i, node) in nodes.iter().enumerate() {
                    block.set(i, term.slow(tau_s + node * length_s) * length_s);
                }
            }
            self.envelopes.push(block);
        }
        self.phases.clear();
        for group in &picture.turnings {
            let turned = turns(group.turns_hz, tau_s);
            self.phases.push(cis_turns(-group.term.map_or(turned, |k| terms[k].phase_turns + turned)));
        }
        self.width.run(Multiply { element: self, picture });
    }

    /// Carries `state` (amplitudes in the picture) through the element into `end`, with what is left of the iteration below `tolerance`.
    /// It starts from nothing, or from the couplings that a coarser run found in the element of which this is a half.
    pub fn solve(&mut self, state: &[Complex64], end: &mut [Complex64], tolerance: f64, seed: Option<Seed>) -> Found {
        self.from.copy_from_slice(state);
        self.width.run(Solve { element: self, state, end, tolerance, seed })
    }

    /// What a finer run may start from, after `solve`: couplings into the slow waves, amplitudes of the others.
    pub fn found(&self, into: &mut Vec<Block>) {
        into.extend_from_slice(&self.f);
        into.extend_from_slice(&self.u[self.waves.slow..]);
    }

    /// The state at the part x of the element, after `solve`.
    pub fn state_at(&self, x: f64, into: &mut [Complex64]) {
        let slow = self.waves.slow;
        let rule = &*RULE;
        let mut p = [0.0; NODES];
        legendre(x, &mut p);
        let weights = Eight(std::array::from_fn(|j| (0..NODES).map(|k| p[k] * rule.to_legendre[j].0[k]).sum()));
        for level in &self.waves.idle {
            into[*level] = self.from[*level] * self.idle_phase(*level, x * self.length_s);
        }
        for j in 0..slow {
            let (phase, moments) = moments_at(self.z[j], x);
            let mut sum = Complex64::default();
            for (moment, row) in moments.iter().zip(&rule.legendre_rows) {
                sum += moment * dot(row, &self.f[j]);
            }
            into[self.waves.list[j].level] = phase * self.starts[j] + Complex64::new(sum.im, -sum.re);
        }
        for (wave, u) in self.waves.list.iter().zip(&self.u).skip(slow) {
            into[wave.level] += dot(&weights, u) * cis_turns(-turns(wave.turns_hz, x * self.length_s));
        }
    }

    /// What a level that nothing reaches turns by.
    fn idle_phase(&self, level: usize, tau_s: f64) -> Complex64 {
        cis_turns(-turns(self.diagonal[level] / RAD_PER_TURN, tau_s))
    }

    /// Couplings from all other waves into one, at the nodes.
    #[inline(always)]
    fn couplings<S: Simd>(&self, simd: S, index: usize) -> (S::V, S::V) {
        let zero = simd.splat(0.0);
        let mut sum = (zero, zero);
        for bundle in &self.waves.bundles[self.waves.list[index].bundles.clone()] {
            let mut part = (zero, zero);
            for edge in &self.waves.edges[bundle.edges.clone()] {
                let u = &self.u[edge.from];
                let (re, im) = (simd.load(&u.re), simd.load(&u.im));
                let value = simd.splat(edge.value.re);
                part = (part.0.plus(value, re), part.1.plus(value, im));
                if edge.value.im != 0.0 {
                    let value = simd.splat(edge.value.im);
                    part = (part.0.minus(value, im), part.1.plus(value, re));
                }
            }
            let c = &self.coefficients[bundle.coefficient];
            let (re, im) = (simd.load(&c.re), simd.load(&c.im));
            sum = (sum.0.plus(re, part.0).minus(im, part.1), sum.1.plus(re, part.1).plus(im, part.0));
        }
        sum
    }

    /// One sweep through the slow waves; gives the root of the mean square of their change, summed over levels.
    #[inline(always)]
    fn slow_sweep<S: Simd>(&mut self, simd: S) -> f64 {
        let mut change = simd.splat(0.0);
        for j in 0..self.waves.slow {
            let f = self.couplings(simd, j);
            let turning = &self.turnings[j];
            let start = free(simd, &turning.phases, self.starts[j]);
            let u = respond(simd, &turning.response, f, start);
            let old = &mut self.u[j];
            let apart = (u.0 - simd.load(&old.re), u.1 - simd.load(&old.im));
            change = change.plus(apart.0, apart.0).plus(apart.1, apart.1);
            u.0.store(&mut old.re);
            u.1.store(&mut old.im);
        }
        mean(change)
    }

    /// The waves that follow and are larger than `above`, and the starts of the slow ones with them.
    #[inline(always)]
    fn follow<S: Simd>(&mut self, simd: S, state: &[Complex64], above: f64) -> (usize, f64) {
        let slow = self.waves.slow;
        let zero = simd.splat(0.0);
        let (mut updates, mut change) = (0, zero);
        for (start, wave) in self.starts.iter_mut().zip(&self.waves.list[..slow]) {
            *start = state[wave.level];
        }
        for index in slow..self.waves.list.len() {
            if self.waves.list[index].size < above {
                self.starts[self.waves.list[index].slow] -= dot(&RULE.at_start, &self.u[index]);
                continue;
            }
            updates += 1;
            let f = self.couplings(simd, index);
            let u = match self.responses[index - slow] {
                Response::Matrix(square) => respond(simd, &self.squares[square], f, (zero, zero)),
                Response::Scale(scale) => (simd.splat(scale) * f.0, simd.splat(scale) * f.1),
            };
            let into = &mut self.u[index];
            let apart = (u.0 - simd.load(&into.re), u.1 - simd.load(&into.im));
            change = change.plus(apart.0, apart.0).plus(apart.1, apart.1);
            u.0.store(&mut into.re);
            u.1.store(&mut into.im);
            self.starts[self.waves.list[index].slow] -= dot(&RULE.at_start, into);
        }
        (updates, mean(change))
    }

    /// All waves as a coarser run has them; the slow ones as they follow from its couplings.
    #[inline(always)]
    fn sow<S: Simd>(&mut self, simd: S, seed: &Seed) {
        let table = &RULE.halves[usize::from(seed.second)];
        let slow = self.waves.slow;
        for index in slow..self.waves.list.len() {
            if seed.places[index] == usize::MAX {
                continue;
            }
            let wave = &self.waves.list[index];
            let phase = if seed.second { self.ends[index - slow] } else { Complex64::new(1.0, 0.0) };
            let (re, im) = multiply(simd, table, &seed.sown[seed.places[index]]);
            let (a, b) = (simd.splat(phase.re), simd.splat(phase.im));
            let into = &mut self.u[index];
            (re * a).minus(im, b).store(&mut into.re);
            (re * b).plus(im, a).store(&mut into.im);
            self.starts[wave.slow] -= dot(&RULE.at_start, into);
        }
        for j in 0..slow {
            if seed.places[j] == usize::MAX {
                continue;
            }
            // couplings are over the length, which is halved
            let f = multiply(simd, table, &seed.sown[seed.places[j]]);
            let f = (f.0 * simd.splat(0.5), f.1 * simd.splat(0.5));
            let turning = &self.turnings[j];
            let start = free(simd, &turning.phases, self.starts[j]);
            let u = respond(simd, &turning.response, f, start);
            u.0.store(&mut self.u[j].re);
            u.1.store(&mut self.u[j].im);
        }
    }

    /// The state at the end, and what the last Legendre coefficients say of the error.
    #[inline(always)]
    fn finish<S: Simd>(&mut self, simd: S, state: &[Complex64], end: &mut [Complex64], found: &mut Found) {
        let slow = self.waves.slow;
        let rule = &*RULE;
        for level in &self.waves.idle {
            end[*level] = state[*level] * self.idle_phase(*level, self.length_s);
        }
        for j in 0..slow {
            let f = self.couplings(simd, j);
            let into = &mut self.f[j];
            f.0.store(&mut into.re);
            f.1.store(&mut into.im);
            let turning = &self.turnings[j];
            let (re, im) = (simd.load(&turning.end_response.re), simd.load(&turning.end_response.im));
            let mut sum = Block::default();
            (re * f.0).minus(im, f.1).store(&mut sum.re);
            (re * f.1).plus(im, f.0).store(&mut sum.im);
            end[self.waves.list[j].level] =
                turning.end_phase * self.starts[j] + Complex64::new(sum.re.0.iter().sum(), sum.im.0.iter().sum());
            let q = multiply(simd, &rule.to_legendre, into);
            let mut square = Eight::all(0.0);
            (q.0 * q.0).plus(q.1, q.1).store(&mut square);
            // the coefficient of P_8, by the fall over two degrees before
            let (late, early) = (square.0[7].max(square.0[6]), square.0[5].max(square.0[4]));
            let tail = if late < early { late / early.sqrt() } else { late.sqrt() };
            let within = 0.06 * tail;
            found.within = larger(found.within, within);
            // waves that follow have no better ends than their polynomials
            let others = 2.0 * tail / (self.waves.strongest_rad_s * self.length_s);
            found.at_end = larger(found.at_end, tail * oscillating(self.z[j]) + within * tail + others);
        }
        for ((wave, u), phase) in self.waves.list.iter().zip(&self.u).skip(slow).zip(&self.ends) {
            end[wave.level] += dot(&rule.at_end, u) * phase;
        }
    }
}

/// Root of the mean over the nodes.
#[inline(always)]
fn mean<V: Lane>(squares: V) -> f64 {
    let mut all = Eight::all(0.0);
    squares.store(&mut all);
    (all.0.iter().sum::<f64>() / NODES as f64).sqrt()
}

/// The larger of two, or what is not a number.
fn larger(a: f64, b: f64) -> f64 {
    if b > a || b.is_nan() {
        b
    } else {
        a
    }
}

/// The matrices of a length.
struct Prepare<'a, 'w> {
    element: &'a mut Element<'w>,
    tolerance: f64,
}

impl Kernel for Prepare<'_, '_> {
    type Output = ();

    #[inline(always)]
    fn run<S: Simd>(self, simd: S) {
        let Prepare { element, tolerance } = self;
        let (slow, fast) = element.waves.list.split_at(element.waves.slow);
        for (j, wave) in slow.iter().enumerate() {
            element.z[j] = wave.rest_rad_s * element.length_s;
            element.turnings[j].fill(simd, element.z[j]);
        }
        for (rest, coefficient) in element.rests.iter_mut().zip(&element.waves.coefficients) {
            if let Some(rest) = rest {
                let angle = simd.splat(rad_s(coefficient.rest_hz) * element.length_s) * simd.load(&RULE.nodes);
                let (sine, cosine) = sin_cos(simd, angle);
                cosine.store(&mut rest.re);
                (-sine).store(&mut rest.im);
            }
        }
        element.squares.clear();
        element.squares.reserve_exact(fast.len());
        element.responses.clear();
        element.ends.clear();
        for wave in fast {
            element.ends.push(cis_turns(-turns(wave.turns_hz, element.length_s)));
            let z = wave.rest_rad_s * element.length_s;
            // orders until what is left out cannot be seen
            let (mut orders, mut left) = (1, wave.size * (FALL_RAD / z.abs()));
            while orders < NODES && left > 0.1 * tolerance {
                orders += 1;
                left *= FALL_RAD / z.abs();
            }
            if orders == 1 {
                element.responses.push(Response::Scale(-1.0 / z));
            } else {
                element.responses.push(Response::Matrix(element.squares.len()));
                let mut square = [Block::default(); NODES];
                following(simd, z, orders, &mut square);
                element.squares.push(square);
            }
        }
    }
}

/// The coefficients of an element from its envelopes and phases.
struct Multiply<'a, 'w> {
    element: &'a mut Element<'w>,
    picture: &'a Picture,
}

impl Kernel for Multiply<'_, '_> {
    type Output = ();

    #[inline(always)]
    fn run<S: Simd>(self, simd: S) {
        let Multiply { element, picture } = self;
        let rests = element.rests.iter();
        for ((out, coefficient), rest) in element.coefficients.iter_mut().zip(&element.waves.coefficients).zip(rests) {
            let phase = element.phases[coefficient.group];
            let (a, b) = (simd.splat(phase.re), simd.splat(phase.im));
            let mut value = match picture.turnings[coefficient.group].term {
                Some(k) => {
                    let slow = &element.envelopes[k];
                    let (re, im) = (simd.load(&slow.re), simd.load(&slow.im));
                    ((re * a).minus(im, b), (re * b).plus(im, a))
                }
                None => (simd.splat(element.length_s) * a, simd.splat(element.length_s) * b),
            };
            if coefficient.conjugate {
                value.1 = -value.1;
            }
            if let Some(rest) = rest {
                let (re, im) = (simd.load(&rest.re), simd.load(&rest.im));
                value = ((value.0 * re).minus(value.1, im), (value.0 * im).plus(value.1, re));
            }
            value.0.store(&mut out.re);
            value.1.store(&mut out.im);
        }
    }
}

/// Each further order of a wave that follows is smaller by this over its turning: slopes of amplitudes over an element.
const FALL_RAD: f64 = 20.0;

/// The iteration of an element for one column.
struct Solve<'a, 'w> {
    element: &'a mut Element<'w>,
    state: &'a [Complex64],
    end: &'a mut [Complex64],
    tolerance: f64,
    seed: Option<Seed<'a>>,
}

impl Kernel for Solve<'_, '_> {
    type Output = Found;

    #[inline(always)]
    fn run<S: Simd>(self, simd: S) -> Found {
        let Solve { element, state, end, tolerance, seed } = self;
        let (slow, all) = (element.waves.slow, element.waves.list.len());
        for j in 0..slow {
            let start = state[element.waves.list[j].level];
            element.starts[j] = start;
            let u = free(simd, &element.turnings[j].phases, start);
            u.0.store(&mut element.u[j].re);
            u.1.store(&mut element.u[j].im);
        }
        element.u[slow..].fill(Block::default());
        let strength = element.waves.strength;
        // how far the slow waves have moved since the others last followed
        let mut stale = if all > slow { 1.0 } else { 0.0 };
        let mut passes = 0;
        let mut last = 0.0;
        let mut found = Found { sweeps: 0, updates: 0, converged: false, at_end: 0.0, within: 0.0 };
        if let Some(seed) = seed {
            element.sow(simd, &seed);
            if all > slow {
                stale = element.follow(simd, state, 0.0).1;
                passes = 2;
            }
            found.updates += all;
        }
        while found.sweeps < MOST_SWEEPS {
            found.sweeps += 1;
            found.updates += slow;
            let change = element.slow_sweep(simd);
            if !(change < 1e6) {
                break;
            }
            if all > slow {
                stale = change.max(stale);
            }
            let left = change * (change / last).min(0.9);
            last = change;
            let due = stale * strength > tolerance;
            if due && (left < tolerance || change < 0.05 * stale) {
                // small ones wait at first until the large ones are roughly right, and later where they would not move
                let above = match passes {
                    0 if change > 1e-3 => SMALL * strength,
                    0 | 1 => 0.0,
                    _ => 0.1 * tolerance / stale,
                };
                let (updates, moved) = element.follow(simd, state, above);
                found.updates += updates;
                // each follows the others that follow too, with about the same strength
                stale = left + moved;
                if passes == 0 && above > 0.0 {
                    stale = stale.max(SMALL);
                }
                passes += if above > 0.0 { 1 } else { 2 };
            } else if left < tolerance {
                found.converged = true;
                break;
            }
        }
        element.finish(simd, state, end, &mut found);
        found
    }
}

/// A bound of |integral of exp(-i z (1 - s)) P_8(s) ds| over s from 0 to 1, the spherical Bessel function of order 8 of z/2:
/// (z/2)^8/17!! while small, 2/z when large.
fn oscillating(z: f64) -> f64 {
    let half = 0.5 * z.abs();
    (half * half / 76.5).powi(4).min(1.0 / half.max(5.0))
}

#[inline(always)]
fn free<S: Simd>(simd: S, phases: &Block, start: Complex64) -> (S::V, S::V) {
    let (re, im) = (simd.load(&phases.re), simd.load(&phases.im));
    let (a, b) = (simd.splat(start.re), simd.splat(start.im));
    ((re * a).minus(im, b), (re * b).plus(im, a))
}

#[inline(always)]
fn dot(weights: &Eight, u: &Block) -> Complex64 {
    let (mut re, mut im) = (0.0, 0.0);
    for i in 0..NODES {
        re += weights.0[i] * u.re.0[i];
        im += weights.0[i] * u.im.0[i];
    }
    Complex64::new(re, im)
}

/// A real matrix times values.
#[inline(always)]
fn multiply<S: Simd>(simd: S, table: &Table, values: &Block) -> (S::V, S::V) {
    let mut sum = (simd.splat(0.0), simd.splat(0.0));
    for (i, column) in table.iter().enumerate() {
        let column = simd.load(column);
        sum = (sum.0.plus(column, simd.splat(values.re.0[i])), sum.1.plus(column, simd.splat(values.im.0[i])));
    }
    sum
}

/// `start` + `matrix` times `f`; four sums side by side, since each waits for itself.
#[inline(always)]
fn respond<S: Simd>(simd: S, matrix: &Square, f: (S::V, S::V), start: (S::V, S::V)) -> (S::V, S::V) {
    let mut plain = Block::default();
    f.0.store(&mut plain.re);
    f.1.store(&mut plain.im);
    let zero = simd.splat(0.0);
    let (mut rr, mut ii, mut ri, mut ir) = (start.0, zero, start.1, zero);
    for j in 0..NODES {
        let column = &matrix[j];
        let (re, im) = (simd.splat(plain.re.0[j]), simd.splat(plain.im.0[j]));
        let (a, b) = (simd.load(&column.re), simd.load(&column.im));
        rr = rr.plus(a, re);
        ii = ii.plus(b, im);
        ri = ri.plus(a, im);
        ir = ir.plus(b, re);
    }
    (rr - ii, ri + ir)
}
