//! Algebra of angular momenta: 3j, Clebsch-Gordan and 6j coefficients.
//!
//! Every argument is twice its value, so that halves are whole numbers. Conventions of E. P. Wigner (Group Theory, Academic Press
//! (1959)) and of E. U. Condon and G. H. Shortley (The Theory of Atomic Spectra, Cambridge (1935)). The sums of G. Racah (Physical
//! Review 62, 438 (1942)) are written as sums of products of binomial and multinomial coefficients, hence of whole numbers, and
//! done in whole numbers of any length; one division and one square root are rounded at the end: errors of about 2e-16 of the
//! coefficient, whatever cancels. Domain: any size; up to 50 within a millisecond.

use num_bigint::{BigInt, BigUint};

/// 3j coefficient (j1 j2 j3; m1 m2 m3), arguments doubled; 0 where it is not defined or a rule of selection forbids it.
pub fn three_j([j1, j2, j3]: [i32; 3], [m1, m2, m3]: [i32; 3]) -> f64 {
    let fits = |j: i32, m: i32| j >= 0 && m.abs() <= j && (j + m) % 2 == 0;
    if m1 + m2 + m3 != 0 || !triangle(j1, j2, j3) || !fits(j1, m1) || !fits(j2, m2) || !fits(j3, m3) {
        return 0.0;
    }
    let half = |doubled: i32| doubled / 2;
    let (a, b, c) = (half(j1 + j2 - j3), half(j1 - j2 + j3), half(j2 + j3 - j1));
    let (up, down) = (half(j1 - m1), half(j2 + m2));
    // 1/(t! (a - t)!) is a binomial coefficient over a!, and so on
    let mut sum = BigInt::ZERO;
    for t in 0.max(up - b).max(down - c)..=a.min(up).min(down) {
        let term = BigInt::from(binomial(a, t) * binomial(b, up - t) * binomial(c, down - t));
        sum += if t % 2 == 0 { term } else { -term };
    }
    let over: BigUint = [j1 + m1, j1 - m1, j2 + m2, j2 - m2, j3 + m3, j3 - m3].into_iter().map(|n| factorial(half(n))).product();
    let under = factorial(half(j1 + j2 + j3) + 1) * factorial(a) * factorial(b) * factorial(c);
    let sign = if half(j1 - j2 - m3) % 2 == 0 { 1.0 } else { -1.0 };
    sign * root(&sum, over, under)
}

/// Clebsch-Gordan coefficient <j1 m1 j2 m2 | j m>, arguments doubled.
pub fn clebsch_gordan([j1, m1]: [i32; 2], [j2, m2]: [i32; 2], [j, m]: [i32; 2]) -> f64 {
    let value = three_j([j1, j2, j], [m1, m2, -m]);
    if value == 0.0 {
        return 0.0;
    }
    let sign = if ((j1 - j2 + m) / 2) % 2 == 0 { 1.0 } else { -1.0 };
    sign * f64::from(j + 1).sqrt() * value
}

/// 6j coefficient {j1 j2 j3; j4 j5 j6}, arguments doubled; 0 where a triangle does not close.
pub fn six_j([j1, j2, j3]: [i32; 3], [j4, j5, j6]: [i32; 3]) -> f64 {
    let triads = [[j1, j2, j3], [j1, j5, j6], [j4, j2, j6], [j4, j5, j3]];
    if triads.iter().any(|[a, b, c]| !triangle(*a, *b, *c)) {
        return 0.0;
    }
    let alphas = triads.map(|triad| triad.iter().sum::<i32>() / 2);
    let betas = [[j1, j2, j4, j5], [j2, j3, j5, j6], [j3, j1, j6, j4]].map(|four| four.iter().sum::<i32>() / 2);
    let from = alphas.into_iter().max().unwrap_or(0);
    let to = betas.into_iter().min().unwrap_or(-1);
    // the arguments below add up to t, so that (t + 1)! over their factorials is t + 1 times a multinomial coefficient
    let mut sum = BigInt::ZERO;
    for t in from..=to {
        let below: BigUint = alphas.iter().map(|alpha| t - alpha).chain(betas.iter().map(|beta| beta - t)).map(factorial).product();
        let term = BigInt::from(factorial(t + 1) / below);
        sum += if t % 2 == 0 { term } else { -term };
    }
    let mut over = BigUint::from(1u32);
    let mut under = BigUint::from(1u32);
    for [a, b, c] in triads {
        over *= factorial((a + b - c) / 2) * factorial((a - b + c) / 2) * factorial((b + c - a) / 2);
        under *= factorial((a + b + c) / 2 + 1);
    }
    root(&sum, over, under)
}

fn triangle(a: i32, b: i32, c: i32) -> bool {
    a >= 0 && b >= 0 && c >= 0 && (a + b + c) % 2 == 0 && c <= a + b && c >= (a - b).abs()
}

fn factorial(n: i32) -> BigUint {
    (2..=n.max(1) as u32).map(BigUint::from).product()
}

fn binomial(n: i32, k: i32) -> BigUint {
    factorial(n) / (factorial(k) * factorial(n - k))
}

/// `sum` sqrt(`over` / `under`), rounded once in the quotient and once in the root.
fn root(sum: &BigInt, over: BigUint, under: BigUint) -> f64 {
    let square = sum.magnitude() * sum.magnitude() * over;
    let negative = sum.sign() == num_bigint::Sign::Minus;
    if square == BigUint::ZERO {
        return 0.0;
    }
    // an even shift that leaves about 128 bits of the quotient
    let shift = (128 + under.bits() as i64 - square.bits() as i64).div_euclid(2) * 2;
    let quotient = if shift >= 0 { (square << shift as u64) / under } else { square / (under << (-shift) as u64) };
    let bits = quotient.bits().saturating_sub(64);
    let mantissa: u64 = (quotient >> bits).try_into().unwrap_or(u64::MAX);
    let power = bits as i64 - shift;
    // an odd power goes into the root
    let (mantissa, power) = if power % 2 == 0 { (mantissa as f64, power) } else { (mantissa as f64 * 2.0, power - 1) };
    let value = mantissa.sqrt() * f64::from((power / 2) as i32).exp2();
    if negative {
        -value
    } else {
        value
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact values of SymPy (its `physics.wigner`), written out at 40 digits by tests/reference/angular_momentum.py: all kinds of
    /// sizes up to 50, with the largest cancellations.
    #[test]
    fn ref_exact_values_of_computer_algebra() {
        let text = include_str!("../../tests/reference/angular_momentum.json");
        let cases: serde_json::Value = serde_json::from_str(text).expect("the script writes JSON");
        let mut seen = 0;
        for case in cases.as_array().expect("a list") {
            let word = case["kind"].as_str().expect("a word");
            let n: Vec<i32> = case["doubled"].as_array().expect("a list").iter().map(|v| v.as_i64().expect("whole") as i32).collect();
            let wanted: f64 = case["value"].as_str().expect("digits").parse().expect("a number");
            let found = match word {
                "3j" => three_j([n[0], n[1], n[2]], [n[3], n[4], n[5]]),
                "6j" => six_j([n[0], n[1], n[2]], [n[3], n[4], n[5]]),
                _ => clebsch_gordan([n[0], n[1]], [n[2], n[3]], [n[4], n[5]]),
            };
            assert!((found - wanted).abs() <= 6e-16 * wanted.abs(), "{word} {n:?}: {found:e}, not {wanted:e}");
            seen += 1;
        }
        assert!(seen > 300, "{seen}");
    }

    /// Sum over m1 of <j1 m1 j2 m2|j m><j1 m1 j2 m2|j' m> is 1 or 0 (orthogonality, Condon and Shortley, chapter III).
    #[test]
    fn prop_clebsch_gordan_is_unitary() {
        for (j1, j2) in [(3i32, 1i32), (3, 3), (7, 4), (20, 9), (100, 100)] {
            let m = (j1 + j2) % 2;
            for j in ((j1 - j2).abs()..=j1 + j2).step_by(2) {
                for other in ((j1 - j2).abs()..=j1 + j2).step_by(2).take(8) {
                    let sum: f64 = (-j1..=j1)
                        .step_by(2)
                        .map(|m1| clebsch_gordan([j1, m1], [j2, m - m1], [j, m]) * clebsch_gordan([j1, m1], [j2, m - m1], [other, m]))
                        .sum();
                    let wanted = if j == other { 1.0 } else { 0.0 };
                    assert!((sum - wanted).abs() < 2e-15, "{j1} {j2} {j} {other}: {sum}");
                }
                if j1 == 100 && j > 8 {
                    break;
                }
            }
        }
    }
}
