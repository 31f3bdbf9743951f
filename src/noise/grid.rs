//! Rules of nodes for several causes at once: every node of one with every node of the others, weights multiplied.

use super::source::{Draw, Source};

/// A grid of nodes.
#[derive(Debug, Clone)]
pub struct Grid {
    /// For each cause its index among all, and its nodes with their weights.
    axes: Vec<(usize, Vec<(Draw, f64)>)>,
}

impl Grid {
    /// Of the causes in `which`; `points` turns the number of points written into the one taken.
    pub fn new(sources: &[Source], which: &[usize], points: impl Fn(usize) -> usize) -> Grid {
        let nodes = |index: usize| {
            let source = &sources[index];
            match source.rule {
                crate::config::noise::Rule::Gauss { points: written } => source.nodes(points(written)),
                _ => source.nodes(1),
            }
        };
        Grid { axes: which.iter().map(|index| (*index, nodes(*index))).collect() }
    }

    /// Nodes altogether; 1 where there is no cause.
    pub fn len(&self) -> u64 {
        self.axes.iter().map(|(_, nodes)| nodes.len() as u64).product()
    }

    /// Nodes of each cause.
    pub fn counts(&self) -> Vec<(usize, usize)> {
        self.axes.iter().map(|(index, nodes)| (*index, nodes.len())).collect()
    }

    /// Node number `k`: appends what it adds to each number, and gives its weight.
    pub fn node(&self, sources: &[Source], mut k: u64, amounts: &mut Vec<(u32, f64)>) -> f64 {
        let mut weight = 1.0;
        for (index, nodes) in self.axes.iter().rev() {
            let (draw, share) = nodes[(k % nodes.len() as u64) as usize];
            k /= nodes.len() as u64;
            weight *= share;
            amounts.extend(sources[*index].amounts(draw));
        }
        weight
    }
}
