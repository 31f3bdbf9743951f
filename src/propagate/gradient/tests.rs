//! Gradients against a closed form, against the exponential of a block matrix, against differences of high order, and lanes against the
//! plain form.

use num_complex::Complex64;

use super::*;
use crate::problem::{Matrix, Vector};
use crate::propagate::lanes::{Width, WIDTHS};

/// Numbers between -1 and 1 (SplitMix64, G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014).
struct Draws(u64);

impl Draws {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        ((z ^ (z >> 31)) >> 11) as f64 / (1u64 << 52) as f64 - 1.0
    }

    fn matrix(&mut self, dim: usize) -> Matrix {
        Matrix::from_fn(dim, dim, |_, _| Complex64::new(self.next(), self.next()))
    }

    fn hermitian(&mut self, dim: usize) -> Matrix {
        let m = self.matrix(dim);
        (&m + m.adjoint()) * Complex64::from(0.5)
    }

    fn unitary(&mut self, dim: usize) -> Matrix {
        self.matrix(dim).qr().q()
    }

    fn state(&mut self, dim: usize) -> Vector {
        self.unitary(dim).column(0).into_owned()
    }

    /// Two controls, slices of unequal length.
    fn system(&mut self, dim: usize, slices: usize) -> Controlled {
        let controls = vec![self.hermitian(dim), self.hermitian(dim)];
        let lengths = (0..slices).map(|_| 1.0 + 0.5 * self.next()).collect();
        Controlled::new(self.hermitian(dim), controls, lengths).expect("Hermitian and positive")
    }

    fn samples(&mut self, count: usize, size: f64) -> Vec<f64> {
        (0..count).map(|_| size * self.next()).collect()
    }
}

/// A number that sees the common phase: the real part of <to|x>.
struct RealAmplitude {
    start: Vector,
    to: Vector,
}

impl Goal for RealAmplitude {
    fn dim(&self) -> usize {
        self.to.len()
    }
    fn start(&self) -> Matrix {
        Matrix::from_columns(std::slice::from_ref(&self.start))
    }
    fn value(&self, end: &Matrix) -> f64 {
        self.to.dotc(&end.column(0)).re
    }
    fn seed(&self, _: &Matrix) -> Matrix {
        Matrix::from_columns(std::slice::from_ref(&self.to))
    }
}

fn goals(draws: &mut Draws, dim: usize) -> Vec<Box<dyn Goal>> {
    let within: Vec<usize> = (0..dim.max(3) - 1).collect();
    vec![
        Box::new(Mean::population(draws.state(dim), dim - 1)),
        Box::new(Mean::new(draws.state(dim), draws.hermitian(dim))),
        Box::new(Mean::fidelity(draws.state(dim), &draws.state(dim))),
        Box::new(Mean::leakage(dim, &within)),
        Box::new(GateOverlap::new(draws.unitary(dim))),
        Box::new(AverageGateError::new(dim, &within, draws.unitary(within.len()))),
        Box::new(RealAmplitude { start: draws.state(dim), to: draws.state(dim) }),
    ]
}

fn furthest(a: &[f64], b: &[f64]) -> f64 {
    assert_eq!(a.len(), b.len());
    a.iter().zip(b).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max)
}

/// Rabi: from level 0 under H = u sx/2 level 1 holds sin^2(theta/2), theta = sum u h, so d/du = h/2 sin(theta) (I. I. Rabi, Physical
/// Review 51, 652 (1937)).
#[test]
fn exact_resonant_drive() {
    let half = Complex64::from(0.5);
    let sx = Matrix::from_row_slice(2, 2, &[half * 0.0, half, half, half * 0.0]);
    let start = Vector::from_vec(vec![half * 2.0, half * 0.0]);
    let mut draws = Draws(1);
    let lengths: Vec<f64> = (0..150).map(|_| 1e-9 * (1.0 + 0.5 * draws.next())).collect();
    let samples = draws.samples(150, 3e8);
    let theta: f64 = samples.iter().zip(&lengths).map(|(u, h)| u * h).sum();
    let system = Controlled::new(Matrix::zeros(2, 2), vec![sx], lengths.clone()).expect("Hermitian and positive");
    let found = gradients(&system, &samples, &Mean::population(start, 1), 1).expect("all fits");
    assert!((found.gradients[0].value - (0.5 * theta).sin().powi(2)).abs() < 1e-14);
    for (derivative, h) in found.gradients[0].by_samples.iter().zip(&lengths) {
        // 1e-14 of the largest derivative, h/2
        assert!((derivative - 0.5 * h * theta.sin()).abs() < 1e-14 * h);
    }
}

/// exp of a matrix by its series, halved and squared.
fn exponential(m: &Matrix) -> Matrix {
    let halvings = (m.norm() * 4.0).log2().ceil().max(0.0) as i32;
    let small = m * Complex64::from(0.5f64.powi(halvings));
    let mut term = Matrix::identity(m.nrows(), m.nrows());
    let mut sum = term.clone();
    for k in 1..22 {
        term = &term * &small * Complex64::from(1.0 / f64::from(k));
        sum += &term;
    }
    (0..halvings).fold(sum, |power, _| &power * &power)
}

/// The upper right block of exp [[a, e], [0, a]] is the derivative of exp(a) along e (A. H. Al-Mohy and N. J. Higham, SIAM Journal on
/// Matrix Analysis and Applications 30, 1639 (2009), equation (1.6)).
#[test]
fn ref_block_exponential() {
    let mut draws = Draws(2);
    for dim in [2, 3, 4, 6] {
        let system = draws.system(dim, 5);
        let samples = draws.samples(system.samples(), 1.5);
        for goal in goals(&mut draws, dim) {
            let found = gradient(&system, &samples, goal.as_ref()).expect("all fits");
            let step = |slice: usize| system.hamiltonian(&samples, slice) * Complex64::new(0.0, -system.lengths_s[slice]);
            let end = (0..5).fold(goal.start(), |x, slice| exponential(&step(slice)) * x);
            assert!((goal.value(&end) - found.value).abs() < 3e-14, "dim {dim}");
            for (place, derivative) in found.by_samples.iter().enumerate() {
                let (slice, control) = (place / 2, place % 2);
                let mut block = Matrix::zeros(2 * dim, 2 * dim);
                block.view_mut((0, 0), (dim, dim)).copy_from(&step(slice));
                block.view_mut((dim, dim), (dim, dim)).copy_from(&step(slice));
                let along = &system.controls[control] * Complex64::new(0.0, -system.lengths_s[slice]);
                block.view_mut((0, dim), (dim, dim)).copy_from(&along);
                let changed = exponential(&block).view((0, dim), (dim, dim)).into_owned();
                let moved = (0..5).fold(goal.start(), |x, k| if k == slice { &changed * x } else { exponential(&step(k)) * x });
                let expected = goal.seed(&end).dotc(&moved).re;
                assert!((derivative - expected).abs() < 3e-14, "dim {dim}, place {place}: {derivative} {expected}");
            }
        }
    }
}

/// Derivatives against central differences of order 8 (B. Fornberg, Mathematics of Computation 51, 699 (1988)) of the number itself,
/// which need no seed.
#[test]
fn ref_differences_of_high_order() {
    const WEIGHTS: [f64; 4] = [4.0 / 5.0, -1.0 / 5.0, 4.0 / 105.0, -1.0 / 280.0];
    let mut draws = Draws(3);
    for dim in [2, 3, 4, 5] {
        let system = draws.system(dim, 12);
        let samples = draws.samples(system.samples(), 0.5);
        for goal in goals(&mut draws, dim) {
            let found = gradient(&system, &samples, goal.as_ref()).expect("all fits");
            for place in [0, 7, 23] {
                let step = 0.015;
                let value = |times: f64| {
                    let mut moved = samples.clone();
                    moved[place] += times * step;
                    plain_gradient(&system, &moved, goal.as_ref()).expect("all fits").value
                };
                let expected: f64 = WEIGHTS.iter().zip(1..).map(|(w, k)| w * (value(f64::from(k)) - value(-f64::from(k))) / step).sum();
                assert!((found.by_samples[place] - expected).abs() < 1e-12, "dim {dim}: {} {expected}", found.by_samples[place]);
            }
        }
    }
}

/// All sets of instructions against the plain form: weak and strong slices (halved up to six times), no field, degenerate levels, a
/// number of sets that fills no block, several threads.
#[test]
fn prop_lanes_and_plain_agree() {
    let mut draws = Draws(4);
    for dim in [2, 3, 4] {
        for size in [0.0, 0.01, 0.3, 2.0, 20.0] {
            let mut system = draws.system(dim, 7);
            if size == 0.0 || size == 0.3 {
                system.statics = Matrix::identity(dim, dim) * Complex64::from(0.7);
            }
            let samples = draws.samples(11 * system.samples(), size);
            for goal in goals(&mut draws, dim) {
                let plain: Vec<Gradient> =
                    samples.chunks(system.samples()).map(|set| plain_gradient(&system, set, goal.as_ref()).expect("all fits")).collect();
                for width in WIDTHS.into_iter().filter(|width| width.is_here()) {
                    let found = gradients_at_width(width, &system, &samples, goal.as_ref(), 1).expect("all fits");
                    let shared = gradients_at_width(width, &system, &samples, goal.as_ref(), 3).expect("all fits");
                    assert_eq!(found.gradients, shared.gradients, "threads change nothing");
                    // rounding of H h itself
                    let limit = 5e-14 * (1.0 + size);
                    for (lanes, plain) in found.gradients.iter().zip(&plain) {
                        assert!((lanes.value - plain.value).abs() < limit, "{width:?} {dim} {size}");
                        let off = furthest(&lanes.by_samples, &plain.by_samples);
                        assert!(off < limit, "{width:?}, {dim} levels, samples of {size}: {off:e}");
                    }
                }
            }
        }
    }
}

/// The short series near its limit is no worse than its error figure says.
#[test]
fn prop_error_figure_is_honest() {
    let mut draws = Draws(5);
    let mut outside = 0;
    for trial in 0..40 {
        let mut system = draws.system(4, 30);
        // slices just below the limit of the short series
        let form = super::side_by_side::norm_form(&system);
        let still = vec![crate::propagate::lanes::Eight::all(0.0); 60];
        let scale = 0.247 / super::side_by_side::largest_spread(&form, &system.lengths_s, &still);
        system.lengths_s.iter_mut().for_each(|length| *length *= scale);
        let samples = vec![0.0; 60];
        let goal = GateOverlap::new(draws.unitary(4));
        let found = gradients(&system, &samples, &goal, 1).expect("all fits");
        let plain = plain_gradient(&system, &samples, &goal).expect("all fits");
        let off = furthest(&found.gradients[0].by_samples, &plain.by_samples);
        let floor = 30.0 * f64::EPSILON;
        outside += usize::from(off > found.derivative_error.max(floor));
        assert!(found.derivative_error < 10.0 * off.max(floor), "trial {trial}: {:e} for {off:e}", found.derivative_error);
    }
    assert_eq!(outside, 0);
}

#[test]
fn prop_what_cannot_be_done_is_refused() {
    let mut draws = Draws(6);
    let good = draws.hermitian(3);
    let odd = draws.matrix(3);
    let new = |statics: &Matrix, control: &Matrix, lengths: &[f64]| {
        Controlled::new(statics.clone(), vec![control.clone()], lengths.to_vec()).map(|_| ())
    };
    assert_eq!(new(&good, &draws.hermitian(2), &[1.0]), Err(GradientFault::Shape(Some(0))));
    assert_eq!(new(&odd, &good, &[1.0]), Err(GradientFault::NotHermitian(None)));
    assert_eq!(new(&(good.clone() * Complex64::from(f64::NAN)), &good, &[1.0]), Err(GradientFault::NotHermitian(None)));
    assert_eq!(new(&good, &good, &[1.0, -1.0]), Err(GradientFault::Length(1)));
    assert_eq!(new(&good, &good, &[]), Err(GradientFault::Length(0)));
    let system = Controlled::new(good.clone(), vec![good.clone()], vec![1.0; 4]).expect("Hermitian and positive");
    let goal = Mean::population(draws.state(3), 0);
    assert_eq!(gradients(&system, &[], &goal, 1), Err(GradientFault::NoSets));
    assert_eq!(gradients(&system, &[0.0; 6], &goal, 1), Err(GradientFault::Count { given: 6, of_a_set: 4 }));
    assert_eq!(gradient(&system, &[0.0, f64::INFINITY, 0.0, 0.0], &goal), Err(GradientFault::NotFinite(1)));
    let other = Mean::population(draws.state(4), 0);
    assert_eq!(gradient(&system, &[0.0; 4], &other), Err(GradientFault::Goal { goal: 4, system: 3 }));
    assert!(matches!(gradient(&system, &[1e9; 4], &goal), Err(GradientFault::TooStrong(_))));
    assert_eq!(GradientFault::Length(1).to_string(), "slice 1 has no positive length");
    assert_eq!(Width::Portable.word(), "portable");
}
