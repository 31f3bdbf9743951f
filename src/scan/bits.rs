//! A set of points, one bit each: ten million take 1.25 MB.

/// A set of numbers below its size.
#[derive(Debug, Clone)]
pub struct Bits {
    words: Vec<u64>,
    size: u64,
    count: u64,
}

impl Bits {
    /// An empty set of numbers below `size`.
    pub fn new(size: u64) -> Bits {
        Bits { words: vec![0; size.div_ceil(64) as usize], size, count: 0 }
    }

    /// Puts a number in; false if it was there or is too large.
    pub fn insert(&mut self, at: u64) -> bool {
        if at >= self.size {
            return false;
        }
        let (word, bit) = (&mut self.words[(at / 64) as usize], 1 << (at % 64));
        let new = *word & bit == 0;
        *word |= bit;
        self.count += u64::from(new);
        new
    }

    /// Whether a number is in.
    pub fn has(&self, at: u64) -> bool {
        at < self.size && self.words[(at / 64) as usize] >> (at % 64) & 1 == 1
    }

    /// How many are in.
    pub fn count(&self) -> u64 {
        self.count
    }
}
