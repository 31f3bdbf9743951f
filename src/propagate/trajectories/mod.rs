//! Quantum trajectories: an open system by pure states that jump at random, whose mean is the density matrix.
//!
//! Between jumps i d(psi)/dt = (H - i/2 sum of rate L+ L) psi; a jump happens when the norm squared has fallen to a random number
//! between 0 and 1, and is chosen among all by rate |L psi|^2 (J. Dalibard, Y. Castin, K. Molmer, Physical Review Letters 68, 580
//! (1992); R. Dum, P. Zoller, H. Ritsch, Physical Review A 45, 4879 (1992)). A state that is lost has no populations from then on.
//!
//! One trajectory sees the same random numbers at every fineness. All recorded quantities must be linear in the density matrix.
//!
//! | file | what it does |
//! |---|---|
//! | `leaving.rs` | G = sum of rate L+ L, and jumps, in the picture of a segment |
//! | `still.rs` | between jumps where nothing changes |
//! | `moving.rs` | between jumps where H changes |

mod leaving;
mod moving;
mod still;

use std::collections::HashMap;
use std::rc::Rc;

use num_complex::Complex64;

use super::asked::{Demand, Recorder};
use super::choose::Method;
use super::picture::{Kind, Picture, Pictures};
use crate::problem::{Problem, Segment, Start, State, Term, Vector};
use crate::quadrature::NODES;
use crate::random::Stream;
use leaving::Leaving;
use moving::{Course, Stages};
use still::{norm, Room, Still};

/// Levels from which on density matrices are too large.
pub const LARGEST_DENSITY: usize = 24;

/// How finely a trajectory is computed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Fine {
    /// Error of the amplitudes at the end that the steps aim at, and share of the norm within which jumps are met.
    pub tolerance: f64,
    /// Least pieces of each gap between moments.
    pub pieces: u32,
}

impl Fine {
    /// For an accuracy of the mean, coarser and finer.
    pub fn pair(accuracy: f64) -> [Fine; 2] {
        let tolerance = (0.01 * accuracy).clamp(1e-12, 1e-5);
        [Fine { tolerance, pieces: 1 }, Fine { tolerance: (tolerance / 30.0).max(1e-13), pieces: 2 }]
    }

    /// In words.
    pub fn words(&self) -> String {
        format!("tolerance {:.0e}", self.tolerance)
    }
}

/// Which gives the course of a segment in its picture.
struct Prepared {
    picture: Rc<Picture>,
    leaving: Rc<Leaving>,
    still: Option<Rc<Still>>,
}

/// Runs trajectories of one problem, one after another.
pub struct Trajectories<'p> {
    problem: &'p Problem,
    timed: bool,
    /// Pure states of the start with their weights, summed up.
    starts: Vec<(f64, Vector)>,
    prepared: Vec<Prepared>,
    room: Room,
    kicked: Vec<Complex64>,
    stages: Stages,
    shown: Vector,
}

impl<'p> Trajectories<'p> {
    /// For a problem; the propagator cannot be had.
    pub fn new(problem: &'p Problem, demand: &Demand) -> Trajectories<'p> {
        let mut pictures = Pictures::new(problem);
        let mut leavings: Vec<(Rc<Picture>, Rc<Leaving>)> = Vec::new();
        let mut leaving = |picture: &Rc<Picture>| {
            if let Some((_, found)) = leavings.iter().find(|(known, _)| Rc::ptr_eq(known, picture)) {
                return found.clone();
            }
            let made = Rc::new(Leaving::new(problem, picture));
            leavings.push((picture.clone(), made.clone()));
            made
        };
        let mut stills: HashMap<Vec<u64>, Rc<Still>> = HashMap::new();
        let prepared = problem.segments.iter().map(|segment| prepare(problem, segment, &mut pictures, &mut leaving, &mut stills)).collect();
        Trajectories {
            problem,
            timed: demand.time_in,
            starts: pure_parts(&problem.start),
            prepared,
            room: Room::default(),
            kicked: Vec::new(),
            stages: Stages::default(),
            shown: Vector::zeros(problem.dim()),
        }
    }

    /// How amplitudes are carried between jumps.
    pub fn method(&self) -> Method {
        if self.prepared.iter().any(|prepared| prepared.still.is_none()) {
            Method::Smooth
        } else {
            Method::ConstantSteps
        }
    }

    /// Steps of Runge-Kutta so far.
    pub fn steps(&self) -> u64 {
        self.stages.steps
    }

    /// One trajectory with the numbers of `stream`.
    pub fn run(&mut self, stream: &mut Stream, fine: &Fine, recorder: &mut dyn Recorder) {
        let problem = self.problem;
        let chance = stream.uniform();
        let last = self.starts.len() - 1;
        let chosen = self.starts.iter().position(|(sum, _)| chance < *sum);
        // a start with less than its whole trace is lost with the rest
        let whole = self.starts[last].0;
        let mut lost = chosen.is_none() && chance >= whole && whole < 1.0 - 1e-12;
        let mut psi: Vec<Complex64> = self.starts[chosen.unwrap_or(last)].1.as_slice().to_vec();
        let mut threshold = stream.uniform();
        let mut spent = vec![0.0; if self.timed { problem.dim() } else { 0 }];
        let total_s = problem.length_s().max(f64::MIN_POSITIVE);
        let mut next = 0;
        for (index, segment) in problem.segments.iter().enumerate() {
            let Prepared { picture, leaving, still } = &self.prepared[index];
            let terms = problem.terms_of(segment);
            let course = still.is_none().then(|| {
                let aims = (fine.tolerance / total_s, fine.tolerance);
                Course::new(picture, leaving, terms, (segment.start, segment.length_s), aims, fine.pieces)
            });
            self.stages.wish_s = course.as_ref().map_or(0.0, |course| course.first_s);
            let mut tau_s = 0.0;
            loop {
                let here = next < problem.moments.len() && problem.moments[next].segment <= index;
                let stop_s = if here { problem.moments[next].offset_s.min(segment.length_s) } else { segment.length_s };
                let piece_s = (stop_s - tau_s) / f64::from(fine.pieces);
                while tau_s < stop_s && !lost {
                    let left_s = stop_s - tau_s;
                    let gap_s = if piece_s >= 0.999 * left_s { left_s } else { piece_s };
                    let jumped = match (&course, still) {
                        (Some(course), _) => self.stages.advance(course, (tau_s, gap_s), &mut psi, threshold, &mut spent),
                        (None, Some(still)) => advance_still(still, &mut psi, gap_s, threshold, fine.tolerance, &mut self.room, &mut spent),
                        (None, None) => None,
                    };
                    match jumped {
                        None => tau_s = if gap_s == left_s { stop_s } else { tau_s + gap_s },
                        Some(after_s) => {
                            tau_s = (tau_s + after_s).min(stop_s);
                            lost = !leaving.jump(stream.uniform(), segment.start, tau_s, &mut psi, &mut self.kicked);
                            threshold = stream.uniform();
                        }
                    }
                }
                if !here {
                    break;
                }
                let size = if lost { 0.0 } else { 1.0 / norm(&psi).sqrt() };
                self.shown.iter_mut().zip(&psi).for_each(|(out, z)| *out = z * size);
                picture.to_problem(problem.moments[next].offset_s, self.shown.as_mut_slice());
                recorder.see(next, State::Pure(&self.shown), &spent);
                next += 1;
            }
            picture.to_problem(segment.length_s, &mut psi);
        }
        recorder.finish(None);
    }
}

/// Carries on where nothing changes, with the times spent by Gauss's rule on parts in which little happens.
fn advance_still(
    still: &Still,
    psi: &mut [Complex64],
    gap_s: f64,
    threshold: f64,
    tolerance: f64,
    room: &mut Room,
    spent: &mut [f64],
) -> Option<f64> {
    if spent.is_empty() {
        return still.advance(psi, gap_s, threshold, tolerance, room);
    }
    let before = psi.to_vec();
    let at_s = still.advance(psi, gap_s, threshold, tolerance, room);
    let length_s = at_s.unwrap_or(gap_s);
    let parts = (still.rate() * length_s / 3.0).ceil().max(1.0);
    let (mut from, mut there) = (before, Vec::new());
    let mut part = 0.0;
    while part < parts {
        let h = length_s / parts;
        for (node, weight) in NODES.iter().flat_map(|(node, weight)| [(0.5 - 0.5 * node, weight), (0.5 + 0.5 * node, weight)]) {
            there.clear();
            there.extend_from_slice(&from);
            still.advance(&mut there, h * node, 0.0, tolerance, room);
            let scale = 0.5 * h * weight / norm(&there);
            spent.iter_mut().zip(&there).for_each(|(time, z)| *time += scale * z.norm_sqr());
        }
        still.advance(&mut from, h, 0.0, tolerance, room);
        part += 1.0;
    }
    at_s
}

fn prepare(
    problem: &Problem,
    segment: &Segment,
    pictures: &mut Pictures,
    leaving: &mut impl FnMut(&Rc<Picture>) -> Rc<Leaving>,
    stills: &mut HashMap<Vec<u64>, Rc<Still>>,
) -> Prepared {
    let terms = problem.terms_of(segment);
    for kind in [Kind::Tied, Kind::Rest] {
        let picture = pictures.of(segment, kind);
        let out = leaving(&picture);
        if picture.constant(terms) && out.is_still() {
            let mut key = vec![Rc::as_ptr(&picture) as usize as u64];
            for term in terms {
                let value = term.slow(0.0);
                key.extend([term.phase_turns.to_bits(), value.re.to_bits(), value.im.to_bits()]);
            }
            if !out.beating.iter().all(leaving::Beating::knows_no_clock) {
                key.push(segment.start.seconds().to_bits());
            }
            let still = stills.entry(key).or_insert_with(|| Rc::new(Still::new(&picture, terms, &out, segment.start))).clone();
            return Prepared { picture, leaving: out, still: Some(still) };
        }
        if !terms.iter().all(Term::is_constant) {
            break;
        }
    }
    let picture = pictures.of(segment, Kind::Free);
    let out = leaving(&picture);
    Prepared { leaving: out, picture, still: None }
}

/// Eigenvectors of the start with their weights summed up, the largest first.
fn pure_parts(start: &Start) -> Vec<(f64, Vector)> {
    let density = match start {
        Start::Pure(amplitudes) => return vec![(1.0, amplitudes.clone())],
        Start::Mixed(density) => density,
    };
    let eigen = ((density + density.adjoint()) * Complex64::from(0.5)).symmetric_eigen();
    let mut parts: Vec<(f64, Vector)> =
        eigen.eigenvalues.iter().zip(eigen.eigenvectors.column_iter()).map(|(weight, v)| (weight.max(0.0), v.into_owned())).collect();
    parts.sort_by(|a, b| b.0.total_cmp(&a.0));
    parts.retain(|(weight, _)| *weight > 1e-17);
    let mut sum = 0.0;
    for (weight, _) in &mut parts {
        sum += *weight;
        *weight = sum;
    }
    parts
}
