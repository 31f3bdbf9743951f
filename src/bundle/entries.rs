//! Entries of matrices as functions of the moved numbers: sums of products of different numbers, where the arithmetic of the config is
//! no more than that.
//!
//! With s_i the number i scaled to [0, 1] over its range, an entry is sum over sets S of c_S times the product of the s_i in S. The c_S
//! follow from the entries at the corners of the box; that nothing else is in it is checked at points inside, to rounding.

/// Most numbers for which all corners are looked at; with more, entries must be sums of single numbers.
const MOST_CORNERS: usize = 4;
/// Largest difference between the function and the entry, over the largest entry of its matrix at any corner.
const ROUNDING: f64 = 2e-15;

/// All entries as functions of the numbers.
#[derive(Debug, Clone)]
pub(super) struct Function {
    lows: Vec<f64>,
    spans: Vec<f64>,
    /// Sets of numbers, as bits.
    sets: Vec<u64>,
    /// Entries that are not zero everywhere: which, and a coefficient for each set.
    rows: Vec<(usize, Vec<f64>)>,
    /// Largest modulus of each entry at the corners.
    largest: Vec<f64>,
}

impl Function {
    /// Corners at which the entries are wanted, for numbers within `bounds`.
    pub fn corners(bounds: &[(f64, f64)]) -> Vec<Vec<f64>> {
        sets(bounds.len()).iter().map(|set| corner(bounds, *set)).collect()
    }

    /// Made of the entries at the [corners](Function::corners).
    pub fn new(bounds: &[(f64, f64)], at_corners: &[Vec<f64>]) -> Function {
        let sets = sets(bounds.len());
        let count = at_corners.first().map_or(0, Vec::len);
        let mut rows = Vec::new();
        for entry in 0..count {
            // c_S = sum over subsets T of S of (-1)^(|S| - |T|) times the entry at corner T
            let coefficients: Vec<f64> = sets
                .iter()
                .map(|set| {
                    let subsets = sets.iter().zip(at_corners).filter(|(sub, _)| *sub & set == **sub);
                    subsets.map(|(sub, at)| if (set ^ sub).count_ones() % 2 == 0 { at[entry] } else { -at[entry] }).sum()
                })
                .collect();
            if coefficients.iter().any(|c| *c != 0.0) {
                rows.push((entry, coefficients));
            }
        }
        let mut function = Function {
            lows: bounds.iter().map(|(low, _)| *low).collect(),
            spans: bounds.iter().map(|(low, high)| high - low).collect(),
            sets,
            rows,
            largest: (0..count).map(|entry| at_corners.iter().fold(0.0f64, |a, at| a.max(at[entry].abs()))).collect(),
        };
        function.forget_rounding();
        function
    }

    /// Coefficients of rounding are taken out, and sets that no entry needs.
    fn forget_rounding(&mut self) {
        for (_, coefficients) in &mut self.rows {
            let largest = coefficients.iter().fold(0.0f64, |a, b| a.max(b.abs()));
            for c in coefficients.iter_mut().filter(|c| c.abs() < 4.0 * f64::EPSILON * largest) {
                *c = 0.0;
            }
        }
        let needed: Vec<bool> = (0..self.sets.len()).map(|k| self.rows.iter().any(|(_, c)| c[k] != 0.0)).collect();
        let keep = |k: &usize| needed[*k];
        self.sets = (0..self.sets.len()).filter(keep).map(|k| self.sets[k]).collect();
        for (_, coefficients) in &mut self.rows {
            *coefficients = (0..needed.len()).filter(keep).map(|k| coefficients[k]).collect();
        }
    }

    /// Writes the entries at `numbers` into every `stride`-th place of `into`, which is zero elsewhere.
    pub fn fill(&self, numbers: &[f64], into: &mut [f64], stride: usize) {
        let mut products = [0.0; 64];
        for (product, set) in products.iter_mut().zip(&self.sets) {
            *product = 1.0;
            for (i, number) in numbers.iter().enumerate().filter(|(i, _)| set >> i & 1 == 1) {
                *product *= if self.spans[i] != 0.0 { (number - self.lows[i]) / self.spans[i] } else { 0.0 };
            }
        }
        for (entry, coefficients) in &self.rows {
            into[entry * stride] = coefficients.iter().zip(&products).map(|(c, p)| c * p).sum();
        }
    }

    /// Whether it gives these entries at `numbers`, matrices of `size` entries one after another, each to rounding of its largest
    /// anywhere: that is what the phases at the end are told to.
    pub fn agrees(&self, numbers: &[f64], entries: &[f64], size: usize) -> bool {
        let mut found = vec![0.0; entries.len()];
        self.fill(numbers, &mut found, 1);
        found.chunks(size).zip(entries.chunks(size)).zip(self.largest.chunks(size)).all(|((found, wanted), largest)| {
            let largest = largest.iter().fold(0.0f64, |a, b| a.max(*b));
            found.iter().zip(wanted).all(|(f, w)| (f - w).abs() <= ROUNDING * largest)
        })
    }
}

/// The sets of numbers that may stand together.
fn sets(numbers: usize) -> Vec<u64> {
    if numbers <= MOST_CORNERS {
        (0..1u64 << numbers).collect()
    } else {
        std::iter::once(0).chain((0..numbers.min(63)).map(|i| 1 << i)).collect()
    }
}

fn corner(bounds: &[(f64, f64)], set: u64) -> Vec<f64> {
    bounds.iter().enumerate().map(|(i, (low, high))| if set >> i & 1 == 1 { *high } else { *low }).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_sums_of_products_are_found() {
        let bounds = [(1.0, 3.0), (-2.0, 5.0), (4.0, 4.0)];
        let entries = |x: &[f64]| vec![2.0 + 3.0 * x[0] - x[1], x[0] * x[1], 0.0, 7.0];
        let at: Vec<Vec<f64>> = Function::corners(&bounds).iter().map(|x| entries(x)).collect();
        let function = Function::new(&bounds, &at);
        for x in [[1.5, 0.25, 4.0], [2.9, -1.0, 4.0]] {
            assert!(function.agrees(&x, &entries(&x), 4), "{x:?}");
        }
        let curved = |x: &[f64]| vec![x[0] * x[0]];
        let at: Vec<Vec<f64>> = Function::corners(&bounds).iter().map(|x| curved(x)).collect();
        assert!(!Function::new(&bounds, &at).agrees(&[1.5, 0.0, 4.0], &curved(&[1.5]), 1));
    }

    #[test]
    fn exact_many_numbers_add_up() {
        let bounds = [(0.0, 1.0); 10];
        let entries = |x: &[f64]| vec![x.iter().enumerate().map(|(i, x)| (i as f64 + 1.0) * x).sum::<f64>() - 3.0];
        let at: Vec<Vec<f64>> = Function::corners(&bounds).iter().map(|x| entries(x)).collect();
        let x: Vec<f64> = (0..10).map(|i| 0.03 + 0.09 * f64::from(i)).collect();
        assert!(Function::new(&bounds, &at).agrees(&x, &entries(&x), 1));
    }
}
