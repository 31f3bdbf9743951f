//! `scan:`: axes of a grid of points, what is kept of each, columns made of the final quantities, and what is best.

use super::expression;
use super::messages::{Fault, StepWord};
use super::place::Place;
use super::reader::{Derived, Quantity, Reader};
use super::tree::{read_text, Node};
use crate::units::Dim;

/// Most points of one scan.
pub const MOST_POINTS: f64 = 1e9;
/// How far from a whole count of steps a range may be.
const STEP_SLACK: f64 = 1e-9;

/// Where an axis has its points.
#[derive(Debug, Clone, PartialEq)]
pub enum Points {
    /// Equal steps, both ends included; ends in the unit of the axis.
    Even {
        /// First.
        from: f64,
        /// Last.
        to: f64,
        /// How many.
        count: u64,
    },
    /// Equal ratios, both ends included; ends in the unit of the axis.
    Ratio {
        /// First.
        from: f64,
        /// Last.
        to: f64,
        /// How many.
        count: u64,
    },
    /// As listed, in SI.
    Listed(Vec<f64>),
}

/// One axis.
#[derive(Debug, Clone)]
pub struct Axis {
    /// The number that it moves.
    pub number: String,
    /// Where its name stands.
    pub place: Place,
    /// Where its points are.
    pub points: Points,
    /// The unit as written in its first value; empty without dimension.
    pub unit: String,
    /// SI value of one such unit.
    pub factor: f64,
    /// Drawn and spaced in equal ratios.
    pub logarithmic: bool,
    /// The earlier axis in step with which it moves.
    pub together_with: Option<usize>,
}

/// What is kept of each point.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Keep {
    /// The final quantities.
    Final,
    /// Whole traces too.
    Traces,
}

/// Which end of a quantity is the good one.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Make {
    /// The smallest is best.
    Small,
    /// The largest is best.
    Large,
}

/// `best:`.
#[derive(Debug, Clone)]
pub struct Best {
    /// The column.
    pub of: String,
    /// Where its name stands.
    pub place: Place,
    /// Which end of it.
    pub make: Make,
    /// How much worse than the best still serves, in SI.
    pub tolerance: Option<f64>,
}

/// `scan:`.
#[derive(Debug, Clone)]
pub struct Scan {
    /// Axes as written, the last one fastest.
    pub axes: Vec<Axis>,
    /// What is kept.
    pub keep: Keep,
    /// Each point sees the same draws of noise.
    pub same_noise: bool,
    /// Further columns, by name.
    pub derived: Vec<(String, Derived)>,
    /// What is best.
    pub best: Option<Best>,
    /// Levels at which a map of a quantity without dimension has a line.
    pub contours: Vec<f64>,
    /// Where the section stands.
    pub place: Place,
}

impl Axis {
    /// Number of its points.
    pub fn count(&self) -> u64 {
        match &self.points {
            Points::Even { count, .. } | Points::Ratio { count, .. } => *count,
            Points::Listed(list) => list.len() as u64,
        }
    }

    /// Point `k` in SI. Made points are rounded to 15 digits in the unit of the axis, so that they are what a person would type.
    pub fn value(&self, k: u64) -> f64 {
        match &self.points {
            Points::Listed(list) => list[k as usize],
            _ => self.shown(k) * self.factor,
        }
    }

    /// Point `k` in the unit of the axis.
    pub fn shown(&self, k: u64) -> f64 {
        let made = |from: f64, to: f64, count: u64, between: f64| {
            if k == 0 {
                from
            } else if k + 1 == count {
                to
            } else {
                digits_15(between)
            }
        };
        match &self.points {
            Points::Listed(list) => digits_15(list[k as usize] / self.factor),
            Points::Even { from, to, count } => {
                let (left, steps) = ((count - 1 - k) as f64, (count - 1) as f64);
                // the middle of a symmetric axis is exactly zero
                made(*from, *to, *count, (from * left + to * k as f64) / steps)
            }
            Points::Ratio { from, to, count } => made(*from, *to, *count, from * (to / from).powf(k as f64 / (count - 1) as f64)),
        }
    }

    /// Heading of its column.
    pub fn heading(&self) -> String {
        if self.unit.is_empty() {
            self.number.clone()
        } else {
            format!("{}_{}", self.number, self.unit)
        }
    }
}

/// The double nearest to the value written with 15 digits: the last two bits, lost in making it, come back.
fn digits_15(value: f64) -> f64 {
    format!("{value:.14e}").parse().unwrap_or(value)
}

/// Reads `scan:`.
pub fn read_scan(reader: &mut Reader, node: &Node) -> Option<Scan> {
    let known = ["axes", "keep", "same_noise_at_every_point", "derived", "best", "contours"];
    reader.fields(node, "scan", &known, &[("axis", "All axes stand in one list: axes.")])?;
    let axes = read_axes(reader, node);
    let keep = match node.get("keep") {
        Some(keep) => reader.word(keep, "scan / keep", &[("final", Keep::Final), ("traces", Keep::Traces)]),
        None => {
            reader.default("scan.keep", "final");
            Some(Keep::Final)
        }
    };
    let same_noise = match node.get("same_noise_at_every_point") {
        Some(truth) => reader.truth(truth, "same_noise_at_every_point"),
        None => Some(true),
    };
    let derived = read_derived(reader, node.get("derived"));
    let best = match node.get("best") {
        Some(best) => read_best(reader, best, derived.as_deref().unwrap_or_default()).map(Some),
        None => Some(None),
    };
    let contours = match node.get("contours") {
        Some(levels) => read_contours(reader, levels),
        None => Some(Vec::new()),
    };
    let contours = contours?;
    Some(Scan { contours, axes: axes?, keep: keep?, same_noise: same_noise?, derived: derived?, best: best?, place: node.place })
}

fn read_axes(reader: &mut Reader, node: &Node) -> Option<Vec<Axis>> {
    const EXAMPLE: &str = "- {number: peak, from: 1 MHz, to: 5 MHz, points: 41}";
    let list = reader.need(node, "axes", "scan", EXAMPLE).and_then(|list| reader.list(list, "scan / axes", EXAMPLE))?;
    if list.is_empty() {
        let fault = Fault::Shape { what: "axes".to_string(), expected: "at least one axis".to_string(), example: EXAMPLE.to_string() };
        reader.error(node.place, fault);
        return None;
    }
    let mut axes: Vec<Axis> = Vec::new();
    let mut good = true;
    let mut broken: Vec<&str> = Vec::new();
    for item in list {
        match read_axis(reader, item, &axes, &broken) {
            Some(axis) => axes.push(axis),
            None => {
                good = false;
                broken.extend(item.get("number").and_then(Node::text));
            }
        }
    }
    if !good {
        return None;
    }
    let points: f64 = axes.iter().filter(|axis| axis.together_with.is_none()).map(|axis| axis.count() as f64).product();
    if points > MOST_POINTS {
        reader.error(node.place, Fault::TooManyPoints { points, limit: MOST_POINTS });
        return None;
    }
    Some(axes)
}

/// `broken` are earlier axes with mistakes of their own.
fn read_axis(reader: &mut Reader, node: &Node, before: &[Axis], broken: &[&str]) -> Option<Axis> {
    let known = ["number", "from", "to", "points", "step", "values", "file", "spacing", "together_with"];
    reader.fields(node, "an axis of scan", &known, &[("name", "The number that moves is called number.")])?;
    let name = reader.need(node, "number", "an axis of scan", "peak")?;
    let number = reader.text(name, "number", "number: peak")?.to_string();
    let numbers = reader.number_names();
    if !numbers.contains(&number) {
        let near = super::reader::near(&number, numbers.iter().map(String::as_str));
        reader.error(name.place, Fault::AxisUnknown { name: number, near, known: numbers });
        return None;
    }
    if let Some(first) = before.iter().find(|axis| axis.number == number) {
        reader.error(name.place, Fault::AxisTwice { name: number, first: first.place.line });
        return None;
    }
    let dim = reader.number_dim(&number)?;
    let together_with = match node.get("together_with") {
        None => None,
        Some(other) if other.text().is_some_and(|name| broken.contains(&name)) => return None,
        Some(other) => {
            let names: Vec<String> = before.iter().map(|axis| axis.number.clone()).collect();
            let index = reader.name_among(other, "earlier axis", &names)?;
            // in step with an axis that is itself in step with another: all move with the first
            Some(before[index].together_with.unwrap_or(index))
        }
    };
    let logarithmic = match node.get("spacing") {
        None => false,
        Some(spacing) => reader.word(spacing, "spacing", &[("linear", false), ("logarithmic", true)])?,
    };
    let mut axis = Axis {
        number,
        place: name.place,
        points: Points::Listed(Vec::new()),
        unit: String::new(),
        factor: 1.0,
        logarithmic,
        together_with,
    };
    let leader = together_with.map(|index| &before[index]);
    let source = reader.one_of(node, &["from", "values", "file"], "an axis of scan", Some("from and to, values, or file"))?;
    for key in ["to", "points", "step"] {
        if let (Some(stray), true) = (node.get(key), source.key != "from") {
            let lines = vec![source.place.line, stray.place.line];
            let found = vec![source.key.clone(), key.to_string()];
            reader.error(stray.place, Fault::OneOf { found, lines, section: "an axis of scan".to_string() });
            return None;
        }
    }
    axis.points = match source.key.as_str() {
        "values" => read_values(reader, &source.value, &mut axis, dim)?,
        "file" => read_file(reader, &source.value, &mut axis, dim)?,
        _ => read_range(reader, node, &mut axis, dim, leader.map(Axis::count))?,
    };
    if axis.logarithmic {
        let bad = (0..axis.count().min(1)).chain(axis.count().checked_sub(1)).find(|k| !(axis.value(*k) != 0.0));
        if bad.is_some() {
            reader.error(source.place, Fault::RatioThroughZero { number: axis.number });
            return None;
        }
    }
    if let Some(leader) = leader.filter(|leader| leader.count() != axis.count()) {
        let counts = [axis.count(), leader.count()];
        reader.error(source.place, Fault::NotInStep { names: [axis.number, leader.number.clone()], counts });
        return None;
    }
    Some(axis)
}

/// The unit of an axis is the one written in its first value; where none can be scaled, SI.
fn take_unit(axis: &mut Axis, node: &Node, dim: Dim) {
    if dim == Dim::NONE {
        return;
    }
    let written = node.text().and_then(|text| unit_within(text, dim));
    (axis.unit, axis.factor) = written.unwrap_or_else(|| (dim.unit(), 1.0));
}

/// The first unit of dimension `dim` in a value, with its factor.
fn unit_within(text: &str, dim: Dim) -> Option<(String, f64)> {
    fn first(of: &expression::Expression, dim: Dim) -> Option<(usize, usize)> {
        use expression::Kind::*;
        match &of.kind {
            Number { dim: found, plain: false, .. } if *found == dim => Some((of.start, of.length)),
            Negative(inner) => first(inner, dim),
            Binary(_, left, right) => first(left, dim).or_else(|| first(right, dim)),
            Call(_, arguments) => arguments.iter().find_map(|argument| first(argument, dim)),
            _ => None,
        }
    }
    let (start, length) = first(&expression::parse(text).ok()?, dim)?;
    let literal: String = text.chars().skip(start).take(length).collect();
    let literal = literal.trim_matches(|c: char| c.is_whitespace() || matches!(c, '(' | ')' | '+' | '-'));
    let digits = literal.char_indices().find(|(k, c)| {
        let exponent =
            matches!(c, 'e' | 'E') && literal[k + 1..].starts_with(|next: char| next.is_ascii_digit() || matches!(next, '+' | '-'));
        let sign = matches!(c, '+' | '-') && literal[..*k].ends_with(['e', 'E']);
        !(c.is_ascii_digit() || *c == '.' || exponent || sign)
    });
    let unit = literal[digits?.0..].trim().to_string();
    let value = |number: &str| match expression::parse(&format!("{number} {unit}")).ok()?.kind {
        expression::Kind::Number { value, dim: found, .. } if found == dim => Some(value),
        _ => None,
    };
    let (one, two) = (value("1")?, value("2")?);
    // decibels and wavelengths do not scale
    (one > 0.0 && (two - 2.0 * one).abs() <= 1e-12 * two.abs()).then_some((unit, one))
}

fn read_range(reader: &mut Reader, node: &Node, axis: &mut Axis, dim: Dim, leader: Option<u64>) -> Option<Points> {
    let from_node = reader.need(node, "from", "an axis of scan", "1 MHz")?;
    let to_node = reader.need(node, "to", "an axis of scan", "5 MHz")?;
    take_unit(axis, from_node, dim);
    let what = |key: &str| format!("{key} of an axis that moves {}", axis.number);
    let (from, to) = (reader.quantity(from_node, &what("from"), dim), reader.quantity(to_node, &what("to"), dim));
    let (from, to) = (from?, to?);
    let ends = [reader.value_now(from.register), reader.value_now(to.register)];
    if !ends.iter().all(|end| end.is_finite()) {
        // the register is reported with all others that are not finite
        return Some(Points::Listed(vec![f64::NAN]));
    }
    let [from_shown, to_shown] = ends.map(|end| digits_15(end / axis.factor));
    let counted = match (node.get("points"), node.get("step")) {
        (None, Some(step)) => read_step(reader, step, axis, dim, ends)?,
        (Some(points), None) => reader.whole(points, "points", 1.0)? as u64,
        (None, None) => match leader {
            Some(count) => count,
            None => {
                let keys = vec!["points".to_string(), "step".to_string()];
                let hint = Some("points counts both ends; step must meet the end.".to_string());
                reader.error(node.place, Fault::OneOfMissing { keys, section: "an axis of scan".to_string(), hint });
                return None;
            }
        },
        (Some(points), Some(step)) => {
            let (found, lines) = (vec!["points".to_string(), "step".to_string()], vec![points.place.line, step.place.line]);
            reader.error(step.place, Fault::OneOf { found, lines, section: "an axis of scan".to_string() });
            return None;
        }
    };
    if counted == 1 && ends[0] != ends[1] {
        reader.error(node.place, Fault::OnePoint { number: axis.number.clone() });
        return None;
    }
    if axis.logarithmic && !(from_shown * to_shown > 0.0) {
        reader.error(from_node.place, Fault::RatioThroughZero { number: axis.number.clone() });
        return None;
    }
    let (from, to, count) = (from_shown, to_shown, counted);
    Some(if axis.logarithmic { Points::Ratio { from, to, count } } else { Points::Even { from, to, count } })
}

/// The count of points that a step makes of a range.
fn read_step(reader: &mut Reader, node: &Node, axis: &Axis, dim: Dim, [from, to]: [f64; 2]) -> Option<u64> {
    if axis.logarithmic {
        reader.error(node.place, Fault::StepOfRatio);
        return None;
    }
    let step = reader.quantity(node, &format!("step of an axis that moves {}", axis.number), dim)?;
    let step = reader.value_now(step.register);
    let steps = (to - from) / step;
    let whole = steps.round();
    if steps.is_finite() && whole >= 1.0 && (steps - whole).abs() <= STEP_SLACK {
        return Some(if whole < 2.0 * MOST_POINTS { whole as u64 + 1 } else { u64::MAX });
    }
    let say = |value: f64| {
        if axis.unit.is_empty() {
            super::messages::short(value)
        } else {
            format!("{} {}", super::messages::short(value / axis.factor), axis.unit)
        }
    };
    let mut fits = Vec::new();
    if steps.is_finite() && steps >= 1.0 {
        // the nearest step that meets the end as it is printed, not only before rounding
        let exact = |count: f64| {
            let printed: f64 = super::messages::short((to - from) / count / axis.factor).parse().unwrap_or(f64::NAN);
            ((to - from) / axis.factor / printed - count).abs() <= STEP_SLACK
        };
        let nearest = (0..20).flat_map(|away| [whole + f64::from(away), whole - f64::from(away)]).find(|n| *n >= 1.0 && exact(*n));
        if let Some(count) = nearest {
            fits.push(StepWord { key: "step", value: say((to - from) / count), points: count as u64 + 1 });
        }
        fits.push(StepWord { key: "to", value: say(from + step * steps.floor()), points: steps.floor() as u64 + 1 });
        fits.push(StepWord { key: "points", value: (whole as u64 + 1).to_string(), points: whole as u64 + 1 });
    }
    reader.error(node.place, Fault::StepMisfit { step: say(step), range: say(to - from), steps, fits });
    None
}

fn read_values(reader: &mut Reader, node: &Node, axis: &mut Axis, dim: Dim) -> Option<Points> {
    let items = reader.list(node, "values", "values: [1 MHz, 2 MHz]")?;
    let Some(first) = items.first() else {
        let fault = Fault::Shape {
            what: "values".to_string(),
            expected: "a list of at least one".to_string(),
            example: "values: [1 MHz, 2 MHz]".to_string(),
        };
        reader.error(node.place, fault);
        return None;
    };
    take_unit(axis, first, dim);
    let what = format!("a value of an axis that moves {}", axis.number);
    let found: Vec<Option<Quantity>> = items.iter().map(|item| reader.quantity(item, &what, dim)).collect();
    let found: Vec<Quantity> = found.into_iter().collect::<Option<_>>()?;
    let values = reader.tape.as_written();
    Some(Points::Listed(found.iter().map(|quantity| values[quantity.register as usize]).collect()))
}

/// One column of a CSV file beside the config, headed `<number>_<unit>` (without dimension `<number>`).
fn read_file(reader: &mut Reader, node: &Node, axis: &mut Axis, dim: Dim) -> Option<Points> {
    let name = reader.text(node, "file", "file: points.csv")?.to_string();
    let path = reader.beside(&name);
    let known = reader.sources.files().iter().position(|file| file.path == path);
    let file = match known.map(|file| Ok(file as u16)).unwrap_or_else(|| read_text(&path, &mut reader.sources)) {
        Ok(file) => file,
        Err(mut mistake) => {
            if mistake.place.line == 0 {
                mistake.place = node.place;
                if let Fault::CannotRead { path, .. } = &mut mistake.fault {
                    *path = name;
                }
            }
            reader.mistakes.push(mistake);
            return None;
        }
    };
    let text = reader.sources.files()[usize::from(file)].text.clone();
    match column(&text, &axis.number, dim) {
        Ok((unit, factor, values)) => {
            (axis.unit, axis.factor) = (unit, factor);
            Some(Points::Listed(values))
        }
        Err((row, reason)) => {
            let length = reader.sources.line(file, row as u32).map_or(1, |line| line.chars().count().max(1));
            let place = Place { file, line: row as u32, column: 1, length: length as u32 };
            reader.error(place, Fault::FileContent { path: name, row, reason });
            None
        }
    }
}

/// Unit, factor and SI values of the column of a number; a fault names its line.
fn column(text: &str, number: &str, dim: Dim) -> Result<(String, f64, Vec<f64>), (usize, String)> {
    let mut table = csv::ReaderBuilder::new().has_headers(false).comment(Some(b'#')).trim(csv::Trim::All).from_reader(text.as_bytes());
    let mut records = table.records();
    let line_of = |record: &csv::StringRecord| record.position().map_or(1, |at| at.line() as usize);
    let header = match records.next() {
        Some(Ok(header)) => header,
        Some(Err(error)) => return Err((1, error.to_string())),
        None => return Err((1, "the file is empty".to_string())),
    };
    let unit_of = |heading: &str| -> Option<(String, f64)> {
        if heading == number {
            return Some((String::new(), 1.0));
        }
        let unit = heading.strip_prefix(number)?.strip_prefix('_')?;
        unit_within(&format!("1 {unit}"), dim)
    };
    let example = if dim == Dim::NONE { number.to_string() } else { format!("{number}_{}", dim.example()) };
    let Some((which, (unit, factor))) = header.iter().enumerate().find_map(|(k, heading)| Some((k, unit_of(heading)?))) else {
        return Err((line_of(&header), format!("no column is headed {example} (the number and its unit)")));
    };
    if unit.is_empty() && dim != Dim::NONE {
        return Err((line_of(&header), format!("the heading {number} has no unit; write {example}")));
    }
    let mut values = Vec::new();
    for record in records {
        let record = record.map_err(|error| (error.position().map_or(1, |at| at.line() as usize), error.to_string()))?;
        let cell = record.get(which).unwrap_or_default();
        match cell.parse::<f64>() {
            Ok(value) if value.is_finite() => values.push(value * factor),
            _ => return Err((line_of(&record), format!("\"{cell}\" is no finite number (dot as decimal sign)"))),
        }
    }
    if values.is_empty() {
        return Err((line_of(&header), "there is no row below the header".to_string()));
    }
    Ok((unit, factor, values))
}

fn read_derived(reader: &mut Reader, node: Option<&Node>) -> Option<Vec<(String, Derived)>> {
    let Some(node) = node else { return Some(Vec::new()) };
    let Some(entries) = node.entries() else {
        let example = "derived: {contrast: population_up - population_down}".to_string();
        let expected = "a block of names and formulas".to_string();
        reader.error(node.place, Fault::Shape { what: "derived".to_string(), expected, example });
        return None;
    };
    let mut derived = Vec::new();
    let mut good = true;
    for entry in entries {
        match reader.derived(&entry.value, &format!("derived / {}", entry.key)) {
            Some(formula) => derived.push((entry.key.clone(), formula)),
            None => good = false,
        }
    }
    good.then_some(derived)
}

fn read_best(reader: &mut Reader, node: &Node, derived: &[(String, Derived)]) -> Option<Best> {
    reader.fields(node, "scan / best", &["of", "make", "tolerance"], &[])?;
    let of_node = reader.need(node, "of", "scan / best", "population_up")?;
    let of = reader.text(of_node, "best / of", "of: population_up")?.to_string();
    let make = reader.need(node, "make", "scan / best", "large")?;
    let make = reader.word(make, "best / make", &[("small", Make::Small), ("large", Make::Large)])?;
    let dim = derived.iter().find(|(name, _)| *name == of).map_or_else(|| dim_of_final(&of), |(_, formula)| formula.dim);
    let tolerance = match node.get("tolerance") {
        None => None,
        Some(tolerance) => {
            let quantity = reader.quantity(tolerance, "best / tolerance", dim)?;
            let value = reader.value_now(quantity.register);
            if !(value >= 0.0) {
                let found = super::messages::short(value);
                let fault = Fault::OutOfRange { what: "the tolerance".to_string(), found, wanted: "0 or larger".to_string() };
                reader.error(tolerance.place, fault);
                return None;
            }
            Some(value)
        }
    };
    Some(Best { of, place: of_node.place, make, tolerance })
}

fn read_contours(reader: &mut Reader, node: &Node) -> Option<Vec<f64>> {
    let items = reader.list(node, "contours", "contours: [0.5, 0.9]")?;
    let found: Vec<Option<Quantity>> = items.iter().map(|item| reader.plain(item, "a level of contours")).collect();
    let found: Vec<Quantity> = found.into_iter().collect::<Option<_>>()?;
    let values = reader.tape.as_written();
    Some(found.iter().map(|quantity| values[quantity.register as usize]).collect())
}

/// The dimension of a final quantity, by its name.
pub fn dim_of_final(name: &str) -> Dim {
    if name.ends_with("_Hz") {
        Dim::FREQUENCY
    } else if name.starts_with("time_in_") {
        Dim::TIME
    } else {
        Dim::NONE
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn axis(points: Points, unit: &str, factor: f64) -> Axis {
        let (number, unit) = ("reach".to_string(), unit.to_string());
        Axis { number, place: Place::default(), points, unit, factor, logarithmic: false, together_with: None }
    }

    #[test]
    fn exact_points_are_what_a_person_would_type() {
        let even = axis(Points::Even { from: -0.3, to: 0.3, count: 7 }, "MHz", 1e6);
        let shown: Vec<f64> = (0..7).map(|k| even.shown(k)).collect();
        assert_eq!(shown, [-0.3, -0.2, -0.1, 0.0, 0.1, 0.2, 0.3]);
        assert_eq!(even.value(1), -0.2 * 1e6);
        let ratio = axis(Points::Ratio { from: 0.01, to: 100.0, count: 9 }, "MHz", 1e6);
        assert_eq!((ratio.shown(2), ratio.shown(8)), (0.1, 100.0));
        assert!((ratio.shown(1) - 0.01 * 10f64.sqrt()).abs() < 1e-16, "{}", ratio.shown(1));
    }

    #[test]
    fn exact_unit_is_the_first_one_written() {
        let unit = |text: &str, dim: Dim| unit_within(text, dim);
        assert_eq!(unit("-3 MHz", Dim::FREQUENCY), Some(("MHz".to_string(), 1e6)));
        assert_eq!(unit("(line - 2.5e-1 GHz)", Dim::FREQUENCY), Some(("GHz".to_string(), 1e9)));
        assert_eq!(unit("1e3 kHz", Dim::FREQUENCY), Some(("kHz".to_string(), 1e3)));
        assert_eq!(unit("90 deg", Dim::ANGLE).map(|(unit, _)| unit), Some("deg".to_string()));
        assert_eq!(unit("line / 2", Dim::FREQUENCY), None);
        // a wavelength does not scale
        assert_eq!(unit("780 nm vacuum", Dim::FREQUENCY), None);
    }
}
