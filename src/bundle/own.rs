//! Points whose pulses differ in shape, length or sweep: each has its own timeline, and they share the number of steps alone.
//!
//! H(t) = A + sum_k (v_k(t) B_k + adjoint) with v_k the sum of all terms of the matrix B_k: its real part goes with B_k + adjoint, its
//! imaginary part with i B_k + adjoint. The number of steps of a segment follows from an angle: the largest among the points of its length
//! times |A|, of the integral of |v_k| times |B_k + adjoint|, and of the angle by which v_k turns.

use num_complex::Complex64;

use super::sizes::pack;
use crate::plan::{Mover, Plan};
use crate::problem::{Matrix, Problem, Segment, Term};
use crate::propagate::lanes::{parabola, Eight, Group, OwnStretch, Recipe, Summed, GAUSS};
use crate::units::{cis_turns, RAD_PER_TURN};
use std::sync::Arc;

/// Angle added to that of a segment, rad: a shape takes some steps however weak it is.
const SHAPE_RAD: f64 = 4.0;
/// Moments at which the size of a term is looked at.
const LOOKS: usize = 9;
/// Most steps of one segment.
const MOST_STEPS: f64 = 1e5;
/// Constant segments go into one stretch up to this ratio of their angles.
const ALIKE: f64 = 4.0;

/// Eight points with their own timelines.
#[derive(Debug)]
pub(super) struct Own<'p> {
    movers: Vec<Mover<'p>>,
}

/// What is carried: entries and stretches.
#[derive(Debug)]
pub(super) struct Filled {
    pub group: Group,
    pub stretches: Vec<Summed>,
    /// Sum of the angles of all segments, rad, and number of steps.
    pub angle: f64,
    pub steps: usize,
}

impl<'p> Own<'p> {
    /// For the points of a plan; laid out at `sample`.
    pub fn new(plan: &'p Plan, names: &[&str], sample: &[f64]) -> Result<Own<'p>, String> {
        let one = || plan.mover_from(names, sample).map_err(|_| "a sample was refused".to_string());
        let movers = (0..8).map(|_| one()).collect::<Result<Vec<_>, _>>()?;
        if movers[0].moves_more_than_pulses() {
            return Err("the start or the surroundings move".to_string());
        }
        Ok(Own { movers })
    }

    /// Registers of a lane.
    pub fn registers(&self, lane: usize) -> &[f64] {
        &self.movers[lane].point().values
    }

    /// Moves the lanes to `points` (those left over to the last), and makes steps at a rate (steps for a radian or so).
    pub fn fill(&mut self, points: &[Vec<f64>], rate: f64, recipe: Option<Arc<Recipe>>) -> Result<Filled, String> {
        for (lane, mover) in self.movers.iter_mut().enumerate() {
            let Some(point) = points.get(lane).or(points.last()) else { return Err("there are no points".to_string()) };
            mover.at(point).map_err(|_| "a point was refused".to_string())?;
        }
        let problems: Vec<&Problem> = self.movers.iter().map(|mover| mover.point().problem()).collect();
        Filled::new(&problems, rate, recipe)
    }
}

impl Filled {
    /// Eight problems and their steps at a rate.
    pub fn new(problems: &[&Problem], rate: f64, recipe: Option<Arc<Recipe>>) -> Result<Filled, String> {
        let first = problems[0];
        let (dim, count) = (first.dim(), first.matrices.len());
        if problems.iter().any(|other| other.segments.len() != first.segments.len() || other.matrices.len() != count || other.dim() != dim)
        {
            return Err("its pulses have another layout".to_string());
        }
        let group = group(problems, recipe);
        let mut steps = Steps { matrices: count, ..Steps::default() };
        for k in 0..first.segments.len() {
            let lanes: Vec<Lane> = problems.iter().map(|problem| Lane::new(problem, &problem.segments[k])).collect();
            steps.segment(&lanes, rate)?;
        }
        steps.close();
        let (angle, count) = (steps.angle, steps.made.iter().map(|made| made.lengths_s.len()).sum());
        Ok(Filled { group, stretches: steps.finished(), angle, steps: count })
    }
}

/// A and the two channels of each matrix, of eight points.
fn group(problems: &[&Problem], recipe: Option<Arc<Recipe>>) -> Group {
    let dim = problems[0].dim();
    let mut packed = vec![0.0; dim * dim];
    let mut of = |entry: &dyn Fn(&Problem, usize, usize) -> Complex64| {
        let mut eights = vec![Eight::all(0.0); dim * dim];
        for (lane, problem) in problems.iter().enumerate() {
            pack(dim, &mut packed, |j, k| entry(problem, j, k));
            eights.iter_mut().zip(&packed).for_each(|(eight, value)| eight.0[lane] = *value);
        }
        eights
    };
    let statics = of(&|problem, j, k| problem.statics[(j, k)]);
    let mut channels = Vec::new();
    for matrix in 0..problems[0].matrices.len() {
        for factor in [Complex64::from(1.0), Complex64::i()] {
            channels.push(of(&|problem, j, k| {
                let b = &problem.matrices[matrix];
                factor * b[(j, k)] + (factor * b[(k, j)]).conj()
            }));
        }
    }
    Group { dim, statics, channels, recipe }
}

/// One segment of one point.
struct Lane<'a> {
    length_s: f64,
    terms: &'a [Term],
    /// Angle, rad.
    angle: f64,
    constant: bool,
}

impl<'a> Lane<'a> {
    fn new(problem: &'a Problem, segment: &Segment) -> Lane<'a> {
        let (length_s, terms) = (segment.length_s, problem.terms_of(segment));
        let mut angle = size(&problem.statics, false) * length_s;
        for term in terms {
            let largest = size(&problem.matrices[term.matrix], true);
            let looks = (0..LOOKS).map(|k| length_s * (k as f64 + 0.5) / LOOKS as f64);
            angle += looks.map(|tau_s| term.envelope.at(tau_s).norm()).sum::<f64>() * largest * length_s / LOOKS as f64;
            angle += RAD_PER_TURN * length_s * term.turns_hz.abs();
            for chirp in &term.chirps {
                let looks = (0..LOOKS).map(|k| chirp.since_s + length_s * (k as f64 + 0.5) / LOOKS as f64);
                let turns = looks.map(|t_s| chirp.sweep.offset_hz(t_s).abs()).sum::<f64>() * length_s / LOOKS as f64;
                angle += RAD_PER_TURN * chirp.times.abs() * turns;
            }
        }
        let constant = terms.iter().all(|term| term.is_constant() && term.turns_hz == 0.0);
        Lane { length_s, terms, angle, constant }
    }

    /// Adds v of every matrix at a moment.
    fn values(&self, tau_s: f64, into: &mut [Complex64]) {
        into.fill(Complex64::default());
        for term in self.terms {
            let turns = term.phase_turns + term.turns_hz * tau_s;
            let slow = term.slow(tau_s);
            into[term.matrix] += if turns == 0.0 { slow } else { slow * cis_turns(-turns) };
        }
    }
}

/// Frobenius norm of A without its trace, or of B + adjoint.
fn size(matrix: &Matrix, doubled: bool) -> f64 {
    if doubled {
        return (matrix + matrix.adjoint()).norm();
    }
    let mean = matrix.trace().re / matrix.nrows() as f64;
    (matrix.norm_squared() - matrix.nrows() as f64 * mean * mean).max(0.0).sqrt()
}

/// Stretches while they are made, with two channels for each matrix.
#[derive(Default)]
struct Steps {
    matrices: usize,
    made: Vec<OwnStretch>,
    open: OwnStretch,
    /// Angle of the first segment of the open stretch.
    first_angle: f64,
    angle: f64,
}

impl Steps {
    fn segment(&mut self, lanes: &[Lane], rate: f64) -> Result<(), String> {
        let angle = lanes.iter().map(|lane| lane.angle).fold(0.0, f64::max);
        if lanes.iter().all(|lane| lane.length_s == 0.0) {
            return Ok(());
        }
        let bare = lanes.iter().all(|lane| lane.constant);
        let count = if bare { 1.0 } else { (rate * (angle + SHAPE_RAD)).ceil().max(1.0) };
        if !(count <= MOST_STEPS) {
            return Err("it takes too many steps".to_string());
        }
        self.angle += angle;
        let alike = bare && self.open.bare && angle <= ALIKE * self.first_angle && self.first_angle <= ALIKE * angle;
        if !alike {
            self.close();
            self.open.bare = bare;
            self.first_angle = angle;
        }
        let channels = 2 * self.matrices;
        let from = self.open.lengths_s.len();
        self.open.lengths_s.resize(from + count as usize, Eight::all(0.0));
        self.open.weights_s.resize((from + count as usize) * channels, [Eight::all(0.0); 3]);
        let mut values = vec![Complex64::default(); self.matrices];
        let mut moments = vec![[[0.0; 3]; 2]; self.matrices];
        for (lane, of) in lanes.iter().enumerate() {
            let h = of.length_s / count;
            for step in 0..count as usize {
                let middle = of.length_s * ((step as f64 + 0.5) / count);
                self.open.lengths_s[from + step].0[lane] = h;
                moments.fill([[0.0; 3]; 2]);
                for (x, weight) in if bare { &[(0.0, 1.0)][..] } else { &GAUSS[..] } {
                    of.values(middle + x * h, &mut values);
                    for (m, v) in moments.iter_mut().zip(&values) {
                        for (m, v) in m.iter_mut().zip([v.re, v.im]) {
                            let w = weight * v;
                            *m = [m[0] + w, m[1] + w * x, m[2] + w * x * x];
                        }
                    }
                }
                for (k, m) in moments.iter().flatten().enumerate() {
                    let weights = if bare { [h * m[0], 0.0, 0.0] } else { parabola(*m, h) };
                    let into = &mut self.open.weights_s[(from + step) * channels + k];
                    into.iter_mut().zip(weights).for_each(|(eight, weight)| eight.0[lane] = weight);
                }
            }
        }
        Ok(())
    }

    /// Ends the open stretch: channels in which nothing acts are left out.
    fn close(&mut self) {
        let open = std::mem::take(&mut self.open);
        if open.lengths_s.is_empty() {
            return;
        }
        let all = 2 * self.matrices;
        let largest = |k: usize| {
            let weights = open.weights_s.iter().skip(k).step_by(all.max(1));
            weights.flatten().flat_map(|eight| eight.0).fold(0.0f64, |a, b| a.max(b.abs()))
        };
        let sizes: Vec<f64> = (0..all).map(largest).collect();
        // what is left of a phase that cancels is rounding
        let channels: Vec<usize> = (0..all).filter(|k| sizes[*k] > 4.0 * f64::EPSILON * sizes[k ^ 1]).collect();
        let weights_s =
            if all == 0 { Vec::new() } else { open.weights_s.chunks_exact(all).flat_map(|of| channels.iter().map(|k| of[*k])).collect() };
        self.made.push(OwnStretch { channels, weights_s, ..open });
    }

    fn finished(self) -> Vec<Summed> {
        self.made.into_iter().map(OwnStretch::summed).collect()
    }
}
