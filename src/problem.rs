//! The type in the middle: what every method of [`crate::propagate`] sees, and all it sees.
//!
//! Time is cut into segments. In the segment that starts at t0, with tau = t - t0,
//!
//! ```text
//! H(t) = A + sum_k ( c_k(tau) exp(-2 pi i (p_k + f_k tau + sweeps_k(tau))) B_k + adjoint )
//! ```
//!
//! with constant matrices A (Hermitian, rad/s) and B_k (no dimension, any matrix), a turning frequency f_k in turns per second
//! (0 where nothing turns), the phase p_k in turns that the turning has reached at the start of the segment (already
//! reduced modulo one turn), the sweeps of chirped carriers, and a slow complex envelope c_k in rad/s. i d(psi)/dt = H(t) psi, hbar = 1.
//!
//! The turning is kept apart from the envelope because frames rewrite it. A method never asks where a coefficient came from.

mod channel;
mod jump;
mod sparse;
mod state;

use std::fmt::Debug;
use std::ops::Range;
use std::sync::Arc;

use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

use crate::units::{cis_turns, nearest};

pub use channel::Channel;
pub use jump::{Jump, TurningPart};
pub use sparse::Sparse;
pub use state::{Start, State};

/// A dense complex matrix, row and column in the order of the basis.
pub type Matrix = DMatrix<Complex64>;
/// Complex amplitudes in the order of the basis.
pub type Vector = DVector<Complex64>;

/// A slow complex envelope as a smooth function of time; kinks and jumps are segment ends, never inside.
pub trait Slow: Debug + Send + Sync {
    /// Value (no dimension) at `t_s` seconds from the start of the pulse.
    fn at(&self, t_s: f64) -> Complex64;
}

/// The coefficient c_k of one term within one segment.
#[derive(Debug, Clone)]
pub enum Envelope {
    /// The same value, in rad/s, all through the segment.
    Constant(Complex64),
    /// `scale * shape(since_s + tau)`.
    Smooth {
        /// The function of the time since the pulse began.
        shape: Arc<dyn Slow>,
        /// How long the pulse had lasted at the start of the segment, s.
        since_s: f64,
        /// Complex size in rad/s.
        scale: Complex64,
    },
}

impl Envelope {
    /// c(tau) in rad/s, tau in seconds from the start of the segment.
    pub fn at(&self, tau_s: f64) -> Complex64 {
        match self {
            Envelope::Constant(value) => *value,
            Envelope::Smooth { shape, since_s, scale } => scale * shape.at(since_s + tau_s),
        }
    }
}

/// A swept turning: turns beyond those of its centre, as a smooth function of time.
pub trait Sweep: Debug + Send + Sync {
    /// Turns since the start of the pulse, beyond those of the centre.
    fn turns(&self, t_s: f64) -> f64;
    /// Their rate, Hz.
    fn offset_hz(&self, t_s: f64) -> f64;
}

/// A sweep that a term takes part in; frames change how often.
#[derive(Debug, Clone)]
pub struct Chirped {
    /// The sweep.
    pub sweep: Arc<dyn Sweep>,
    /// How long its pulse had lasted at the start of the segment, s.
    pub since_s: f64,
    /// The term turns by exp(-2 pi i times sweep).
    pub times: f64,
}

/// One turning term `c exp(-2 pi i (p + f tau + sweeps)) B + adjoint` of one segment.
#[derive(Debug, Clone)]
pub struct Term {
    /// Which of [`Problem::matrices`] is B.
    pub matrix: usize,
    /// f, in turns per second; 0 where nothing turns.
    pub turns_hz: f64,
    /// p, in turns, at the start of the segment, between -1 and 1.
    pub phase_turns: f64,
    /// c, in rad/s.
    pub envelope: Envelope,
    /// Swept carriers that it turns with; mostly none.
    pub chirps: Vec<Chirped>,
}

impl Term {
    /// The envelope with its sweeps, but without the even turning, in rad/s.
    pub fn slow(&self, tau_s: f64) -> Complex64 {
        let value = self.envelope.at(tau_s);
        if self.chirps.is_empty() {
            return value;
        }
        let turns: f64 = self.chirps.iter().map(|chirp| chirp.times * chirp.sweep.turns(chirp.since_s + tau_s)).sum();
        value * cis_turns(-turns)
    }

    /// Whether nothing but the even turning changes within the segment.
    pub fn is_constant(&self) -> bool {
        self.chirps.is_empty() && matches!(self.envelope, Envelope::Constant(_))
    }
}

/// A moment as the unevaluated sum of two doubles, so that nanoseconds stay exact beside seconds.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Instant {
    high: f64,
    low: f64,
}

impl Instant {
    /// The moment `s` seconds after the start of the sequence.
    pub fn at(s: f64) -> Self {
        Instant { high: s, low: 0.0 }
    }

    /// This moment moved by `s` seconds (Knuth's two-sum, exact but for the last bit of the low part).
    pub fn after(self, s: f64) -> Self {
        let sum = self.high + s;
        let part = sum - self.high;
        let lost = (self.high - (sum - part)) + (s - part) + self.low;
        let high = sum + lost;
        Instant { high, low: lost - (high - sum) }
    }

    /// This moment counted from `earlier`.
    pub fn minus(self, earlier: Instant) -> Instant {
        Instant::default().after(self.high).after(-earlier.high).after(self.low).after(-earlier.low)
    }

    /// Seconds from `earlier` to this moment.
    pub fn since(self, earlier: Instant) -> f64 {
        (self.high - earlier.high) + (self.low - earlier.low)
    }

    /// Seconds from the start of the sequence.
    pub fn seconds(self) -> f64 {
        self.high + self.low
    }

    /// `hz` times this moment in turns, less the whole turns; correct to about 1e-16 of a turn for any product below 2^53.
    pub fn turns(self, hz: f64) -> f64 {
        let product = hz * self.high;
        let rest = hz.mul_add(self.high, -product);
        let whole = product - nearest(product);
        let turns = whole + (rest + hz * self.low);
        turns - nearest(turns)
    }
}

/// A stretch of time in which every envelope is constant or smooth.
#[derive(Debug, Clone)]
pub struct Segment {
    /// When it starts.
    pub start: Instant,
    /// How long it lasts, s; kept apart from the start so that it is exact.
    pub length_s: f64,
    /// Its terms, as a range of [`Problem::terms`].
    pub terms: Range<usize>,
}

/// A time at which something is recorded.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Moment {
    /// Segment in which it lies.
    pub segment: usize,
    /// Seconds from the start of that segment, from 0 to its length.
    pub offset_s: f64,
    /// Seconds from the start of the sequence, as the user gave it.
    pub time_s: f64,
}

/// A system: Hamiltonian on a timeline, jumps, start and moments to record, in the frame that the run states.
#[derive(Debug, Clone)]
pub struct Problem {
    /// A, in rad/s, Hermitian, `dim` x `dim`.
    pub statics: Arc<Matrix>,
    /// The matrices B_k, `dim` x `dim`.
    pub matrices: Arc<Vec<Matrix>>,
    /// Consecutive, without gap or overlap, first at time 0.
    pub segments: Vec<Segment>,
    /// Terms of all segments, those of one segment together.
    pub terms: Vec<Term>,
    /// The state at time 0.
    pub start: Start,
    /// What the surroundings do; empty for a closed system.
    pub jumps: Arc<Vec<Jump>>,
    /// In order of time; the last one is the end of the sequence.
    pub moments: Vec<Moment>,
}

impl Problem {
    /// Number of basis states.
    pub fn dim(&self) -> usize {
        self.statics.nrows()
    }

    /// Whether states are carried as density matrices: something jumps, or the start is mixed.
    pub fn is_open(&self) -> bool {
        self.jumps.iter().any(|jump| jump.rate_per_s > 0.0) || matches!(self.start, Start::Mixed(_))
    }

    /// The terms of one segment.
    pub fn terms_of(&self, segment: &Segment) -> &[Term] {
        &self.terms[segment.terms.clone()]
    }

    /// H in rad/s at `tau_s` seconds from the start of `segment`.
    pub fn hamiltonian(&self, segment: &Segment, tau_s: f64) -> Matrix {
        let mut h = (*self.statics).clone();
        for term in self.terms_of(segment) {
            let c = term.slow(tau_s) * cis_turns(-(term.phase_turns + term.turns_hz * tau_s));
            let b = &self.matrices[term.matrix];
            for j in 0..b.ncols() {
                for i in 0..b.nrows() {
                    let entry = c * b[(i, j)];
                    h[(i, j)] += entry;
                    h[(j, i)] += entry.conj();
                }
            }
        }
        h
    }

    /// The first `length_s` seconds alone, with their end as the only moment.
    pub fn first(&self, length_s: f64) -> Problem {
        let mut segments: Vec<Segment> = Vec::new();
        let mut left = length_s;
        for segment in &self.segments {
            if left <= 0.0 {
                break;
            }
            // what is left by rounding alone is no further segment
            let cut = segment.length_s.min(left);
            left -= cut;
            segments.push(Segment { length_s: cut, ..segment.clone() });
            if left <= 1e-12 * length_s {
                break;
            }
        }
        let end = Moment {
            segment: segments.len().saturating_sub(1),
            offset_s: segments.last().map_or(0.0, |last| last.length_s),
            time_s: length_s,
        };
        Problem { segments, moments: vec![end], ..self.clone() }
    }

    /// Length of the whole sequence, s.
    pub fn length_s(&self) -> f64 {
        self.segments.last().map_or(0.0, |last| last.start.after(last.length_s).seconds())
    }
}
