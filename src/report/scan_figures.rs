//! What a scan shows as plots: a map where two axes run, lines along one axis, and cuts through the best point.
//!
//! Rows pass by once; what is kept of them is sized by the plot, not by the number of points.

use std::io;

use super::followed_figures;
use super::plots::{lines, map, Drawn, LinesFigure, LinesPanel, MapFigure, PlotError, Ruler};
use crate::config::scan::Make;
use crate::config::settings::Plot;
use crate::report::fingerprint::fingerprint;
use crate::report::heading::heading;
use crate::scan::follow::{follow, Followed};
use crate::scan::row::Found;
use crate::scan::setup::Setup;
use crate::scan::shelf::Rows;
use crate::scan::summary::{BestPoint, Cut};

/// A plot by its file name, or why it could not be drawn.
pub type NamedScan = (String, Result<Drawn, PlotError>);

/// Most cells of a map along one axis; finer grids are averaged.
const MOST_CELLS: u64 = 500;
/// Most points of a line.
const MOST_PLACES: u64 = 4000;
/// An axis of so few values is drawn as curves side by side.
const FEW: u64 = 6;
/// Most curves of one figure, and most columns that get a figure of their own.
const MOST_CURVES: u64 = 8;
const MOST_COLUMNS: usize = 6;

/// One axis of a picture: a group of axes, cut into cells of so many points.
#[derive(Debug, Clone, Copy)]
struct Side {
    group: usize,
    block: u64,
    cells: usize,
}

/// The numbers that plots need, collected row by row.
pub struct Points<'a> {
    setup: &'a Setup,
    /// To the right, and upwards or as further curves.
    across: Option<Side>,
    up: Option<Side>,
    /// Where the other groups stand.
    fixed: Vec<u64>,
    /// For each column the sum of each cell.
    sums: Vec<Vec<f64>>,
    /// For each column how many numbers were added.
    counts: Vec<Vec<u32>>,
    failed: Vec<bool>,
    as_map: bool,
    as_lines: bool,
    best: Option<BestPoint>,
    cuts: Vec<Cut>,
    /// Levels followed along the one axis, where they are recorded.
    pub followed: Option<Followed>,
}

impl<'a> Points<'a> {
    /// Nothing yet; `best` and the cuts through it where there is one.
    pub fn new(setup: &'a Setup, best: Option<BestPoint>, cuts: Vec<Cut>) -> Points<'a> {
        let grid = &setup.grid;
        let fixed = match &best {
            Some(best) => grid.coordinates(best.point),
            None => grid.counts().iter().map(|count| count / 2).collect(),
        };
        let wanted = &setup.document().output.plots;
        let chosen = setup.document().root.get("output").and_then(|output| output.get("plots")).is_some();
        // the two groups with most points, in the order written
        let mut groups: Vec<usize> = (0..grid.counts().len()).filter(|group| grid.counts()[*group] > 1).collect();
        groups.sort_by_key(|group| std::cmp::Reverse(grid.counts()[*group]));
        groups.truncate(2);
        groups.sort_unstable();
        let mut points = Points {
            setup,
            across: None,
            up: None,
            fixed,
            sums: Vec::new(),
            counts: Vec::new(),
            failed: Vec::new(),
            as_map: false,
            as_lines: false,
            best,
            cuts,
            followed: None,
        };
        let few = groups.len() == 2 && groups.iter().any(|group| grid.counts()[*group] <= FEW);
        points.as_map = groups.len() == 2 && wanted.contains(&Plot::Map) && (chosen || !few);
        points.as_lines = wanted.contains(&Plot::ScanLines) && (groups.len() == 1 || groups.len() == 2 && (few || chosen));
        let side = |group: usize, most: u64| {
            let count = grid.counts()[group];
            let block = count.div_ceil(most);
            Side { group, block, cells: count.div_ceil(block) as usize }
        };
        match groups[..] {
            [one] if points.as_lines => points.across = Some(side(one, MOST_PLACES)),
            [first, second] if points.as_map || points.as_lines => {
                (points.across, points.up) = (Some(side(first, MOST_CELLS)), Some(side(second, MOST_CELLS)));
            }
            _ => {}
        }
        let cells = points.across.map_or(0, |side| side.cells) * points.up.map_or(1, |side| side.cells);
        points.sums = vec![vec![0.0; cells]; setup.columns.len().min(MOST_COLUMNS)];
        points.counts = vec![vec![0; cells]; points.sums.len()];
        points.failed = vec![false; cells];
        points
    }

    /// Collects all rows.
    pub fn of(setup: &'a Setup, rows: &dyn Rows, best: Option<BestPoint>, cuts: Vec<Cut>) -> io::Result<Points<'a>> {
        let mut points = Points::new(setup, best, cuts);
        points.followed = follow(setup);
        if points.across.is_some() {
            rows.each(&mut |row| {
                match &row.found {
                    Found::Numbers { numbers, .. } => points.add(row.point, Some(numbers)),
                    Found::Failed(_) => points.add(row.point, None),
                }
                Ok(())
            })?;
        }
        Ok(points)
    }

    /// Adds the numbers of a point, or that it failed.
    pub fn add(&mut self, point: u64, numbers: Option<&[f64]>) {
        let Some(across) = self.across else { return };
        let along = self.setup.grid.coordinates(point);
        let shown = |group: usize| group == across.group || self.up.is_some_and(|up| up.group == group);
        if (0..along.len()).any(|group| !shown(group) && along[group] != self.fixed[group]) {
            return;
        }
        let place = |side: Side| (along[side.group] / side.block) as usize;
        let cell = self.up.map_or(0, place) * across.cells + place(across);
        match numbers {
            None => self.failed[cell] = true,
            Some(numbers) => {
                for ((sums, counts), value) in self.sums.iter_mut().zip(&mut self.counts).zip(numbers).filter(|(_, v)| v.is_finite()) {
                    sums[cell] += value;
                    counts[cell] += 1;
                }
            }
        }
    }

    fn values(&self, column: usize) -> Vec<f64> {
        let mean = |(sum, count): (&f64, &u32)| if *count > 0 { sum / f64::from(*count) } else { f64::NAN };
        self.sums[column].iter().zip(&self.counts[column]).map(mean).collect()
    }

    fn ruler(&self, side: Side) -> Ruler {
        let axis = &self.setup.grid.axes()[self.setup.grid.leaders()[side.group]];
        let last = axis.count() - 1;
        let middle = |cell: usize| {
            let (first, past) = (cell as u64 * side.block, ((cell as u64 + 1) * side.block - 1).min(last));
            0.5 * (axis.shown(first) + axis.shown(past))
        };
        let places = (0..side.cells).map(middle).collect();
        Ruler { name: axis.number.clone(), unit: axis.unit.clone(), places, logarithmic: axis.logarithmic }
    }

    /// What stands still in the picture, and what moves in step with its axes.
    fn remark(&self) -> String {
        let grid = &self.setup.grid;
        let shown: Vec<usize> = self.across.iter().chain(&self.up).map(|side| side.group).collect();
        let mut parts = Vec::new();
        for (k, axis) in grid.axes().iter().enumerate() {
            let group = grid.group_of(k);
            if let (true, Some(leader)) = (shown.contains(&group), axis.together_with) {
                parts.push(format!("{} in step with {}", axis.number, grid.axes()[leader].number));
            } else if !shown.contains(&group) {
                parts.push(format!("{} = {} {}", axis.number, crate::config::messages::short(axis.shown(self.fixed[group])), axis.unit));
            }
        }
        parts.iter().map(|part| part.trim()).collect::<Vec<_>>().join(", ")
    }
}

/// The unit of a column as plots show it.
fn unit(setup: &Setup, column: usize) -> String {
    let unit = &setup.columns[column].unit;
    if unit == "1" {
        String::new()
    } else {
        unit.clone()
    }
}

/// A name as part of a file name.
pub fn file_word(name: &str) -> String {
    name.chars().map(|c| if c.is_alphanumeric() || c == '_' { c } else { '-' }).collect()
}

/// The plots of a scan.
pub fn of_scan(points: &Points) -> Vec<NamedScan> {
    let mut drawn = Vec::new();
    match (points.across, points.up) {
        (Some(across), Some(up)) => {
            for column in 0..points.sums.len() {
                let name = file_word(&points.setup.columns[column].name);
                if points.as_map {
                    drawn.push((format!("map-{name}"), map(&map_figure(points, column, across, up))));
                }
                if points.as_lines {
                    drawn.push((format!("lines-{name}"), lines(&curves_figure(points, column, across, up))));
                }
            }
        }
        (Some(across), None) => {
            drawn.extend(one_axis(points, across));
            if let Some(found) = &points.followed {
                drawn.extend(followed_figures::of(points.setup, found, &points.ruler(across)));
            }
        }
        _ => {}
    }
    if let Some(best) = points.best.as_ref().filter(|_| points.cuts.len() > 1) {
        drawn.push(("cuts".to_string(), lines(&cuts_figure(points, best))));
    }
    drawn
}

fn map_figure(points: &Points, column: usize, across: Side, up: Side) -> MapFigure {
    let setup = points.setup;
    let asked = setup.scan.best.as_ref();
    let best = points.best.as_ref().filter(|best| best.column == column).zip(asked).map(|(best, asked)| {
        let axis = |side: Side| setup.grid.axes()[setup.grid.leaders()[side.group]].shown(points.fixed[side.group]);
        let level =
            asked.tolerance.map(|tolerance| if asked.make == Make::Small { best.value + tolerance } else { best.value - tolerance });
        ((axis(across), axis(up)), level)
    });
    MapFigure {
        title: heading(setup.document()),
        fingerprint: fingerprint(setup.document()),
        across: points.ruler(across),
        up: points.ruler(up),
        quantity: setup.columns[column].name.clone(),
        unit: unit(setup, column),
        values: points.values(column),
        failed: points.failed.clone(),
        contours: if setup.columns[column].unit == "1" { setup.scan.contours.clone() } else { Vec::new() },
        best,
        remark: points.remark(),
    }
}

/// One column over the longer axis, a curve for each value of the shorter one.
fn curves_figure(points: &Points, column: usize, across: Side, up: Side) -> LinesFigure {
    let setup = points.setup;
    let (long, short) = if across.cells >= up.cells { (across, up) } else { (up, across) };
    let (values, other) = (points.values(column), points.ruler(short));
    let stride = short.cells.div_ceil(MOST_CURVES as usize).max(1);
    let at = |x: usize, y: usize| if long.group == across.group { values[y * across.cells + x] } else { values[x * across.cells + y] };
    let curves = (0..short.cells)
        .step_by(stride)
        .map(|y| {
            let name = format!("{} = {} {}", other.name, crate::config::messages::short(other.places[y]), other.unit);
            (name.trim().to_string(), (0..long.cells).map(|x| at(x, y)).collect())
        })
        .collect();
    LinesFigure {
        title: heading(setup.document()),
        fingerprint: fingerprint(setup.document()),
        quantity: setup.columns[column].name.clone(),
        unit: unit(setup, column),
        panels: vec![LinesPanel { across: points.ruler(long), curves, at: None }],
        band: None,
        remark: points.remark(),
    }
}

/// All columns over the one axis, those of one unit together.
fn one_axis(points: &Points, across: Side) -> Vec<NamedScan> {
    let setup = points.setup;
    // levels that are followed have figures of their own
    let other = |column: &usize| points.followed.is_none() || !followed_figures::is_level(setup, *column);
    let mut units: Vec<String> = Vec::new();
    for column in (0..points.sums.len()).filter(other) {
        let of = unit(setup, column);
        if !units.contains(&of) {
            units.push(of);
        }
    }
    let best = |columns: &[usize]| points.best.as_ref().filter(|best| columns.contains(&best.column));
    units
        .iter()
        .enumerate()
        .map(|(k, of)| {
            let columns: Vec<usize> = (0..points.sums.len()).filter(other).filter(|column| unit(setup, *column) == *of).collect();
            let curves = columns.iter().map(|column| (setup.columns[*column].name.clone(), points.values(*column))).collect();
            let axis = &setup.grid.axes()[setup.grid.leaders()[across.group]];
            let at = best(&columns).map(|_| axis.shown(points.fixed[across.group]));
            let figure = LinesFigure {
                title: heading(setup.document()),
                fingerprint: fingerprint(setup.document()),
                quantity: if columns.len() == 1 { setup.columns[columns[0]].name.clone() } else { "final quantities".to_string() },
                unit: of.clone(),
                panels: vec![LinesPanel { across: points.ruler(across), curves, at }],
                band: best(&columns).filter(|_| columns.len() == 1).and_then(|best| band(setup, best)),
                remark: points.remark(),
            };
            let name = if k == 0 { "lines".to_string() } else { format!("lines-{}", file_word(of)) };
            (name, lines(&figure))
        })
        .collect()
}

/// From the best value to the last that still serves.
fn band(setup: &Setup, best: &BestPoint) -> Option<(f64, f64)> {
    let asked = setup.scan.best.as_ref()?;
    let tolerance = asked.tolerance?;
    Some(if asked.make == Make::Small { (best.value, best.value + tolerance) } else { (best.value - tolerance, best.value) })
}

fn cuts_figure(points: &Points, best: &BestPoint) -> LinesFigure {
    let setup = points.setup;
    let here = setup.grid.coordinates(best.point);
    let panels = points.cuts.iter().take(4).map(|cut| {
        let count = cut.numbers.len() as u64;
        let block = count.div_ceil(MOST_PLACES);
        // a cut is drawn point by point, thinned where there are more than pixels
        let kept: Vec<u64> = (0..count).filter(|k| k % block == 0 || *k == here[cut.group]).collect();
        let axis = &setup.grid.axes()[setup.grid.leaders()[cut.group]];
        let places = kept.iter().map(|k| axis.shown(*k)).collect();
        let values = kept.iter().map(|k| cut.numbers[*k as usize].as_ref().map_or(f64::NAN, |numbers| numbers[best.column])).collect();
        let across = Ruler { name: axis.number.clone(), unit: axis.unit.clone(), places, logarithmic: axis.logarithmic };
        LinesPanel { across, curves: vec![(setup.columns[best.column].name.clone(), values)], at: Some(axis.shown(here[cut.group])) }
    });
    LinesFigure {
        title: heading(setup.document()),
        fingerprint: fingerprint(setup.document()),
        quantity: setup.columns[best.column].name.clone(),
        unit: unit(setup, best.column),
        panels: panels.collect(),
        band: band(setup, best),
        remark: format!("through the best point, {}", super::scan_text::at(setup, best.point)),
    }
}
