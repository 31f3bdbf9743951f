//! Causes of noise at one point of a config: what shares a draw, how it is spread, and how far each number moves with it.
//!
//! A draw is made in a coordinate of its own (standard deviations of a normal distribution, half widths of a Lorentzian, a bin and
//! the place in it, an index); each number of the cause turns it into an amount of its own size.

use super::gauss;
use crate::config::document::Document;
use crate::config::noise::{Memory, NoiseEntry, Rule, Spread, Width};
use crate::config::place::Place;
use crate::config::reader::Quantity;
use crate::random::Stream;
use crate::units::RAD_PER_TURN;

/// Standard deviation of a normal distribution over its full width at half maximum: 1/sqrt(8 ln 2).
fn sigma_per_fwhm() -> f64 {
    1.0 / (8.0 * std::f64::consts::LN_2).sqrt()
}

/// One draw of a cause.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Draw {
    /// Which bin or value, where there are several.
    pub index: usize,
    /// Standard deviations, half widths, or the place in the bin from -1 to 1.
    pub x: f64,
}

/// How a cause is spread.
#[derive(Debug, Clone, PartialEq)]
enum Form {
    Gaussian,
    /// Where it ends, in half widths.
    Lorentzian {
        cut: f64,
    },
    /// Shares of the bins.
    Bins(Vec<f64>),
    /// Weights of the values.
    Values(Vec<f64>),
}

/// How far a number moves with a draw.
#[derive(Debug, Clone, PartialEq)]
enum Size {
    Times(f64),
    /// Lower and upper edge of each bin.
    Bins(Vec<(f64, f64)>),
    Values(Vec<f64>),
}

/// How a cause moves in time; a spectrum is that of a cause of size 1.
#[derive(Debug, Clone, PartialEq)]
pub enum Time {
    /// Not within a shot.
    Slow,
    /// Correlation exp(-|t|/time_s).
    Exponential {
        /// Memory, s.
        time_s: f64,
    },
    /// 1/f between two frequencies, Hz.
    OneOver {
        /// Lower limit.
        from_hz: f64,
        /// Upper limit.
        to_hz: f64,
    },
    /// Straight between rows of (Hz, density).
    Table(Vec<(f64, f64)>),
}

/// A number and how far it moves.
#[derive(Debug, Clone)]
struct Member {
    numbers: Vec<u32>,
    size: Size,
}

/// One cause: the entries of noise that share a draw.
#[derive(Debug, Clone)]
pub struct Source {
    /// Names of the numbers.
    pub names: Vec<String>,
    /// How the average over it is taken.
    pub rule: Rule,
    /// How it moves in time.
    pub time: Time,
    /// Which cause it is, counted from 0: part of the key of its random numbers.
    pub kind: u64,
    /// Where its rule stands.
    pub rule_place: Place,
    form: Form,
    members: Vec<Member>,
}

/// Standard deviation of a width, in the unit of the number.
pub fn sigma(width: &Width, values: &[f64]) -> f64 {
    let now = |quantity: &Quantity| values[quantity.register as usize];
    match width {
        Width::Sigma(sigma) => now(sigma).abs(),
        Width::Fwhm(fwhm) => now(fwhm).abs() * sigma_per_fwhm(),
        Width::T2Star(time) => std::f64::consts::SQRT_2 / (RAD_PER_TURN * now(time)),
    }
}

/// Sigma, full width at half maximum and T2-star of an entry, where it has them: in the unit of the number, the last in s.
pub fn figures(entry: &NoiseEntry, values: &[f64]) -> [Option<f64>; 3] {
    let now = |quantity: &Quantity| values[quantity.register as usize];
    let mean = |parts: &[(f64, f64)]| parts.iter().map(|(weight, x)| weight * x).sum::<f64>() / parts.iter().map(|p| p.0).sum::<f64>();
    match &entry.spread {
        Spread::Gaussian(width) => {
            let sigma = sigma(width, values);
            let hz = entry.dim == crate::units::Dim::FREQUENCY && sigma > 0.0;
            [Some(sigma), Some(sigma / sigma_per_fwhm()), hz.then(|| std::f64::consts::SQRT_2 / (RAD_PER_TURN * sigma))]
        }
        Spread::Lorentzian { fwhm, .. } => [None, Some(now(fwhm)), None],
        Spread::Values { values: listed, weights } => {
            let parts: Vec<(f64, f64)> = weights.iter().zip(listed).map(|(weight, value)| (now(weight), now(value))).collect();
            let centre = mean(&parts);
            let squares: Vec<(f64, f64)> = parts.iter().map(|(weight, x)| (*weight, (x - centre).powi(2))).collect();
            [Some(mean(&squares).sqrt()), None, None]
        }
        Spread::Histogram { edges, counts } => {
            let bins: Vec<(f64, f64, f64)> =
                counts.iter().zip(edges.windows(2)).map(|(n, pair)| (now(n), now(&pair[0]), now(&pair[1]))).collect();
            let centre = mean(&bins.iter().map(|(n, a, b)| (*n, 0.5 * (a + b))).collect::<Vec<_>>());
            let square = |a: f64, b: f64| ((a - centre).powi(2) + (a - centre) * (b - centre) + (b - centre).powi(2)) / 3.0;
            [Some(mean(&bins.iter().map(|(n, a, b)| (*n, square(*a, *b))).collect::<Vec<_>>()).sqrt()), None, None]
        }
        Spread::BySpectrum => {
            let variance = match &entry.memory {
                Memory::OneOver { from, to, at_1_hz } => now(at_1_hz).powi(2) * (now(to) / now(from)).ln(),
                Memory::Table { rows, .. } => rows.windows(2).map(|pair| 0.5 * (pair[1].0 - pair[0].0) * (pair[0].1 + pair[1].1)).sum(),
                _ => 0.0,
            };
            [Some(variance.sqrt()), None, None]
        }
    }
}

/// The causes of a document at a point of it, in the order written.
pub fn sources(document: &Document, values: &[f64]) -> Vec<Source> {
    let mut found: Vec<(Option<String>, Source)> = Vec::new();
    for entry in &document.noise {
        let (form, member) = member(entry, values);
        let names = entry.moves.iter().map(|moved| moved.name.clone());
        match found.iter_mut().find(|(label, _)| label.is_some() && *label == entry.together) {
            Some((_, source)) => {
                source.members.push(member);
                source.names.extend(names);
            }
            None => {
                let kind = found.len() as u64;
                let source = Source {
                    names: names.collect(),
                    rule: entry.rule,
                    time: time(entry, values),
                    kind,
                    rule_place: entry.rule_place,
                    form,
                    members: vec![member],
                };
                found.push((entry.together.clone(), source));
            }
        }
    }
    found.into_iter().map(|(_, source)| source).collect()
}

fn member(entry: &NoiseEntry, values: &[f64]) -> (Form, Member) {
    let now = |quantity: &Quantity| values[quantity.register as usize];
    let shares = |counts: &[Quantity]| -> Vec<f64> {
        let total: f64 = counts.iter().map(now).sum();
        counts.iter().map(|count| now(count) / total).collect()
    };
    let (form, size) = match &entry.spread {
        Spread::Gaussian(width) => (Form::Gaussian, Size::Times(sigma(width, values))),
        Spread::Lorentzian { fwhm, cut_at } => {
            let half = 0.5 * now(fwhm);
            (Form::Lorentzian { cut: now(cut_at) / half }, Size::Times(half))
        }
        Spread::Histogram { edges, counts } => {
            let bins = edges.windows(2).map(|pair| (now(&pair[0]), now(&pair[1]))).collect();
            (Form::Bins(shares(counts)), Size::Bins(bins))
        }
        Spread::Values { values: listed, weights } => (Form::Values(shares(weights)), Size::Values(listed.iter().map(now).collect())),
        Spread::BySpectrum => {
            let size = if let Memory::OneOver { at_1_hz, .. } = &entry.memory { now(at_1_hz) } else { 1.0 };
            (Form::Gaussian, Size::Times(size))
        }
    };
    (form, Member { numbers: entry.moves.iter().map(|moved| moved.index).collect(), size })
}

fn time(entry: &NoiseEntry, values: &[f64]) -> Time {
    let now = |quantity: &Quantity| values[quantity.register as usize];
    match &entry.memory {
        Memory::Slow => Time::Slow,
        Memory::Exponential(time) => Time::Exponential { time_s: now(time) },
        Memory::OneOver { from, to, .. } => Time::OneOver { from_hz: now(from), to_hz: now(to) },
        Memory::Table { rows, .. } => Time::Table(rows.clone()),
    }
}

impl Source {
    /// Indices of all numbers it moves.
    pub fn numbers(&self) -> impl Iterator<Item = u32> + '_ {
        self.members.iter().flat_map(|member| member.numbers.iter().copied())
    }

    /// What a draw adds to each number.
    pub fn amounts(&self, draw: Draw) -> impl Iterator<Item = (u32, f64)> + '_ {
        self.members.iter().flat_map(move |member| {
            let amount = match &member.size {
                Size::Times(size) => size * draw.x,
                Size::Bins(bins) => {
                    let (low, high) = bins[draw.index];
                    0.5 * (low + high) + 0.5 * (high - low) * draw.x
                }
                Size::Values(values) => values[draw.index],
            };
            member.numbers.iter().map(move |number| (*number, amount))
        })
    }

    /// Each number, and its standard deviation where it wanders.
    pub fn deviations(&self) -> Vec<(u32, f64)> {
        let variance = match &self.time {
            Time::Slow | Time::Exponential { .. } => 1.0,
            Time::OneOver { from_hz, to_hz } => (to_hz / from_hz).ln(),
            Time::Table(rows) => rows.windows(2).map(|pair| 0.5 * (pair[1].0 - pair[0].0) * (pair[0].1 + pair[1].1)).sum(),
        };
        self.amounts(Draw { index: 0, x: variance.sqrt() }).collect()
    }

    /// The nodes of a rule with so many points, with weights that add up to 1.
    pub fn nodes(&self, points: usize) -> Vec<(Draw, f64)> {
        let plain = |rule: gauss::Rule| rule.into_iter().map(|(x, weight)| (Draw { index: 0, x }, weight)).collect();
        match &self.form {
            Form::Gaussian => plain(gauss::normal(points)),
            Form::Lorentzian { cut } => plain(gauss::lorentzian(points, *cut)),
            Form::Bins(shares) => {
                let rule = gauss::even(points);
                let filled = shares.iter().enumerate().filter(|(_, share)| **share > 0.0);
                filled.flat_map(|(index, share)| rule.iter().map(move |(x, weight)| (Draw { index, x: *x }, share * weight))).collect()
            }
            Form::Values(weights) => {
                let listed = weights.iter().enumerate().filter(|(_, weight)| **weight > 0.0);
                listed.map(|(index, weight)| (Draw { index, x: 0.0 }, *weight)).collect()
            }
        }
    }

    /// A random draw.
    pub fn draw(&self, stream: &mut Stream) -> Draw {
        let pick = |shares: &[f64], at: f64| {
            let mut left = at;
            shares.iter().position(|share| {
                left -= share;
                left < 0.0
            })
        };
        match &self.form {
            Form::Gaussian => Draw { index: 0, x: stream.normal() },
            // the inverse of the distribution function, a piece of the arc tangent
            Form::Lorentzian { cut } => Draw { index: 0, x: libm::tan(libm::atan(*cut) * (2.0 * stream.uniform() - 1.0)) },
            Form::Bins(shares) => {
                let index = pick(shares, stream.uniform()).unwrap_or(shares.len() - 1);
                Draw { index, x: 2.0 * stream.uniform() - 1.0 }
            }
            Form::Values(weights) => Draw { index: pick(weights, stream.uniform()).unwrap_or(weights.len() - 1), x: 0.0 },
        }
    }
}
