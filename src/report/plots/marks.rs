//! Named moments under a plot: small ticks with names in lanes, so that names close together stay apart.
use super::font;
use super::frame::{Window, EDGE, LINE, SMALL, TICK};
use super::palette::{Look, AXIS, REST, SOFT_INK};
use super::place::Lanes;
use super::scene::{Anchor, Scene};

/// The marks, laid out in lanes.
pub struct Marks {
    placed: Vec<(f64, Option<(usize, f64, String)>)>,
    lanes: usize,
    unnamed: usize,
}

impl Marks {
    /// Lays out the marks that lie in one of the windows (from left to right).
    pub fn lay(marks: &[(String, f64)], windows: &[Window]) -> Self {
        let holder = |time: f64| windows.iter().find(|window| window.holds(time));
        let mut inside: Vec<(&str, f64)> = marks
            .iter()
            .filter_map(|(name, time)| Some((name.as_str(), holder(*time)?.x(*time))))
            .collect();
        inside.sort_by(|a, b| a.1.total_cmp(&b.1));
        let (left, right) = (
            windows.first().map_or(0.0, |window| window.left),
            windows.last().map_or(1.0, |window| window.right),
        );
        let mut lanes = Lanes::new(3, 12.0);
        let mut unnamed = 0;
        let mut placed = Vec::new();
        for (name, x) in inside {
            let text = font::fit(name, TICK, 220.0);
            let width = font::width(&text, TICK);
            let start = (x - width / 2.0).clamp(left, (right - width).max(left));
            let lane = lanes.take(start, start + width);
            unnamed += usize::from(lane.is_none());
            // Ticks that fall on one pixel and have no name left add nothing.
            let repeated = placed.last().is_some_and(|last: &(f64, _)| x - last.0 < 1.0);
            if lane.is_some() || !repeated {
                placed.push((x, lane.map(|lane| (lane, start, text))));
            }
        }
        Marks {
            placed,
            lanes: lanes.used(),
            unnamed,
        }
    }

    /// Height in pixels that the names take.
    pub fn height(&self) -> f64 {
        if self.placed.is_empty() {
            return 0.0;
        }
        10.0 + LINE * (self.lanes + usize::from(self.unnamed > 0)) as f64
    }

    /// Faint upright lines from the marks through the panels.
    pub fn guides(&self, scene: &mut Scene, top: f64, bottom: f64) {
        for (x, _) in &self.placed {
            let dotted = Look {
                color: REST,
                marker: None,
                dash: Some((2.0, 5.0)),
            };
            scene.curve(vec![(*x, top), (*x, bottom)], 1.4, dotted);
        }
    }

    /// Draws ticks and names from `y` downwards.
    pub fn draw(&self, scene: &mut Scene, y: f64) {
        for (x, name) in &self.placed {
            scene.line(vec![(*x, y), (*x, y + 8.0)], 2.0, AXIS);
            if let Some((lane, start, text)) = name {
                let middle = y + 10.0 + LINE * (*lane as f64 + 0.5);
                let width = font::width(text, TICK);
                // The dotted lines of neighbours must not run through the letters.
                scene.rectangle(
                    (start - 3.0, middle - LINE / 2.0),
                    (start + width + 3.0, middle + LINE / 2.0),
                    (255, 255, 255),
                    1.0,
                );
                scene.text(text, (*start, middle), TICK, SOFT_INK, Anchor::Start);
            }
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
