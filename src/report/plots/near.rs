//! Labels beside their points, clear of each other, of all points and of each other's leader lines.

/// Left, right, top, bottom in pixels.
pub type Rect = (f64, f64, f64, f64);
/// A straight line between two places in pixels.
pub type Segment = ((f64, f64), (f64, f64));

/// Half the height in pixels that a label takes.
const HALF: f64 = 12.5;
/// Pixels around a point that stay free.
const CLEAR: f64 = 11.0;
/// Pixels between a point and its label.
const BESIDE: f64 = 15.0;
/// Steps in pixels in which a label moves up or down, and how many.
const STEP: f64 = 8.0;
const STEPS: i32 = 44;
/// Pixels that a label would rather move than cover a guide.
const GUIDE_COST: f64 = 60.0;

/// What is already on the plot.
#[derive(Debug, Default)]
pub struct Board {
    /// Points, covered by no label or leader.
    pub points: Vec<(f64, f64)>,
    /// Rectangles taken by texts.
    pub taken: Vec<Rect>,
    /// Lines that labels avoid where they can.
    pub guides: Vec<Segment>,
    /// Leader lines drawn so far.
    pub leaders: Vec<Segment>,
}

/// Where a label stands.
#[derive(Clone, Copy, Debug)]
pub struct Spot {
    /// Left end of the text.
    pub left: f64,
    /// Middle of its height.
    pub y: f64,
    /// From the point to the text, where the text is not right beside it.
    pub leader: Option<Segment>,
}

impl Board {
    /// The nearest free spot inside `area` for a text `width` pixels wide that belongs to `point`, now taken; none if there is none.
    pub fn place(&mut self, point: (f64, f64), width: f64, area: Rect) -> Option<Spot> {
        let mut best: Option<(f64, Spot)> = None;
        for away in [0.0, 22.0, 60.0, 130.0] {
            for step in (-STEPS)..=STEPS {
                for right in [true, false] {
                    let spot = spot(point, width, away, f64::from(step) * STEP, right);
                    let steep = f64::from(step.abs()) * STEP;
                    // Leaders steeper than a half turn hide which way they lead.
                    let cost = steep + 0.6 * away + if right { 0.0 } else { 3.0 } + (steep - 2.0 * away - 30.0).max(0.0);
                    if best.as_ref().is_some_and(|known| known.0 <= cost) || !self.free(point, &spot, width, area) {
                        continue;
                    }
                    let rect = rect(&spot, width);
                    let cost = cost + GUIDE_COST * self.guides.iter().filter(|guide| crosses(guide, &rect)).count() as f64;
                    if best.as_ref().is_none_or(|known| cost < known.0) {
                        best = Some((cost, spot));
                    }
                }
            }
        }
        let (_, spot) = best?;
        self.taken.push(rect(&spot, width));
        self.leaders.extend(spot.leader);
        Some(spot)
    }

    fn free(&self, point: (f64, f64), spot: &Spot, width: f64, area: Rect) -> bool {
        let own = rect(spot, width);
        let inside = own.0 >= area.0 && own.1 <= area.1 && own.2 >= area.2 && own.3 <= area.3;
        let covers = |place: &(f64, f64)| {
            place.0 + CLEAR > own.0 && place.0 - CLEAR < own.1 && place.1 + CLEAR - 3.0 > own.2 && place.1 - CLEAR + 3.0 < own.3
        };
        let overlaps = |other: &Rect| own.0 < other.1 && other.0 < own.1 && own.2 < other.3 && other.2 < own.3;
        if !inside || self.taken.iter().any(overlaps) || self.points.iter().any(covers) {
            return false;
        }
        if self.leaders.iter().any(|leader| crosses(leader, &own)) {
            return false;
        }
        let Some(leader) = spot.leader else { return true };
        let same = |place: &(f64, f64)| (place.0 - point.0).hypot(place.1 - point.1) < CLEAR;
        let hits = |place: &(f64, f64)| !same(place) && distance(*place, &leader) < CLEAR;
        let meets = |other: &Segment| !same(&other.0) && segments_meet(other, &leader);
        !self.taken.iter().any(|other| crosses(&leader, other)) && !self.points.iter().any(hits) && !self.leaders.iter().any(meets)
    }
}

fn spot(point: (f64, f64), width: f64, away: f64, up: f64, right: bool) -> Spot {
    let gap = BESIDE + away;
    let (left, end) = if right { (point.0 + gap, point.0 + gap - 4.0) } else { (point.0 - gap - width, point.0 - gap + 4.0) };
    let y = point.1 - up;
    let leader = (away > 0.0 || up.abs() > STEP).then_some((point, (end, y)));
    Spot { left, y, leader }
}

fn rect(spot: &Spot, width: f64) -> Rect {
    (spot.left - 3.0, spot.left + width + 3.0, spot.y - HALF, spot.y + HALF)
}

/// Whether a line meets a rectangle.
fn crosses(line: &Segment, rect: &Rect) -> bool {
    let (x, y) = line.0;
    let (dx, dy) = (line.1 .0 - x, line.1 .1 - y);
    let (mut enter, mut leave) = (0.0f64, 1.0f64);
    for (start, step, low, high) in [(x, dx, rect.0, rect.1), (y, dy, rect.2, rect.3)] {
        if step.abs() < 1e-9 {
            if start < low || start > high {
                return false;
            }
            continue;
        }
        let (a, b) = ((low - start) / step, (high - start) / step);
        (enter, leave) = (enter.max(a.min(b)), leave.min(a.max(b)));
    }
    enter <= leave
}

fn distance(place: (f64, f64), line: &Segment) -> f64 {
    let (dx, dy) = (line.1 .0 - line.0 .0, line.1 .1 - line.0 .1);
    let along = ((place.0 - line.0 .0) * dx + (place.1 - line.0 .1) * dy) / (dx * dx + dy * dy).max(1e-12);
    let along = along.clamp(0.0, 1.0);
    (line.0 .0 + along * dx - place.0).hypot(line.0 .1 + along * dy - place.1)
}

fn segments_meet(one: &Segment, other: &Segment) -> bool {
    let side = |line: &Segment, place: (f64, f64)| {
        (line.1 .0 - line.0 .0) * (place.1 - line.0 .1) - (line.1 .1 - line.0 .1) * (place.0 - line.0 .0)
    };
    side(one, other.0) * side(one, other.1) <= 0.0 && side(other, one.0) * side(other, one.1) <= 0.0
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_a_free_point_has_its_label_right_beside_it() {
        let mut board = Board { points: vec![(100.0, 100.0)], ..Board::default() };
        let spot = board.place((100.0, 100.0), 80.0, (0.0, 300.0, 0.0, 200.0));
        assert!(spot.is_some_and(|spot| spot.left == 115.0 && spot.y == 100.0 && spot.leader.is_none()));
        // Too near the right edge: to the left.
        let spot = board.place((250.0, 50.0), 80.0, (0.0, 300.0, 0.0, 200.0));
        assert!(spot.is_some_and(|spot| spot.left == 155.0 && spot.y == 50.0));
        assert!(board.place((250.0, 50.0), 400.0, (0.0, 300.0, 0.0, 200.0)).is_none());
    }

    #[test]
    fn exact_lines_meet_rectangles_and_each_other() {
        let unit = (0.0, 1.0, 0.0, 1.0);
        assert!(crosses(&((-1.0, 0.5), (2.0, 0.5)), &unit) && crosses(&((0.2, 0.2), (0.3, 0.3)), &unit));
        assert!(!crosses(&((-1.0, 1.5), (2.0, 1.5)), &unit) && !crosses(&((-1.0, 0.0), (0.0, 2.5)), &unit));
        assert!(segments_meet(&((0.0, 0.0), (1.0, 1.0)), &((0.0, 1.0), (1.0, 0.0))));
        assert!(!segments_meet(&((0.0, 0.0), (1.0, 1.0)), &((2.0, 1.0), (3.0, 0.0))));
        assert!((distance((0.5, 2.0), &((0.0, 0.0), (1.0, 0.0))) - 2.0).abs() < 1e-12);
    }

    proptest::proptest! {
        #[test]
        fn prop_labels_never_touch(points in proptest::collection::vec((0.0..600.0f64, 0.0..400.0f64), 1..12)) {
            let mut board = Board { points: points.clone(), ..Board::default() };
            let area = (0.0, 600.0, 0.0, 400.0);
            for point in &points {
                board.place(*point, 120.0, area);
            }
            for (index, one) in board.taken.iter().enumerate() {
                proptest::prop_assert!(one.0 >= 0.0 && one.1 <= 600.0 && one.2 >= 0.0 && one.3 <= 400.0);
                for other in &board.taken[..index] {
                    proptest::prop_assert!(one.1 <= other.0 || other.1 <= one.0 || one.3 <= other.2 || other.3 <= one.2);
                }
                for point in &points {
                    proptest::prop_assert!(point.0 < one.0 || point.0 > one.1 || point.1 < one.2 || point.1 > one.3);
                }
                proptest::prop_assert!(!board.leaders.iter().any(|leader| leader.1.0 < one.0 && leader.0.0 > one.1 && crosses(leader, one)));
            }
        }
    }
}
