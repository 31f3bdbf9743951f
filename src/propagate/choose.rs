//! The table of methods and the automatic choice between them.

use super::load::Load;

/// How stretches are carried where H changes; constant ones are always done by their exponential.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Method {
    /// Matrix exponentials; where H changes, of its midpoint values.
    ConstantSteps,
    /// Runge-Kutta 8(5,3) with step control.
    Smooth,
    /// Magnus expansion of order 6.
    Geometric,
    /// Collocation on adaptive elements.
    Collocation,
    /// Collocation with harmonics of the carriers.
    Carrier,
}

impl Method {
    /// The word for it in a config and in results.
    pub fn word(self) -> &'static str {
        match self {
            Method::ConstantSteps => "constant steps",
            Method::Smooth => "smooth",
            Method::Geometric => "geometric",
            Method::Collocation => "collocation",
            Method::Carrier => "fast carrier",
        }
    }

    /// Whether it chooses its own steps by a tolerance.
    pub fn is_adaptive(self) -> bool {
        matches!(self, Method::Smooth | Method::Collocation | Method::Carrier)
    }

    /// The method of a word, if there is one.
    pub fn from_word(word: &str) -> Option<Method> {
        METHODS.iter().map(|row| row.method).find(|method| method.word() == word)
    }
}

/// What one method can do and costs.
#[derive(Debug, Clone, Copy)]
pub struct Row {
    /// The method.
    pub method: Method,
    /// Its word.
    pub word: &'static str,
    /// What it is, in a sentence.
    pub about: &'static str,
    /// Whether it gives integrals of populations over time.
    pub time_in: bool,
    /// Whether it is exact to rounding as long as H is constant in the stillest picture.
    pub exact_when_constant: bool,
    /// Order of the error in the step where H changes.
    pub order: u32,
    /// Estimated cost of a whole solution, both resolutions, in ns on the machine it was calibrated on; only ratios matter.
    pub cost_ns: fn(&Load) -> f64,
}

/// All methods.
pub const METHODS: &[Row] = &[
    Row {
        method: Method::ConstantSteps,
        word: "constant steps",
        about: "matrix exponentials of constant stretches; where H changes, midpoint slices",
        time_in: true,
        exact_when_constant: true,
        order: 2,
        cost_ns: slices_ns,
    },
    Row {
        method: Method::Smooth,
        word: "smooth",
        about: "Runge-Kutta 8(5,3) with step control",
        time_in: true,
        exact_when_constant: true,
        order: 8,
        cost_ns: smooth_ns,
    },
    Row {
        method: Method::Geometric,
        word: "geometric",
        about: "Magnus expansion of order 6, unitary at every step",
        time_in: false,
        exact_when_constant: true,
        order: 6,
        cost_ns: geometric_ns,
    },
    Row {
        method: Method::Collocation,
        word: "collocation",
        about: "collocation on adaptive elements, order 16, rows at no cost",
        time_in: false,
        exact_when_constant: true,
        order: 16,
        cost_ns: collocation_ns,
    },
    Row {
        method: Method::Carrier,
        word: "fast carrier",
        about: "harmonics of the carriers with slow amplitudes, by collocation; nothing dropped",
        time_in: false,
        exact_when_constant: true,
        order: 16,
        cost_ns: carrier_ns,
    },
];

/// How many times more steps an accuracy takes than 1e-8 does, at an order.
fn accuracy_factor(load: &Load, order: f64) -> f64 {
    (1e-8 / load.accuracy.max(1e-14)).powf(1.0 / order)
}

fn slices_ns(load: &Load) -> f64 {
    let levels = load.levels as f64;
    let exact = 250.0 * (load.segments as f64) + 250.0 * load.moments as f64;
    // A rough count: second order needs some ten thousand slices for each turn at 1e-8. Automatic never takes them.
    let slices = 1e4 * (load.still_turns + load.rises + load.swing_turns) * accuracy_factor(load, 2.0);
    exact + if load.changing > 0 { slices * (150.0 + 15.0 * levels.powi(3)) } else { 0.0 }
}

// The numbers of the next two functions were fitted to the seconds of 363 random problems of 2 to 6 levels, 0.1 to 50 s at some Hz,
// accuracies 1e-6 to 1e-11 (the ignored test `print_loads_and_seconds`), and meet them within a factor of 1.6 and 1.4 on average.

fn smooth_ns(load: &Load) -> f64 {
    if load.coordinates > 0 {
        return smooth_open_ns(load);
    }
    let levels = load.levels as f64;
    let more_columns = (load.columns - 1) as f64;
    let steps = (89.0 * load.coupling_turns + 43.0 * load.entry_turns + 45.0 * load.changing as f64) * accuracy_factor(load, 10.0);
    let step_ns =
        if load.levels == 2 { 1000.0 + 130.0 * more_columns } else { 900.0 + 60.0 * levels * levels + 66.0 * levels * more_columns };
    (steps + load.moments as f64) * step_ns
}

fn geometric_ns(load: &Load) -> f64 {
    if load.coordinates > 0 {
        return geometric_open_ns(load);
    }
    let levels = load.levels as f64;
    let more_columns = (load.columns - 1) as f64;
    let steps = (44.0 * load.swing_turns + 51.0 * load.still_turns + 18.5 * load.rises) * accuracy_factor(load, 6.0);
    let step_ns =
        if load.levels == 2 { 1000.0 + 25.0 * more_columns } else { 1800.0 + 14.0 * levels.powi(3) + 330.0 * levels * more_columns };
    (steps + load.moments as f64) * step_ns
}

fn smooth_open_ns(load: &Load) -> f64 {
    let (entries, size, columns) = (load.nonzero as f64, load.coordinates as f64, load.columns as f64);
    let steps = (89.0 * load.coupling_turns + 43.0 * load.entry_turns + 8.0 * load.decays + 45.0 * load.changing as f64)
        * accuracy_factor(load, 10.0);
    (steps + load.moments as f64) * (600.0 + 12.0 * (1.5 * entries * columns + 5.0 * size * columns))
}

fn geometric_open_ns(load: &Load) -> f64 {
    let (size, columns) = (load.coordinates as f64, load.columns as f64);
    let steps = (44.0 * load.swing_turns + 51.0 * load.still_turns + 4.0 * load.decays + 18.5 * load.rises) * accuracy_factor(load, 6.0);
    (steps + load.moments as f64) * (800.0 + 6.0 * size.powi(3) * 0.4 + 12.0 * size * size * columns)
}

// The next two are rough counts of elements (22 random problems, 4 to 3089 elements) times what an element costs.

fn elements_ns(load: &Load, turns: f64) -> f64 {
    let columns = load.columns as f64;
    let elements = (1.5 * turns + 2.0 * load.rises + 3.0 * load.changing as f64) * accuracy_factor(load, 16.0);
    elements * (1500.0 + 1200.0 * load.levels as f64 * columns) + 100.0 * (load.levels * load.moments) as f64
}

fn collocation_ns(load: &Load) -> f64 {
    // of density matrices it is Runge-Kutta that runs
    if load.coordinates > 0 {
        return smooth_open_ns(load);
    }
    elements_ns(load, load.swing_turns + 0.6 * load.still_turns)
}

fn carrier_ns(load: &Load) -> f64 {
    if load.coordinates > 0 || load.followed_turns == 0.0 {
        return collocation_ns(load);
    }
    3.0 * elements_ns(load, load.coupling_turns)
}

/// Collocation where it serves a closed problem best, with harmonics where carriers are fast enough, and why.
fn by_elements(load: &Load) -> Option<(Method, String)> {
    if load.coordinates > 0 || load.time_in {
        return None;
    }
    if load.followed_turns > 0.0 {
        let why = format!(
            "carriers turn {} times while the couplings swing the state through {} turns, so their harmonics follow slow amplitudes, \
             with {} levels; nothing is dropped",
            round(load.followed_turns),
            round(load.coupling_turns),
            load.levels
        );
        return Some((Method::Carrier, why));
    }
    (collocation_ns(load) < geometric_ns(load).min(smooth_ns(load))).then(|| {
        let why = format!(
            "H swings the state through {} turns, itself turns {} times and its envelopes rise or fall {} times, with {} levels",
            round(load.swing_turns),
            round(load.still_turns),
            round(load.rises),
            load.levels
        );
        (Method::Collocation, why)
    })
}

/// The method for a problem, and why.
pub(super) fn choose(load: &Load, wished: Option<Method>) -> (Method, String) {
    // of a density matrix every method gives the times spent
    let spent = |method: Method| load.coordinates > 0 || METHODS.iter().any(|row| row.method == method && row.time_in);
    if let Some(method) = wished {
        if load.time_in && load.changing > 0 && !spent(method) {
            return (Method::Smooth, format!("{} was asked for, but it gives no time spent in a level; smooth does", method.word()));
        }
        if load.coordinates > 0 && matches!(method, Method::Collocation | Method::Carrier) {
            return (Method::Smooth, format!("{} was asked for, but it carries no density matrices; smooth does", method.word()));
        }
        let asked = "asked for by name".to_string();
        if load.changing == 0 && method != Method::ConstantSteps {
            return (method, asked + "; H is constant throughout, so exponentials serve here too");
        }
        return (method, asked);
    }
    if load.changing == 0 && load.commuting > 0 {
        let others = if load.commuting < load.segments {
            format!(" in {} of {} stretches (constant in the others)", load.commuting, load.segments)
        } else {
            String::new()
        };
        let why = format!("H changes, but commutes with itself at all times{others}, so the exponential of its integral is exact");
        return (Method::ConstantSteps, why);
    }
    if load.changing == 0 {
        let where_ = if load.segments == 1 {
            "through the whole sequence".to_string()
        } else {
            format!("within each of {} stretches", load.segments)
        };
        let how = if load.carrier_turns > 0.0 { ", seen in a picture that turns with the carrier" } else { "" };
        return (Method::ConstantSteps, format!("H is constant {where_}{how}, so exponentials are exact however long they last"));
    }
    if let Some(found) = by_elements(load) {
        return found;
    }
    let (smooth, geometric) = (smooth_ns(load), geometric_ns(load));
    if geometric < smooth && (!load.time_in || load.coordinates > 0) {
        let why =
            format!(
            "H swings the state through {} turns but itself turns only {} times and its envelopes rise or fall {} times, with {} levels",
            round(load.swing_turns), round(load.still_turns), round(load.rises), load.levels
        );
        return (Method::Geometric, why);
    }
    let mut why = format!(
        "the couplings swing the state through {} turns while H itself turns {} times and its envelopes rise or fall {} times, \
         with {} levels",
        round(load.coupling_turns),
        round(load.entry_turns),
        round(load.rises),
        load.levels
    );
    if geometric < smooth {
        why += "; geometric steps would be cheaper but give no time spent in a level";
    }
    (Method::Smooth, why)
}

fn round(number: f64) -> String {
    if number >= 100.0 || number == 0.0 {
        format!("{number:.0}")
    } else if number >= 1.0 {
        format!("{number:.1}")
    } else {
        format!("{number:.1e}")
    }
}
