//! result.json of a scan.

use serde_json::{json, Map, Value};

use super::number::number;
use super::result_json::{config, program};
use crate::config::messages::one_line;
use crate::config::scan::Make;
use crate::scan::setup::Setup;
use crate::scan::summary::{BestPoint, Region, Summary};

/// Everything that a finished scan says, beside its table.
pub struct Finished<'a> {
    /// The scan.
    pub setup: &'a Setup,
    /// What its points say.
    pub summary: &'a Summary,
    /// Points that meet the tolerance, where one was asked for.
    pub region: Option<&'a Region>,
    /// Points computed by this process and its helpers.
    pub computed: u64,
    /// Points that were stored before.
    pub reused: u64,
    /// Threads.
    pub threads: usize,
    /// The resolution of all points, method by method; empty where each was solved by itself.
    pub resolution: Vec<String>,
    /// Warnings.
    pub warnings: Vec<String>,
    /// Seconds, of this start alone.
    pub seconds: f64,
}

/// The object, without what is known of its table.
pub fn result(finished: &Finished) -> Map<String, Value> {
    let (setup, summary) = (finished.setup, finished.summary);
    let document = setup.document();
    let mut result = Map::new();
    let mut put = |key: &str, value: Value| result.insert(key.to_string(), value);
    put("program", program());
    put("config", config(document));
    put("points", json!(summary.points));
    put("failed", json!(summary.failed));
    put("computed", json!(finished.computed));
    put("reused", json!(finished.reused));
    let (name, reason) = if finished.resolution.is_empty() {
        ("each point by itself", "each point was refined until its own error figure met the accuracy")
    } else if setup.bundled().is_ok() {
        (
            "eight points side by side",
            "as many steps as corners and points inside need; one group of eight of each block and the extremes were computed with half \
             as many again too, and blocks that need more were refined point by point",
        )
    } else {
        (
            "one resolution for all points",
            "the finest that any probe needs; one point of each tile and the extremes were computed at the next finer one too, \
             and tiles that need more were refined point by point",
        )
    };
    put("method", json!({"name": name, "reason": reason, "resolution": finished.resolution, "refined_by_itself": summary.alone}));
    put("error_figure", number(summary.error_figure));
    put("checked", json!(summary.checked));
    if let Some(worst) = summary.worst {
        put("error_figure_at", place(setup, worst));
    }
    put("accuracy", json!({"final": document.accuracy.last, "reached": reached(setup, summary), "points_beyond": summary.inaccurate}));
    let columns = || setup.columns.iter().enumerate();
    put("errors", columns().map(|(k, column)| (column.name.clone(), number(summary.errors[k]))).collect::<Map<_, _>>().into());
    if !summary.sampling.is_empty() {
        put("sampling_error", number(summary.sampling_error(setup)));
        put(
            "sampling_errors",
            columns().map(|(k, column)| (column.name.clone(), number(summary.sampling[k]))).collect::<Map<_, _>>().into(),
        );
    }
    put("axes", setup.grid.axes().iter().enumerate().map(|(k, axis)| axis_json(setup, k, axis)).collect());
    put("units", columns().map(|(_, column)| (column.name.clone(), json!(column.unit))).collect::<Map<_, _>>().into());
    put(
        "extremes",
        columns()
            .filter_map(|(k, column)| {
                let [low, high] = summary.extremes[k]?;
                let end = |(value, point): (f64, u64)| json!({"value": number(value), "at": place(setup, point)});
                Some((column.name.clone(), json!({"smallest": end(low), "largest": end(high)})))
            })
            .collect::<Map<_, _>>()
            .into(),
    );
    if let Some(best) = &summary.best {
        put("best", best_json(finished, best));
    }
    put(
        "failures",
        json!({
            "reasons": summary.reasons.iter().map(|(reason, count)| json!({"reason": reason, "points": count})).collect::<Vec<_>>(),
            "first": summary.failures.iter().map(|(point, reason)| json!({"at": place(setup, *point), "reason": reason})).collect::<Vec<_>>(),
        }),
    );
    put("warnings", json!(finished.warnings));
    put("threads", json!(finished.threads));
    put("seconds", number(finished.seconds));
    result
}

/// Whether every point that was computed twice is as accurate as asked.
pub fn reached(setup: &Setup, summary: &Summary) -> bool {
    summary.error_figure <= setup.document().accuracy.last
}

/// A point by the headings of its axes.
pub fn place(setup: &Setup, point: u64) -> Value {
    let shown = setup.grid.shown(point);
    setup.grid.axes().iter().zip(shown).map(|(axis, value)| (axis.heading(), number(value))).collect::<Map<_, _>>().into()
}

fn axis_json(setup: &Setup, k: usize, axis: &crate::config::scan::Axis) -> Value {
    let mut found = json!({
        "number": axis.number, "unit": if axis.unit.is_empty() { "1" } else { &axis.unit }, "points": axis.count(),
        "spacing": if axis.logarithmic { "logarithmic" } else { "linear" },
    });
    if axis.together_with.is_some() {
        let leader = setup.grid.leaders()[setup.grid.group_of(k)];
        found["together_with"] = json!(setup.grid.axes()[leader].number);
    }
    found
}

fn best_json(finished: &Finished, best: &BestPoint) -> Value {
    let setup = finished.setup;
    let asked = setup.scan.best.as_ref();
    let mut found = json!({
        "of": setup.columns[best.column].name,
        "make": if asked.is_some_and(|best| best.make == Make::Small) { "small" } else { "large" },
        "value": number(best.value),
        "error": number(finished.summary.errors[best.column]),
        "at": place(setup, best.point),
    });
    if let (Some(region), Some(tolerance)) = (finished.region, asked.and_then(|best| best.tolerance)) {
        found["tolerance"] = number(tolerance);
        let mut reaches = Map::new();
        for reach in &region.reaches {
            let members = setup.grid.axes().iter().enumerate().filter(|(k, _)| setup.grid.group_of(*k) == reach.group);
            for (_, axis) in members {
                let ends = reach.places.map(|place| axis.shown(place));
                let (low, high) = if ends[0] <= ends[1] { (0, 1) } else { (1, 0) };
                reaches.insert(
                    axis.heading(),
                    json!({
                        "from": number(ends[low]), "to": number(ends[high]),
                        "points": reach.places[1] - reach.places[0] + 1,
                        "ends_with_the_axis": [reach.open[low], reach.open[high]],
                    }),
                );
            }
        }
        let share = region.points as f64 / finished.summary.points.max(1) as f64;
        found["region"] = json!({"points": region.points, "share": number(share), "along": reaches});
    }
    found
}

/// Warnings of the config as lines.
pub fn warnings(setup: &Setup) -> Vec<String> {
    let document = setup.document();
    document.warnings.iter().map(|warning| one_line(&document.sources, warning)).collect()
}
