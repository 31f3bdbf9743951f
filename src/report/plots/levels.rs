//! The levels of a system to scale, with their names, and the transitions between them with gap and strength.
//!
//! Groups of levels that lie far apart stand in panels of their own above each other, each to its own scale, as a fine structure
//! drawn to the scale of the whole would be one line.
use super::frame::{self, EDGE, HEIGHT, LABEL, LINE, SMALL, TICK, WIDTH};
use super::palette::{Rgb, AXIS, CURVES, GRID, INK, SOFT_INK};
use super::place::apart;
use super::scale::{engineering, ticks, with_digits, Display};
use super::scene::{Anchor, Drawn, Scene};
use super::{font, PlotError};

/// Levels and transitions.
#[derive(Clone, Debug, Default)]
pub struct LevelsFigure {
    /// Title, at the top left.
    pub title: String,
    /// Fingerprint of the config, in small print.
    pub fingerprint: String,
    /// Name and energy over h (Hz) of each level, in any order.
    pub levels: Vec<(String, f64)>,
    /// Transitions, in any order.
    pub lines: Vec<TransitionLine>,
    /// What the strengths are of, for example "position"; empty where there are none.
    pub strengths_of: String,
}

/// A transition.
#[derive(Clone, Debug, Default)]
pub struct TransitionLine {
    /// Places of both levels in the list.
    pub levels: [usize; 2],
    /// Its strength, in any unit; only ratios count.
    pub strength: f64,
}

/// Transitions drawn at most, the strongest first.
const DRAWN: usize = 14;
/// Strength below which a transition is not drawn, relative to the strongest.
const FAINT: f64 = 1e-3;
/// Panels at most.
const PANELS: usize = 4;
/// A gap this many times the width of the groups beside it cuts the axis.
const FAR: f64 = 8.0;
/// Pixels between panels.
const BREAK: f64 = 46.0;
/// Names at most; where there are more, neighbours share one.
const NAME_LIMIT: f64 = 300.0;
/// Pixels to which a line of the strongest transition is drawn wide.
const WIDEST: f64 = 9.0;

/// A group of levels with a scale of its own.
struct Group {
    /// Places of its levels, ascending in energy.
    members: Vec<usize>,
    low: f64,
    high: f64,
    top: f64,
    bottom: f64,
    /// What is taken off the numbers of its axis, Hz.
    offset: f64,
    display: Display,
}

impl Group {
    fn y(&self, energy: f64) -> f64 {
        self.bottom - (self.bottom - self.top) * (energy - self.low) / (self.high - self.low)
    }
}

/// Draws the diagram. Errors: no level with a finite energy.
pub fn levels(figure: &LevelsFigure) -> Result<Drawn, PlotError> {
    let mut order: Vec<usize> = (0..figure.levels.len()).filter(|k| figure.levels[*k].1.is_finite()).collect();
    if order.is_empty() {
        return Err(PlotError::Nothing { title: figure.title.clone() });
    }
    order.sort_by(|a, b| figure.levels[*a].1.total_cmp(&figure.levels[*b].1));
    let mut scene = Scene::new(WIDTH, HEIGHT);
    let top = frame::title(&mut scene, &figure.title) + 34.0;
    let groups = laid_out(figure, grouped(figure, &order), top, HEIGHT - 64.0);
    let numbers = groups.iter().flat_map(marks).map(|(_, text)| font::width(&text, TICK)).fold(0.0, f64::max);
    let left = EDGE + numbers.max(60.0) + 26.0;
    let names: Vec<Vec<(String, f64)>> = groups.iter().map(|group| named(figure, group)).collect();
    let widest = names.iter().flatten().map(|(name, _)| font::width(&font::fit(name, LABEL, NAME_LIMIT), LABEL)).fold(0.0, f64::max);
    let right = WIDTH - EDGE - widest - 56.0;

    for group in &groups {
        axis(&mut scene, group, left, right);
    }
    for (group, names) in groups.iter().zip(&names) {
        bars(&mut scene, figure, group, names, left + 14.0, right);
    }
    let mut lines = strongest(figure);
    let digits = digits_apart(figure, &lines);
    // so many that no gap comes near the next arrow
    let each = lines.iter().map(|line| font::width(&gap_text(figure, line, digits), TICK)).fold(0.0, f64::max) + 36.0;
    lines.truncate(((right - left - 60.0) / each) as usize);
    transitions(&mut scene, figure, &groups, &lines, digits, (left + 40.0, right - 20.0));
    for group in &groups {
        axis_label(&mut scene, group, left);
    }
    breaks(&mut scene, figure, &groups, left);
    remarks(&mut scene, figure, &lines);
    frame::fingerprint(&mut scene, &figure.fingerprint);
    scene.finish()
}

/// Levels in groups, cut where a gap is far wider than what lies on both sides of it.
fn grouped(figure: &LevelsFigure, order: &[usize]) -> Vec<Vec<usize>> {
    let mut groups = vec![order.to_vec()];
    let energy = |k: usize| figure.levels[k].1;
    while groups.len() < PANELS {
        let width = |group: &[usize]| energy(group[group.len() - 1]) - energy(group[0]);
        let mut best: Option<(usize, usize, f64)> = None;
        for (index, group) in groups.iter().enumerate() {
            for cut in 1..group.len() {
                let gap = energy(group[cut]) - energy(group[cut - 1]);
                let (below, above) = (width(&group[..cut]), width(&group[cut..]));
                // at least one side must gain a structure that can be seen
                let inner = below.max(above);
                if inner > 0.0 && gap > FAR * inner && best.is_none_or(|(.., most)| gap > most) {
                    best = Some((index, cut, gap));
                }
            }
        }
        let Some((index, cut, _)) = best else { break };
        let upper = groups[index].split_off(cut);
        groups.insert(index + 1, upper);
    }
    groups
}

/// Gives each group its panel, the lowest at the bottom, taller where more levels stand.
fn laid_out(figure: &LevelsFigure, groups: Vec<Vec<usize>>, top: f64, bottom: f64) -> Vec<Group> {
    let count = groups.len() as f64;
    let free = bottom - top - BREAK * (count - 1.0);
    let share = |group: &[usize]| if group.len() == 1 { 1.0 } else { 2.0 + (group.len() as f64).sqrt() };
    let whole: f64 = groups.iter().map(|group| share(group)).sum();
    let mut at = bottom;
    let several = groups.len() > 1;
    groups
        .into_iter()
        .map(|members| {
            let height = free * share(&members) / whole;
            let (first, last) = (figure.levels[members[0]].1, figure.levels[members[members.len() - 1]].1);
            let size = first.abs().max(last.abs());
            let flat = last - first <= 1e-12 * size;
            let room = if flat { 0.05 * size.max(1.0) } else { 0.1 * (last - first) };
            // a group of its own counts from its lowest level, as its splittings are what is read
            let offset = if several && !flat && (last - first) < 1e-3 * size { first } else { 0.0 };
            let shown = if offset == 0.0 { size } else { last - first };
            let group = Group {
                members,
                low: first - room,
                high: last + room,
                top: at - height,
                bottom: at,
                offset,
                display: engineering(shown, "Hz"),
            };
            at -= height + BREAK;
            group
        })
        .collect()
}

/// Ticks of a panel: energy in Hz and text.
fn marks(group: &Group) -> Vec<(f64, String)> {
    if group.members.len() == 1 && group.top > 0.0 && group.bottom - group.top < 120.0 {
        return Vec::new();
    }
    let wanted = ((group.bottom - group.top) / 62.0).round().clamp(2.0, 10.0) as usize;
    let shown = |energy: f64| group.display.shown(energy - group.offset);
    ticks(shown(group.low), shown(group.high), wanted)
        .into_iter()
        .map(|(value, text)| (group.display.si(value) + group.offset, text))
        .collect()
}

fn axis(scene: &mut Scene, group: &Group, left: f64, right: f64) {
    for (energy, text) in marks(group) {
        let y = group.y(energy).floor() + 0.5;
        if y < group.top - 1.0 || y > group.bottom + 1.0 {
            continue;
        }
        scene.line(vec![(left, y), (right, y)], 1.0, GRID);
        scene.text(&text, (left - 12.0, y), TICK, INK, Anchor::End);
    }
    scene.line(vec![(left, group.top), (left, group.bottom)], 1.4, AXIS);
}

/// What the axis of a panel shows, above it and in front of the arrows that go on to the next panel.
fn axis_label(scene: &mut Scene, group: &Group, left: f64) {
    let label = if group.offset == 0.0 {
        format!("energy / h ({})", group.display.unit)
    } else {
        format!("energy / h less {} ({})", with_digits(group.offset, "Hz", 7), group.display.unit)
    };
    let wide = font::width(&label, LABEL);
    scene.rectangle((left + 12.0, group.top - 30.0), (left + 20.0 + wide, group.top - 6.0), (255, 255, 255), 0.92);
    scene.text(&label, (left + 16.0, group.top - 18.0), LABEL, INK, Anchor::Start);
}

/// A zigzag across the axis between two panels, with the gap that is left out.
fn breaks(scene: &mut Scene, figure: &LevelsFigure, groups: &[Group], left: f64) {
    for pair in groups.windows(2) {
        let (below, above) = (&pair[0], &pair[1]);
        let y = below.top - 4.0;
        for shift in [0.0, 7.0] {
            let zigzag = [(-9.0, 4.0), (-3.0, -4.0), (3.0, 4.0), (9.0, -4.0)];
            scene.line(zigzag.iter().map(|(dx, dy)| (left + dx, y + dy - shift)).collect(), 1.6, AXIS);
        }
        let last = figure.levels[below.members[below.members.len() - 1]].1;
        let first = figure.levels[above.members[0]].1;
        let text = format!("axis broken: {} between", with_digits(first - last, "Hz", 4));
        let wide = font::width(&text, SMALL);
        scene.rectangle((WIDTH - EDGE - wide - 4.0, below.top - 27.0), (WIDTH - EDGE, below.top - 9.0), (255, 255, 255), 0.92);
        scene.text(&text, (WIDTH - EDGE, below.top - 18.0), SMALL, SOFT_INK, Anchor::End);
    }
}

/// What stands beside the levels of a group: names, those of levels that cannot be told apart joined, and the energy they stand at.
fn named(figure: &LevelsFigure, group: &Group) -> Vec<(String, f64)> {
    let mut found: Vec<(Vec<&str>, f64, f64)> = Vec::new();
    for &k in &group.members {
        let (name, energy) = (figure.levels[k].0.as_str(), figure.levels[k].1);
        match found.last_mut() {
            Some((names, _, last)) if group.y(*last) - group.y(energy) < 3.0 => {
                names.push(name);
                *last = energy;
            }
            _ => found.push((vec![name], energy, energy)),
        }
    }
    // where even so the names do not fit, neighbours share one
    let room = ((group.bottom - group.top + LINE) / LINE).floor().max(1.0) as usize;
    let each = found.len().div_ceil(room);
    found
        .chunks(each.max(1))
        .map(|chunk| {
            let names: Vec<&str> = chunk.iter().flat_map(|(names, ..)| names.iter().copied()).collect();
            let energy = 0.5 * (chunk[0].1 + chunk[chunk.len() - 1].2);
            let text = match names.as_slice() {
                [one] => (*one).to_string(),
                [first, last] => format!("{first}   {last}"),
                [first, second, third] => format!("{first}   {second}   {third}"),
                [first, .., last] => format!("{first} … {last} ({} levels)", names.len()),
                [] => String::new(),
            };
            (text, energy)
        })
        .collect()
}

/// The levels as bars, each with a leader to its name.
fn bars(scene: &mut Scene, figure: &LevelsFigure, group: &Group, names: &[(String, f64)], left: f64, right: f64) {
    for &k in &group.members {
        let y = group.y(figure.levels[k].1);
        scene.line(vec![(left, y), (right, y)], 3.2, CURVES[0]);
    }
    let wished: Vec<f64> = names.iter().map(|(_, energy)| group.y(*energy)).collect();
    for (((name, _), from), to) in names.iter().zip(&wished).zip(apart(&wished, LINE, group.top - 6.0, group.bottom + 6.0)) {
        scene.line(vec![(right + 4.0, *from), (right + 22.0, to), (right + 36.0, to)], 1.4, AXIS);
        scene.text(&font::fit(name, LABEL, NAME_LIMIT), (right + 44.0, to), LABEL, INK, Anchor::Start);
    }
}

/// The transitions that are drawn, the strongest first.
fn strongest(figure: &LevelsFigure) -> Vec<&TransitionLine> {
    let known = |line: &&TransitionLine| {
        line.strength.is_finite() && line.levels.iter().all(|k| figure.levels.get(*k).is_some_and(|l| l.1.is_finite()))
    };
    let mut lines: Vec<&TransitionLine> = figure.lines.iter().filter(known).collect();
    lines.sort_by(|a, b| b.strength.total_cmp(&a.strength));
    let most = lines.first().map_or(0.0, |line| line.strength);
    lines.retain(|line| line.strength > FAINT * most && line.strength > 0.0);
    lines.truncate(DRAWN);
    lines
}

/// Width of a line: the root of the strength, so that a hundredth is still seen.
fn width(strength: f64, most: f64) -> f64 {
    (WIDEST * (strength / most).sqrt()).max(1.2)
}

fn colour(index: usize) -> Rgb {
    // the first colour is that of the levels
    CURVES[1 + index % (CURVES.len() - 1)]
}

/// The gap of a line with so many digits.
fn gap_text(figure: &LevelsFigure, line: &TransitionLine, digits: i32) -> String {
    let [a, b] = line.levels;
    with_digits((figure.levels[a].1 - figure.levels[b].1).abs(), "Hz", digits)
}

/// Digits by which the gaps that are drawn can be told apart: 4, or up to 6 where some would look alike.
fn digits_apart(figure: &LevelsFigure, lines: &[&TransitionLine]) -> i32 {
    let texts = |digits: i32| {
        let mut texts: Vec<String> = lines.iter().map(|line| gap_text(figure, line, digits)).collect();
        texts.sort_unstable();
        texts.dedup();
        texts.len()
    };
    let most = texts(6);
    (4..6).find(|digits| texts(*digits) == most).unwrap_or(6)
}

/// Double arrows between levels, from left to right by lower level and gap, each with its gap.
fn transitions(
    scene: &mut Scene,
    figure: &LevelsFigure,
    groups: &[Group],
    lines: &[&TransitionLine],
    digits: i32,
    (left, right): (f64, f64),
) {
    let Some(most) = lines.first().map(|line| line.strength) else { return };
    let energy = |k: usize| figure.levels[k].1;
    let ends = |line: &TransitionLine| {
        let [a, b] = line.levels;
        if energy(a) <= energy(b) {
            [a, b]
        } else {
            [b, a]
        }
    };
    let mut placed: Vec<&TransitionLine> = lines.to_vec();
    placed.sort_by(|a, b| {
        let (a, b) = (ends(a), ends(b));
        energy(a[0]).total_cmp(&energy(b[0])).then(energy(a[1]).total_cmp(&energy(b[1])))
    });
    let y = |k: usize| groups.iter().find(|group| group.members.contains(&k)).map_or(0.0, |group| group.y(energy(k)));
    let step = (right - left) / placed.len() as f64;
    let arrows: Vec<Arrow> = placed
        .iter()
        .enumerate()
        .map(|(index, line)| {
            let [lower, upper] = ends(line);
            let (x, wide) = (left + step * (index as f64 + 0.3), width(line.strength, most));
            let text = gap_text(figure, line, digits);
            Arrow { x, from: y(lower), to: y(upper), wide, color: colour(index), text }
        })
        .collect();
    for arrow in &arrows {
        arrow.draw(scene);
    }
    let mut bars: Vec<f64> = groups.iter().flat_map(|group| group.members.iter().map(|k| group.y(energy(*k)))).collect();
    // nor may it lie under the label of an axis
    bars.extend(groups.iter().flat_map(|group| [group.top - 28.0, group.top - 8.0]));
    for arrow in &arrows {
        arrow.write(scene, &bars, &arrows);
    }
}

/// A transition as drawn, from the lower to the upper level in pixels.
struct Arrow {
    x: f64,
    from: f64,
    to: f64,
    wide: f64,
    color: Rgb,
    text: String,
}

impl Arrow {
    /// A line with a head at each end; of levels too close for heads the line alone.
    fn draw(&self, scene: &mut Scene) {
        let head = (6.0 + 1.3 * self.wide).min(0.45 * (self.from - self.to).abs());
        let half = 0.62 * head.max(3.0);
        scene.line(vec![(self.x, self.from - 0.9 * head), (self.x, self.to + 0.9 * head)], self.wide.min(2.0 * half), self.color);
        for (tip, sign) in [(self.from - 1.6, -1.0), (self.to + 1.6, 1.0)] {
            scene.area(vec![(self.x, tip), (self.x - half, tip + sign * head), (self.x + half, tip + sign * head)], self.color, 1.0);
        }
    }

    /// Its gap beside it, where neither a level nor another arrow runs through the letters; else on white.
    fn write(&self, scene: &mut Scene, bars: &[f64], arrows: &[Arrow]) {
        let start = self.x + self.wide / 2.0 + 6.0;
        let end = start + font::width(&self.text, TICK);
        let crossed =
            |y: f64| arrows.iter().any(|other| other.x > self.x && other.x - 9.0 < end && y < other.from + 12.0 && y > other.to - 12.0);
        let clear = |y: f64| bars.iter().all(|bar| (bar - y).abs() > 14.0);
        let inside = |y: f64| y < self.from - 10.0 && y > self.to + 10.0;
        let middle = 0.5 * (self.from + self.to);
        let near = || (0..120).flat_map(|k| [f64::from(k) * 4.0, f64::from(k) * -4.0]).map(move |shift| middle + shift);
        let free = near().find(|y| inside(*y) && clear(*y) && !crossed(*y));
        let free = free.or_else(|| near().find(|y| inside(*y) && clear(*y)));
        // between levels that lie close the gap stands above or below them
        let free = free.or_else(|| near().take(80).find(|y| clear(*y) && !crossed(*y))).unwrap_or(middle);
        scene.rectangle((start - 2.0, free - 11.0), (end + 2.0, free + 11.0), (255, 255, 255), 0.92);
        scene.text(&self.text, (start, free), TICK, INK, Anchor::Start);
    }
}

/// Says what the widths mean and what was left out.
fn remarks(scene: &mut Scene, figure: &LevelsFigure, lines: &[&TransitionLine]) {
    let mut said = Vec::new();
    if !lines.is_empty() && !figure.strengths_of.is_empty() {
        said.push(format!("width of a line: the root of its strength by {}", figure.strengths_of));
    }
    let strong = figure.lines.iter().filter(|line| line.strength > 0.0).count();
    if strong > lines.len() {
        let hidden = strong - lines.len();
        said.push(format!("{hidden} weaker line{} not drawn", if hidden == 1 { "" } else { "s" }));
    }
    let text = font::fit(&said.join("; "), SMALL, WIDTH - 400.0);
    scene.text(&text, (EDGE, HEIGHT - 20.0), SMALL, SOFT_INK, Anchor::Start);
}

#[cfg(test)]
mod tests {
    use super::*;

    fn figure(energies: &[f64]) -> LevelsFigure {
        let levels = energies.iter().enumerate().map(|(k, energy)| (k.to_string(), *energy)).collect();
        LevelsFigure { title: "t".into(), levels, ..LevelsFigure::default() }
    }

    #[test]
    fn exact_far_groups_get_panels_of_their_own() {
        let groups = |energies: &[f64]| {
            let figure = figure(energies);
            let order: Vec<usize> = (0..energies.len()).collect();
            grouped(&figure, &order).iter().map(Vec::len).collect::<Vec<_>>()
        };
        assert_eq!(groups(&[0.0, 1.0, 2.0, 3.0]), [4]);
        assert_eq!(groups(&[0.0, 6.8e9, 3.8e14, 3.8e14 + 8e8]), [2, 2]);
        assert_eq!(groups(&[0.0, 1.0, 100.0]), [2, 1]);
        assert_eq!(groups(&[0.0, 1e9]), [2]);
    }

    #[test]
    fn prop_any_energies_can_be_drawn() {
        for energies in [vec![0.0], vec![5.0, 5.0, 5.0], vec![-1e15, 1e15], vec![f64::NAN, 2.0], (0..300).map(f64::from).collect()] {
            let mut figure = figure(&energies);
            figure.lines = vec![TransitionLine { levels: [0, energies.len() - 1], strength: 1.0 }];
            assert!(levels(&figure).is_ok(), "{energies:?}");
        }
        assert!(levels(&figure(&[])).is_err());
    }
}
