//! Every width against the portable one, and the portable one against the plain exponential of a matrix.

use std::sync::Arc;

use num_complex::Complex64;

use super::super::exponential::Flow;
use super::elementary::sin_cos;
use super::lane::{Kernel, Lane, Simd};
use super::*;

/// The widths of this processor; those it lacks are named.
fn widths() -> Vec<Width> {
    let (here, missing): (Vec<Width>, Vec<Width>) = WIDTHS.into_iter().partition(|width| width.is_here());
    for width in missing {
        println!("skipped: this processor has no {}", width.word());
    }
    here
}

/// SplitMix64 (G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014), as a number in (-1, 1).
struct Random(u64);

impl Random {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        2.0 * ((z ^ (z >> 31)) >> 11) as f64 / (1u64 << 53) as f64 - 1.0
    }

    fn eight(&mut self, size: f64) -> Eight {
        Eight(std::array::from_fn(|_| size * self.next()))
    }
}

struct SinCos(Eight);

impl Kernel for SinCos {
    type Output = (Eight, Eight);

    #[inline(always)]
    fn run<S: Simd>(self, simd: S) -> (Eight, Eight) {
        let (s, c) = sin_cos(simd, simd.load(&self.0));
        let mut out = (Eight::all(0.0), Eight::all(0.0));
        s.store(&mut out.0);
        c.store(&mut out.1);
        out
    }
}

/// Against the standard library: within 1.5 units of the last place of 1 (2.2e-16 each); reached are 0.8.
#[test]
fn exact_sine_and_cosine_of_eight() {
    let mut random = Random(1);
    for width in widths() {
        let mut worst = 0.0f64;
        for round in 0..20_000 {
            let size = 10f64.powf(f64::from(round % 10) - 3.0);
            let mut x = random.eight(size);
            // near multiples of a quarter turn, where one of the two vanishes
            x.0[0] = f64::from(round) * std::f64::consts::FRAC_PI_2 + 1e-9 * x.0[0];
            let (s, c) = width.run(SinCos(x));
            for l in 0..8 {
                worst = worst.max((s.0[l] - x.0[l].sin()).abs()).max((c.0[l] - x.0[l].cos()).abs());
            }
        }
        assert!(worst < 1.5 * f64::EPSILON, "{}: {worst:e}", width.word());
        let hard = Eight([f64::NAN, f64::INFINITY, f64::NEG_INFINITY, 1e300, -1e22, 0.0, -0.0, 5e-324]);
        let (s, c) = width.run(SinCos(hard));
        for l in 0..8 {
            let (want_s, want_c) = hard.0[l].sin_cos();
            assert!(s.0[l] == want_s || (s.0[l].is_nan() && want_s.is_nan()), "{} lane {l}", width.word());
            assert!(c.0[l] == want_c || (c.0[l].is_nan() && want_c.is_nan()), "{} lane {l}", width.word());
        }
    }
}

/// How the matrices of a test are made.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Kind {
    Full,
    /// A diagonal, C on the side diagonals.
    Ladder,
    /// Real entries alone.
    Flat,
    /// No field and equal levels.
    Nothing,
    /// Equal levels.
    Degenerate,
    /// Two eigenvalues that nearly meet.
    NearlyDegenerate,
}

const KINDS: [Kind; 6] = [Kind::Full, Kind::Ladder, Kind::Flat, Kind::Nothing, Kind::Degenerate, Kind::NearlyDegenerate];

fn group(random: &mut Random, dim: usize, channels: usize, kind: Kind, size: f64) -> Group {
    let packed = |random: &mut Random, is_static: bool| {
        let mut all = vec![Eight::all(0.0); dim * dim];
        for (place, entry) in all.iter_mut().enumerate() {
            let diagonal = place < dim;
            let imaginary = !diagonal && (place - dim) % 2 == 1;
            let far = dim == 3 && (place == place_of(3, 0, 2) || place == place_of(3, 0, 2) + 1);
            let there = match kind {
                Kind::Nothing => false,
                Kind::Full => true,
                Kind::Ladder => diagonal == is_static && !far,
                Kind::Flat => !imaginary,
                Kind::Degenerate => !is_static,
                Kind::NearlyDegenerate => diagonal && is_static,
            };
            if there {
                *entry = random.eight(size);
            }
            if kind == Kind::NearlyDegenerate && is_static && place == 1 {
                *entry = Eight::all(size * (1.0 + 1e-9));
            }
            if kind == Kind::NearlyDegenerate && is_static && place == 0 {
                *entry = Eight::all(size);
            }
        }
        all
    };
    let statics = packed(random, true);
    Group { dim, statics, channels: (0..channels).map(|_| packed(random, false)).collect(), recipe: None }
}

fn columns(dim: usize) -> Vec<Vec<Eight>> {
    (0..dim).map(|k| (0..2 * dim).map(|j| Eight::all(if j == 2 * k { 1.0 } else { 0.0 })).collect()).collect()
}

fn dense(packed: &Packed, dim: usize, lane: usize) -> Vec<Complex64> {
    let mut h = vec![Complex64::default(); dim * dim];
    for j in 0..dim {
        h[j + dim * j] = packed[j].0[lane].into();
        for k in j + 1..dim {
            let at = place_of(dim, j, k);
            let entry = Complex64::new(packed[at].0[lane], packed[at + 1].0[lane]);
            h[j + dim * k] = entry;
            h[k + dim * j] = entry.conj();
        }
    }
    h
}

/// The propagator of lane `lane` by the plain exponential of slice after slice.
fn plain(group: &Group, bounds_s: &[f64], values: &[f64], lane: usize) -> Vec<Vec<Complex64>> {
    let dim = group.dim;
    let channels = group.channels.len();
    let mut columns: Vec<Vec<Complex64>> = (0..dim).map(|k| (0..dim).map(|j| if j == k { 1.0 } else { 0.0 }.into()).collect()).collect();
    let (mut psi, mut room) = (vec![Complex64::default(); dim], Vec::new());
    for (slice, pair) in bounds_s.windows(2).enumerate() {
        let mut h = dense(&group.statics, dim, lane);
        for (c, u) in group.channels.iter().zip(&values[slice * channels..]) {
            for (h, c) in h.iter_mut().zip(dense(c, dim, lane)) {
                *h += c * u;
            }
        }
        let flow = Flow::new(&h, dim, pair[1] - pair[0], false);
        for column in &mut columns {
            flow.act(pair[1] - pair[0], column, &mut psi, &mut room);
            column.copy_from_slice(&psi);
        }
    }
    columns
}

fn deviation(columns: &[Vec<Eight>], wanted: &[Vec<Complex64>], lane: usize) -> f64 {
    let mut worst = 0.0f64;
    for (column, wanted) in columns.iter().zip(wanted) {
        for (pair, want) in column.chunks_exact(2).zip(wanted) {
            let off = (Complex64::new(pair[0].0[lane], pair[1].0[lane]) - want).norm();
            worst = if off.is_nan() { f64::INFINITY } else { worst.max(off) };
        }
    }
    worst
}

/// Slices of any size, one after the other, by every width: against the plain exponential, which is good to rounding (the angle
/// times 1e-16, and as much for each slice).
#[test]
fn exact_slices_agree_with_the_plain_exponential() {
    let mut random = Random(7);
    for width in widths() {
        for (dim, channels, kind, size) in [2, 3].into_iter().flat_map(|dim| {
            let sizes = [1e-9, 1e-3, 0.02, 0.1, 0.5, 2.0, 40.0, 3e3];
            sizes
                .into_iter()
                .flat_map(move |size| KINDS.into_iter().flat_map(move |kind| [1, 2, 3].map(|channels| (dim, channels, kind, size))))
        }) {
            let group = group(&mut random, dim, channels, kind, size);
            let bounds_s: Vec<f64> = (0..6).map(|k| f64::from(k) + 0.1 * random.next()).collect();
            let values: Vec<f64> = (0..5 * channels).map(|_| random.next()).collect();
            let profile = Profile::Held { bounds_s: bounds_s.clone(), values: values.clone() };
            for count in [5.0, 10.0] {
                let steps = profile.steps(channels, count);
                assert!(steps.bare);
                let mut carried = columns(dim);
                // the bounds start a little off 0
                group.carry(width, &[Stretch { channels: (0..channels).collect(), steps }], &mut carried);
                for lane in [0, 3, 7] {
                    let off = deviation(&carried, &plain(&group, &bounds_s, &values, lane), lane);
                    let limit = 4e-15 * (1.0 + size * channels as f64);
                    assert!(off < limit, "{} {dim} levels {kind:?} size {size}: {off:e} over {limit:e}", width.word());
                }
            }
        }
    }
}

/// NaN in one lane stays in its lane; a field that is not a number gives no number.
#[test]
fn prop_what_is_no_number_stays_in_its_lane() {
    let mut random = Random(3);
    for width in widths() {
        for dim in [2, 3] {
            let mut group = group(&mut random, dim, 1, Kind::Full, 0.3);
            let steps = Profile::Held { bounds_s: vec![0.0, 1.0, 2.0], values: vec![0.4, -0.9] }.steps(1, 2.0);
            let stretch = [Stretch { channels: vec![0], steps }];
            let mut sound = columns(dim);
            group.carry(width, &stretch, &mut sound);
            group.channels[0][dim].0[5] = f64::NAN;
            let mut carried = columns(dim);
            group.carry(width, &stretch, &mut carried);
            for (a, b) in carried.iter().flatten().zip(sound.iter().flatten()) {
                assert!(a.0[5].is_nan(), "{} {dim} levels", width.word());
                // the series may have another length, which is below rounding
                let off = (0..5).map(|l| (a.0[l] - b.0[l]).abs()).fold(0.0, f64::max);
                assert!(off < 1e-15, "{} {dim} levels: {off:e}", width.word());
            }
        }
    }
}

/// A smooth drive: order 6 in the step (S. Blanes, F. Casas, J. A. Oteo, J. Ros, Physics Reports 470, 151 (2009)), by every width; and the
/// same numbers to rounding as the portable one.
#[test]
fn exact_smooth_steps_have_order_six() {
    let mut random = Random(11);
    for (dim, kind) in [(2, Kind::Flat), (2, Kind::Full), (3, Kind::Ladder), (3, Kind::Full)] {
        let group = group(&mut random, dim, 2, kind, 1.0);
        let profile = Profile::Smooth {
            length_s: 4.0,
            at: Arc::new(|t, u| {
                u[0] = (1.3 * t).sin();
                u[1] = (-0.5 * (t - 2.0) * (t - 2.0)).exp();
            }),
        };
        let run = |width: Width, count: f64| {
            let mut carried = columns(dim);
            group.carry(width, &[Stretch { channels: vec![0, 1], steps: profile.steps(2, count) }], &mut carried);
            carried
        };
        let distance = |a: &[Vec<Eight>], b: &[Vec<Eight>]| -> f64 {
            let pairs = a.iter().flatten().zip(b.iter().flatten());
            pairs.flat_map(|(a, b)| (0..8).map(move |l| (a.0[l] - b.0[l]).abs())).fold(0.0, f64::max)
        };
        let [rough, middle, fine] = [20.0, 40.0, 160.0].map(|count| run(Width::Portable, count));
        let (first, second) = (distance(&rough, &fine), distance(&middle, &fine));
        let order = (first / second).log2();
        assert!((5.5..7.0).contains(&order) && second < 1e-6, "{dim} levels {kind:?}: order {order}, errors {first:e} {second:e}");
        for width in widths() {
            let off = distance(&run(width, 40.0), &middle);
            assert!(off < 1e-14, "{} {dim} levels {kind:?}: {off:e}", width.word());
        }
    }
}

/// Slices taken together: the same as one by one within an error that falls with the square of their number, since the steps of
/// the slices are not part of the parabola that order 6 is for.
#[test]
fn exact_slices_taken_together() {
    let mut random = Random(19);
    for dim in [2, 3] {
        let group = group(&mut random, dim, 1, Kind::Flat, 1.0);
        let bounds_s: Vec<f64> = (0..=401).map(|k| 0.01 * f64::from(k)).collect();
        let values: Vec<f64> = (0..401).map(|k| (-0.5 * (0.01 * f64::from(k) - 2.0).powi(2)).exp()).collect();
        let profile = Profile::Held { bounds_s: bounds_s.clone(), values: values.clone() };
        let mut errors = Vec::new();
        for count in [25.0, 50.0, 401.0] {
            let mut carried = columns(dim);
            group.carry(Width::widest(), &[Stretch { channels: vec![0], steps: profile.steps(1, count) }], &mut carried);
            errors.push(deviation(&carried, &plain(&group, &bounds_s, &values, 2), 2));
        }
        assert!(errors[0] < 1e-6 && errors[1] < errors[0] / 3.0 && errors[2] < 1e-13, "{dim} levels: {errors:?}");
    }
}

/// The conditions of order 6 of the product without commutators, in matrices that do not commute: it must differ from the exponential of the
/// Magnus expansion by the seventh power of the step (S. Blanes, F. Casas, J. A. Oteo, J. Ros, Physics Reports 470, 151 (2009), for
/// the expansion); seen by carrying four levels, whose kernel it is, against small slices.
#[test]
fn exact_many_levels_have_order_six() {
    let mut random = Random(23);
    let four = group(&mut random, 4, 2, Kind::Full, 0.6);
    let profile = Profile::Smooth {
        length_s: 4.0,
        at: Arc::new(|t, u| {
            u[0] = (1.3 * t).sin();
            u[1] = (-0.5 * (t - 2.0) * (t - 2.0)).exp();
        }),
    };
    let run = |width: Width, count: f64| {
        let mut carried = columns(4);
        four.carry(width, &[Stretch { channels: vec![0, 1], steps: profile.steps(2, count) }], &mut carried);
        carried
    };
    let distance = |a: &[Vec<Eight>], b: &[Vec<Eight>]| -> f64 {
        let pairs = a.iter().flatten().zip(b.iter().flatten());
        pairs.flat_map(|(a, b)| (0..8).map(move |l| (a.0[l] - b.0[l]).abs())).fold(0.0, f64::max)
    };
    let [rough, middle, fine] = [8.0, 16.0, 64.0].map(|count| run(Width::Portable, count));
    let (first, second) = (distance(&rough, &fine), distance(&middle, &fine));
    let order = (first / second).log2();
    assert!((5.3..7.5).contains(&order) && second < 1e-4, "order {order}, errors {first:e} {second:e}");
    for width in widths() {
        let off = distance(&run(width, 16.0), &middle);
        assert!(off < 3e-14, "{}: {off:e}", width.word());
    }
}

/// Four and five levels in slices, state by state and column by column: against the plain exponential, to rounding.
#[test]
fn exact_slices_of_many_levels() {
    let mut random = Random(29);
    for width in widths() {
        for (dim, size) in [(4, 1e-3), (4, 0.7), (5, 3.0), (6, 30.0)] {
            let group = group(&mut random, dim, 2, Kind::Full, size);
            let bounds_s: Vec<f64> = (0..4).map(f64::from).collect();
            let values: Vec<f64> = (0..6).map(|_| random.next()).collect();
            let steps = Profile::Held { bounds_s: bounds_s.clone(), values: values.clone() }.steps(2, 3.0);
            let mut carried = columns(dim);
            group.carry(width, &[Stretch { channels: vec![0, 1], steps }], &mut carried);
            for lane in [0, 5] {
                let off = deviation(&carried, &plain(&group, &bounds_s, &values, lane), lane);
                let limit = 4e-15 * (1.0 + 20.0 * size);
                assert!(off < limit, "{} {dim} levels size {size}: {off:e} over {limit:e}", width.word());
            }
        }
    }
}

/// A density matrix without jumps is the projector of its state; with decay alone its populations follow exp(-rate t) (V. Weisskopf,
/// E. Wigner, Zeitschrift fuer Physik 63, 54 (1930)) and its coherence half as fast.
#[test]
fn exact_densities() {
    let mut random = Random(31);
    for width in widths() {
        let mut three = group(&mut random, 3, 1, Kind::Full, 0.4);
        let steps = Profile::Held { bounds_s: vec![0.0, 1.0, 2.5], values: vec![0.4, -0.9] }.steps(1, 2.0);
        let stretch = [Stretch { channels: vec![0], steps }];
        let mut state = vec![columns(3)[1].clone()];
        three.carry(width, &stretch, &mut state);
        three.recipe = Some(Arc::new(Recipe::of_densities(3, &[])));
        let mut density = vec![(0..9).map(|k| Eight::all(if k == 1 { 1.0 } else { 0.0 })).collect::<Vec<Eight>>()];
        three.carry(width, &stretch, &mut density);
        for lane in 0..8 {
            let amplitude = |j: usize| Complex64::new(state[0][2 * j].0[lane], state[0][2 * j + 1].0[lane]);
            for j in 0..3 {
                assert!((density[0][j].0[lane] - amplitude(j).norm_sqr()).abs() < 1e-14);
                for k in j + 1..3 {
                    let entry = amplitude(j) * amplitude(k).conj();
                    let at = place_of(3, j, k);
                    let off = (Complex64::new(density[0][at].0[lane], density[0][at + 1].0[lane]) - entry).norm();
                    assert!(off < 1e-14, "{}: {off:e}", width.word());
                }
            }
        }
        let mut lower = crate::problem::Matrix::zeros(2, 2);
        lower[(0, 1)] = 0.5f64.sqrt().into();
        let mut two = group(&mut random, 2, 0, Kind::Nothing, 0.0);
        two.recipe = Some(Arc::new(Recipe::of_densities(2, &[(lower, true)])));
        let steps = Profile::Held { bounds_s: vec![0.0, 3.0], values: Vec::new() }.steps(0, 1.0);
        let mut density = vec![vec![Eight::all(0.36), Eight::all(0.64), Eight::all(0.48), Eight::all(0.0)]];
        two.carry(width, &[Stretch { channels: Vec::new(), steps }], &mut density);
        let wanted = [1.0 - 0.64 * (-1.5f64).exp(), 0.64 * (-1.5f64).exp(), 0.48 * (-0.75f64).exp(), 0.0];
        for (found, wanted) in density[0].iter().zip(wanted) {
            assert!((found.0[6] - wanted).abs() < 1e-15, "{}: {found:?} and {wanted}", width.word());
        }
    }
}
