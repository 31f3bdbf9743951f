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

/// Means of groups of draws, for the standard error of what is not linear in the mean: each group is left out in turn (the
/// jackknife of M. H. Quenouille, Biometrika 43, 353 (1956), and J. W. Tukey, Annals of Mathematical Statistics 29, 614 (1958)).
#[derive(Debug, Clone, Default)]
pub struct Groups(Vec<(u64, Vec<f64>)>);

/// Groups kept at most, before neighbours are joined.
const MOST_GROUPS: usize = 512;

impl Groups {
    /// Takes in one draw; an empty vector is nothing to keep.
    pub fn take(&mut self, vector: &[f64]) {
        if !vector.is_empty() {
            self.0.push((1, vector.to_vec()));
        }
    }

    /// Takes in what came after.
    pub fn join(&mut self, other: Groups) {
        self.0.extend(other.0);
        while self.0.len() > MOST_GROUPS {
            let pair = |pair: &[(u64, Vec<f64>)]| match pair {
                [(n, a), (m, b)] => {
                    let share = *m as f64 / (n + m) as f64;
                    (n + m, a.iter().zip(b).map(|(a, b)| a + share * (b - a)).collect())
                }
                rest => rest[0].clone(),
            };
            self.0 = self.0.chunks(2).map(pair).collect();
        }
    }

    /// One standard error of each number that `find` makes of the mean; nothing where there are fewer than two groups.
    pub fn standard_errors(&self, find: impl Fn(&[f64]) -> Vec<f64>) -> Vec<f64> {
        let count: u64 = self.0.iter().map(|(n, _)| n).sum();
        let Some((_, first)) = self.0.first().filter(|_| self.0.len() > 1) else { return Vec::new() };
        let mut mean = vec![0.0; first.len()];
        for (n, group) in &self.0 {
            add(&mut mean, group, *n as f64 / count as f64);
        }
        let whole = find(&mean);
        let mut squares = vec![0.0; whole.len()];
        for (n, group) in &self.0 {
            let rest = (count - n) as f64;
            let without: Vec<f64> = mean.iter().zip(group).map(|(mean, x)| mean + (mean - x) * *n as f64 / rest).collect();
            // groups of unequal size by their weight: (N - n)/N for (G - 1)/G
            for (square, (a, b)) in squares.iter_mut().zip(find(&without).iter().zip(&whole)) {
                *square += rest / count as f64 * (a - b).powi(2);
            }
        }
        squares.into_iter().map(f64::sqrt).collect()
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

    /// Of the mean itself the jackknife gives the standard error; of its square 2 |mean| times that (error propagation), also where
    /// neighbours have been joined.
    #[test]
    fn exact_errors_by_leaving_out() {
        for draws in [50u32, 4000] {
            let (mut groups, mut sample) = (Groups::default(), Sample::default());
            let mut stream = crate::random::Stream::new(3, 0, 0, 0);
            for _ in 0..draws {
                let x = 5.0 + stream.normal();
                let mut one = Groups::default();
                one.take(&[x]);
                groups.join(one);
                sample.take(&[x]);
            }
            let [found, squared] = groups.standard_errors(|mean| vec![mean[0], mean[0] * mean[0]])[..] else { panic!("two numbers") };
            let error = sample.standard_errors()[0];
            // joined groups are fewer: their own spread is 1/sqrt(2 G)
            let tolerance = if draws == 50 { 1e-12 } else { 4.0 / (2.0 * 256.0f64).sqrt() };
            assert!((found / error - 1.0).abs() < tolerance, "{found} against {error}");
            assert!((squared / (2.0 * sample.mean[0] * error) - 1.0).abs() < tolerance + 0.02, "{squared}");
        }
    }

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
