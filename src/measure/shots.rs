//! Counts behind a read-out: with p_r = sum_j reads_rj (population of j), n shots show n p_r on average, with the standard deviation
//! sqrt(n p_r (1 - p_r)) of the binomial law (J. Bernoulli, Ars Conjectandi, 1713). Population that was lost is not read.

use crate::problem::State;

/// What one read shows.
#[derive(Debug, Clone, PartialEq)]
pub struct Count {
    /// Name of the read.
    pub read: String,
    /// Expected count.
    pub expected: f64,
    /// Standard deviation of the count.
    pub spread: f64,
}

/// The counts of `number` shots; `reads` are the names with the probability of that read for each level.
pub fn counts(number: f64, reads: &[(String, Vec<f64>)], state: State) -> Vec<Count> {
    let one = |(read, row): &(String, Vec<f64>)| {
        let p: f64 = row.iter().enumerate().map(|(level, probability)| probability * state.population(level)).sum();
        Count { read: read.clone(), expected: number * p, spread: (number * p * (1.0 - p)).max(0.0).sqrt() }
    };
    reads.iter().map(one).collect()
}
