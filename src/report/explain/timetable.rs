//! The sequence as a table: start, centre, end, phase and axis of every pulse, repeats folded to their first round.

use super::drives::count_turns;
use super::facts::Facts;
use super::page::{count, degrees, prefix, quantity, short, Page};
use super::words;
use crate::config::sequence::{Change, Step};

/// Rows shown.
const ROWS: usize = 48;

/// A row.
enum Row {
    /// Times of a pulse, how deep it is set in, and its other cells.
    Pulse([f64; 3], usize, Vec<String>),
    /// Anything else.
    Words(usize, String),
}

struct Walk<'f> {
    facts: &'f Facts<'f>,
    rows: Vec<Row>,
    pulse: usize,
    mark: usize,
}

/// Pulses and marks that steps unroll to.
fn unrolled(steps: &[Step]) -> (usize, usize) {
    let mut found = (0, 0);
    for step in steps {
        let (pulses, marks) = match step {
            Step::Pulse(_) => (1, 0),
            Step::Together(pulses) => (pulses.len(), 0),
            Step::Repeat(times, inner) => {
                let (pulses, marks) = unrolled(inner);
                (times * pulses, times * marks)
            }
            Step::Block(inner) => unrolled(inner),
            Step::Mark(_) => (0, 1),
            Step::Wait(_) | Step::WaitBetweenCentres(_) | Step::TurnFrame(..) | Step::SetCarrier(..) => (0, 0),
        };
        found.0 += pulses;
        found.1 += marks;
    }
    found
}

/// The section.
pub fn timetable(page: &mut Page, facts: &Facts) {
    let timeline = &facts.point.timeline;
    let end_s = timeline.end.seconds();
    page.heading(&format!("sequence: {}, {} long", count(timeline.pulses.len(), "pulse"), quantity(end_s, "s", 10)));
    let mut walk = Walk { facts, rows: Vec::new(), pulse: 0, mark: 0 };
    walk.steps(&facts.document.sequence, 0);
    let left = timeline.pulses.len() - walk.pulse;
    // one unit for all times, that of the shortest pulse shown
    let shown = walk.rows.iter().filter_map(|row| match row {
        Row::Pulse(times, ..) => Some(times[2] - times[0]),
        Row::Words(..) => None,
    });
    let (factor, prefix) = prefix(shown.fold(end_s, f64::min), "s");
    let times: Vec<f64> = walk
        .rows
        .iter()
        .flat_map(|row| match row {
            Row::Pulse(times, ..) => times.iter().map(|time| time / factor).collect(),
            Row::Words(..) => Vec::new(),
        })
        .collect();
    let decimals = decimals(&times);
    let unit = format!("{prefix}s");
    let widest = times.iter().map(|time| format!("{time:.decimals$}").len()).max().unwrap_or(0);
    let wide = widest.max(format!("centre/{unit}").len());
    let mut rows = Vec::new();
    let mut heads = ["start", "centre", "end"].map(|head| format!("{:>wide$}", format!("{head}/{unit}"))).to_vec();
    heads.extend(["drive", "envelope", "turn", "phase", "axis of turn"].map(String::from));
    let heads: Vec<&str> = heads.iter().map(String::as_str).collect();
    for row in walk.rows {
        match row {
            Row::Pulse(times, depth, cells) => {
                let mut all: Vec<String> = times.iter().map(|time| format!("{:>wide$.decimals$}", time / factor)).collect();
                all.extend(cells);
                all[3] = format!("{}{}", "  ".repeat(depth), all[3]);
                rows.push((all, None));
            }
            Row::Words(depth, words) => rows.push((Vec::new(), Some(format!("{}{words}", "  ".repeat(depth))))),
        }
    }
    page.mixed_table(2, &heads, &rows, 3);
    if left > 0 {
        page.line(2, &format!("and {}; --json lists all", count(left, "more pulse")));
    }
}

/// As few decimals as show all times to the fourth.
fn decimals(times: &[f64]) -> usize {
    let shown = |decimals: i32, time: f64| {
        let power = 10f64.powi(decimals);
        ((time * power).round() / power - time).abs() <= 0.5e-4
    };
    (0..4).find(|d| times.iter().all(|time| shown(*d, *time))).unwrap_or(4) as usize
}

impl Walk<'_> {
    fn is_full(&self) -> bool {
        self.rows.len() >= ROWS
    }

    fn say(&mut self, depth: usize, words: String) {
        self.rows.push(Row::Words(depth, words));
    }

    fn steps(&mut self, steps: &[Step], depth: usize) {
        let value = |register: u32| self.facts.point.values[register as usize];
        let drives = &self.facts.document.drives;
        for step in steps {
            if self.is_full() {
                return;
            }
            match step {
                Step::Pulse(_) => self.pulses(1, depth),
                Step::Together(pulses) => self.pulses(pulses.len(), depth),
                Step::Wait(time) => {
                    let words = format!("wait {}", short(value(time.register), "s"));
                    self.say(depth, words);
                }
                Step::WaitBetweenCentres(time) => {
                    let words = format!("wait {} from centre to centre", short(value(time.register), "s"));
                    self.say(depth, words);
                }
                Step::Block(inner) => self.steps(inner, depth),
                Step::Repeat(times, inner) => self.repeat(*times, inner, depth),
                Step::TurnFrame(drive, angle) => {
                    let words =
                        format!("turn frame of {} by {} deg", drives[*drive].name, super::page::digits(value(angle.register) * 360.0, 6));
                    self.say(depth, words);
                }
                Step::SetCarrier(drive, carrier, change) => {
                    let how = match change {
                        Some(Change::Continues) => ", its phase continues",
                        Some(Change::AlwaysOn) => ", as if always on",
                        None => "",
                    };
                    let hz = quantity(value(carrier.centre.register), "Hz", 12);
                    let words = format!("carrier of {} set to {hz}{how}", drives[*drive].name);
                    self.say(depth, words);
                }
                Step::Mark(name) => {
                    let at = self.facts.point.timeline.marks.get(self.mark).map_or(0.0, |(_, at)| at.seconds());
                    self.mark += 1;
                    self.say(depth, format!("mark {name} at {}", quantity(at, "s", 10)));
                }
            }
        }
    }

    fn pulses(&mut self, how_many: usize, depth: usize) {
        for _ in 0..how_many {
            let Some(placed) = self.facts.point.timeline.pulses.get(self.pulse) else {
                return;
            };
            let fact = self.facts.pulse(placed);
            let cells = vec![
                self.facts.document.drives[fact.drive].name.clone(),
                self.facts.document.envelopes[fact.envelope].name.clone(),
                fact.axis_turns.map_or("-".to_string(), |_| count_turns(fact.strength.turns)),
                fact.phase_turns.map_or("-".to_string(), degrees),
                fact.axis_turns.map_or("-".to_string(), words::axis),
            ];
            self.rows.push(Row::Pulse(fact.times_s, depth, cells));
            self.pulse += 1;
        }
    }

    /// The first round, and what the others have of their own.
    fn repeat(&mut self, times: usize, inner: &[Step], depth: usize) {
        let (pulses, marks) = unrolled(inner);
        if times == 0 {
            return;
        }
        let placed = &self.facts.point.timeline.pulses;
        let (first, first_mark) = (self.pulse, self.mark);
        let mut words = format!("x {times}, the first round:");
        if times > 1 && pulses > 0 {
            let every = placed[first + pulses].start.since(placed[first].start);
            let same = |k: usize| {
                let (a, b) = (&placed[first + k % pulses], &placed[first + k]);
                let whole = |turns: f64| (turns - turns.round()).abs() < 1e-9;
                whole(a.phase_turns - b.phase_turns) && a.carrier == b.carrier
            };
            words = format!("x {times}, a round every {}, the first one:", short(every, "s"));
            if !(pulses..times * pulses).all(same) {
                words = format!("x {times}, a round every {}, phases differ from round to round; the first one:", short(every, "s"));
            }
        }
        self.say(depth, words);
        self.steps(inner, depth + 1);
        if !self.is_full() {
            self.pulse = first + times * pulses;
            self.mark = first_mark + times * marks;
            self.say(depth, format!("end of x {times}"));
        }
    }
}
