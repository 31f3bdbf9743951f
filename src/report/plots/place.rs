//! Labels kept apart.

/// Moves wished centres (any order) by as little as needed so that neighbours are at least `gap` apart and all lie in
/// `low..=high`; where they cannot all fit, the gap shrinks. Order among equals is kept.
///
/// Labels that collide are pooled into blocks about their mean (isotonic regression of the centres less k times the gap).
pub fn apart(wished: &[f64], gap: f64, low: f64, high: f64) -> Vec<f64> {
    let count = wished.len();
    if count == 0 {
        return Vec::new();
    }
    let gap = if count > 1 { gap.min((high - low).max(0.0) / (count - 1) as f64) } else { gap };
    let mut order: Vec<usize> = (0..count).collect();
    order.sort_by(|a, b| wished[*a].total_cmp(&wished[*b]));
    // Each block: sum of wishes less their offsets, and number of members.
    let mut blocks: Vec<(f64, usize)> = Vec::new();
    for (rank, &index) in order.iter().enumerate() {
        let mut block = (wished[index] - rank as f64 * gap, 1);
        while let Some(&(sum, members)) = blocks.last() {
            if sum / members as f64 <= block.0 / block.1 as f64 {
                break;
            }
            block = (block.0 + sum, block.1 + members);
            blocks.pop();
        }
        blocks.push(block);
    }
    let mut placed = vec![0.0; count];
    let mut rank = 0;
    let last = high - (count - 1) as f64 * gap;
    for (sum, members) in blocks {
        // Clamping a non-decreasing sequence keeps it so.
        let base = (sum / members as f64).min(last).max(low);
        for _ in 0..members {
            placed[order[rank]] = base + rank as f64 * gap;
            rank += 1;
        }
    }
    placed
}

/// Texts side by side in lanes: no two in a lane come closer than `space`.
pub struct Lanes {
    space: f64,
    taken: Vec<Vec<(f64, f64)>>,
}

impl Lanes {
    /// `count` empty lanes.
    pub fn new(count: usize, space: f64) -> Self {
        Lanes { space, taken: vec![Vec::new(); count] }
    }

    /// The first lane in which `low..high` is free, now taken; none if there is no such lane.
    pub fn take(&mut self, low: f64, high: f64) -> Option<usize> {
        let space = self.space;
        let free = |lane: &Vec<(f64, f64)>| lane.iter().all(|(start, end)| high + space <= *start || end + space <= low);
        let lane = self.taken.iter().position(free)?;
        self.taken[lane].push((low, high));
        Some(lane)
    }

    /// Lanes that hold anything.
    pub fn used(&self) -> usize {
        self.taken.iter().filter(|lane| !lane.is_empty()).count()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_colliding_labels_spread_about_their_mean() {
        assert_eq!(apart(&[50.0, 50.0, 50.0, 200.0], 20.0, 0.0, 300.0), [30.0, 50.0, 70.0, 200.0]);
        assert_eq!(apart(&[0.0, 0.0], 20.0, 10.0, 300.0), [10.0, 30.0]);
        assert_eq!(apart(&[299.0, 10.0, 300.0], 20.0, 0.0, 300.0), [280.0, 10.0, 300.0]);
    }

    #[test]
    fn exact_lanes_fill_in_order() {
        let mut lanes = Lanes::new(2, 5.0);
        assert_eq!(lanes.take(0.0, 10.0), Some(0));
        assert_eq!(lanes.take(12.0, 20.0), Some(1));
        assert_eq!(lanes.take(15.0, 30.0), Some(0));
        assert_eq!(lanes.take(15.0, 30.0), None);
        assert_eq!(lanes.used(), 2);
    }

    proptest::proptest! {
        #[test]
        fn prop_labels_never_come_closer_than_the_gap(wished in proptest::collection::vec(-100.0..500.0f64, 1..12)) {
            let placed = apart(&wished, 24.0, 0.0, 300.0);
            let mut sorted = placed.clone();
            sorted.sort_by(f64::total_cmp);
            proptest::prop_assert!(sorted.windows(2).all(|pair| pair[1] - pair[0] > 24.0 - 1e-9));
            proptest::prop_assert!(sorted[0] >= -1e-9 && sorted[sorted.len() - 1] <= 300.0 + 1e-9);
            for (a, b) in (0..wished.len()).flat_map(|a| (0..wished.len()).map(move |b| (a, b))) {
                proptest::prop_assert!(wished[a] >= wished[b] || placed[a] < placed[b] + 1e-9);
            }
        }
    }
}
