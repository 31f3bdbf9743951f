//! Numbers from outside, each with the script that made it.

/// tests/reference/slices.py (mpmath, 50 digits).
pub const HUNDRED_THOUSAND_REPEATS: f64 = 0.469_522_389_104_547_4;
