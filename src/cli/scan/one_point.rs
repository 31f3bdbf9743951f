//! One point of a scan alone: its config, and its numbers.

use super::super::{complain, complain_of, point, print, read_config, settings, Common, Status};
use crate::config::document::Document;
use crate::config::place::lines;
use crate::noise::{compute, Draws};
use crate::plan::{Plan, Point};
use crate::report::{result_json, summary};
use crate::scan::grid::Grid;

/// Computes the point at which the numbers of `wanted` have the values written there.
pub(super) fn one_point(common: &Common, wanted: &str, as_json: bool) -> Result<Status, Status> {
    let words: Vec<String> = wanted.split(',').map(|word| word.trim().to_string()).filter(|word| !word.is_empty()).collect();
    if words.iter().any(|word| !word.contains('=')) || words.is_empty() {
        complain(&format!("error: --point {wanted} is no list of NAME=VALUE.\n  Write: --point reach=20MHz,peak=1.5MHz\n"));
        return Err(Status::Refused);
    }
    let mut set = common.set.clone();
    set.extend(words);
    let document = read_config(&Common { config: common.config.clone(), set: set.clone() })?;
    let moved = settings(&set)?;
    let text = with_numbers(&document, &moved);
    let plan = Plan::new(document);
    let point = point(&plan)?;
    let document = plan.document();
    complain_of(document, &point.warnings);
    let draws = Draws { family: family(document, &point), ..Draws::default() };
    let outcome = compute(document, &point, &draws).map_err(|mistake| {
        complain_of(document, &[mistake]);
        Status::Refused
    })?;
    complain_of(document, outcome.warnings());
    if as_json {
        let result = result_json::result(document, &point, &outcome);
        print(&format!("{}\n", serde_json::to_string_pretty(&result).unwrap_or_default()));
    } else {
        let sets: String = set.iter().map(|word| format!(" --set {word}")).collect();
        print(&format!("{text}\n{}", summary::summary(document, &point, &outcome, None)));
        print(&format!("to keep its traces and plots: nutate run {}{sets} --folder DIR\n", common.config.display()));
    }
    if !outcome.reached {
        complain(&format!("warning: {}.\n", summary::not_reached(document, &outcome)));
        return Ok(Status::NotAccurate);
    }
    Ok(Status::Good)
}

/// The draws of noise that the scan makes at this point.
fn family(document: &Document, at: &Point) -> u64 {
    let Some(scan) = document.scan.as_ref().filter(|scan| !scan.same_noise) else { return 0 };
    let value = |name: &str| document.numbers.iter().find(|number| number.name == name).map(|number| at.values[number.register as usize]);
    let values: Option<Vec<f64>> = scan.axes.iter().map(|axis| value(&axis.number)).collect();
    values.and_then(|values| Grid::new(scan).point_of(&values)).unwrap_or(0)
}

/// The text of the config with other values in place of those of some numbers.
fn with_numbers(document: &Document, moved: &[(String, String)]) -> String {
    let source = document.source();
    let mut rows: Vec<String> = lines(&source.text).map(str::to_string).collect();
    let numbers = document.root.get("numbers");
    let mut places: Vec<_> =
        moved.iter().filter_map(|(name, value)| Some((numbers?.get(name)?.place, value))).filter(|(place, _)| place.line > 0).collect();
    // from the right, so that places further left stay true
    places.sort_by_key(|(place, _)| std::cmp::Reverse((place.line, place.column)));
    for (place, value) in places {
        let Some(row) = rows.get_mut(place.line as usize - 1) else { continue };
        let chars: Vec<char> = row.chars().collect();
        let (from, to) = (place.column as usize - 1, (place.column + place.length) as usize - 1);
        let (head, tail): (String, String) =
            (chars[..from.min(chars.len())].iter().collect(), chars[to.min(chars.len())..].iter().collect());
        *row = format!("{head}{value}{tail}");
    }
    rows.join("\n")
}
