//! A time axis on which every pulse can be seen: whole where pulses are wide enough, else broken into windows around pulses.
use super::frame::Window;
use super::scale::quantity;
use super::traces::widened;

/// A pulse on the axis; two with equal `shape` look the same.
#[derive(Clone, Debug, PartialEq)]
pub struct Span {
    /// Start in s.
    pub start: f64,
    /// End in s.
    pub end: f64,
    /// Names (drive, envelope) that must agree.
    pub names: (String, String),
    /// Numbers that must agree to a millionth.
    pub shape: Vec<f64>,
}

/// The axis as shown.
#[derive(Clone, Debug)]
pub struct View {
    /// Windows from left to right.
    pub windows: Vec<Window>,
    /// Time in s from which each window counts.
    pub origins: Vec<f64>,
    /// What lies between each window and the next.
    pub gaps: Vec<String>,
    /// What follows the last window.
    pub after: Option<String>,
    /// Whether the axis is broken.
    pub broken: bool,
    /// Whether all windows have the same scale.
    pub one_scale: bool,
}

/// Pixels between two windows.
pub const GAP: f64 = 136.0;
/// A pulse narrower than this (pixels) breaks the axis.
const NARROW: f64 = 40.0;
/// Pulses of one drive in a window at most.
const CROWD: usize = 12;
/// Windows at most.
const WINDOWS: usize = 5;
/// Windows at least, where there are as many, though they look the same.
const REPEATS: usize = 3;

/// Settles the axis from `low` to `high` (s) between pixels `left` and `right`; `spans` are sorted by start.
pub fn view(spans: &[Span], (low, high): (f64, f64), left: f64, right: f64) -> View {
    let (low, high) = widened(low, high);
    let scale = (right - left) / (high - low);
    let narrow = spans.iter().any(|span| (span.end - span.start) * scale < NARROW);
    let whole = Window { low, high, left, right };
    if !narrow || spans.is_empty() {
        return View { windows: vec![whole], origins: vec![0.0], gaps: Vec::new(), after: None, broken: false, one_scale: true };
    }
    let groups = groups(spans);
    let shown = choose(&groups);
    let between = |from: usize, to: usize| match to - from - 1 {
        0 => quantity((groups[to].low - groups[from].high).max(0.0), "s"),
        skipped => format!("… {skipped} more"),
    };
    let gaps: Vec<String> = shown.windows(2).map(|pair| between(pair[0], pair[1])).collect();
    let rest = groups.len() - 1 - shown.last().copied().unwrap_or(0);
    let after = (rest > 0).then(|| format!("… {rest} more"));
    let room = right - left - GAP * (gaps.len() + usize::from(after.is_some())) as f64;
    let padded: Vec<(f64, f64)> = shown.iter().map(|index| padded(&groups, *index)).collect();
    let (widths, one_scale) = share(&padded, room);
    let mut x = left;
    let mut windows = Vec::new();
    for ((low, high), width) in padded.into_iter().zip(widths) {
        windows.push(Window { low, high, left: x, right: x + width });
        x += width + GAP;
    }
    let origins = shown.iter().map(|index| groups[*index].low).collect();
    View { windows, origins, gaps, after, broken: true, one_scale }
}

/// Pulses that are shown in one window.
struct Group<'a> {
    low: f64,
    high: f64,
    shortest: f64,
    members: Vec<&'a Span>,
}

/// Gathers pulses that follow each other within about their own length and are not too unequal to be seen together.
fn groups(spans: &[Span]) -> Vec<Group<'_>> {
    let mut groups: Vec<Group> = Vec::new();
    for span in spans {
        let length = span.end - span.start;
        if let Some(group) = groups.last_mut() {
            let before = group.members.last().map_or(0.0, |last| last.end - last.start);
            let near = span.start - group.high <= length.max(before);
            let shortest = group.shortest.min(length);
            let seen = shortest > 0.03 * (span.end.max(group.high) - group.low);
            let crowd = group.members.iter().filter(|member| member.names.0 == span.names.0).count() >= CROWD;
            // What overlaps cannot be shown apart, however unequal.
            if span.start < group.high || (near && seen && !crowd) {
                group.high = group.high.max(span.end);
                group.shortest = shortest;
                group.members.push(span);
                continue;
            }
        }
        groups.push(Group { low: span.start, high: span.end, shortest: length, members: vec![span] });
    }
    groups
}

fn alike(one: &Group, other: &Group) -> bool {
    let near = |a: f64, b: f64, size: f64| (a - b).abs() <= 1e-6 * size;
    let length = one.high - one.low;
    one.members.len() == other.members.len()
        && one.members.iter().zip(&other.members).all(|(a, b)| {
            let sizes = a.shape.iter().zip(&b.shape).all(|(x, y)| near(*x, *y, x.abs().max(y.abs())));
            let placed = near(a.start - one.low, b.start - other.low, length) && near(a.end - one.low, b.end - other.low, length);
            a.names == b.names && a.shape.len() == b.shape.len() && sizes && placed
        })
}

/// Which groups are shown: all if few, else the first of each look, filled up with the first repeats.
fn choose(groups: &[Group]) -> Vec<usize> {
    if groups.len() <= WINDOWS {
        return (0..groups.len()).collect();
    }
    let mut chosen: Vec<usize> = Vec::new();
    for (index, group) in groups.iter().enumerate() {
        if chosen.len() < WINDOWS && !chosen.iter().any(|known| alike(&groups[*known], group)) {
            chosen.push(index);
        }
    }
    for index in 0..groups.len() {
        if chosen.len() < REPEATS && !chosen.contains(&index) {
            chosen.push(index);
        }
    }
    chosen.sort_unstable();
    chosen
}

/// A group with some room on both sides, though not into its neighbours.
fn padded(groups: &[Group], index: usize) -> (f64, f64) {
    let group = &groups[index];
    let room = 0.08 * (group.high - group.low);
    let before = index.checked_sub(1).map_or(f64::INFINITY, |before| group.low - groups[before].high);
    let after = groups.get(index + 1).map_or(f64::INFINITY, |after| after.low - group.high);
    widened(group.low - room.min(before.max(0.0)), group.high + room.min(after.max(0.0)))
}

/// Widths in pixels: to scale, but none so narrow that it could not be read; and whether that left one scale for all.
fn share(spans: &[(f64, f64)], room: f64) -> (Vec<f64>, bool) {
    let least = (room / spans.len() as f64).min(200.0);
    let lengths: Vec<f64> = spans.iter().map(|span| span.1 - span.0).collect();
    let mut fixed = vec![false; spans.len()];
    loop {
        let left = room - least * fixed.iter().filter(|is| **is).count() as f64;
        let sum: f64 = lengths.iter().zip(&fixed).filter(|pair| !*pair.1).map(|pair| *pair.0).sum();
        let width = |index: usize| if fixed[index] { least } else { left * (lengths[index] / sum) };
        let widths: Vec<f64> = (0..spans.len()).map(width).collect();
        let too_narrow = (0..spans.len()).find(|index| !fixed[*index] && widths[*index] < least - 1e-6);
        match too_narrow {
            Some(index) => fixed[index] = true,
            None => return (widths, !fixed.contains(&true)),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn span(start: f64, length: f64, name: &str) -> Span {
        Span { start, end: start + length, names: ("drive".into(), name.into()), shape: vec![length] }
    }

    #[test]
    fn exact_wide_pulses_keep_the_axis_whole() {
        let view = view(&[span(0.0, 1e-8, "a"), span(2e-8, 1e-8, "a")], (0.0, 4e-8), 0.0, 1000.0);
        assert!(!view.broken && view.windows.len() == 1);
    }

    #[test]
    fn exact_echo_is_broken_into_three_windows_and_names_the_waits() {
        let spans = [span(0.0, 50e-9, "half"), span(20.05e-6, 100e-9, "flip"), span(40.15e-6, 50e-9, "half")];
        let view = view(&spans, (0.0, 40.2e-6), 0.0, 1400.0);
        assert_eq!(view.gaps, ["20 µs", "20 µs"]);
        assert!(view.windows.iter().all(|window| window.right - window.left >= 199.0));
        assert_eq!(view.after, None);
    }

    #[test]
    fn exact_repeats_are_counted_not_shown() {
        let mut spans = vec![span(0.0, 5e-9, "half")];
        spans.extend((1..=250).map(|k| span(1e-3 * f64::from(k), 1e-8, "flip")));
        spans.push(span(0.251, 5e-9, "half"));
        let view = view(&spans, (0.0, 0.251), 0.0, 1400.0);
        assert_eq!(view.windows.len(), 3);
        assert_eq!(view.after.as_deref(), Some("… 249 more"));
    }
}
