//! Laws that hold for every config, on random small ones: two to four levels in a chain, one drive of any form, up to three
//! pulses of any symmetric shape, with waits.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

mod rig;

use nutate::problem::Matrix;
use nutate::report::result_json::result;
use proptest::prelude::*;
use rig::{last, run, run_set};

const SHAPES: [&str; 5] = ["square", "raised cosine", "trapezoid", "blackman", "gaussian"];
const FORMS: [&str; 3] = ["linear", "one_sided", "direct"];

#[derive(Debug, Clone)]
enum Step {
    Wait { us: f64 },
    Pulse { shape: &'static str, us: f64, peak_mhz: f64, phase_turns: f64 },
}

/// A config of one drive on a chain of levels.
#[derive(Debug, Clone)]
struct Config {
    energies_mhz: Vec<f64>,
    strengths: Vec<f64>,
    form: &'static str,
    carrier_mhz: f64,
    steps: Vec<Step>,
}

/// How numbers are written.
struct Units {
    level: fn(f64) -> String,
    energy: fn(f64) -> String,
    time: fn(f64) -> String,
    angle: fn(f64) -> String,
}

const USUAL: Units = Units {
    level: |mhz| format!("{mhz:e} MHz"),
    energy: |mhz| format!("{mhz:e} MHz"),
    time: |us| format!("{us:e} us"),
    angle: |turns| format!("{turns:e} turn"),
};

impl Config {
    fn length_us(&self) -> f64 {
        let length = |step: &Step| match step {
            Step::Wait { us } | Step::Pulse { us, .. } => *us,
        };
        self.steps.iter().map(length).sum()
    }

    /// The config as text; `order` is the order in which the levels are written.
    fn text(&self, units: &Units, order: &[usize], start: usize, record: &str) -> String {
        let energy = |mhz: f64| (units.energy)(mhz);
        let levels: Vec<String> = order.iter().map(|k| format!("l{k}: {}", (units.level)(self.energies_mhz[*k]))).collect();
        let strengths: Vec<String> = self
            .strengths
            .iter()
            .enumerate()
            .map(|(k, strength)| format!("{{pair: [l{k}, l{}], strength: {strength:e}}}", k + 1))
            .collect();
        let (mut carrier, size) = match self.form {
            "direct" => (String::new(), "matrix_element"),
            _ => (format!(", carrier: {}, carrier_phase: runs on", energy(self.carrier_mhz)), "peak"),
        };
        carrier.insert_str(0, &format!("reference_pair: [l0, l1], form: {}", self.form));
        let (mut envelopes, mut steps) = (String::new(), String::new());
        for (k, step) in self.steps.iter().enumerate() {
            match step {
                Step::Wait { us } => steps += &format!("  - wait: {}\n", (units.time)(*us)),
                Step::Pulse { shape, us, peak_mhz, phase_turns } => {
                    let time = |us: f64| (units.time)(us);
                    let times = match *shape {
                        "trapezoid" => format!("length: {}, rise: {}", time(*us), time(0.25 * us)),
                        "gaussian" => format!("field_sigma: {}, cut_at: {}, edge: lift", time(0.2 * us), time(0.5 * us)),
                        _ => format!("length: {}", time(*us)),
                    };
                    envelopes += &format!("  e{k}: {{shape: {shape}, {times}, {size}: {}}}\n", energy(*peak_mhz));
                    let phase = match self.form {
                        "direct" => String::new(),
                        _ => format!(", phase: {}", (units.angle)(*phase_turns)),
                    };
                    steps += &format!("  - pulse: {{drive: d, envelope: e{k}{phase}}}\n");
                }
            }
        }
        format!(
            "format: 1
system: {{levels: {{{}}}}}
drives: {{d: {{strengths: [{}], {carrier}}}}}
envelopes:
  spare: {{shape: square, length: 1 us, {size}: 1 MHz}}
{envelopes}sequence:
{steps}start: l{start}
record: {{at: [{}], {record}}}
frame: {{kind: lab}}
accuracy: {{final: 1e-9, method: automatic}}
",
            levels.join(", "),
            strengths.join(", "),
            (units.time)(0.37 * self.length_us()),
        )
    }

    fn written(&self, record: &str) -> String {
        let order: Vec<usize> = (0..self.energies_mhz.len()).collect();
        self.text(&USUAL, &order, 0, record)
    }

    /// The propagator of the whole sequence and its error figure.
    fn propagator(&self) -> (Matrix, f64) {
        run(&self.written("propagator: true")).propagator.unwrap()
    }

    /// The config whose H(t) is minus this one's at the mirrored time. The carrier at T - t has run f T less f t, so its phase
    /// turns the other way and starts f T later.
    fn reversed(&self) -> Config {
        let turns = self.carrier_mhz * self.length_us();
        let step = |step: &Step| match step.clone() {
            Step::Pulse { shape, us, peak_mhz, phase_turns } => {
                Step::Pulse { shape, us, peak_mhz: -peak_mhz, phase_turns: -phase_turns - turns }
            }
            wait => wait,
        };
        Config {
            energies_mhz: self.energies_mhz.iter().map(|mhz| -mhz).collect(),
            steps: self.steps.iter().rev().map(step).collect(),
            ..self.clone()
        }
    }

    /// The part before and the part from step `k`, each a sequence of its own.
    fn parted(&self, k: usize) -> [Config; 2] {
        let first = Config { steps: self.steps[..k].to_vec(), ..self.clone() };
        let turns = self.carrier_mhz * first.length_us();
        let mut second = Config { steps: self.steps[k..].to_vec(), ..self.clone() };
        for step in &mut second.steps {
            if let Step::Pulse { phase_turns, .. } = step {
                *phase_turns += turns;
            }
        }
        [first, second]
    }
}

fn pulse() -> impl Strategy<Value = Step> {
    (prop::sample::select(&SHAPES[..]), 0.05..0.4f64, 0.2..6.0f64, -1.0..1.0f64)
        .prop_map(|(shape, us, peak_mhz, phase_turns)| Step::Pulse { shape, us, peak_mhz, phase_turns })
}

fn config() -> impl Strategy<Value = Config> {
    let steps = prop::collection::vec((pulse(), prop::option::of(0.01..0.5f64)), 1..4);
    let gaps = prop::collection::vec(3.0..25.0f64, 1..4);
    let strengths = prop::collection::vec(0.4..1.6f64, 3);
    (gaps, strengths, prop::sample::select(&FORMS[..]), -2.0..2.0f64, steps).prop_map(|(gaps, strengths, form, off, steps)| {
        let mut energies_mhz = vec![1.5];
        for gap in &gaps {
            energies_mhz.push(energies_mhz[energies_mhz.len() - 1] + gap);
        }
        Config {
            strengths: strengths[..gaps.len()].to_vec(),
            form,
            carrier_mhz: gaps[0] + off,
            energies_mhz,
            steps: steps.into_iter().flat_map(|(pulse, wait)| [Some(pulse), wait.map(|us| Step::Wait { us })]).flatten().collect(),
        }
    })
}

/// Largest modulus of an entry of the difference.
fn off(a: &Matrix, b: &Matrix) -> f64 {
    (a - b).iter().map(|entry| entry.norm()).fold(0.0, f64::max)
}

fn populations(text: &str, levels: usize) -> (Vec<f64>, f64) {
    let outcome = run(text);
    let found = (0..levels).map(|k| last(&outcome, &format!("population_l{k}"))).collect();
    (found, outcome.error_figure)
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 32, failure_persistence: None, ..ProptestConfig::default() })]

    /// Populations add to one at every recorded time, and the propagator is unitary.
    #[test]
    fn norm_is_kept(config in config()) {
        let outcome = run(&config.written("populations: all, propagator: true"));
        let levels = config.energies_mhz.len();
        for row in outcome.rows.chunks(outcome.columns.len()) {
            let sum: f64 = row[..levels].iter().sum();
            prop_assert!((sum - 1.0).abs() <= levels as f64 * outcome.error_figure + 1e-14, "{sum}");
        }
        let (u, error) = outcome.propagator.unwrap();
        prop_assert!(off(&(u.adjoint() * &u), &Matrix::identity(levels, levels)) <= 4.0 * levels as f64 * error + 1e-14);
    }

    /// A sequence and then minus its mirror image in time leave everything as it was.
    #[test]
    fn reversal_in_time_undoes(config in config()) {
        let (there, error) = config.propagator();
        let (back, other_error) = config.reversed().propagator();
        let size = there.nrows();
        let slack = 4.0 * size as f64 * (error + other_error) + 1e-12;
        prop_assert!(off(&there, &Matrix::identity(size, size)) > 1e-3);
        prop_assert!(off(&(back * there), &Matrix::identity(size, size)) <= slack);
    }

    /// The propagator of a sequence is that of its second part times that of its first.
    #[test]
    fn propagators_compose(config in config(), cut in 0.0..1.0f64) {
        prop_assume!(config.steps.len() > 1);
        let k = 1 + (cut * (config.steps.len() - 1) as f64) as usize;
        let [first, second] = config.parted(k.min(config.steps.len() - 1));
        // a drive that stands in no pulse would only be a warning
        let ((whole, error), (a, error_a), (b, error_b)) = (config.propagator(), first.propagator(), second.propagator());
        let slack = 4.0 * whole.nrows() as f64 * (error + error_a + error_b) + 1e-12;
        prop_assert!(off(&(b * a), &whole) <= slack);
    }

    /// The order in which levels are written changes no population.
    #[test]
    fn relabelling_levels_leaves_populations(config in config(), turn in 1..4usize) {
        let levels = config.energies_mhz.len();
        let order: Vec<usize> = (0..levels).map(|k| (k * (levels - 1) + turn) % levels).collect();
        let (written, error) = populations(&config.written("populations: all"), levels);
        let (other, other_error) = populations(&config.text(&USUAL, &order, 0, "populations: all"), levels);
        for (a, b) in written.iter().zip(&other) {
            prop_assert!((a - b).abs() <= error + other_error + 1e-13, "{written:?} {other:?}");
        }
    }

    /// MHz, rad/us, electronvolt and kelvin; us, ns and minutes; turns, degrees and radians say the same. h and k of the SI
    /// (exact since 2019; E. Tiesinga and others, Reviews of Modern Physics 93, 025010 (2021)).
    #[test]
    fn units_leave_results(config in config()) {
        let others = [
            Units {
                level: |mhz| format!("{:e} rad/ns", 1e-3 * std::f64::consts::TAU * mhz),
                energy: |mhz| format!("{:e} rad/us", std::f64::consts::TAU * mhz),
                time: |us| format!("{:e} ns", 1e3 * us),
                angle: |turns| format!("{:e} deg", 360.0 * turns),
            },
            Units {
                level: |mhz| format!("{:e} J", 1e6 * mhz * 6.626_070_15e-34),
                energy: |mhz| format!("{:e} eV", 1e6 * mhz * 6.626_070_15e-34 / 1.602_176_634e-19),
                time: |us| format!("{:e} min", 1e-6 * us / 60.0),
                angle: |turns| format!("{:e} rad", std::f64::consts::TAU * turns),
            },
            Units {
                level: |mhz| format!("{:e} mK", 1e9 * mhz * 6.626_070_15e-34 / 1.380_649e-23),
                energy: |mhz| format!("{:e} kHz", 1e3 * mhz),
                time: |us| format!("{:e} ps", 1e6 * us),
                angle: |turns| format!("{turns:e} turn"),
            },
        ];
        let levels = config.energies_mhz.len();
        let (usual, error) = populations(&config.written("populations: all"), levels);
        let order: Vec<usize> = (0..levels).collect();
        for units in &others {
            let (other, other_error) = populations(&config.text(units, &order, 0, "populations: all"), levels);
            for (a, b) in usual.iter().zip(&other) {
                prop_assert!((a - b).abs() <= error + other_error + 1e-12, "{usual:?} {other:?}");
            }
        }
    }

    /// A second run gives the same bits.
    #[test]
    fn a_second_run_is_the_same(config in config()) {
        let text = config.written("populations: all, propagator: true, energy: true, coherence: [l0, l1]");
        let numbers = || {
            let plan = nutate::plan::Plan::new(rig::document(&text, &[]));
            let point = plan.point().unwrap();
            let outcome = nutate::outcome::compute(plan.document(), &point);
            let mut tree = result(plan.document(), &point, &outcome);
            tree["seconds"] = serde_json::Value::Null;
            let rows: Vec<u64> = outcome.rows.iter().map(|number| number.to_bits()).collect();
            (serde_json::to_string(&tree).unwrap(), rows)
        };
        prop_assert_eq!(numbers(), numbers());
    }

    /// A value given with --set is the value written.
    #[test]
    fn setting_a_number_is_writing_it(peak_mhz in 0.2..3.0f64, length_ns in 50.0..900.0f64) {
        let text = |peak: &str, length: &str| {
            rig::ONE_PULSE
                .replace("system:", &format!("numbers: {{peak: {peak}, length: {length}, turn_of: peak * length}}\nsystem:"))
                .replace("length: 2 us, peak: 0.7 MHz", "length: length * turn_of / (peak * length), peak: peak")
        };
        let (peak, length) = (format!("{peak_mhz:e} MHz"), format!("{length_ns:e} ns"));
        let written = run(&text(&peak, &length));
        let set = run_set(&text("1 MHz", "1 us"), &[("peak", &peak), ("length", &length)]);
        prop_assert_eq!(&written.rows, &set.rows);
        prop_assert!(written.rows != run(&text("1 MHz", "1 us")).rows);
    }
}

/// A raised cosine of `length_us` and `peak_mhz` on two levels, whole or in `slices` held at their middle values.
fn sliced(peak_mhz: f64, length_us: f64, gap_mhz: f64, slices: Option<usize>) -> f64 {
    let shape = match slices {
        None => "shape: raised cosine".to_string(),
        Some(n) => {
            let middle = |k: usize| (std::f64::consts::PI * (k as f64 + 0.5) / n as f64).sin().powi(2);
            let samples: Vec<String> = (0..n).map(|k| format!("{:e}", middle(k))).collect();
            format!("shape: samples, between: hold, samples: [{}]", samples.join(", "))
        }
    };
    let outcome = run(&format!(
        "format: 1
system: {{levels: {{a: 0 MHz, b: {gap_mhz:e} MHz}}}}
drives: {{d: {{pair: [a, b], form: direct}}}}
envelopes: {{e: {{{shape}, length: {length_us:e} us, matrix_element: {peak_mhz:e} MHz / 2}}}}
sequence: [{{pulse: {{drive: d, envelope: e}}}}]
start: a
record: {{populations: all}}
frame: {{kind: lab}}
accuracy: {{final: 1e-11, method: automatic}}
"
    ));
    last(&outcome, "population_b")
}

/// W. Magnus, Communications on Pure and Applied Mathematics 7, 649 (1954): slices held at their middles are of order 2; the
/// numbers stand in tests/reference/closed_forms.json.
#[test]
fn slices_of_the_reference() {
    let all: serde_json::Value = serde_json::from_str(include_str!("reference/closed_forms.json")).unwrap();
    let expected = &all["slicing-error-of-smooth-pulse"]["expected"];
    let digits = |value: &serde_json::Value| value.as_str().unwrap().parse::<f64>().unwrap();
    // the reference puts level b at -2 MHz, which no population can tell
    rig::close(sliced(6.0, 0.2, -2.0, None), digits(&expected["populations"][0][1]), 1e-12);
    for (k, n) in [10, 40, 160, 640].into_iter().enumerate() {
        rig::close(sliced(6.0, 0.2, -2.0, Some(n)), digits(&expected["P1_sliced"][k]), 2e-13);
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 24, failure_persistence: None, ..ProptestConfig::default() })]

    /// Twice as many slices leave a quarter of the error.
    #[test]
    fn slicing_converges_at_order_two(peak_mhz in 1.0..8.0f64, length_us in 0.1..0.4f64, gap_mhz in 1.0..6.0f64) {
        let smooth = sliced(peak_mhz, length_us, gap_mhz, None);
        let errors = [40, 80, 160].map(|n| (sliced(peak_mhz, length_us, gap_mhz, Some(n)) - smooth).abs());
        // where the leading error happens to vanish the next order shows
        prop_assume!(errors[2] > 1e-7);
        let order = (errors[1] / errors[2]).log2();
        prop_assert!((order - 2.0).abs() < 0.1, "{order} from {errors:?}");
    }
}
