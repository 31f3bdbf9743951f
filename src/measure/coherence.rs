//! Coherences: element a, b of the density matrix, c_a times the conjugate of c_b, in the frame of the run.

use super::{Column, Quantity, Seen};

/// Coherences of some pairs.
pub struct Coherences {
    pairs: Vec<([usize; 2], String)>,
}

impl Coherences {
    /// Those of `pairs`.
    pub fn new(names: &[String], pairs: &[[usize; 2]]) -> Coherences {
        Coherences { pairs: pairs.iter().map(|[a, b]| ([*a, *b], format!("{}_{}", names[*a], names[*b]))).collect() }
    }
}

impl Quantity for Coherences {
    fn columns(&self) -> Vec<Column> {
        let part = |name: &str, part: &str| {
            let label = format!("{} {part}", name.replace('_', ", "));
            Column::plain(format!("coherence_{name}_{part}"), &["coherence", name], "coherence", label)
        };
        self.pairs.iter().flat_map(|(_, name)| [part(name, "re"), part(name, "im")]).collect()
    }

    fn see(&self, seen: &Seen, row: &mut Vec<f64>) {
        for ([a, b], _) in &self.pairs {
            let element = seen.state.coherence(*a, *b);
            row.extend([element.re, element.im]);
        }
    }
}
