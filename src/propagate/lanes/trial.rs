//! How fast each kernel is on this machine, with every set of instructions that it has, beside the plain exponential of slice after slice.

use std::hint::black_box;
use std::sync::Arc;
use std::time::{Duration, Instant};

use num_complex::Complex64;

use super::super::exponential::Flow;
use super::{place_of, Eight, Group, Profile, Recipe, Stretch, Width, WIDTHS};

/// One kernel's speed.
#[derive(Debug, Clone, PartialEq)]
pub struct Trial {
    /// What it does.
    pub name: &'static str,
    /// Time of a slice of one point, ns, with each set of instructions of this machine.
    pub lanes_ns: Vec<(Width, f64)>,
    /// The same by the plain exponential, where there is one.
    pub plain_ns: Option<f64>,
    /// Largest difference between two sets of instructions.
    pub apart: f64,
}

/// Slices of a run.
const SLICES: usize = 200;
/// How long each is measured.
const LONG: Duration = Duration::from_millis(4);

/// Measures every kernel, a few tens of milliseconds each.
pub fn trials() -> Vec<Trial> {
    let all = [
        ("2 levels, propagators, slice by slice", 2, 2, false, SLICES),
        ("2 levels, propagators, 8 slices at once", 2, 2, false, SLICES / 8),
        ("3 levels, states, slice by slice", 3, 1, false, SLICES),
        ("3 levels, states, 8 slices at once", 3, 1, false, SLICES / 8),
        ("3 levels, propagators, slice by slice", 3, 3, false, SLICES),
        ("6 levels, states, slice by slice", 6, 1, false, SLICES),
        ("16 levels, propagators, slice by slice", 16, 16, false, SLICES),
        ("3 levels, density matrices, slice by slice", 3, 1, true, SLICES),
    ];
    all.into_iter().map(|(name, dim, columns, density, steps)| trial(name, dim, columns, density, steps as f64)).collect()
}

fn trial(name: &'static str, dim: usize, columns: usize, density: bool, steps: f64) -> Trial {
    let group = ladder(dim, density);
    let bounds_s = (0..=SLICES).map(|k| 0.03 * k as f64).collect();
    let values: Vec<f64> = (0..SLICES).map(|k| (-0.5 * ((k as f64 - 100.0) / 33.0).powi(2)).exp()).collect();
    let profile = Profile::Held { bounds_s, values: values.clone() };
    let stretch = [Stretch { channels: vec![0], steps: profile.steps(1, steps) }];
    let numbers = if density { dim * dim } else { 2 * dim };
    let start: Vec<Vec<Eight>> = (0..columns)
        .map(|c| (0..numbers).map(|k| Eight::all(if k == if density { 0 } else { 2 * c } { 1.0 } else { 0.0 })).collect())
        .collect();
    let mut ends: Vec<Vec<Vec<Eight>>> = Vec::new();
    let mut lanes_ns = Vec::new();
    for width in WIDTHS.into_iter().filter(|width| width.is_here()) {
        let mut end = start.clone();
        let s = least_s(|| {
            end.clone_from(&start);
            group.carry(width, &stretch, black_box(&mut end));
        });
        lanes_ns.push((width, s * 1e9 / (8 * SLICES) as f64));
        ends.push(end);
    }
    let pairs = ends.iter().skip(1).flat_map(|end| end.iter().flatten().zip(ends[0].iter().flatten()));
    let apart = pairs.flat_map(|(a, b)| a.0.into_iter().zip(b.0)).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
    let plain_ns = (!density).then(|| plain_ns(&group, &values, columns));
    Trial { name, lanes_ns, plain_ns, apart }
}

/// Eight ladders that differ in their detuning and drive.
fn ladder(dim: usize, density: bool) -> Group {
    let mut statics = vec![Eight::all(0.0); dim * dim];
    let mut drive = statics.clone();
    for j in 0..dim {
        statics[j] = Eight(std::array::from_fn(|l| 0.02 * l as f64 * j as f64 - 0.2 * (j * j.saturating_sub(1)) as f64));
        if j + 1 < dim {
            drive[place_of(dim, j, j + 1)] = Eight(std::array::from_fn(|l| (0.1 + 0.02 * l as f64) * (j as f64 + 1.0).sqrt()));
        }
    }
    let recipe = if density { Some(Arc::new(Recipe::of_densities(dim, &[]))) } else { None };
    Group { dim, statics, channels: vec![drive], recipe }
}

fn plain_ns(group: &Group, values: &[f64], columns: usize) -> f64 {
    let dim = group.dim;
    let mut h = vec![Complex64::default(); dim * dim];
    let (mut psi, mut room) = (vec![Complex64::default(); dim], Vec::new());
    let s = least_s(|| {
        let mut carried: Vec<Vec<Complex64>> =
            (0..columns).map(|c| (0..dim).map(|j| if j == c { 1.0 } else { 0.0 }.into()).collect()).collect();
        for u in &values[..20] {
            for j in 0..dim {
                h[j + dim * j] = group.statics[j].0[3].into();
                for k in j + 1..dim {
                    let at = place_of(dim, j, k);
                    let entry = Complex64::new(group.channels[0][at].0[3] * u, group.channels[0][at + 1].0[3] * u);
                    h[j + dim * k] = entry;
                    h[k + dim * j] = entry.conj();
                }
            }
            let flow = Flow::new(&h, dim, 0.03, false);
            for column in &mut carried {
                flow.act(0.03, column, &mut psi, &mut room);
                column.copy_from_slice(&psi);
            }
        }
        black_box(&carried);
    });
    s * 1e9 / 20.0
}

/// Smallest time of a call among those that fit into a few milliseconds, s.
fn least_s(mut call: impl FnMut()) -> f64 {
    let began = Instant::now();
    let mut least = f64::INFINITY;
    while least.is_infinite() || began.elapsed() < LONG {
        let clock = Instant::now();
        call();
        least = least.min(clock.elapsed().as_secs_f64());
    }
    least
}
