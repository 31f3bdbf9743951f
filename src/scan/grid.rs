//! Points of a scan by number: which values the axes have there.
//!
//! Axes that move together form one group; groups make a grid in the order written, the last one fastest. Point numbers run from 0.

use crate::config::scan::{Axis, Scan};

/// The grid of a scan.
#[derive(Debug, Clone)]
pub struct Grid {
    axes: Vec<Axis>,
    /// Group of each axis.
    group: Vec<usize>,
    /// Points of each group.
    counts: Vec<u64>,
}

impl Grid {
    /// The grid of these axes.
    pub fn new(scan: &Scan) -> Grid {
        let mut group = Vec::new();
        let mut counts = Vec::new();
        for axis in &scan.axes {
            match axis.together_with {
                Some(leader) => group.push(group[leader]),
                None => {
                    group.push(counts.len());
                    counts.push(axis.count());
                }
            }
        }
        Grid { axes: scan.axes.clone(), group, counts }
    }

    /// Number of points.
    pub fn points(&self) -> u64 {
        self.counts.iter().product()
    }

    /// The axes, as written.
    pub fn axes(&self) -> &[Axis] {
        &self.axes
    }

    /// The first axis of each group, by its place among the axes.
    pub fn leaders(&self) -> Vec<usize> {
        (0..self.counts.len()).filter_map(|group| self.group.iter().position(|of| *of == group)).collect()
    }

    /// The group that an axis belongs to.
    pub fn group_of(&self, axis: usize) -> usize {
        self.group[axis]
    }

    /// Points along each group.
    pub fn counts(&self) -> &[u64] {
        &self.counts
    }

    /// Where a point stands along each group, from 0.
    pub fn coordinates(&self, point: u64) -> Vec<u64> {
        let mut rest = point;
        let mut along = vec![0; self.counts.len()];
        for (k, count) in self.counts.iter().enumerate().rev() {
            along[k] = rest % count;
            rest /= count;
        }
        along
    }

    /// The point that stands there.
    pub fn point_at(&self, along: &[u64]) -> u64 {
        self.counts.iter().zip(along).fold(0, |point, (count, at)| point * count + at)
    }

    /// The point at a place along one group, with all others at their middle.
    pub fn point_along(&self, group: usize, place: u64) -> u64 {
        let along: Vec<u64> = self.counts.iter().enumerate().map(|(k, count)| if k == group { place } else { count / 2 }).collect();
        self.point_at(&along)
    }

    /// The point at which the axes have these values (SI, in the order of the axes), if it is one of the grid.
    pub fn point_of(&self, values: &[f64]) -> Option<u64> {
        let is = |(axis, value): (&Axis, &f64), place: u64| {
            let written = axis.value(place);
            (written - value).abs() <= 1e-12 * written.abs().max(value.abs())
        };
        let along: Option<Vec<u64>> = (0..self.counts.len())
            .map(|group| {
                let own = |k: &usize| self.group[*k] == group;
                (0..self.counts[group]).find(|place| (0..self.axes.len()).filter(own).all(|k| is((&self.axes[k], &values[k]), *place)))
            })
            .collect();
        along.map(|along| self.point_at(&along))
    }

    /// Values of all axes at a point, SI, in the order of the axes.
    pub fn values(&self, point: u64) -> Vec<f64> {
        let along = self.coordinates(point);
        self.axes.iter().zip(&self.group).map(|(axis, group)| axis.value(along[*group])).collect()
    }

    /// The same in the units of the axes.
    pub fn shown(&self, point: u64) -> Vec<f64> {
        let along = self.coordinates(point);
        self.axes.iter().zip(&self.group).map(|(axis, group)| axis.shown(along[*group])).collect()
    }

    /// Smallest and largest value of every axis, SI.
    pub fn bounds(&self) -> Vec<(f64, f64)> {
        let ends = |(axis, group): (&Axis, &usize)| {
            let values = (0..self.counts[*group]).map(|k| axis.value(k));
            values.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), value| (low.min(value), high.max(value)))
        };
        self.axes.iter().zip(&self.group).map(ends).collect()
    }

    /// The corners and the middle: where the numbers are most extreme, and where they are not. At most 65.
    pub fn corners(&self) -> Vec<u64> {
        let bent: Vec<usize> = (0..self.counts.len()).filter(|k| self.counts[*k] > 1).take(6).collect();
        let mut found: Vec<u64> = (0..1u64 << bent.len())
            .map(|mask| {
                let mut along = vec![0; self.counts.len()];
                for (bit, k) in bent.iter().enumerate() {
                    along[*k] = if mask >> bit & 1 == 1 { self.counts[*k] - 1 } else { 0 };
                }
                self.point_at(&along)
            })
            .collect();
        found.push(self.point_at(&self.counts.iter().map(|count| count / 2).collect::<Vec<_>>()));
        found.sort_unstable();
        found.dedup();
        found
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::config::place::Place;
    use crate::config::scan::{Keep, Points};

    fn axis(number: &str, count: u64, together_with: Option<usize>) -> Axis {
        let points = Points::Even { from: 0.0, to: (count - 1) as f64, count };
        let (number, unit) = (number.to_string(), String::new());
        Axis { number, place: Place::default(), points, unit, factor: 1.0, logarithmic: false, together_with }
    }

    #[test]
    fn exact_last_axis_is_fastest_and_axes_in_step_share_their_place() {
        let axes = vec![axis("a", 3, None), axis("b", 3, Some(0)), axis("c", 2, None)];
        let scan = Scan {
            axes,
            keep: Keep::Final,
            same_noise: true,
            derived: Vec::new(),
            best: None,
            contours: Vec::new(),
            place: Place::default(),
        };
        let grid = Grid::new(&scan);
        assert_eq!(grid.points(), 6);
        let rows: Vec<Vec<f64>> = (0..6).map(|point| grid.values(point)).collect();
        assert_eq!(rows[0], [0.0, 0.0, 0.0]);
        assert_eq!(rows[1], [0.0, 0.0, 1.0]);
        assert_eq!(rows[5], [2.0, 2.0, 1.0]);
        assert!((0..6).all(|point| grid.point_at(&grid.coordinates(point)) == point));
        assert_eq!(grid.corners(), [0, 1, 3, 4, 5]);
        assert_eq!(grid.leaders(), [0, 2]);
    }
}
