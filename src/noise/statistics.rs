//! Means of vectors and the sums of their squared deviations, in blocks that are joined in a fixed order: the result is the same
//! to the last bit for any number of threads (T. F. Chan, G. H. Golub, R. J. LeVeque, The American Statistician 37, 242 (1983)).

/// Mean and squared deviations of vectors that came in one after another.
#[derive(Debug, Clone, Default)]
pub struct Sample {
    /// How many came in.
    pub count: u64,
    /// Their mean.
    pub mean: Vec<f64>,
    /// Sums of the squared deviations from the mean.
    pub squares: Vec<f64>,
}

impl Sample {
    /// Takes in one vector.
    pub fn take(&mut self, vector: &[f64]) {
        self.count += 1;
        if self.count == 1 {
            self.mean = vector.to_vec();
            self.squares = vec![0.0; vector.len()];
            return;
        }
        let share = 1.0 / self.count as f64;
        for ((mean, square), x) in self.mean.iter_mut().zip(&mut self.squares).zip(vector) {
            let apart = x - *mean;
            *mean += share * apart;
            *square += apart * (x - *mean);
        }
    }

    /// Takes in what another sample has.
    pub fn join(&mut self, other: &Sample) {
        if other.count == 0 {
            return;
        }
        if self.count == 0 {
            self.clone_from(other);
            return;
        }
        let (a, b) = (self.count as f64, other.count as f64);
        let (share, weight) = (b / (a + b), a * b / (a + b));
        for k in 0..self.mean.len() {
            let apart = other.mean[k] - self.mean[k];
            self.mean[k] += share * apart;
            self.squares[k] += other.squares[k] + weight * apart * apart;
        }
        self.count += other.count;
    }

    /// One standard error of each mean: the root of the variance over the count; infinite for a single vector.
    pub fn standard_errors(&self) -> Vec<f64> {
        let n = self.count as f64;
        let scale = if self.count > 1 { 1.0 / (n * (n - 1.0)) } else { f64::INFINITY };
        self.squares.iter().map(|square| if self.count > 1 { (square * scale).sqrt() } else { f64::INFINITY }).collect()
    }
}

/// Adds `weight` times a vector to a sum.
pub fn add(sum: &mut Vec<f64>, vector: &[f64], weight: f64) {
    if sum.is_empty() {
        sum.resize(vector.len(), 0.0);
    }
    for (sum, x) in sum.iter_mut().zip(vector) {
        *sum += weight * x;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Joined samples are the sample of all, to rounding; standard error of 1 .. 9 is sqrt(7.5/9).
    #[test]
    fn exact_joined_samples() {
        let mut whole = Sample::default();
        let mut parts = [Sample::default(), Sample::default(), Sample::default()];
        for k in 1..=9u32 {
            let x = f64::from(k);
            whole.take(&[x, 1e9 + x]);
            parts[(k as usize - 1) / 4].take(&[x, 1e9 + x]);
        }
        let mut joined = Sample::default();
        parts.iter().for_each(|part| joined.join(part));
        assert_eq!(joined.count, 9);
        assert!((joined.mean[0] - 5.0).abs() < 1e-15 && (whole.mean[0] - 5.0).abs() < 1e-15);
        for error in joined.standard_errors().iter().chain(&whole.standard_errors()) {
            assert!((error - (7.5f64 / 9.0).sqrt()).abs() < 1e-7, "{error}");
        }
    }
}
