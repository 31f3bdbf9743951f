//! Named places on the horizontal axis (moments, transitions): ticks with names in lanes, so that names close together stay apart.
use super::font;
use super::frame::{Window, EDGE, LINE, SMALL, TICK};
use super::palette::{Look, AXIS, REST, SOFT_INK};
use super::place::Lanes;
use super::scene::{Anchor, Scene};

/// A tick at pixel `x`, with its name if there is room.
pub struct Tick {
    /// Pixel.
    pub x: f64,
    /// Its name.
    pub name: Option<Placed>,
}

/// A name in a lane (0 is next to the plot).
pub struct Placed {
    /// Lane.
    pub lane: usize,
    /// Pixel at which the name starts.
    pub start: f64,
    text: String,
}

impl Placed {
    /// Writes the name about the height `middle`, on white: no line of a neighbour must run through its letters.
    pub fn draw(&self, scene: &mut Scene, middle: f64) {
        let corners = ((self.start - 3.0, middle - LINE / 2.0), (self.start + font::width(&self.text, TICK) + 3.0, middle + LINE / 2.0));
        scene.rectangle(corners.0, corners.1, (255, 255, 255), 1.0);
        scene.text(&self.text, (self.start, middle), TICK, SOFT_INK, Anchor::Start);
    }
}

/// The named places (name, axis value) that lie in one of the windows (from left to right), sorted, in at most `count` lanes.
/// Those without a name that fall on the pixel of their predecessor are left out.
pub fn in_lanes(places: &[(String, f64)], windows: &[Window], count: usize) -> Vec<Tick> {
    let (Some(first), Some(last)) = (windows.first(), windows.last()) else {
        return Vec::new();
    };
    let holder = |value: f64| windows.iter().find(|window| window.holds(value));
    let pixel = |(name, value): &'_ (String, f64)| Some((holder(*value)?.x(*value), name.clone()));
    let mut inside: Vec<(f64, String)> = places.iter().filter_map(pixel).collect();
    inside.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut lanes = Lanes::new(count, 12.0);
    let mut ticks: Vec<Tick> = Vec::new();
    for (x, name) in inside {
        let text = font::fit(&name, TICK, 240.0);
        let width = font::width(&text, TICK);
        let start = (x - width / 2.0).clamp(first.left, (last.right - width).max(first.left));
        let name = lanes.take(start, start + width).map(|lane| Placed { lane, start, text });
        if name.is_some() || ticks.last().is_none_or(|before| x - before.x >= 1.0) {
            ticks.push(Tick { x, name });
        }
    }
    ticks
}

/// The marks under a plot.
pub struct Marks {
    ticks: Vec<Tick>,
    lanes: usize,
    unnamed: usize,
}

impl Marks {
    /// Lays out the marks (name, time in s) that lie in one of the windows.
    pub fn lay(marks: &[(String, f64)], windows: &[Window]) -> Self {
        let ticks = in_lanes(marks, windows, 3);
        let named = ticks.iter().filter_map(|tick| tick.name.as_ref());
        let lanes = named.clone().map(|name| name.lane + 1).max().unwrap_or(0);
        let inside = marks.iter().filter(|mark| windows.iter().any(|window| window.holds(mark.1))).count();
        let unnamed = inside - named.count();
        Marks { ticks, lanes, unnamed }
    }

    /// Height in pixels that the names take.
    pub fn height(&self) -> f64 {
        if self.ticks.is_empty() {
            return 0.0;
        }
        10.0 + LINE * (self.lanes + usize::from(self.unnamed > 0)) as f64
    }

    /// Faint upright lines at the marks.
    pub fn guides(&self, scene: &mut Scene, top: f64, bottom: f64) {
        for tick in &self.ticks {
            let dotted = Look { color: REST, marker: None, dash: Some((2.0, 5.0)) };
            scene.curve(vec![(tick.x, top), (tick.x, bottom)], 1.4, dotted);
        }
    }

    /// Draws ticks and names from `y` downwards.
    pub fn draw(&self, scene: &mut Scene, y: f64) {
        for tick in &self.ticks {
            scene.line(vec![(tick.x, y), (tick.x, y + 8.0)], 2.0, AXIS);
        }
        for name in self.ticks.iter().filter_map(|tick| tick.name.as_ref()) {
            name.draw(scene, y + 10.0 + LINE * (name.lane as f64 + 0.5));
        }
        if self.unnamed > 0 {
            let text = format!("… {} more marks, too close together to be named", self.unnamed);
            let place = (EDGE, y + 10.0 + LINE * (self.lanes as f64 + 0.5));
            let width = font::width(&text, SMALL);
            scene.rectangle((place.0, place.1 - 12.0), (place.0 + width, place.1 + 12.0), (255, 255, 255), 1.0);
            scene.text(&text, place, SMALL, SOFT_INK, Anchor::Start);
        }
    }
}
