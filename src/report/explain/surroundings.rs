//! The sections about decay, dephasing and coherence times: each stated in all three words of the trade.

use serde_json::{json, Value};

use super::facts::Facts;
use super::page::{count, digits, short, Page};
use crate::config::decay::SpeedWord;
use crate::config::dephasing::{linewidth_hz, Fading};
use crate::model::surroundings::WayOut;
use crate::report::number::number;
use crate::units::RATE_PER_LINEWIDTH;

/// Ways out, levels and pairs shown.
const MOST: usize = 12;

/// A time, or "endless".
fn time(seconds: f64) -> String {
    if seconds.is_finite() {
        short(seconds, "s")
    } else {
        "endless".to_string()
    }
}

/// A rate with the power of ten that suits it: `19.2308 /ms`.
fn rate(per_s: f64) -> String {
    let units = [(1e12, "/ps"), (1e9, "/ns"), (1e6, "/us"), (1e3, "/ms")];
    let (factor, unit) = units.iter().find(|(factor, _)| per_s.abs() >= factor * 0.1).unwrap_or(&(1.0, "/s"));
    format!("{} {unit}", digits(per_s / factor, 6))
}

/// Lifetime, rate and linewidth of one rate.
fn three(per_s: f64) -> [String; 3] {
    [time(1.0 / per_s), rate(per_s), short(per_s / RATE_PER_LINEWIDTH, "Hz")]
}

fn name(facts: &Facts, level: Option<usize>) -> String {
    level.map_or("outside".to_string(), |level| facts.document.system.names[level].clone())
}

fn more(page: &mut Page, all: usize, what: &str) {
    if all > MOST {
        page.line(2, &format!("and {} more {what}; --json lists all", all - MOST));
    }
}

/// All sections.
pub fn surroundings(page: &mut Page, facts: &Facts) {
    let found = &facts.point.surroundings;
    if found.jumps.is_empty() {
        return;
    }
    decays(page, facts);
    dephasings(page, facts);
    coherence_times(page, facts);
}

fn decays(page: &mut Page, facts: &Facts) {
    let found = &facts.point.surroundings;
    if found.ways.is_empty() {
        return;
    }
    page.heading("decay");
    let row = |way: &WayOut| {
        let [life, rate, width] = three(way.rate_per_s);
        let by = way.operator.map_or(String::new(), |operator| format!("by the operator {}", facts.document.operators[operator].name));
        vec![format!("{} to {}", name(facts, Some(way.from)), name(facts, way.to)), life, rate, width, by]
    };
    let rows: Vec<Vec<String>> = found.ways.iter().take(MOST).map(row).collect();
    page.table(2, &["from, to", "lifetime", "rate", "linewidth", ""], &rows);
    more(page, found.ways.len(), "ways");
    let left: Vec<usize> = (0..facts.document.system.names.len()).filter(|level| ways_of(facts, *level) > 1).collect();
    for level in left.iter().take(MOST) {
        let [life, rate, width] = three(found.rate_out(*level));
        let ways = count(ways_of(facts, *level), "way");
        page.line(2, &format!("{} altogether ({ways}): lifetime {life}, rate {rate}, linewidth {width}", name(facts, Some(*level))));
    }
    let values = &facts.point.values;
    for decay in facts.document.decays.iter().take(MOST) {
        if let Some(bath) = decay.temperature {
            let kelvin = values[bath.register as usize];
            page.line(
                2,
                &format!(
                    "line {}: bath at {}; the stated {} is the one at zero temperature, down goes n + 1, up n times its rate",
                    decay.place.line,
                    short(kelvin, "K"),
                    match decay.speed.word {
                        SpeedWord::Lifetime => "lifetime",
                        SpeedWord::Rate => "rate",
                        SpeedWord::Linewidth => "linewidth",
                    }
                ),
            );
        }
    }
}

fn ways_of(facts: &Facts, level: usize) -> usize {
    facts.point.surroundings.ways.iter().filter(|way| way.from == level).count()
}

fn dephasings(page: &mut Page, facts: &Facts) {
    let (document, found) = (facts.document, &facts.point.surroundings);
    if found.fades.is_empty() {
        return;
    }
    page.heading("dephasing, for a weight difference of 1");
    let names = &document.system.names;
    for (fade, written) in found.fades.iter().zip(&document.dephasings).take(MOST) {
        let weights: Vec<String> = names
            .iter()
            .zip(&fade.weights)
            .filter(|(_, weight)| **weight != 0.0)
            .take(MOST)
            .map(|(name, weight)| format!("{name}: {}", digits(*weight, 6)))
            .collect();
        let stated = match written.fading {
            Fading::Total(total, [a, b]) => format!(
                "; what a total time of {} on {} and {} leaves with the lifetimes taken out",
                short(facts.point.values[total.register as usize], "s"),
                names[a],
                names[b]
            ),
            _ => String::new(),
        };
        page.line(
            2,
            &format!(
                "weights {{{}}}: pure time {}, linewidth {}{stated}",
                weights.join(", "),
                time(fade.pure_time_s),
                short(linewidth_hz(fade.pure_time_s), "Hz")
            ),
        );
    }
    more(page, found.fades.len(), "dephasings");
}

/// 1/e time of the coherence of a pair, and the limit that decay alone sets, s.
fn coherence_time(facts: &Facts, a: usize, b: usize) -> (f64, f64) {
    let found = &facts.point.surroundings;
    (1.0 / found.coherence_rate(a, b), 2.0 / (found.rate_out(a) + found.rate_out(b)))
}

fn pairs(facts: &Facts) -> impl Iterator<Item = (usize, usize)> {
    let size = facts.document.system.names.len();
    (0..size).flat_map(move |a| (a + 1..size).map(move |b| (a, b)))
}

fn coherence_times(page: &mut Page, facts: &Facts) {
    page.heading("coherence times (1/e), and the limit that decay alone sets");
    let all: Vec<(usize, usize)> = pairs(facts).collect();
    let names = &facts.document.system.names;
    let row = |(a, b): &(usize, usize)| {
        let (t2, limit) = coherence_time(facts, *a, *b);
        // 2 T1 in the sense of the word only where one of the two decays
        let found = &facts.point.surroundings;
        let word = match (found.rate_out(*a) > 0.0, found.rate_out(*b) > 0.0) {
            (false, false) => "nothing decays",
            (true, true) => "2 over the sum of both rates",
            _ => "2 T1",
        };
        vec![format!("{} and {}", names[*a], names[*b]), format!("T2 {}", time(t2)), format!("limit {}", time(limit)), word.to_string()]
    };
    let rows: Vec<Vec<String>> = all.iter().take(MOST).map(row).collect();
    page.table(2, &[], &rows);
    more(page, all.len(), "pairs");
}

/// The four lists of `explain --json`.
pub fn json(facts: &Facts) -> [(&'static str, Vec<Value>); 4] {
    let found = &facts.point.surroundings;
    let three = |per_s: f64| (number(1.0 / per_s), number(per_s), number(per_s / RATE_PER_LINEWIDTH));
    let names = &facts.document.system.names;
    let life = |level: usize| {
        let (lifetime, rate, width) = three(found.rate_out(level));
        json!({"name": names[level], "lifetime_s": lifetime, "rate_per_s": rate, "linewidth_Hz": width})
    };
    let way = |way: &WayOut| {
        let (lifetime, rate, width) = three(way.rate_per_s);
        let mut object = json!({
            "from": names[way.from], "to": name(facts, way.to), "lifetime_s": lifetime, "rate_per_s": rate, "linewidth_Hz": width,
        });
        if let Some(operator) = way.operator {
            object["operator"] = json!(facts.document.operators[operator].name);
        }
        object
    };
    let fades = found.fades.iter().map(|fade| {
        let (time, width) = (number(fade.pure_time_s), number(linewidth_hz(fade.pure_time_s)));
        json!({"pure_time_s": time, "linewidth_Hz": width})
    });
    let pair = |(a, b)| {
        let (t2, limit) = coherence_time(facts, a, b);
        json!({"from": names[a], "to": names[b], "t2_s": number(t2), "limit_s": number(limit)})
    };
    [
        ("lifetimes", (0..names.len()).filter(|level| found.rate_out(*level) > 0.0).map(life).collect()),
        ("decays", found.ways.iter().map(way).collect()),
        ("dephasing", fades.collect()),
        ("coherence_times", pairs(facts).map(pair).collect()),
    ]
}
