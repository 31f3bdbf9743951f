//! The turning terms of a frame: size against turning frequency, what was kept, and what each dropped term costs.
use super::decades::{Decades, LONGEST};
use super::frame::{self, EDGE, FOOT, HEIGHT, LABEL, LINE, SMALL, TICK, WIDTH};
use super::near::{Board, Rect, Spot};
use super::palette::{Look, Marker, Rgb, AXIS, CURVES, GRID, INK, REST, SOFT_INK};
use super::scale::{number, with_digits};
use super::scene::{Anchor, Drawn, Scene};
use super::thin::drawable;
use super::{font, PlotError};

/// The turning terms of a frame.
#[derive(Clone, Debug, Default)]
pub struct LedgerFigure {
    /// Title, at the top left.
    pub title: String,
    /// Fingerprint of the config, in small print.
    pub fingerprint: String,
    /// Terms that turn faster were dropped, Hz; none (or not finite) where there is no such limit.
    pub limit_hz: Option<f64>,
    /// All terms.
    pub terms: Vec<LedgerTerm>,
}

/// One turning term of a frame.
#[derive(Clone, Debug, Default)]
pub struct LedgerTerm {
    /// What it is, for example "xy: 0 to 1".
    pub label: String,
    /// Its size in Hz; the sign is not shown, and a term of size zero is counted, not drawn.
    pub size_hz: f64,
    /// How fast it turns in Hz, without sign; 0 for a term that stands still.
    pub turns_at_hz: f64,
    /// Whether it is kept.
    pub kept: bool,
    /// Predicted shift in Hz, where dropped.
    pub shift_hz: Option<f64>,
    /// Predicted ripple of populations (1 is all), where dropped.
    pub ripple: Option<f64>,
}

/// Terms with a label at most.
const LABELLED: usize = 14;
/// Terms drawn at most, the largest first; further ones are counted.
const DRAWN: usize = 1000;
/// Pixels of the name of a term, and of a whole label, at most.
const NAME_LIMIT: f64 = 320.0;
/// A dropped term larger than this share of its turning frequency is doubtful.
const DOUBTFUL: f64 = 0.1;
/// Pixels of the strip of terms that stand still, at least and at most.
const STRIP: (f64, f64) = (120.0, 300.0);
/// Colours and markers of kept and dropped terms.
const KEPT: (Rgb, Marker) = (CURVES[0], Marker::Disc(true));
const DROPPED: (Rgb, Marker) = (CURVES[1], Marker::Diamond(false));

/// Draws every term against its turning frequency and size. Errors: no term with a finite size above zero.
pub fn ledger(figure: &LedgerFigure) -> Result<Drawn, PlotError> {
    let shown = shown(figure);
    let Some(plot) = Plot::new(figure, &shown) else {
        return Err(PlotError::Nothing { title: figure.title.clone() });
    };
    let mut scene = Scene::new(WIDTH, HEIGHT);
    let top = frame::title(&mut scene, &figure.title);
    let plot = plot.laid_out(top + LINE + 10.0);
    plot.axes(&mut scene);

    let places: Vec<(f64, f64)> = shown.iter().map(|term| plot.place(term)).collect();
    let mut board = Board { points: places.clone(), ..Board::default() };
    plot.guides(&mut scene, &mut board);
    let labels = plot.labels(&shown, &places, &mut board);
    for label in &labels {
        if let Some(leader) = label.spot.leader {
            scene.line(vec![leader.0, leader.1], 1.2, AXIS);
        }
    }
    // The largest last, so that it lies on top.
    for (term, place) in shown.iter().zip(&places).rev() {
        let (color, marker) = if term.kept { KEPT } else { DROPPED };
        scene.marker(*place, marker, color);
    }
    for label in &labels {
        let Spot { left, y, .. } = label.spot;
        let width = font::width(&label.text, TICK);
        scene.rectangle((left - 3.0, y - 11.0), (left + width + 3.0, y + 11.0), (255, 255, 255), 0.85);
        let ink = if label.kept { SOFT_INK } else { INK };
        scene.text(&label.text, (left, y), TICK, ink, Anchor::Start);
    }
    plot.key(&mut scene);
    plot.remarks(&mut scene, &shown, labels.len());
    frame::fingerprint(&mut scene, &figure.fingerprint);
    scene.finish()
}

/// The terms that are drawn: those with a size and a turning frequency on the axes, dropped ones first, the largest ripple first.
fn shown(figure: &LedgerFigure) -> Vec<&LedgerTerm> {
    let known = |term: &&LedgerTerm| drawable(term.size_hz) && drawable(term.turns_at_hz) && size(term) > 1e-200;
    let mut terms: Vec<&LedgerTerm> = figure.terms.iter().filter(known).collect();
    let floor = 10f64.powf(-LONGEST);
    let largest = terms.iter().map(|term| size(term)).fold(0.0, f64::max);
    terms.retain(|term| size(term) >= floor * largest);
    let fastest = terms.iter().map(|term| turns(term)).fold(0.0, f64::max);
    terms.retain(|term| turns(term) == 0.0 || turns(term) >= floor * fastest);
    let ripple = |term: &LedgerTerm| term.ripple.map_or(size(term) / turns(term).max(1e-200), f64::abs);
    let rank = |term: &LedgerTerm| if term.kept { size(term) } else { ripple(term) };
    terms.sort_by(|a, b| a.kept.cmp(&b.kept).then(rank(b).total_cmp(&rank(a))));
    terms.truncate(DRAWN);
    terms
}

fn size(term: &LedgerTerm) -> f64 {
    term.size_hz.abs()
}

/// How fast a term turns; what cannot be told from standing still counts as that.
fn turns(term: &LedgerTerm) -> f64 {
    let turns = term.turns_at_hz.abs();
    if turns > 1e-200 {
        turns
    } else {
        0.0
    }
}

/// A label and where it stands.
struct Label {
    text: String,
    spot: Spot,
    kept: bool,
}

/// The axes: a strip of terms that stand still (none if there are none), and the turning ones (none if there are none).
struct Plot<'a> {
    figure: &'a LedgerFigure,
    limit: Option<f64>,
    across: Option<Decades>,
    up: Decades,
    /// Left and right pixel of the strip.
    strip: Option<(f64, f64)>,
    top: f64,
    bottom: f64,
    left: f64,
    right: f64,
    /// Whether the tenth of the turning frequency lies above the plot.
    tenth_above: bool,
}

impl<'a> Plot<'a> {
    fn new(figure: &'a LedgerFigure, shown: &[&LedgerTerm]) -> Option<Self> {
        let turning = || shown.iter().map(|term| turns(term)).filter(|turns| *turns > 0.0);
        let limit = figure.limit_hz.filter(|limit| drawable(*limit) && *limit > 1e-200);
        let near = |limit: &f64| turning().all(|turns| (turns / limit).log10().abs() < LONGEST);
        let limit = limit.filter(near);
        let across = Decades::around(turning().chain(limit), 0.16);
        let largest = shown.iter().map(|term| size(term)).fold(0.0, f64::max);
        // The axis reaches up to the line of doubt where dropping begins, unless that is far from all terms.
        let slowest = shown.iter().filter(|term| !term.kept && turns(term) > 0.0).map(|term| turns(term)).reduce(f64::min);
        let tenth = limit.or(slowest).map(|turns| DOUBTFUL * turns);
        let seen = tenth.filter(|tenth| *tenth < 3e3 * largest && *tenth > 3e-3 * largest);
        let up = Decades::around(shown.iter().map(|term| size(term)).chain(seen), 0.16)?;
        let tenth_above = across.as_ref().is_some_and(|across| across.low + DOUBTFUL.log10() > up.high);
        let still: Vec<f64> = shown.iter().filter(|term| turns(term) == 0.0).map(|term| font::width(&wording(term), TICK)).collect();
        let strip = (!still.is_empty()).then(|| (0.0, still.iter().copied().fold(0.0, f64::max) + 70.0));
        Some(Plot { figure, limit, across, up, strip, top: 0.0, bottom: 0.0, left: 0.0, right: 0.0, tenth_above })
    }

    /// Settles the pixels.
    fn laid_out(mut self, top: f64) -> Self {
        (self.top, self.bottom) = (top, HEIGHT - FOOT);
        self.up = self.up.clone().between(self.bottom, top);
        let numbers = self.up.ticks(9).into_iter().filter_map(|tick| tick.1).map(|text| font::width(&text, TICK)).fold(0.0, f64::max);
        (self.left, self.right) = (EDGE + 14.0 + numbers.max(60.0), WIDTH - EDGE - 16.0);
        let mut start = self.left;
        if let Some((_, width)) = self.strip {
            let end = if self.across.is_some() { self.left + width.clamp(STRIP.0, STRIP.1) } else { self.right };
            self.strip = Some((self.left, end));
            start = end + 26.0;
        }
        self.across = self.across.map(|axis| axis.between(start, self.right));
        self
    }

    fn place(&self, term: &LedgerTerm) -> (f64, f64) {
        let y = self.up.pixel(size(term));
        match (&self.across, self.strip) {
            (_, Some((left, right))) if turns(term) == 0.0 => (left + (0.25 * (right - left)).min(40.0), y),
            (Some(across), _) => (across.pixel(turns(term)), y),
            // Without an axis there is no turning term.
            (None, _) => (self.left, y),
        }
    }

    /// Grid, ticks, numbers and the names of the axes.
    fn axes(&self, scene: &mut Scene) {
        let areas: Vec<(f64, f64)> = self.strip.into_iter().chain(self.across.as_ref().map(|axis| (axis.from, axis.to))).collect();
        for (y, text) in self.up.ticks(9) {
            let y = y.floor() + 0.5;
            if let Some(text) = text {
                for (left, right) in &areas {
                    scene.line(vec![(*left, y), (*right, y)], 1.0, GRID);
                }
                scene.text(&text, (self.left - 12.0, y), TICK, INK, Anchor::End);
            }
            scene.line(vec![(self.left, y), (self.left + 5.0, y)], 1.0, AXIS);
        }
        if let Some((left, right)) = self.strip {
            scene.text("still", ((left + right) / 2.0, self.bottom + 22.0), TICK, INK, Anchor::Middle);
        }
        if let Some(axis) = &self.across {
            let mut free = axis.from - 14.0;
            for (x, text) in axis.ticks(12) {
                let x = x.floor() + 0.5;
                scene.line(vec![(x, self.bottom), (x, self.bottom + if text.is_some() { 7.0 } else { 4.0 })], 1.2, AXIS);
                let Some(text) = text else { continue };
                scene.line(vec![(x, self.top), (x, self.bottom)], 1.0, GRID);
                let half = font::width(&text, TICK) / 2.0;
                if x - half > free {
                    scene.text(&text, (x, self.bottom + 22.0), TICK, INK, Anchor::Middle);
                    free = x + half + 14.0;
                }
            }
            let place = ((axis.from + axis.to) / 2.0, HEIGHT - FOOT + 60.0);
            scene.text(&axis.label("turning frequency"), place, LABEL, INK, Anchor::Middle);
        }
        for (left, right) in areas {
            scene.line(vec![(left, self.top), (left, self.bottom), (right, self.bottom)], 1.4, AXIS);
        }
        scene.text(&self.up.label("size"), (self.left, self.top - 21.0), LABEL, INK, Anchor::Start);
    }

    /// The limit and the line of doubt, with their labels.
    fn guides(&self, scene: &mut Scene, board: &mut Board) {
        let Some(axis) = &self.across else { return };
        // In pixels, from power to power: size = turning / 10.
        let shift = DOUBTFUL.log10();
        let (start, end) = (axis.low.max(self.up.low - shift), axis.high.min(self.up.high - shift));
        let at = |power: f64| (axis.pixel_of_power(power), self.up.pixel_of_power(power + shift));
        let doubt = (start < end).then(|| (at(start), at(end)));
        if let Some((from, to)) = doubt {
            self.shade(scene, axis, (start, end), &at);
            scene.curve(vec![from, to], 1.6, Look { color: SOFT_INK, marker: None, dash: Some((9.0, 6.0)) });
            board.guides.push((from, to));
        }
        if let Some(limit) = self.limit {
            let x = axis.pixel(limit);
            scene.line(vec![(x, self.top - 8.0), (x, self.bottom)], 2.0, INK);
            board.guides.push(((x, self.top), (x, self.bottom)));
            let text = format!("dropped beyond {}", with_digits(limit, "Hz", 4));
            let half = font::width(&text, TICK) / 2.0;
            let lowest = self.left + font::width(&self.up.label("size"), LABEL) + 24.0 + half;
            scene.text(&text, (x.min(self.right - half).max(lowest), self.top - 21.0), TICK, INK, Anchor::Middle);
        }
        if let Some((from, to)) = doubt {
            name_line(scene, board, from, to, (axis.from + 6.0, axis.to - 6.0, self.top + 4.0, self.bottom - 4.0));
            self.name_corner(scene, board, axis, from, to);
        }
    }

    /// Tints where a dropped term is doubtful: beyond the limit and above the line.
    fn shade(&self, scene: &mut Scene, axis: &Decades, (start, end): (f64, f64), at: &dyn Fn(f64) -> (f64, f64)) {
        let low = self.limit.map_or(axis.low, f64::log10);
        let mut outline = vec![(axis.pixel_of_power(low), self.top)];
        if low < end {
            outline.push(if low >= start { at(low) } else { (axis.pixel_of_power(low), self.bottom) });
            if low < start {
                outline.push(at(start));
            }
            outline.push(at(end));
        } else {
            outline.push((axis.pixel_of_power(low), self.bottom));
            outline.push((axis.to, self.bottom));
        }
        outline.push((axis.to, self.top));
        scene.area(outline, DROPPED.0, 0.07);
    }

    /// Writes into the tinted corner what it means, where there is room.
    fn name_corner(&self, scene: &mut Scene, board: &mut Board, axis: &Decades, from: (f64, f64), to: (f64, f64)) {
        let left = self.limit.map_or(axis.from, |limit| axis.pixel(limit)) + 14.0;
        let own: Rect = (left - 4.0, left + font::width("doubtful", TICK) + 4.0, self.top + 6.0, self.top + 32.0);
        // At the height of the word the line of doubt must lie to the right of it.
        let share = ((from.1 - own.3) / (from.1 - to.1)).clamp(0.0, 1.0);
        let room = if own.3 < to.1 { axis.to } else { from.0 + share * (to.0 - from.0) };
        let covered = |point: &(f64, f64)| point.0 + 14.0 > own.0 && point.0 - 14.0 < own.1 && point.1 - 14.0 < own.3;
        let overlaps = |other: &Rect| own.0 < other.1 && other.0 < own.1 && own.2 < other.3 && other.2 < own.3;
        if own.1 < room && !board.points.iter().any(covered) && !board.taken.iter().any(overlaps) {
            scene.text("doubtful", (left, self.top + 19.0), TICK, SOFT_INK, Anchor::Start);
            board.taken.push(own);
        }
    }

    /// Names of the first terms, as many as there is room for.
    fn labels(&self, shown: &[&LedgerTerm], places: &[(f64, f64)], board: &mut Board) -> Vec<Label> {
        let mut chosen: Vec<usize> = (0..shown.len().min(LABELLED)).collect();
        // From the top down, so that labels in a crowd give way in one direction.
        chosen.sort_by(|a, b| shown[*a].kept.cmp(&shown[*b].kept).then(places[*a].1.total_cmp(&places[*b].1)));
        let mut labels = Vec::new();
        for index in chosen {
            let term = shown[index];
            let text = wording(term);
            let (left, right) = match (self.strip, &self.across) {
                (Some(strip), _) if turns(term) == 0.0 => strip,
                (_, Some(axis)) => (axis.from, axis.to),
                _ => (self.left, self.right),
            };
            let area: Rect = (left + 4.0, right, self.top + 2.0, self.bottom - 2.0);
            if let Some(spot) = board.place(places[index], font::width(&text, TICK), area) {
                labels.push(Label { text, spot, kept: term.kept });
            }
        }
        labels
    }

    /// What the markers mean.
    fn key(&self, scene: &mut Scene) {
        let y = HEIGHT - FOOT + 60.0;
        let mut x = self.left + 8.0;
        for (name, kept, (color, marker)) in [("kept", true, KEPT), ("dropped", false, DROPPED)] {
            if self.figure.terms.iter().any(|term| term.kept == kept) {
                scene.marker((x, y), marker, color);
                scene.text(name, (x + 16.0, y), LABEL, INK, Anchor::Start);
                x += 16.0 + font::width(name, LABEL) + 36.0;
            }
        }
    }

    /// Says what was left out.
    fn remarks(&self, scene: &mut Scene, shown: &[&LedgerTerm], labelled: usize) {
        let mut said = Vec::new();
        if labelled < shown.len() {
            said.push(format!("… {} more {} without a label", shown.len() - labelled, terms(shown.len() - labelled)));
        }
        let left_out = self.figure.terms.len() - shown.len();
        if left_out > 0 {
            said.push(format!("{left_out} {} not drawn: zero, very small or beyond {DRAWN}", terms(left_out)));
        }
        if self.tenth_above {
            said.push("a tenth of the turning frequency lies above the plot".to_string());
        }
        if self.limit.is_none() && self.figure.limit_hz.is_some_and(f64::is_finite) {
            said.push("the limit lies outside the plot".to_string());
        }
        let text = font::fit(&said.join("; "), SMALL, WIDTH - 2.0 * EDGE - 340.0);
        scene.text(&text, (EDGE, HEIGHT - 20.0), SMALL, SOFT_INK, Anchor::Start);
    }
}

fn terms(count: usize) -> &'static str {
    if count == 1 {
        "term"
    } else {
        "terms"
    }
}

/// Writes beside the line from `from` to `to` what it is, where it covers no point.
fn name_line(scene: &mut Scene, board: &mut Board, from: (f64, f64), to: (f64, f64), area: Rect) {
    let text = "a tenth of the turning frequency";
    let width = font::width(text, TICK);
    for share in [0.96, 0.88, 0.8, 0.7, 0.6, 0.5, 0.4, 0.3, 0.2, 0.1, 0.04] {
        let (x, y) = (from.0 + share * (to.0 - from.0), from.1 + share * (to.1 - from.1));
        for (left, y) in [(x + 16.0, y + 14.0), (x - 16.0 - width, y - 14.0)] {
            let own = (left - 4.0, left + width + 4.0, y - 13.0, y + 13.0);
            let inside = own.0 >= area.0 && own.1 <= area.1 && own.2 >= area.2 && own.3 <= area.3;
            let near =
                |point: &(f64, f64)| point.0 + 14.0 > own.0 && point.0 - 14.0 < own.1 && point.1 + 14.0 > own.2 && point.1 - 14.0 < own.3;
            if inside && !board.points.iter().any(near) {
                scene.text(text, (left, y), TICK, SOFT_INK, Anchor::Start);
                board.taken.push(own);
                return;
            }
        }
    }
    // No free place on a crowded plot: at the top right, over the points.
    let own = (area.1 - width, area.1, area.2, area.2 + 26.0);
    scene.rectangle((own.0 - 4.0, own.2), (own.1, own.3), (255, 255, 255), 0.85);
    scene.text(text, (own.0, own.2 + 13.0), TICK, SOFT_INK, Anchor::Start);
    board.taken.push(own);
    scene.line(vec![(own.1 - 40.0, own.3), to], 1.0, REST);
}

/// What is said about a term: its name, and the predicted cost where it is dropped.
fn wording(term: &LedgerTerm) -> String {
    let name = font::fit(&term.label, TICK, NAME_LIMIT);
    let mut text = if name.is_empty() { "unnamed".to_string() } else { name };
    if term.kept {
        return text;
    }
    if let Some(shift) = term.shift_hz.filter(|shift| drawable(*shift)) {
        text += &format!(", shift {}", with_digits(shift, "Hz", 3));
    }
    if let Some(ripple) = term.ripple.filter(|ripple| drawable(*ripple)) {
        let percent = 100.0 * ripple;
        let plain = percent == 0.0 || (1e-3..1e4).contains(&percent.abs());
        text += &if plain { format!(", ripple {} %", number(percent, 2)) } else { format!(", ripple {}", with_digits(ripple, "", 2)) };
    }
    text
}
