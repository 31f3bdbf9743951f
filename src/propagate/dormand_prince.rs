//! Coefficients of the explicit Runge-Kutta method of Dormand and Prince of order 8 with error estimates of order 5 and 3.
//!
//! E. Hairer, S. P. Norsett, G. Wanner, Solving Ordinary Differential Equations I, second edition, Springer (1993), section II.5;
//! digits as in the table of SciPy's integrator of the same name. Zero entries are left out.

/// Nodes c of the twelve stages, as parts of the step.
pub(super) const NODES: [f64; 12] = [
    0.0,
    0.05260015195876773,
    0.0789002279381516,
    0.1183503419072274,
    0.2816496580927726,
    0.3333333333333333,
    0.25,
    0.3076923076923077,
    0.6512820512820513,
    0.6,
    0.8571428571428571,
    1.0,
];

/// Rows of the matrix a: (stage, weight).
pub(super) const STAGES: [&[(usize, f64)]; 12] = [
    &[],
    &[(0, 0.05260015195876773)],
    &[(0, 0.0197250569845379), (1, 0.0591751709536137)],
    &[(0, 0.02958758547680685), (2, 0.08876275643042054)],
    &[(0, 0.2413651341592667), (2, -0.8845494793282861), (3, 0.924834003261792)],
    &[(0, 0.037037037037037035), (3, 0.17082860872947386), (4, 0.12546768756682242)],
    &[(0, 0.037109375), (3, 0.17025221101954405), (4, 0.06021653898045596), (5, -0.017578125)],
    &[(0, 0.03709200011850479), (3, 0.17038392571223998), (4, 0.10726203044637328), (5, -0.015319437748624402), (6, 0.008273789163814023)],
    &[
        (0, 0.6241109587160757),
        (3, -3.3608926294469414),
        (4, -0.868219346841726),
        (5, 27.59209969944671),
        (6, 20.154067550477894),
        (7, -43.48988418106996),
    ],
    &[
        (0, 0.47766253643826434),
        (3, -2.4881146199716677),
        (4, -0.590290826836843),
        (5, 21.230051448181193),
        (6, 15.279233632882423),
        (7, -33.28821096898486),
        (8, -0.020331201708508627),
    ],
    &[
        (0, -0.9371424300859873),
        (3, 5.186372428844064),
        (4, 1.0914373489967295),
        (5, -8.149787010746927),
        (6, -18.52006565999696),
        (7, 22.739487099350505),
        (8, 2.4936055526796523),
        (9, -3.0467644718982196),
    ],
    &[
        (0, 2.273310147516538),
        (3, -10.53449546673725),
        (4, -2.0008720582248625),
        (5, -17.9589318631188),
        (6, 27.94888452941996),
        (7, -2.8589982771350235),
        (8, -8.87285693353063),
        (9, 12.360567175794303),
        (10, 0.6433927460157636),
    ],
];

/// Weights b of the result of order 8: (stage, weight).
pub(super) const WEIGHTS: &[(usize, f64)] = &[
    (0, 0.054293734116568765),
    (5, 4.450312892752409),
    (6, 1.8915178993145003),
    (7, -5.801203960010585),
    (8, 0.3111643669578199),
    (9, -0.1521609496625161),
    (10, 0.20136540080403034),
    (11, 0.04471061572777259),
];

/// Weights of the error estimate of order 5: (stage, weight).
pub(super) const ERROR_5: &[(usize, f64)] = &[
    (0, 0.01312004499419488),
    (5, -1.2251564463762044),
    (6, -0.4957589496572502),
    (7, 1.6643771824549864),
    (8, -0.35032884874997366),
    (9, 0.3341791187130175),
    (10, 0.08192320648511571),
    (11, -0.022355307863886294),
];

/// Weights of the error estimate of order 3: (stage, weight).
pub(super) const ERROR_3: &[(usize, f64)] = &[
    (0, -0.18980075407240762),
    (5, 4.450312892752409),
    (6, 1.8915178993145003),
    (7, -5.801203960010585),
    (8, -0.4226823213237919),
    (9, -0.1521609496625161),
    (10, 0.20136540080403034),
    (11, 0.02265179219836082),
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_order_conditions_hold() {
        for (stage, (row, node)) in STAGES.iter().zip(NODES).enumerate() {
            let sum: f64 = row.iter().map(|(_, a)| a).sum();
            assert!((sum - node).abs() < 2e-14, "row {stage} sums to {sum}, node {node}");
            assert!(row.iter().all(|(earlier, _)| *earlier < stage), "row {stage} uses a later stage");
        }
        for power in 0..8 {
            let sum: f64 = WEIGHTS.iter().map(|(stage, b)| b * NODES[*stage].powi(power)).sum();
            assert!((sum - 1.0 / f64::from(power + 1)).abs() < 4e-15, "b c^{power} sums to {sum}");
        }
        // sum b a c^k = 1/((k+1)(k+2)), the conditions of bushy trees with one branch, up to order 8.
        for power in 1..7 {
            let sum: f64 =
                WEIGHTS.iter().map(|(stage, b)| b * STAGES[*stage].iter().map(|(j, a)| a * NODES[*j].powi(power)).sum::<f64>()).sum();
            assert!((sum - 1.0 / f64::from((power + 1) * (power + 2))).abs() < 4e-15, "b a c^{power} sums to {sum}");
        }
        for (order, error) in [(5, ERROR_5), (3, ERROR_3)] {
            for power in 0..order {
                let sum: f64 = error.iter().map(|(stage, e)| e * NODES[*stage].powi(power)).sum();
                assert!(sum.abs() < 4e-15, "estimate of order {order}, c^{power}: {sum}");
            }
        }
    }
}
