//! Gauss and Legendre's rule with 20 points, exact for polynomials up to degree 39, for smooth stretches.
//!
//! Nodes and weights: roots of the Legendre polynomial at 40 digits with mpmath (M. Abramowitz and I. A. Stegun, Handbook of
//! Mathematical Functions (1964), 25.4.29).

/// Node on (0, 1) and weight; each stands for its mirror image too.
pub const NODES: [(f64, f64); 10] = [
    (0.076_526_521_133_497_34, 0.152_753_387_130_725_84),
    (0.227_785_851_141_645_07, 0.149_172_986_472_603_74),
    (0.373_706_088_715_419_55, 0.142_096_109_318_382_04),
    (0.510_867_001_950_827_1, 0.131_688_638_449_176_64),
    (0.636_053_680_726_515, 0.118_194_531_961_518_43),
    (0.746_331_906_460_150_8, 0.101_930_119_817_240_44),
    (0.839_116_971_822_218_8, 0.083_276_741_576_704_75),
    (0.912_234_428_251_326, 0.062_672_048_334_109_07),
    (0.963_971_927_277_913_8, 0.040_601_429_800_386_94),
    (0.993_128_599_185_094_9, 0.017_614_007_139_152_118),
];

/// Integral of `f` from `from` to `to`.
pub fn integral(from: f64, to: f64, f: impl Fn(f64) -> f64) -> f64 {
    let (middle, half) = (0.5 * (from + to), 0.5 * (to - from));
    half * NODES.iter().map(|(node, weight)| weight * (f(middle - half * node) + f(middle + half * node))).sum::<f64>()
}

#[cfg(test)]
mod tests {
    use super::integral;

    /// The order conditions: x^k from -1 to 1 is 2/(k + 1) for even k up to 38; degree 40 is missed.
    #[test]
    fn exact_for_polynomials_up_to_degree_39() {
        for k in 0..40 {
            let want = if k % 2 == 0 { 2.0 / (k as f64 + 1.0) } else { 0.0 };
            let got = integral(-1.0, 1.0, |x| x.powi(k));
            assert!((got - want).abs() < 2e-15, "degree {k}: {got} against {want}");
        }
        let missed = integral(-1.0, 1.0, |x| x.powi(40)) - 2.0 / 41.0;
        assert!(missed.abs() > 1e-13 && missed.abs() < 1e-9, "degree 40 misses by {missed}");
    }
}
