//! Random numbers by counting: the k-th number of a stream is a function of the key and k alone, so that any draw can be made
//! again by itself, on any machine and in any thread.
//!
//! Philox with four words of 64 bits and ten rounds (J. K. Salmon, M. A. Moraes, R. O. Dror, D. E. Shaw, Proceedings of the 2011
//! International Conference for High Performance Computing, Networking, Storage and Analysis, 16 (2011)). Normal deviates by the
//! method of G. E. P. Box and M. E. Muller, Annals of Mathematical Statistics 29, 610 (1958), with the functions of `libm`, which
//! round alike everywhere.

use crate::units::RAD_PER_TURN;

const MULTIPLIERS: [u64; 2] = [0xD2E7_470E_E14C_6C93, 0xCA5A_8263_9512_1157];
const STEPS: [u64; 2] = [0x9E37_79B9_7F4A_7C15, 0xBB67_AE85_84CA_A73B];

/// Ten rounds of Philox on a counter.
fn philox(mut counter: [u64; 4], mut key: [u64; 2]) -> [u64; 4] {
    for round in 0..10 {
        if round > 0 {
            key = [key[0].wrapping_add(STEPS[0]), key[1].wrapping_add(STEPS[1])];
        }
        let [a, b] = [0, 1].map(|k| u128::from(MULTIPLIERS[k]) * u128::from(counter[2 * k]));
        counter = [(b >> 64) as u64 ^ counter[1] ^ key[0], b as u64, (a >> 64) as u64 ^ counter[3] ^ key[1], a as u64];
    }
    counter
}

/// One stream of random numbers.
#[derive(Debug, Clone)]
pub struct Stream {
    key: [u64; 2],
    counter: [u64; 4],
    words: [u64; 4],
    left: usize,
    kept: Option<f64>,
}

impl Stream {
    /// The stream number `stream` of `family` under `seed`; `kind` keeps causes apart that share a seed.
    pub fn new(seed: u64, kind: u64, family: u64, stream: u64) -> Stream {
        Stream { key: [seed, kind], counter: [0, stream, family, 0], words: [0; 4], left: 0, kept: None }
    }

    fn word(&mut self) -> u64 {
        if self.left == 0 {
            self.words = philox(self.counter, self.key);
            self.counter[0] += 1;
            self.left = 4;
        }
        self.left -= 1;
        self.words[3 - self.left]
    }

    /// Evenly between 0 and 1, never either.
    pub fn uniform(&mut self) -> f64 {
        const STEP: f64 = 1.0 / (1u64 << 52) as f64;
        ((self.word() >> 12) as f64 + 0.5) * STEP
    }

    /// Normal, mean 0, standard deviation 1.
    pub fn normal(&mut self) -> f64 {
        if let Some(kept) = self.kept.take() {
            return kept;
        }
        let radius = (-2.0 * libm::log(self.uniform())).sqrt();
        let (sin, cos) = libm::sincos(RAD_PER_TURN * self.uniform());
        self.kept = Some(radius * sin);
        radius * cos
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Words of NumPy's Philox (numpy.random.Philox, version 2), which counts up before it draws.
    #[test]
    fn ref_philox_words() {
        let drawn = philox([1, 0, 0, 0], [0, 0]);
        assert_eq!(drawn, KNOWN_ZERO);
        let drawn = philox([0x0123_4567_89ab_cdf0, 7, 0xffff_ffff_ffff_ffff, 42], [20417, 3]);
        assert_eq!(drawn, KNOWN_KEY);
    }

    const KNOWN_ZERO: [u64; 4] = [0x02f4_ba64_08e4_d89b, 0x3dd6_2b0b_9ca8_c5b2, 0x1c86_67a5_5d90_2e79, 0x907d_7a05_2fd5_b4dc];
    const KNOWN_KEY: [u64; 4] = [0x125b_bf70_1e79_845a, 0x9228_2cae_1110_79e5, 0x9cde_259e_61f8_5679, 0x275f_8fbe_8474_4f81];

    /// Moments of a million deviates within four standard errors: mean 0, variance 1, fourth moment 3; uniform mean 1/2,
    /// variance 1/12.
    #[test]
    fn prop_moments_of_the_deviates() {
        let mut stream = Stream::new(5, 0, 0, 0);
        let n = 1_000_000;
        let normal: Vec<f64> = (0..n).map(|_| stream.normal()).collect();
        let moment = |power: i32| normal.iter().map(|x| x.powi(power)).sum::<f64>() / f64::from(n);
        let root = f64::from(n).sqrt();
        assert!(moment(1).abs() < 4.0 / root);
        assert!((moment(2) - 1.0).abs() < 4.0 * 2f64.sqrt() / root);
        assert!((moment(4) - 3.0).abs() < 4.0 * 96f64.sqrt() / root);
        let uniform: Vec<f64> = (0..n).map(|_| stream.uniform() - 0.5).collect();
        assert!((uniform.iter().sum::<f64>() / f64::from(n)).abs() < 4.0 / 12f64.sqrt() / root);
        assert!((uniform.iter().map(|u| u * u).sum::<f64>() / f64::from(n) - 1.0 / 12.0).abs() < 4.0 * (1.0 / 180f64).sqrt() / root);
    }

    /// A draw does not depend on what was drawn elsewhere.
    #[test]
    fn prop_streams_stand_by_themselves() {
        let first: Vec<u64> = (0..9).map(|_| Stream::new(1, 2, 3, 4).word()).collect();
        assert!(first.windows(2).all(|pair| pair[0] == pair[1]));
        let other = [Stream::new(1, 2, 3, 5), Stream::new(1, 2, 4, 4), Stream::new(1, 3, 3, 4), Stream::new(2, 2, 3, 4)];
        for mut stream in other {
            assert_ne!(stream.word(), first[0]);
        }
    }
}
