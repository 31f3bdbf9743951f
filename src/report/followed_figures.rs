//! Levels and transitions of a scan as plots and tables, their lines followed along its axis.

use std::io::{self, Write};

use serde_json::{json, Value};

use super::number::number;
use super::plots::{followed, FollowedFigure, FollowedLine, Ruler};
use super::scan_csv::quoted;
use super::scan_figures::{file_word, NamedScan};
use super::scan_text::place_words;
use crate::config::messages::short_with_unit;
use crate::config::record::Item;
use crate::report::fingerprint::fingerprint;
use crate::report::heading::heading;
use crate::scan::follow::{Crossing, Followed};
use crate::scan::setup::Setup;

/// Crossings, and places without names, that are said on the screen.
const SHOWN: usize = 8;

/// Whether a column of the table is a level or a gap of the static system.
pub fn is_level(setup: &Setup, column: usize) -> bool {
    let name = &setup.columns[column].name;
    let names = &setup.document().system.names;
    let levels = levels_of(setup);
    levels.iter().any(|level| *name == format!("level_{}_Hz", names[*level]))
        || pairs_of(setup).iter().any(|[a, b]| *name == format!("gap_{}_{}_Hz", names[*a], names[*b]))
}

fn levels_of(setup: &Setup) -> Vec<usize> {
    let items = &setup.document().record.items;
    items.iter().flat_map(|item| if let Item::Levels(list) = item { list.as_slice() } else { &[] }).copied().collect()
}

fn pairs_of(setup: &Setup) -> Vec<[usize; 2]> {
    let items = &setup.document().record.items;
    items.iter().flat_map(|item| if let Item::Transitions(list) = item { list.as_slice() } else { &[] }).copied().collect()
}

/// The lines that bear one of the names somewhere.
fn level_lines(found: &Followed, wanted: &[usize]) -> Vec<usize> {
    let bears = |line: &usize| found.states[*line].iter().flatten().any(|state| wanted.contains(state));
    (0..found.states.len()).filter(bears).collect()
}

/// The pairs of lines that bear one of the pairs of names somewhere.
fn pair_lines(found: &Followed, wanted: &[[usize; 2]]) -> Vec<[usize; 2]> {
    let mut pairs = Vec::new();
    for place in 0..found.energies_hz.len() {
        let line_of = |state: usize| (0..found.states.len()).find(|line| found.states[*line][place] == Some(state));
        for [a, b] in wanted {
            if let (Some(first), Some(second)) = (line_of(*a), line_of(*b)) {
                pairs.push([first.min(second), first.max(second)]);
            }
        }
    }
    pairs.sort_unstable();
    pairs.dedup();
    pairs
}

/// The plots: levels, and transitions once for each matrix that gives them strength.
pub fn of(setup: &Setup, found: &Followed, across: &Ruler) -> Vec<NamedScan> {
    let mut drawn = Vec::new();
    let blank = FollowedFigure {
        title: heading(setup.document()),
        fingerprint: fingerprint(setup.document()),
        across: across.clone(),
        remark: remark(found),
        ..FollowedFigure::default()
    };
    let levels = levels_of(setup);
    if !levels.is_empty() {
        drawn.push(("levels".to_string(), followed(&levels_figure(setup, found, &levels, blank.clone()))));
    }
    let pairs = pairs_of(setup);
    if !pairs.is_empty() {
        for k in 0..found.matrices.len().max(1) {
            let name = match found.matrices.len() {
                0 | 1 => "transitions".to_string(),
                _ => format!("transitions-{}", file_word(&found.matrices[k])),
            };
            drawn.push((name, followed(&transitions_figure(setup, found, &pairs, (k, blank.clone())))));
        }
    }
    drawn
}

fn remark(found: &Followed) -> String {
    match found.crossings.len() {
        0 => String::new(),
        1 => "where a line changes its colour, two avoid each other and exchange their names".to_string(),
        several => format!("where lines change their colour ({several} times), two avoid each other and exchange their names"),
    }
}

fn levels_figure(setup: &Setup, found: &Followed, wanted: &[usize], blank: FollowedFigure) -> FollowedFigure {
    let names = &setup.document().system.names;
    let places = 0..found.energies_hz.len();
    let lines = level_lines(found, wanted)
        .into_iter()
        .map(|line| FollowedLine {
            values: places.clone().map(|place| found.level_hz(line, place)).collect(),
            names: places.clone().map(|place| found.name(line, place).and_then(|name| wanted.iter().position(|w| *w == name))).collect(),
            strengths: Vec::new(),
        })
        .collect();
    let names = wanted.iter().map(|level| names[*level].clone()).collect();
    FollowedFigure { quantity: "energy / h".to_string(), names, lines, ..blank }
}

fn transitions_figure(setup: &Setup, found: &Followed, wanted: &[[usize; 2]], (k, blank): (usize, FollowedFigure)) -> FollowedFigure {
    let names = &setup.document().system.names;
    let places = 0..found.energies_hz.len();
    let lines = pair_lines(found, wanted)
        .into_iter()
        .map(|[first, second]| {
            let gap = |place: usize| (found.level_hz(second, place) - found.level_hz(first, place)).abs();
            let name = |place: usize| {
                let (a, b) = (found.name(first, place)?, found.name(second, place)?);
                wanted.iter().position(|pair| *pair == [a, b] || *pair == [b, a])
            };
            let strength = |place: usize| {
                let pair = found.states[first][place].zip(found.states[second][place]);
                pair.and_then(|(a, b)| found.strength(k, place, [a, b])).unwrap_or(f64::NAN)
            };
            FollowedLine {
                values: places.clone().map(gap).collect(),
                names: places.clone().map(name).collect(),
                strengths: if found.matrices.is_empty() { Vec::new() } else { places.clone().map(strength).collect() },
            }
        })
        .collect();
    let names = wanted.iter().map(|[a, b]| format!("{} to {}", names[*a], names[*b])).collect();
    let strengths_of = found.matrices.get(k).cloned().unwrap_or_default();
    FollowedFigure { quantity: "gap / h".to_string(), names, lines, strengths_of, ..blank }
}

/// levels.csv and transitions.csv: line by line at each place, with the name it bears there and the strengths; the files written.
pub fn tables(setup: &Setup, found: &Followed, side: &std::path::Path) -> io::Result<Vec<String>> {
    let mut files = Vec::new();
    let names = &setup.document().system.names;
    let members: Vec<usize> = (0..setup.grid.axes().len()).filter(|axis| setup.grid.group_of(*axis) == found.group).collect();
    let axes: Vec<String> = members.iter().map(|axis| quoted(&setup.grid.axes()[*axis].heading())).collect();
    let at = |place: usize| {
        let shown = members.iter().map(|axis| format!("{:?}", setup.grid.axes()[*axis].shown(place as u64)));
        shown.collect::<Vec<_>>().join(",")
    };
    let places = 0..found.energies_hz.len();
    let lines = level_lines(found, &levels_of(setup));
    if !lines.is_empty() {
        let mut text = format!("{},line,state,weight,energy_Hz\n", axes.join(","));
        for place in places.clone() {
            for (index, line) in lines.iter().enumerate() {
                let Some(state) = found.states[*line][place] else { continue };
                let (weight, level) = (found.weights[place][state], found.energies_hz[place][state]);
                text.push_str(&format!("{},{},{},{weight:?},{level:?}\n", at(place), index + 1, quoted(&names[state])));
            }
        }
        write(side, "levels.csv", &text, &mut files)?;
    }
    let pairs = pair_lines(found, &pairs_of(setup));
    if !pairs.is_empty() {
        let strengths: String = found.matrices.iter().map(|name| format!(",{}", quoted(&format!("strength_{name}")))).collect();
        let mut text = format!("{},line,from,to,gap_Hz{strengths}\n", axes.join(","));
        for place in places {
            for (index, [first, second]) in pairs.iter().enumerate() {
                let Some((a, b)) = found.states[*first][place].zip(found.states[*second][place]) else { continue };
                let levels = &found.energies_hz[place];
                let (lower, upper) = if levels[b] < levels[a] { (b, a) } else { (a, b) };
                let gap = levels[upper] - levels[lower];
                let (from, to) = (quoted(&names[lower]), quoted(&names[upper]));
                text.push_str(&format!("{},{},{from},{to},{gap:?}", at(place), index + 1));
                for k in 0..found.matrices.len() {
                    text.push_str(&found.strength(k, place, [a, b]).map_or(",".to_string(), |size| format!(",{size:?}")));
                }
                text.push('\n');
            }
        }
        write(side, "transitions.csv", &text, &mut files)?;
    }
    Ok(files)
}

fn write(side: &std::path::Path, name: &str, text: &str, files: &mut Vec<String>) -> io::Result<()> {
    let mut to = std::fs::File::create(side.join(name))?;
    to.write_all(text.as_bytes())?;
    to.sync_all()?;
    files.push(name.to_string());
    Ok(())
}

/// What result.json says of crossings, steps that could not be decided, and places without clear names.
pub fn json(setup: &Setup, found: &Followed) -> Value {
    let names = |list: &[usize]| list.iter().map(|state| setup.document().system.names[*state].clone()).collect::<Vec<_>>();
    let axis = &setup.grid.axes()[setup.grid.leaders()[found.group]];
    let shown = |place: usize| number(axis.shown(place as u64));
    let crossing = |one: &Crossing| {
        json!({
            "names": names(&one.names), "between": [shown(one.places[0]), shown(one.places[1])],
            "at": number(one.at), "closest_Hz": number(one.closest_hz),
        })
    };
    let undecided =
        found.undecided.iter().map(|one| json!({"names": names(&one.states), "between": [shown(one.places[0]), shown(one.places[1])]}));
    let nameless = found.nameless.iter().map(|(place, states)| json!({"at": shown(*place), "names": names(states)}));
    json!({
        "along": axis.heading(),
        "crossings": found.crossings.iter().map(crossing).collect::<Vec<_>>(),
        "not_followed": undecided.collect::<Vec<_>>(),
        "no_clear_name": nameless.collect::<Vec<_>>(),
    })
}

/// The same for the screen.
pub fn text(setup: &Setup, found: &Followed) -> String {
    let names = |list: &[usize]| {
        let names: Vec<&str> = list.iter().map(|state| setup.document().system.names[*state].as_str()).collect();
        match names.as_slice() {
            [first, second] => format!("{first} and {second}"),
            [first, .., last] if names.len() > 4 => format!("{} states from {first} to {last}", names.len()),
            _ => names.join(", "),
        }
    };
    let axis = &setup.grid.axes()[setup.grid.leaders()[found.group]];
    let mut text = String::new();
    for one in found.crossings.iter().take(SHOWN) {
        text.push_str(&format!(
            "avoided crossing of {} at {} = {}, where they come within {}: the lines exchange their names\n",
            names(&one.names),
            axis.number,
            place_words(axis, one.at),
            short_with_unit(one.closest_hz, "Hz")
        ));
    }
    if found.crossings.len() > SHOWN {
        text.push_str(&format!("  and {} more in result.json\n", found.crossings.len() - SHOWN));
    }
    for one in found.undecided.iter().take(SHOWN) {
        let [from, to] = one.places.map(|place| place_words(axis, axis.shown(place as u64)));
        text.push_str(&format!(
            "could not be followed from {} = {from} to {to}, where their order in energy was kept: {}\n",
            axis.number,
            names(&one.states)
        ));
    }
    if let Some((place, states)) = found.nameless.first() {
        let count = found.nameless.len();
        text.push_str(&format!(
            "no name fits by more than half at {count} point{}, the first at {} = {}: {}; scan.csv gives the best that is free\n",
            if count == 1 { "" } else { "s" },
            axis.number,
            place_words(axis, axis.shown(*place as u64)),
            names(states)
        ));
    }
    text
}
