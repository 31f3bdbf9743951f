//! Stretches in which H of the picture is constant: one exponential each, any length, exact to rounding.
//!
//! Every moment is reached from the start of the stretch (or of its piece) in one go, O(dim^2) each, so that rounding does not
//! grow with their number. A second resolution cuts the stretch into pieces. Stretches with the same terms and length share their
//! exponential.

use std::collections::HashMap;
use std::rc::Rc;

use num_complex::Complex64;

use super::exponential::Flow;
use super::run::{Eye, State, Stretch, Work};

/// The exponentials of the run so far, found by the bits of the terms.
pub(super) struct Flows {
    kept: HashMap<Vec<u64>, Rc<Flow>>,
    most: usize,
    key: Vec<u64>,
    h: Vec<Complex64>,
    psi: Vec<Complex64>,
    room: Vec<Complex64>,
}

impl Flows {
    /// Keeps at most about 32 MB of exponentials of `dim` levels.
    pub fn new(dim: usize) -> Self {
        let zero = Complex64::default();
        Flows {
            kept: HashMap::new(),
            most: (2_000_000 / (dim * dim).max(1)).clamp(4, 4096),
            key: Vec::new(),
            h: vec![zero; dim * dim],
            psi: vec![zero; dim],
            room: Vec::new(),
        }
    }

    fn of(&mut self, stretch: &Stretch, modes: bool) -> Rc<Flow> {
        self.key.clear();
        self.key.push(stretch.length_s.to_bits());
        for term in stretch.terms {
            let value = term.slow(0.0);
            let bits = [term.matrix as u64, term.turns_hz.to_bits(), term.phase_turns.to_bits(), value.re.to_bits(), value.im.to_bits()];
            self.key.extend_from_slice(&bits);
        }
        if let Some(flow) = self.kept.get(&self.key) {
            return flow.clone();
        }
        stretch.picture.fill(stretch.terms, 0.0, &mut self.h);
        let flow = Rc::new(Flow::new(&self.h, stretch.picture.dim, stretch.length_s, modes));
        if self.kept.len() < self.most {
            self.kept.insert(self.key.clone(), flow.clone());
        }
        flow
    }
}

/// Carries the state through the stretch in `pieces` equal pieces.
pub(super) fn pass(stretch: &Stretch, pieces: u32, flows: &mut Flows, state: &mut State, eye: &mut Eye, work: &mut Work) {
    let dim = state.dim;
    let timed = !state.time_in_s.is_empty();
    let flow = flows.of(stretch, timed);
    let mut next = 0;
    for piece in 1..=pieces {
        let from_s = stretch.length_s * f64::from(piece - 1) / f64::from(pieces);
        let to_s = stretch.length_s * f64::from(piece) / f64::from(pieces);
        while next < stretch.moments.len() && (piece == pieces || stretch.moments[next].offset_s <= to_s) {
            let since_s = stretch.moments[next].offset_s - from_s;
            work.step(flow.act(since_s, &state.amplitudes[..dim], &mut flows.psi, &mut flows.room), dim * dim);
            let mut time_in_s = state.time_in_s.clone();
            if timed {
                flow.dwell(since_s, &state.amplitudes[..dim], &mut time_in_s);
            }
            eye.see(stretch, next, &flows.psi, &time_in_s);
            next += 1;
        }
        if timed {
            flow.dwell(to_s - from_s, &state.amplitudes[..dim], &mut state.time_in_s);
        }
        let mut products = 0;
        for column in state.amplitudes.chunks_exact_mut(dim) {
            products += flow.act(to_s - from_s, column, &mut flows.psi, &mut flows.room);
            column.copy_from_slice(&flows.psi);
        }
        work.step(products, dim * dim);
    }
}
