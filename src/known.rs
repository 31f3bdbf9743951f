//! Problems with a known answer: a config, and closed forms for numbers that its run must give. The tests and `nutate selftest`
//! go through the same table.

use std::path::Path;
use std::time::Instant;

use crate::config::document;
use crate::outcome::{compute, Outcome};
use crate::plan::Plan;
use crate::units::{sin_cos_turns, RAD_PER_TURN};

/// A final number and its closed form.
pub struct Answer {
    /// Name of the final number, such as `population_up`.
    pub name: &'static str,
    /// Its value.
    pub value: f64,
}

/// A problem and its answer.
pub struct Known {
    /// What it is.
    pub name: &'static str,
    /// Where the closed form stands.
    pub source: &'static str,
    /// The config, all but `accuracy`.
    pub config: &'static str,
    /// What must come out.
    pub answers: fn() -> Vec<Answer>,
}

/// How a known problem came out.
#[derive(Debug, Clone)]
pub struct Verdict {
    /// Largest deviation from the closed forms.
    pub deviation: f64,
    /// The error figure of the run.
    pub error_figure: f64,
    /// The method used.
    pub method: &'static str,
    /// Time of the run, s.
    pub seconds: f64,
}

impl Verdict {
    /// Within the error figure (and four units of rounding of the closed form).
    pub fn good(&self) -> bool {
        self.deviation <= self.error_figure + 4.0 * f64::EPSILON
    }
}

impl Known {
    /// Runs the problem by a method (a word of the language) to an accuracy; the error is the refusal in words.
    pub fn run(&self, method: &str, accuracy: f64) -> Result<Verdict, String> {
        let text = format!("{}accuracy: {{final: {accuracy:e}, method: {method}}}\n", self.config);
        let document = document::read_str(self.name, &text, Path::new(""), &[]).map_err(|refusal| refusal.text())?;
        let plan = Plan::new(document);
        let point = plan.point().map_err(|mistake| format!("{mistake:?}"))?;
        let clock = Instant::now();
        let outcome = compute(plan.document(), &point);
        let seconds = clock.elapsed().as_secs_f64();
        let mut deviation = 0.0f64;
        for answer in (self.answers)() {
            let found = value(&outcome, answer.name).ok_or_else(|| format!("{} is not recorded", answer.name))?;
            deviation = deviation.max((found - answer.value).abs());
        }
        Ok(Verdict { deviation, error_figure: outcome.error_figure, method: outcome.method.word(), seconds })
    }
}

fn value(outcome: &Outcome, name: &str) -> Option<f64> {
    outcome.finals.iter().find(|last| last.name == name).map(|last| last.value)
}

/// sin^2 of an angle in turns.
fn sin2(turns: f64) -> f64 {
    sin_cos_turns(turns).0.powi(2)
}

/// The table.
pub const KNOWN: &[Known] = &[
    Known {
        name: "resonant flip, one-sided",
        source: "I. I. Rabi, Physical Review 51, 652 (1937): P = sin^2(pi R t)",
        config: "format: 1\nsystem:\n  levels: {down: 0 MHz, up: 120 MHz}\ndrives:\n  rf:\n    pair: [down, up]\n    form: one_sided\n    carrier: gap(down, up)\nenvelopes:\n  flat: {shape: square, length: 0.33 us, peak: 1.25 MHz}\nsequence:\n  - pulse: {drive: rf, envelope: flat}\nstart: down\nrecord: {at: [0.33 us], populations: all}\n",
        answers: || vec![Answer { name: "population_up", value: sin2(1.25e6 * 0.33e-6 / 2.0) }],
    },
    Known {
        name: "detuned flip, one-sided",
        source: "I. I. Rabi, Physical Review 51, 652 (1937): P = R^2/W^2 sin^2(pi W t), W^2 = R^2 + D^2",
        config: "format: 1\nsystem:\n  levels: {down: 0 MHz, up: 120 MHz}\ndrives:\n  rf:\n    pair: [down, up]\n    form: one_sided\n    carrier: 0.8 MHz above gap(down, up)\nenvelopes:\n  flat: {shape: square, length: 4.1 us, peak: 1.25 MHz}\nsequence:\n  - pulse: {drive: rf, envelope: flat}\nstart: down\nrecord: {at: [4.1 us], populations: all}\n",
        answers: || {
            let (r, d) = (1.25e6f64, 0.8e6f64);
            let w = r.hypot(d);
            vec![Answer { name: "population_up", value: (r / w).powi(2) * sin2(w * 4.1e-6 / 2.0) }]
        },
    },
    Known {
        name: "two coupled levels left alone",
        source: "I. I. Rabi, Physical Review 51, 652 (1937), with coupling g: P = 4 g^2/W^2 sin^2(pi W t), W^2 = 4 g^2 + D^2",
        config: "format: 1\nsystem:\n  hamiltonian:\n    names: [left, right]\n    unit: MHz\n    rows: [[0, 3.4], [3.4, 1.9]]\nsequence:\n  - wait: 7.3 us\nstart: left\nrecord: {at: [7.3 us], populations: all}\n",
        answers: || {
            let (g, d) = (3.4e6f64, 1.9e6f64);
            let w = (2.0 * g).hypot(d);
            vec![Answer { name: "population_right", value: (2.0 * g / w).powi(2) * sin2(w * 7.3e-6 / 2.0) }]
        },
    },
    Known {
        name: "smooth pulse on resonance, one-sided",
        source: "area theorem (S. L. McCall, E. L. Hahn, Physical Review 183, 457 (1969)): P = sin^2 of half the area",
        config: "format: 1\nsystem:\n  levels: {down: 0 MHz, up: 50 MHz}\ndrives:\n  rf:\n    pair: [down, up]\n    form: one_sided\n    carrier: gap(down, up)\nenvelopes:\n  hump: {shape: gaussian, field_sigma: 0.2 us, cut_at: 0.7 us, edge: lift, turn: 0.37 turn}\nsequence:\n  - pulse: {drive: rf, envelope: hump}\nstart: down\nrecord: {at: [1.4 us], populations: all}\n",
        answers: || vec![Answer { name: "population_up", value: sin2(0.37 / 2.0) }],
    },
    Known {
        name: "direct coupling ramped, equal levels",
        source: "H commutes with itself at all times: P = sin^2 of the integral of the coupling (2 pi, twice the entry times half)",
        config: "format: 1\nsystem:\n  levels: {a: 3 MHz, b: 3 MHz}\ndrives:\n  hop: {pair: [a, b], form: direct}\nenvelopes:\n  hump: {shape: sine squared, length: 0.5 us, matrix_element: 3.2 MHz}\nsequence:\n  - pulse: {drive: hop, envelope: hump}\nstart: a\nrecord: {at: [0.5 us], populations: all}\n",
        answers: || vec![Answer { name: "population_b", value: sin2(3.2e6 * 0.25e-6) }],
    },
    Known {
        name: "harmonic ladder pushed on resonance",
        source: "R. J. Glauber, Physical Review 131, 2766 (1963): Poisson weights of a coherent state, mean (pi R t)^2",
        config: "format: 1\nsystem:\n  ladder: {levels: 24, first_gap: 36 MHz, anharmonicity: 0 Hz, couplings_grow: sqrt}\ndrives:\n  push: {acts_on: ladder, reference_pair: [0, 1], form: one_sided, carrier: 36 MHz}\nenvelopes:\n  flat: {shape: square, length: 1 us, peak: 300 kHz}\nsequence:\n  - pulse: {drive: push, envelope: flat}\nstart: 0\nrecord: {at: [1 us], populations: [0, 1, 2]}\n",
        answers: || {
            let mean = (0.5 * RAD_PER_TURN * 0.3).powi(2);
            let names = ["population_0", "population_1", "population_2"];
            let weights = [1.0, mean, mean * mean / 2.0].map(|w| w * (-mean).exp());
            names.iter().zip(weights).map(|(name, value)| Answer { name, value }).collect()
        },
    },
    Known {
        name: "lambda system, both legs on resonance",
        source: "constant three-level matrix in the frame of both carriers: with equal R the state is in far after t = sqrt2/(2 R) (E. Arimondo, Progress in Optics 35, 257 (1996))",
        config: "format: 1\nsystem:\n  levels: {near: 0 MHz, far: 90 MHz, upper: 700 MHz}\ndrives:\n  pump: {pair: [near, upper], form: one_sided, carrier: \"gap(near, upper)\"}\n  dump: {pair: [far, upper], form: one_sided, carrier: \"gap(far, upper)\"}\nenvelopes:\n  on: {shape: square, length: 1 turn / (sqrt(2) * 2 MHz), peak: 2 MHz}\nsequence:\n  - together:\n      - pulse: {drive: pump, envelope: on}\n      - pulse: {drive: dump, envelope: on}\nstart: near\nrecord: {populations: all, at: [0.1 us]}\n"
            ,
        answers: || vec![Answer { name: "population_far", value: 1.0 }, Answer { name: "population_upper", value: 0.0 }],
    },
    Known {
        name: "driven on resonance while it decays and dephases",
        source: "H. C. Torrey, Physical Review 76, 1059 (1949): a damped oscillation about the steady state",
        config: "format: 1\nsystem:\n  levels: {down: 0 MHz, up: 50 MHz}\ndrives:\n  rf: {pair: [down, up], form: one_sided, carrier: \"gap(down, up)\"}\nenvelopes:\n  on: {shape: square, length: 1.7 us, peak: 0.9 MHz}\nsequence:\n  - pulse: {drive: rf, envelope: on}\ndecay: [{from: up, to: down, lifetime: 1.3 us}]\ndephasing: [{energy_of: {up: 1}, pure_time: 2.1 us}]\nstart: down\nrecord: {at: [1.7 us], populations: all}\n",
        answers: || {
            let (down, across, turning, t) = (1.0 / 1.3e-6, 0.5 / 1.3e-6 + 1.0 / 2.1e-6, RAD_PER_TURN * 0.9e6, 1.7e-6);
            let still: f64 = down * across / (down * across + turning * turning);
            let (damped, swung): (f64, f64) = (0.5 * (down + across), turning.powi(2) - (0.5 * (down - across)).powi(2));
            let (off, rate) = (1.0 - still, swung.sqrt());
            // in the lower level the inversion stands still at first: its slope about the steady state is zero
            let inversion = still + (-damped * t).exp() * off * ((rate * t).cos() + damped / rate * (rate * t).sin());
            vec![Answer { name: "population_up", value: 0.5 * (1.0 - inversion) }]
        },
    },
    Known {
        name: "cascade down three levels",
        source: "H. Bateman, Proceedings of the Cambridge Philosophical Society 15, 423 (1910)",
        config: "format: 1\nsystem:\n  levels: {ground: 0 MHz, middle: 40 MHz, top: 90 MHz}\nsequence:\n  - wait: 0.8 us\ndecay: [{from: top, to: middle, lifetime: 0.4 us}, {from: middle, to: ground, lifetime: 0.9 us}]\nstart: top\nrecord: {at: [0.8 us], populations: all}\n",
        answers: || {
            let (fast, slow, t) = (1.0 / 0.4e-6, 1.0 / 0.9e-6, 0.8e-6f64);
            let (top, middle) = ((-fast * t).exp(), fast / (fast - slow) * ((-slow * t).exp() - (-fast * t).exp()));
            let names = ["population_top", "population_middle", "population_ground"];
            names.iter().zip([top, middle, 1.0 - top - middle]).map(|(name, value)| Answer { name, value }).collect()
        },
    },
    Known {
        name: "smooth pulse on resonance while both levels are lost alike",
        source: "area theorem (S. L. McCall, E. L. Hahn, Physical Review 183, 457 (1969)) times the exponential of the common loss",
        config: "format: 1\nsystem:\n  levels: {down: 0 MHz, up: 50 MHz}\ndrives:\n  rf:\n    pair: [down, up]\n    form: one_sided\n    carrier: gap(down, up)\nenvelopes:\n  hump: {shape: gaussian, field_sigma: 0.2 us, cut_at: 0.7 us, edge: lift, turn: 0.37 turn}\nsequence:\n  - pulse: {drive: rf, envelope: hump}\ndecay: [{from: down, to: outside, lifetime: 2 us}, {from: up, to: outside, lifetime: 2 us}]\nstart: down\nrecord: {at: [1.4 us], populations: all}\n",
        answers: || vec![Answer { name: "population_up", value: sin2(0.37 / 2.0) * (-1.4f64 / 2.0).exp() }],
    },
];

#[cfg(test)]
mod tests {
    use super::*;

    /// Every known problem by every method that can take it.
    #[test]
    fn exact_known_problems_by_every_method() {
        for known in KNOWN {
            for (method, accuracy) in [
                ("automatic", 1e-10),
                ("smooth", 1e-10),
                ("geometric", 1e-10),
                ("collocation", 1e-10),
                ("fast carrier", 1e-10),
                ("constant steps", 1e-7),
            ] {
                let verdict = known.run(method, accuracy).expect("a known problem is a lawful config");
                assert!(
                    verdict.good(),
                    "{} by {method}: off by {:.2e}, error figure {:.2e}",
                    known.name,
                    verdict.deviation,
                    verdict.error_figure
                );
                assert!(verdict.error_figure <= accuracy, "{} by {method}: error figure {:.2e}", known.name, verdict.error_figure);
            }
        }
    }
}
