//! In which order the points of a part are computed.

use super::bits::Bits;
use super::store::{Head, Part};

/// Points of a part, in tiles of consecutive points; tile k belongs to part k modulo the number of parts.
#[derive(Debug, Clone, Copy)]
pub struct Order {
    /// Points of the whole scan.
    pub points: u64,
    /// Points of a tile.
    pub tile: u64,
    /// The part.
    pub part: Part,
}

impl Order {
    /// The order of the points of a part, as a store says it.
    pub fn of(head: &Head, part: Part) -> Order {
        Order { points: head.points, tile: head.tile, part }
    }

    /// The part that a point belongs to, from 1.
    pub fn part_of(&self, point: u64) -> u64 {
        point / self.tile % self.part.of + 1
    }

    /// All points of the part, ascending.
    pub fn all(self) -> impl Iterator<Item = u64> + Send {
        let tiles = self.points.div_ceil(self.tile);
        let mine = (self.part.number - 1..tiles).step_by(self.part.of.max(1) as usize);
        mine.flat_map(move |tile| tile * self.tile..((tile + 1) * self.tile).min(self.points))
    }

    /// The point of a tile that is computed at two resolutions: one at random, the same in each run, but no probe.
    pub fn check_point(&self, tile: u64, probes: &[u64]) -> u64 {
        let first = tile * self.tile;
        let count = self.tile.min(self.points - first);
        let wished = scattered(tile) % count;
        (0..count).map(|k| first + (wished + k) % count).find(|point| !probes.contains(point)).unwrap_or(first + wished)
    }

    /// These points of all tiles of the part, ascending.
    pub fn check_points<'p>(&self, probes: &'p [u64]) -> impl Iterator<Item = u64> + Send + 'p {
        let (order, tiles) = (*self, self.points.div_ceil(self.tile));
        (self.part.number - 1..tiles).step_by(self.part.of.max(1) as usize).map(move |tile| order.check_point(tile, probes))
    }

    /// How many there are.
    pub fn count(&self) -> u64 {
        let tiles = self.points.div_ceil(self.tile);
        if self.part.number > tiles {
            return 0;
        }
        let mine = (tiles - self.part.number) / self.part.of + 1;
        // the last tile may be shorter
        let last_is_mine = (tiles - 1) % self.part.of + 1 == self.part.number;
        mine * self.tile - if last_is_mine { tiles * self.tile - self.points } else { 0 }
    }

    /// Those that are not done.
    pub fn pending<'d>(&self, done: &'d Bits) -> impl Iterator<Item = u64> + Send + 'd {
        self.all().filter(|point| !done.has(*point))
    }
}

/// A number scattered over all 64 bits (G. L. Steele, D. Lea, C. H. Flood, ACM SIGPLAN Notices 49, 453 (2014)).
pub fn scattered(number: u64) -> u64 {
    let mut x = number.wrapping_add(0x9e37_79b9_7f4a_7c15);
    x = (x ^ (x >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    x = (x ^ (x >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    x ^ (x >> 31)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_parts_share_all_points_without_overlap() {
        for (points, tile, of) in [(1000, 48, 7), (48, 48, 3), (49, 48, 2), (5, 1, 9), (96, 48, 2)] {
            let mut seen = Bits::new(points);
            for number in 1..=of {
                let order = Order { points, tile, part: Part { number, of } };
                assert_eq!(order.all().count() as u64, order.count(), "{points} {tile} {number}/{of}");
                assert!(order.all().all(|point| seen.insert(point) && order.part_of(point) == number));
            }
            assert_eq!(seen.count(), points);
            let order = Order { points, tile, part: Part::WHOLE };
            let probes = [0, points / 2, points - 1];
            let checked: Vec<u64> = order.check_points(&probes).collect();
            assert_eq!(checked.len() as u64, points.div_ceil(tile));
            for (k, point) in checked.iter().enumerate() {
                assert_eq!(point / tile, k as u64);
                assert!(tile == 1 || points % tile == 1 || !probes.contains(point), "{point}");
            }
        }
    }
}
