//! What a scan prints: the screen at its end, its plan before it starts, and how far the stores of a folder are.

use super::scan_folder::spaced;
use super::scan_json::{reached, Finished};
use super::summary::with_error;
use crate::config::messages::{short, short_with_unit};
use crate::report::heading::heading;
use crate::scan::follow::Followed;
use crate::scan::setup::Setup;

/// A time for people: `47 s`, `12 min`, `3 h 20 min`.
pub fn duration(seconds: f64) -> String {
    if seconds < 9.95e-4 {
        format!("{:.1} us", seconds * 1e6)
    } else if seconds < 0.0995 {
        format!("{:.1} ms", seconds * 1e3)
    } else if seconds < 9.95 {
        format!("{seconds:.1} s")
    } else if seconds < 99.5 {
        format!("{seconds:.0} s")
    } else if seconds < 5970.0 {
        format!("{:.0} min", seconds / 60.0)
    } else if seconds < 172_800.0 {
        let minutes = (seconds / 60.0).round();
        format!("{:.0} h {:.0} min", (minutes / 60.0).floor(), minutes % 60.0)
    } else {
        format!("{:.1} days", seconds / 86_400.0)
    }
}

/// Reasons of failed points that are shown.
const SHOWN: usize = 5;

/// A point in words: `reach = 20 MHz, peak = 1.5 MHz`.
pub fn at(setup: &Setup, point: u64) -> String {
    let shown = setup.grid.shown(point);
    let one = |(axis, value): (&crate::config::scan::Axis, f64)| {
        format!("{} = {}{}{}", axis.number, short(value), if axis.unit.is_empty() { "" } else { " " }, axis.unit)
    };
    setup.grid.axes().iter().zip(shown).map(one).collect::<Vec<_>>().join(", ")
}

/// A value of an axis with its unit.
pub fn place_words(axis: &crate::config::scan::Axis, value: f64) -> String {
    format!("{} {}", short(value), axis.unit).trim_end().to_string()
}

/// A value of a column with its unit.
fn value(setup: &Setup, column: usize, value: f64, error: f64) -> String {
    let column = &setup.columns[column];
    if ["s", "Hz"].contains(&column.unit.as_str()) {
        return format!("{} +- {}", short_with_unit(value, &column.unit), short_with_unit(error, &column.unit));
    }
    let unit = if column.unit == "1" { String::new() } else { format!(" {}", column.unit) };
    format!("{}{unit}", with_error(value, error))
}

/// The axes in words, one line each.
pub fn axes(setup: &Setup) -> String {
    let mut text = String::new();
    for (k, axis) in setup.grid.axes().iter().enumerate() {
        let count = axis.count();
        let unit = if axis.unit.is_empty() { String::new() } else { format!(" {}", axis.unit) };
        let ends = format!("{} to {}{unit}", short(axis.shown(0)), short(axis.shown(count - 1)));
        let spacing = if axis.logarithmic { ", logarithmic" } else { "" };
        let step = match axis.together_with {
            Some(_) => format!(", in step with {}", setup.grid.axes()[setup.grid.leaders()[setup.grid.group_of(k)]].number),
            None => String::new(),
        };
        text.push_str(&format!("  {}: {ends}, {count} points{spacing}{step}\n", axis.number));
    }
    text
}

/// The screen at the end.
pub fn summary(finished: &Finished, followed: Option<&Followed>, place: &str) -> String {
    let (setup, summary) = (finished.setup, finished.summary);
    let mut text = format!("{}\n", heading(setup.document()));
    text.push_str(&format!("{} points", spaced(summary.points)));
    if finished.reused > 0 {
        text.push_str(&format!(" ({} computed now, {} stored before)", spaced(finished.computed), spaced(finished.reused)));
    }
    text.push_str(&format!(" in {}:\n{}", duration(finished.seconds), axes(setup)));
    let wide = setup.columns.iter().map(|column| column.name.chars().count()).max().unwrap_or(0);
    for (k, column) in setup.columns.iter().enumerate().take(16) {
        let Some([low, high]) = summary.extremes[k] else { continue };
        let sampling =
            summary.sampling.get(k).map_or(String::new(), |error| format!("\n  {:<wide$}  sampling error up to {error:.1e}", ""));
        text.push_str(&format!(
            "  {:<wide$}  from {} at {}\n  {:<wide$}  to   {} at {}{sampling}\n",
            column.name,
            value(setup, k, low.0, summary.errors[k]),
            at(setup, low.1),
            "",
            value(setup, k, high.0, summary.errors[k]),
            at(setup, high.1)
        ));
    }
    if let (Some(best), Some(asked)) = (&summary.best, &setup.scan.best) {
        text.push_str(&format!(
            "best: {} {} at {}\n",
            asked.of,
            value(setup, best.column, best.value, summary.errors[best.column]),
            at(setup, best.point)
        ));
        if let (Some(region), Some(tolerance)) = (finished.region, asked.tolerance) {
            text.push_str(&format!("  within {} of it: {} points", short(tolerance), spaced(region.points)));
            for reach in &region.reaches {
                let axis = &setup.grid.axes()[setup.grid.leaders()[reach.group]];
                let [from, to] = reach.places.map(|place| short(axis.shown(place)));
                let unit = if axis.unit.is_empty() { String::new() } else { format!(" {}", axis.unit) };
                let more = if reach.open != [false, false] { " (to the end of the axis)" } else { "" };
                text.push_str(&format!("; {} from {from} to {to}{unit}{more}", axis.number));
            }
            text.push('\n');
        }
    }
    text.push_str(&format!(
        "error figure {:.1e} ({} asked), measured on {} points computed at two resolutions{}\n",
        summary.error_figure,
        short(setup.document().accuracy.last),
        spaced(summary.checked),
        summary.worst.map_or(String::new(), |worst| format!("; largest at {}", at(setup, worst)))
    ));
    if !finished.resolution.is_empty() {
        text.push_str(&format!("method: {}; {} points refined by themselves\n", finished.resolution.join("; "), spaced(summary.alone)));
    }
    if let Some(found) = followed {
        text.push_str(&super::followed_figures::text(setup, found));
    }
    text.push_str(&failures(finished));
    text.push_str(&format!("files: {place}\n"));
    text
}

/// Failed points by reason.
fn failures(finished: &Finished) -> String {
    let summary = finished.summary;
    if summary.failed == 0 {
        return String::new();
    }
    let mut text = format!("{} of {} points failed:\n", spaced(summary.failed), spaced(summary.points));
    let mut reasons: Vec<(&String, &u64)> = summary.reasons.iter().collect();
    reasons.sort_by(|a, b| b.1.cmp(a.1).then(a.0.cmp(b.0)));
    for (reason, count) in reasons.iter().take(SHOWN) {
        let first = summary.failures.iter().find(|(_, of)| of == *reason);
        let place = first.map_or(String::new(), |(point, _)| format!(", the first at {}", at(finished.setup, *point)));
        text.push_str(&format!("  {} x {reason}{place}\n", spaced(**count)));
    }
    if reasons.len() > SHOWN {
        text.push_str(&format!("  and {} more reasons in result.json\n", reasons.len() - SHOWN));
    }
    text
}

/// Why the accuracy is not reached, and what to do.
pub fn not_reached(finished: &Finished) -> Option<String> {
    if reached(finished.setup, finished.summary) {
        return None;
    }
    let asked = finished.setup.document().accuracy.last;
    let worst = finished.summary.worst.map_or(String::new(), |worst| format!(" (at {})", at(finished.setup, worst)));
    Some(format!(
        "the accuracy of {} that was asked for is not reached everywhere: the largest error figure is {}{worst}; ask for accuracy: {{final: {}}}, or leave out what is hardest",
        short(asked),
        short(finished.summary.error_figure),
        short(10f64.powf(finished.summary.error_figure.log10().ceil()))
    ))
}

/// What to say where the draws of noise leave more than was asked for.
pub fn rough_average(finished: &Finished) -> Option<String> {
    let (asked, sampling) = (finished.setup.document().accuracy.last, finished.summary.sampling_error(finished.setup));
    (sampling > asked).then(|| {
        format!(
            "the sampling error of the draws reaches {}, larger than the accuracy of {} that was asked for; it falls with the root of \
             their number: more draws, or rule: until accurate",
            short(sampling),
            short(asked)
        )
    })
}

#[cfg(test)]
mod tests {
    use super::duration;

    #[test]
    fn exact_times_for_people() {
        let said: Vec<String> = [0.02, 3.0, 47.2, 720.0, 12_000.0, 400_000.0].map(duration).to_vec();
        assert_eq!(said, ["20.0 ms", "3.0 s", "47 s", "12 min", "3 h 20 min", "4.6 days"]);
    }
}
