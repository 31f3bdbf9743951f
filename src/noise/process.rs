//! Numbers that wander within a shot: Gaussian processes, drawn as their exact means over consecutive cells of time.
//!
//! Within a cell H is taken with the mean of the number over that cell. The phase that a level gathers over whole cells is then
//! exact however long they are; what a drive makes of the wandering inside a cell is not, and is measured by halving the cells:
//! the mean over a cell is the mean over its halves, so both resolutions see one and the same path.
//!
//! Exponential memory T (G. E. Uhlenbeck and L. S. Ornstein, Physical Review 36, 823 (1930)): over a cell of length h the value
//! at its end and the integral over it, given the value at its start, are jointly normal (D. T. Gillespie, Physical Review E 54,
//! 2084 (1996)), with r = h/T, e = exp(-r) and variance 1 of the process
//!
//! ```text
//! end:      mean x e         variance 1 - e^2
//! integral: mean x T (1 - e) variance T^2 (2 r - 3 + 4 e - e^2)    covariance T (1 - e)^2
//! ```
//!
//! A one-sided spectrum S: x(t) = sum_j sqrt(S(f_j) w_j) (a_j cos(2 pi f_j t) + b_j sin(2 pi f_j t)), a and b normal (S. O. Rice,
//! Bell System Technical Journal 23, 282 (1944)). With any nodes and weights this is a Gaussian process; its correlation is the
//! quadrature of the integral of S cos(2 pi f t). Nodes are those of Gauss and Legendre in pieces of at most two turns within the
//! sequence, so that the correlation is right to rounding for every time that the sequence can tell apart. What is left is
//! measured by half as many nodes more.

use super::gauss;
use super::source::Time;
use crate::random::Stream;
use crate::units::{sin_cos_turns, RAD_PER_TURN};

/// Most products of cells and frequencies: 160 MB.
const MOST_ENTRIES: f64 = 1e7;
/// Turns within the sequence that one piece of a spectrum may span.
const PIECE_TURNS: f64 = 2.0;
/// Times at which the correlation is checked.
const CHECKS: usize = 65;

/// A process on given cells.
#[derive(Debug, Clone)]
pub enum Process {
    /// Exponential memory, variance 1.
    Memory(Vec<Step>),
    /// A spectrum.
    Spectrum(Harmonics),
}

/// What one cell does to a process with memory.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Step {
    /// e.
    decay: f64,
    /// Standard deviation of the end.
    end: f64,
    /// Mean over the cell: by the value at the start, by the deviate of the end, by one of its own.
    by: [f64; 3],
}

/// Sums of harmonics on cells.
#[derive(Debug, Clone)]
pub struct Harmonics {
    nodes: usize,
    /// For each cell, for each frequency: amplitude times the mean of the cosine and of the sine.
    table: Vec<[f64; 2]>,
    /// Largest error of the correlation over the variance.
    pub correlation_error: f64,
}

/// A spectrum that reaches too far for the length of the sequence.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TooWide {
    /// Turns of its highest frequency within the sequence.
    pub turns: f64,
    /// Products of cells and frequencies.
    pub entries: f64,
    /// At most so many.
    pub limit: f64,
}

impl Process {
    /// The process `time` on consecutive cells of the given lengths, s.
    pub fn new(time: &Time, cells_s: &[f64]) -> Result<Process, TooWide> {
        match time {
            Time::Slow => Ok(Process::Memory(vec![Step { decay: 1.0, end: 0.0, by: [1.0, 0.0, 0.0] }; cells_s.len()])),
            Time::Exponential { time_s } => Ok(Process::Memory(cells_s.iter().map(|h| step(h / time_s)).collect())),
            Time::OneOver { .. } | Time::Table(_) => harmonics(time, cells_s).map(Process::Spectrum),
        }
    }

    /// Draws a path: its means over the cells, appended.
    pub fn draw(&self, stream: &mut Stream, means: &mut Vec<f64>) {
        match self {
            Process::Memory(steps) => {
                let mut x = stream.normal();
                for step in steps {
                    let (a, b) = (stream.normal(), stream.normal());
                    means.push(step.by[0] * x + step.by[1] * a + step.by[2] * b);
                    x = step.decay * x + step.end * a;
                }
            }
            Process::Spectrum(harmonics) => {
                let deviates: Vec<[f64; 2]> = (0..harmonics.nodes).map(|_| [stream.normal(), stream.normal()]).collect();
                let cells = harmonics.table.chunks_exact(harmonics.nodes.max(1));
                means.extend(cells.map(|cell| cell.iter().zip(&deviates).map(|(u, d)| u[0] * d[0] + u[1] * d[1]).sum::<f64>()));
            }
        }
    }

    /// Largest error of the correlation, over the variance.
    pub fn correlation_error(&self) -> f64 {
        match self {
            Process::Memory(_) => 0.0,
            Process::Spectrum(harmonics) => harmonics.correlation_error,
        }
    }
}

/// One cell of length `r` memories.
fn step(r: f64) -> Step {
    let decay = (-r).exp();
    let fall = -(-r).exp_m1();
    let end = (-(-2.0 * r).exp_m1()).sqrt();
    // over r: the mean, not the integral
    let integral = if r < 0.5 {
        // 2r - 3 + 4e - e^2 = sum over k from 3 of (-r)^k (4 - 2^k)/k!, which the closed form loses to rounding
        let (mut sum, mut power, mut two) = (0.0, -r * r * r / 6.0, 8.0);
        for k in 3..40 {
            sum += power * (4.0 - two);
            power *= -r / f64::from(k + 1);
            two *= 2.0;
        }
        sum
    } else {
        2.0 * r - 3.0 + 4.0 * decay - decay * decay
    };
    let shared = if end > 0.0 { fall * fall / end } else { 0.0 };
    let own = (integral - shared * shared).max(0.0).sqrt();
    if r == 0.0 {
        return Step { decay: 1.0, end: 0.0, by: [1.0, 0.0, 0.0] };
    }
    Step { decay, end, by: [fall / r, shared / r, own / r] }
}

/// Frequencies in Hz and the share of the variance that stands for each.
type Lines = Vec<(f64, f64)>;

/// The lines of a spectrum for a sequence of `length_s`, with `more` times the usual nodes.
fn lines(time: &Time, length_s: f64, more: f64) -> Lines {
    let mut lines = Lines::new();
    // nodes for a piece that spans so many turns
    let points = |turns: f64, least: f64| ((least + 3.0 * turns.sqrt() + 4.5 * turns) * more).ceil() as usize;
    match time {
        Time::OneOver { from_hz, to_hz } => {
            // in the logarithm of the frequency a^2/f is even
            let mut low = *from_hz;
            while low < *to_hz {
                let high = (4.0 * low).min(low + PIECE_TURNS / length_s).min(*to_hz);
                let width = (high / low).ln();
                for (x, weight) in gauss::even(points((high - low) * length_s, 9.0)) {
                    lines.push((low * (0.5 * width * (x + 1.0)).exp(), weight * width));
                }
                low = high;
            }
        }
        Time::Table(rows) => {
            for pair in rows.windows(2) {
                let ((from, start), (to, end)) = (pair[0], pair[1]);
                let pieces = ((to - from) * length_s / PIECE_TURNS).ceil().max(1.0);
                let width = (to - from) / pieces;
                let rule = gauss::even(points(width * length_s, 4.0));
                for piece in 0..pieces as usize {
                    for (x, weight) in &rule {
                        let f = from + width * (piece as f64 + 0.5 * (x + 1.0));
                        let density = start + (end - start) * (f - from) / (to - from);
                        lines.push((f, weight * width * density));
                    }
                }
            }
        }
        Time::Slow | Time::Exponential { .. } => {}
    }
    lines.retain(|(_, share)| *share > 0.0);
    lines
}

fn correlation(lines: &Lines, t_s: f64) -> f64 {
    lines.iter().map(|(f, share)| share * sin_cos_turns(f * t_s).1).sum()
}

fn harmonics(time: &Time, cells_s: &[f64]) -> Result<Harmonics, TooWide> {
    let length_s: f64 = cells_s.iter().sum();
    let highest = match time {
        Time::OneOver { to_hz, .. } => *to_hz,
        Time::Table(rows) => rows.last().map_or(0.0, |(f, _)| *f),
        Time::Slow | Time::Exponential { .. } => 0.0,
    };
    let turns = highest * length_s;
    // before any memory is taken: about ten nodes a turn
    let limit = MOST_ENTRIES;
    let fault = |nodes: f64| TooWide { turns, entries: nodes * cells_s.len() as f64, limit };
    if 6.0 * turns * cells_s.len() as f64 > limit {
        return Err(fault(6.0 * turns));
    }
    let usual = lines(time, length_s, 1.0);
    if usual.len() as f64 * cells_s.len() as f64 > limit {
        return Err(fault(usual.len() as f64));
    }
    let finer = lines(time, length_s, 1.5);
    let variance = correlation(&finer, 0.0);
    let apart = |k: usize| {
        let t_s = length_s * k as f64 / (CHECKS - 1) as f64;
        (correlation(&usual, t_s) - correlation(&finer, t_s)).abs()
    };
    let correlation_error = (0..CHECKS).map(apart).fold(0.0, f64::max) / variance.max(1e-300);
    let mut table = Vec::with_capacity(cells_s.len() * usual.len());
    let mut start_s = 0.0;
    for h in cells_s {
        let middle_s = start_s + 0.5 * h;
        for (f, share) in &usual {
            let half = 0.5 * f * h;
            // the mean over the cell: the value in its middle times sin(pi f h)/(pi f h)
            let damped = if half < 1e-9 { 1.0 } else { sin_cos_turns(half).0 / (half * RAD_PER_TURN) };
            let size = share.sqrt() * damped;
            let (sin, cos) = sin_cos_turns(f * middle_s);
            table.push([size * cos, size * sin]);
        }
        start_s += h;
    }
    Ok(Harmonics { nodes: usual.len(), table, correlation_error })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Covariance of the means over two cells, measured over draws, and the number of draws.
    fn covariances(process: &Process, cells: usize, draws: u64) -> Vec<Vec<f64>> {
        let mut sums = vec![vec![0.0; cells]; cells];
        for draw in 0..draws {
            let mut means = Vec::new();
            process.draw(&mut Stream::new(17, 0, 0, draw), &mut means);
            for (row, a) in sums.iter_mut().zip(&means) {
                row.iter_mut().zip(&means).for_each(|(sum, b)| *sum += a * b / draws as f64);
            }
        }
        sums
    }

    /// Integrals of exp(-|t - t'|/T) over two cells, closed form: within one cell 2 (r - 1 + e^-r)/r^2, between two the
    /// product of (1 - e^-r)/r of both and the decay over the gap. Within five standard errors of 200 000 draws.
    #[test]
    fn exact_covariance_of_exponential_memory() {
        let cells = [0.3, 2.0, 1e-5, 0.7, 0.05];
        let process = Process::new(&Time::Exponential { time_s: 0.5 }, &cells).expect("no spectrum");
        let found = covariances(&process, cells.len(), 200_000);
        let r: Vec<f64> = cells.iter().map(|h| h / 0.5).collect();
        let starts: Vec<f64> = (0..r.len()).map(|k| r[..k].iter().sum()).collect();
        for j in 0..r.len() {
            for k in 0..r.len() {
                let (a, b) = (j.min(k), j.max(k));
                let want = if j == k {
                    if r[j] < 1e-3 {
                        1.0 - r[j] / 3.0
                    } else {
                        2.0 * (r[j] - 1.0 + (-r[j]).exp()) / (r[j] * r[j])
                    }
                } else {
                    let mean = |r: f64| -(-r).exp_m1() / r;
                    mean(r[a]) * mean(r[b]) * (-(starts[b] - starts[a] - r[a])).exp()
                };
                assert!((found[j][k] - want).abs() < 5.0 * (2.0f64 / 200_000.0).sqrt(), "{j} {k}: {} against {want}", found[j][k]);
            }
        }
    }

    /// The mean over a cell is the mean over its halves: the variance of the mean of two halves is that of the whole.
    #[test]
    fn exact_halves_make_the_whole() {
        for r in [1e-6, 1e-3, 0.3, 0.49, 0.51, 3.0, 40.0] {
            let (whole, half) = (step(r), step(0.5 * r));
            let variance = |s: &Step| s.by.iter().map(|b| b * b).sum::<f64>();
            // covariance of the halves: by[0] of the second times that of the mean of the first with its end
            let between = half.by[0] * (half.by[0] * half.decay + half.by[1] * half.end);
            let joined = 0.5 * variance(&half) + 0.5 * between;
            assert!((joined - variance(&whole)).abs() < 4e-15, "{r}: {joined} against {}", variance(&whole));
        }
    }

    /// Correlation of 1/f noise from 10 kHz to 2 MHz, a = 60 kHz: a^2 times the difference of two cosine integrals
    /// (tests/reference/noise.py, mpmath); and what is left by half as many nodes more is rounding.
    #[test]
    fn ref_correlation_of_one_over_f() {
        let time = Time::OneOver { from_hz: 1e4, to_hz: 2e6 };
        let lines = lines(&time, 3e-6, 1.0);
        for (t_s, want) in ONE_OVER {
            let got = correlation(&lines, t_s);
            assert!((got - want).abs() < 1e-13 * 5.3, "{t_s}: {got} against {want}");
        }
        let cells = vec![1e-7; 30];
        let process = Process::new(&time, &cells).expect("few turns");
        assert!(process.correlation_error() < 1e-14, "{}", process.correlation_error());
    }

    const ONE_OVER: [(f64, f64); 4] =
        [(0.0, 5.298_317_366_548_037), (1e-7, 4.928_626_288_676_319), (1e-6, 2.184_947_613_651_159_4), (3e-6, 1.099_633_980_646_350_5)];

    /// Variances of the means over cells of a table spectrum, against a fine sum; within five standard errors.
    #[test]
    fn prop_variance_of_a_table_spectrum() {
        let rows = vec![(0.0, 2.0), (3.0, 1.0), (4.0, 0.0), (10.0, 0.5)];
        let cells = [0.2, 0.2, 0.5];
        let process = Process::new(&Time::Table(rows.clone()), &cells).expect("few turns");
        let found = covariances(&process, 3, 100_000);
        let density = |f: f64| {
            let pair = rows.windows(2).find(|pair| f <= pair[1].0).expect("within the table");
            pair[0].1 + (pair[1].1 - pair[0].1) * (f - pair[0].0) / (pair[1].0 - pair[0].0)
        };
        for (k, h) in cells.iter().enumerate() {
            let steps = 200_000;
            let want: f64 = (0..steps)
                .map(|s| {
                    let f = 10.0 * (f64::from(s) + 0.5) / f64::from(steps);
                    let half = std::f64::consts::PI * f * h;
                    density(f) * (half.sin() / half).powi(2) * 10.0 / f64::from(steps)
                })
                .sum();
            assert!((found[k][k] / want - 1.0).abs() < 5.0 * (2.0f64 / 100_000.0).sqrt(), "{k}: {} against {want}", found[k][k]);
        }
    }

    /// A spectrum that turns a million times within many cells is refused before memory is taken.
    #[test]
    fn exact_too_wide_is_refused() {
        let cells = vec![1e-6; 1000];
        let fault = Process::new(&Time::OneOver { from_hz: 1.0, to_hz: 1e9 }, &cells).expect_err("a million turns");
        assert!((fault.turns - 1e6).abs() < 1.0);
    }
}
