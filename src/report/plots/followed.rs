//! Levels or gaps along the axis of a scan, each line followed through its avoided crossings: its colour says which name it bears
//! where, its width how strong it is. Lines that lie far apart stand in panels of their own above each other.
use super::frame::{self, EDGE, FOOT, HEIGHT, KEY, LABEL, LINE, SMALL, TICK, WIDTH};
use super::palette::{Marker, Rgb, AXIS, CURVES, GRID, INK, REST, SOFT_INK};
use super::place::apart;
use super::ruler::{Laid, Ruler};
use super::scale::{engineering, ticks, with_digits, Display};
use super::scene::{Anchor, Drawn, Scene};
use super::{font, PlotError};

/// Followed lines over one axis.
#[derive(Clone, Debug, Default)]
pub struct FollowedFigure {
    /// Title, at the top left.
    pub title: String,
    /// Fingerprint of the config, in small print.
    pub fingerprint: String,
    /// What is shown, in Hz.
    pub quantity: String,
    /// The axis.
    pub across: Ruler,
    /// The names that lines bear; each has its colour.
    pub names: Vec<String>,
    /// The lines.
    pub lines: Vec<FollowedLine>,
    /// What the widths are of; empty where all lines are equal.
    pub strengths_of: String,
    /// Said at the foot.
    pub remark: String,
}

/// One line, place by place.
#[derive(Clone, Debug, Default)]
pub struct FollowedLine {
    /// Values in Hz; NaN where a point failed.
    pub values: Vec<f64>,
    /// Which of the names it bears; none of them is grey.
    pub names: Vec<Option<usize>>,
    /// Its strength, in any unit, as only ratios count; empty where lines have none.
    pub strengths: Vec<f64>,
}

/// Up to so many points each has a disc.
const DISCS: usize = 25;
const NAME_LIMIT: f64 = 330.0;
/// Panels at most, and how many times the width of the lines beside it a gap must have to cut the axis.
const PANELS: usize = 4;
const FAR: f64 = 8.0;
/// Pixels between panels.
const BREAK: f64 = 50.0;
/// Width of the strongest line and of one without strength, in pixels, and steps of width.
const WIDEST: f64 = 11.0;
const THINNEST: f64 = 1.0;
const PLAIN: f64 = 2.6;
const STEP: f64 = 0.5;

/// Lines on one scale.
struct Panel {
    members: Vec<usize>,
    low: f64,
    high: f64,
    top: f64,
    bottom: f64,
    /// What is taken off the numbers of its axis, Hz.
    offset: f64,
    display: Display,
}

impl Panel {
    fn y(&self, value: f64) -> f64 {
        self.bottom - (self.bottom - self.top) * (value - self.low) / (self.high - self.low)
    }
}

/// Draws followed lines. Errors: lengths that differ, nothing to draw.
pub fn followed(figure: &FollowedFigure) -> Result<Drawn, PlotError> {
    let expected = figure.across.places.len();
    for line in &figure.lines {
        for found in [line.values.len(), line.names.len()] {
            if found != expected {
                return Err(PlotError::Length { column: figure.quantity.clone(), found, expected });
            }
        }
    }
    let mut scene = Scene::new(WIDTH, HEIGHT);
    let top = frame::title(&mut scene, &figure.title) + 34.0;
    let panels = laid_out(figure, top, HEIGHT - FOOT)?;
    let numbers = panels.iter().flat_map(marks).map(|(_, text)| font::width(&text, TICK)).fold(40.0, f64::max);
    let left = EDGE + 18.0 + numbers;
    let labels: Vec<Vec<Label>> = panels.iter().map(|panel| labels(figure, panel)).collect();
    let right = frame::right_edge(labels.iter().flatten().map(|label| label.text.as_str()), NAME_LIMIT);
    let laid = figure.across.between(left, right, false);
    for panel in &panels {
        grid(&mut scene, panel, &laid, (left, right));
    }
    let most = figure.lines.iter().flat_map(|line| &line.strengths).copied().filter(|size| size.is_finite()).fold(0.0, f64::max);
    for (panel, labels) in panels.iter().zip(&labels) {
        // thin lines in front of wide ones
        let mut order = panel.members.clone();
        let strongest = |line: usize| figure.lines[line].strengths.iter().copied().fold(0.0, f64::max);
        order.sort_by(|a, b| strongest(*b).total_cmp(&strongest(*a)));
        for member in order {
            draw(&mut scene, &figure.lines[member], panel, (figure, &laid), most);
        }
        write(&mut scene, labels, panel, right);
    }
    foot(&mut scene, figure, &laid, (left, right), &panels);
    frame::fingerprint(&mut scene, &figure.fingerprint);
    scene.finish()
}

/// Lowest and highest value of a line.
fn range(line: &FollowedLine) -> Option<(f64, f64)> {
    let values = || line.values.iter().copied().filter(|value| value.is_finite());
    values().reduce(f64::min).zip(values().reduce(f64::max))
}

/// The lines in panels, the lowest at the bottom, cut where a gap is far wider than what lies on both sides of it.
fn laid_out(figure: &FollowedFigure, top: f64, bottom: f64) -> Result<Vec<Panel>, PlotError> {
    let mut ranges: Vec<(usize, f64, f64)> =
        figure.lines.iter().enumerate().filter_map(|(k, line)| range(line).map(|(low, high)| (k, low, high))).collect();
    ranges.sort_by(|a, b| a.1.total_cmp(&b.1));
    // what overlaps stands together
    let mut groups: Vec<(Vec<usize>, f64, f64)> = Vec::new();
    for (k, low, high) in ranges {
        match groups.last_mut() {
            Some(group) if low <= group.2 => {
                group.0.push(k);
                group.2 = group.2.max(high);
            }
            _ => groups.push((vec![k], low, high)),
        }
    }
    if groups.is_empty() {
        return Err(PlotError::Nothing { title: figure.title.clone() });
    }
    let cuts = cuts(&groups);
    let mut joined: Vec<(Vec<usize>, f64, f64)> = Vec::new();
    for (index, group) in groups.into_iter().enumerate() {
        match joined.last_mut().filter(|_| !cuts.contains(&index)) {
            Some(last) => {
                last.0.extend(group.0);
                last.2 = last.2.max(group.2);
            }
            None => joined.push(group),
        }
    }
    let count = joined.len() as f64;
    let share = |group: &(Vec<usize>, f64, f64)| 1.0 + (group.0.len() as f64).sqrt();
    let (free, whole) = (bottom - top - BREAK * (count - 1.0), joined.iter().map(share).sum::<f64>());
    let mut at = bottom;
    Ok(joined
        .into_iter()
        .map(|group| {
            let height = free * share(&group) / whole;
            let (members, first, last) = group;
            let size = first.abs().max(last.abs());
            let flat = last - first <= 1e-12 * size;
            let room = if flat { 0.05 * size.max(1.0) } else { 0.06 * (last - first) };
            let offset = if !flat && last - first < 2e-3 * size { first } else { 0.0 };
            let shown = if offset == 0.0 { size } else { last - first };
            let (low, high) = (first - room, last + room);
            let panel = Panel { members, low, high, top: at - height, bottom: at, offset, display: engineering(shown, "Hz") };
            at -= height + BREAK;
            panel
        })
        .collect())
}

/// Before which of the groups, ascending, the axis is cut.
fn cuts(groups: &[(Vec<usize>, f64, f64)]) -> Vec<usize> {
    let mut cuts: Vec<usize> = Vec::new();
    while cuts.len() + 1 < PANELS {
        let start = |index: usize| cuts.iter().copied().filter(|cut| *cut <= index).max().unwrap_or(0);
        let end = |index: usize| cuts.iter().copied().filter(|cut| *cut > index).min().unwrap_or(groups.len());
        let best = (1..groups.len())
            .filter(|index| !cuts.contains(index))
            .filter_map(|index| {
                let gap = groups[index].1 - groups[index - 1].2;
                let below = groups[index - 1].2 - groups[start(index - 1)].1;
                let above = groups[end(index) - 1].2 - groups[index].1;
                let inner = below.max(above);
                (inner > 0.0 && gap > FAR * inner).then_some((index, gap))
            })
            .max_by(|a, b| a.1.total_cmp(&b.1));
        let Some((index, _)) = best else { break };
        cuts.push(index);
    }
    cuts
}

/// Ticks of a panel: value in Hz and text.
fn marks(panel: &Panel) -> Vec<(f64, String)> {
    let wanted = ((panel.bottom - panel.top) / 70.0).round().clamp(2.0, 9.0) as usize;
    let shown = |value: f64| panel.display.shown(value - panel.offset);
    let all = ticks(shown(panel.low), shown(panel.high), wanted);
    all.into_iter().map(|(value, text)| (panel.display.si(value) + panel.offset, text)).collect()
}

fn grid(scene: &mut Scene, panel: &Panel, laid: &Laid, (left, right): (f64, f64)) {
    for (value, text) in marks(panel) {
        let y = panel.y(value).floor() + 0.5;
        if y >= panel.top - 1.0 && y <= panel.bottom + 1.0 {
            scene.line(vec![(left, y), (right, y)], 1.0, GRID);
            scene.text(&text, (left - 12.0, y), TICK, INK, Anchor::End);
        }
    }
    for (x, _) in laid.ticks(wanted_ticks(left, right)) {
        scene.line(vec![(x.floor() + 0.5, panel.top), (x.floor() + 0.5, panel.bottom)], 1.0, GRID);
    }
    scene.line(vec![(left, panel.top), (left, panel.bottom), (right, panel.bottom)], 1.4, AXIS);
}

fn wanted_ticks(left: f64, right: f64) -> usize {
    ((right - left) / 105.0).round().max(2.0) as usize
}

fn colour(name: Option<usize>) -> Rgb {
    name.map_or(REST, |name| CURVES[name % CURVES.len()])
}

/// A line, from left to right whichever way the axis was scanned; between two places at which it bears different names the colour
/// changes half way.
fn draw(scene: &mut Scene, line: &FollowedLine, panel: &Panel, (figure, laid): (&FollowedFigure, &Laid), most: f64) {
    let width = |place: usize| match line.strengths.get(place) {
        Some(size) if most > 0.0 && size.is_finite() => ((THINNEST + (WIDEST - THINNEST) * (size / most).sqrt()) / STEP).round() * STEP,
        Some(_) => THINNEST,
        None => PLAIN,
    };
    let mut points: Vec<((f64, f64), usize)> = (0..line.values.len())
        .filter(|place| line.values[*place].is_finite())
        .map(|place| ((laid.pixel(figure.across.places[place]), panel.y(line.values[place])), place))
        .collect();
    points.sort_by(|a, b| a.0 .0.total_cmp(&b.0 .0));
    if let [(at, place)] = points[..] {
        scene.marker(at, Marker::Disc(true), colour(line.names[place]));
    }
    // runs of one colour and width
    let mut run: Vec<(f64, f64)> = Vec::new();
    let mut look: (Rgb, f64) = (REST, PLAIN);
    let mut add = |scene: &mut Scene, ends: [(f64, f64); 2], now: (Rgb, f64)| {
        if now != look || run.last() != Some(&ends[0]) {
            if run.len() > 1 {
                scene.line(std::mem::take(&mut run), look.1, look.0);
            }
            run = vec![ends[0]];
            look = now;
        }
        run.push(ends[1]);
    };
    for pair in points.windows(2) {
        let [(from, a), (to, b)] = [pair[0], pair[1]];
        // a failed point leaves a hole
        if a.abs_diff(b) != 1 {
            continue;
        }
        let middle = (0.5 * (from.0 + to.0), 0.5 * (from.1 + to.1));
        add(scene, [from, middle], (colour(line.names[a]), width(a)));
        add(scene, [middle, to], (colour(line.names[b]), width(b)));
    }
    add(scene, [(f64::NAN, 0.0), (f64::NAN, 0.0)], (REST, -1.0));
    if points.len() <= DISCS && line.strengths.is_empty() {
        points.iter().for_each(|(at, place)| scene.marker(*at, Marker::Disc(true), colour(line.names[*place])));
    }
}

/// A name at the right end of a line, or that of several that lie close.
struct Label {
    text: String,
    /// Height at which its line ends, in pixels.
    from: f64,
    color: Rgb,
}

/// What stands at the right ends of the lines of a panel, from the top.
fn labels(figure: &FollowedFigure, panel: &Panel) -> Vec<Label> {
    let places = &figure.across.places;
    let mut ends: Vec<(f64, usize)> = Vec::new();
    for member in &panel.members {
        let line = &figure.lines[*member];
        let finite = (0..places.len()).filter(|place| line.values[*place].is_finite());
        let Some(last) = finite.max_by(|a, b| places[*a].total_cmp(&places[*b])) else { continue };
        if let Some(name) = line.names[last] {
            ends.push((panel.y(line.values[last]), name));
        }
    }
    ends.sort_by(|a, b| a.0.total_cmp(&b.0));
    let room = ((panel.bottom - panel.top + 20.0) / LINE).floor().max(1.0) as usize;
    let each = ends.len().div_ceil(room).max(1);
    ends.chunks(each)
        .map(|chunk| {
            let name = |k: usize| figure.names[chunk[k].1].as_str();
            let text = match chunk.len() {
                1 => name(0).to_string(),
                2 => format!("{}   {}", name(0), name(1)),
                count => format!("{} … {} ({count} lines)", name(0), name(count - 1)),
            };
            let from = 0.5 * (chunk[0].0 + chunk[chunk.len() - 1].0);
            Label { text, from, color: if chunk.len() == 1 { colour(Some(chunk[0].1)) } else { AXIS } }
        })
        .collect()
}

fn write(scene: &mut Scene, labels: &[Label], panel: &Panel, right: f64) {
    let wished: Vec<f64> = labels.iter().map(|label| label.from).collect();
    for (label, to) in labels.iter().zip(apart(&wished, LINE, panel.top - 6.0, panel.bottom + 6.0)) {
        scene.line(vec![(right + 3.0, label.from), (right + 16.0, to), (right + KEY - 10.0, to)], PLAIN, label.color);
        scene.text(&font::fit(&label.text, LABEL, NAME_LIMIT), (right + KEY, to), LABEL, INK, Anchor::Start);
    }
}

/// Numbers under the lowest panel, what each axis shows, and what the widths mean.
fn foot(scene: &mut Scene, figure: &FollowedFigure, laid: &Laid, (left, right): (f64, f64), panels: &[Panel]) {
    let bottom = panels.first().map_or(0.0, |panel| panel.bottom);
    let mut free = f64::NEG_INFINITY;
    for (x, text) in laid.ticks(wanted_ticks(left, right)) {
        scene.line(vec![(x, bottom), (x, bottom + if text.is_some() { 7.0 } else { 4.0 })], 1.4, AXIS);
        if let Some(text) = text.filter(|text| x - font::width(text, TICK) / 2.0 > free) {
            scene.text(&text, (x, bottom + 23.0), TICK, INK, Anchor::Middle);
            free = x + font::width(&text, TICK) / 2.0 + 14.0;
        }
    }
    let label = font::fit(&figure.across.label(), LABEL, right - left);
    scene.text(&label, ((left + right) / 2.0, bottom + 56.0), LABEL, INK, Anchor::Middle);
    for panel in panels {
        let less = if panel.offset == 0.0 { String::new() } else { format!(" less {}", with_digits(panel.offset, "Hz", 7)) };
        let text = format!("{}{less} ({})", figure.quantity, panel.display.unit);
        scene.text(&text, (left, panel.top - 20.0), LABEL, INK, Anchor::Start);
    }
    let mut said = Vec::new();
    if !figure.strengths_of.is_empty() {
        said.push(format!("width of a line: the root of its strength by {}", figure.strengths_of));
    }
    if !figure.remark.is_empty() {
        said.push(figure.remark.clone());
    }
    let text = font::fit(&said.join("; "), SMALL, WIDTH - 400.0);
    scene.text(&text, (EDGE, HEIGHT - 20.0), SMALL, SOFT_INK, Anchor::Start);
}

#[cfg(test)]
mod tests {
    use super::*;

    fn group(low: f64, high: f64) -> (Vec<usize>, f64, f64) {
        (vec![0], low, high)
    }

    #[test]
    fn exact_axis_is_cut_where_a_gap_dwarfs_both_sides() {
        assert_eq!(cuts(&[group(0.0, 1.0), group(2.0, 3.0)]), [0; 0]);
        assert_eq!(cuts(&[group(0.0, 1.0), group(20.0, 21.0)]), [1]);
        // the fine structure of both sides is wider than the gap between them
        assert_eq!(cuts(&[group(0.0, 4.0), group(20.0, 24.0), group(1e6, 1e6 + 4.0)]), [2]);
        // of lines that are all flat nothing would be gained
        assert_eq!(cuts(&[group(0.0, 0.0), group(20.0, 20.0)]), [0; 0]);
    }

    #[test]
    fn prop_holes_single_points_and_flat_lines_can_be_drawn() {
        let line = |values: &[f64]| FollowedLine {
            values: values.to_vec(),
            names: vec![Some(0); values.len()],
            strengths: values.iter().map(|value| value.abs()).collect(),
        };
        let figure = |places: &[f64], lines: Vec<FollowedLine>| FollowedFigure {
            across: Ruler { places: places.to_vec(), ..Ruler::default() },
            names: vec!["a".to_string()],
            lines,
            ..FollowedFigure::default()
        };
        let hole = f64::NAN;
        assert!(followed(&figure(&[0.0, 1.0, 2.0, 3.0], vec![line(&[1.0, hole, 2.0, 2.0]), line(&[hole; 4])])).is_ok());
        assert!(followed(&figure(&[5.0], vec![line(&[0.0])])).is_ok());
        assert!(followed(&figure(&[2.0, 1.0], vec![line(&[3e14, 3e14]), line(&[0.0, 0.0])])).is_ok());
        assert!(followed(&figure(&[2.0, 1.0], vec![line(&[hole, hole])])).is_err());
        assert!(followed(&figure(&[2.0, 1.0], vec![line(&[1.0])])).is_err());
    }
}
