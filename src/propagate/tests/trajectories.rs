//! Quantum trajectories: times of jumps, and means against the density matrix.

use super::open::{solve_open, with_jumps, Densities};
use super::statistics::{random_problem, Random};
use super::*;
use crate::problem::{Jump, TurningPart};
use crate::propagate::{Fine, Trajectories};
use crate::random::Stream;

/// Fine enough that only chance is left.
const FINE: Fine = Fine { tolerance: 1e-11, pieces: 1 };

/// Mean and standard error of every number over some trajectories of one seed.
fn means(problem: &Problem, demand: &Demand, seed: u64, count: u64, fine: &Fine) -> (Vec<f64>, Vec<f64>) {
    let mut runner = Trajectories::new(problem, demand);
    let (mut sums, mut squares) = (Vec::new(), Vec::new());
    for number in 0..count {
        let mut seen = Densities { scale_s: problem.length_s(), ..Densities::default() };
        runner.run(&mut Stream::new(seed, 0, 0, number), fine, &mut seen);
        sums.resize(seen.numbers.len(), 0.0);
        squares.resize(seen.numbers.len(), 0.0);
        for ((sum, square), x) in sums.iter_mut().zip(&mut squares).zip(&seen.numbers) {
            *sum += x;
            *square += x * x;
        }
    }
    let n = count as f64;
    let means: Vec<f64> = sums.iter().map(|sum| sum / n).collect();
    let errors = squares.iter().zip(&means).map(|(square, mean)| ((square / n - mean * mean).max(0.0) / (n - 1.0)).sqrt()).collect();
    (means, errors)
}

/// A lone level that decays at rate G jumps when e^(-Gt) falls to the random number, whether anything else changes or not, and
/// has then been held so long (G. Gamow, Zeitschrift fuer Physik 51, 204 (1928), for the law).
#[test]
fn exact_times_of_jumps() {
    let gamma = 1.7;
    for moving in [false, true] {
        let terms = if moving { vec![term(0, 0.0, 0.0, shaped(0.7, |t| (3.0 * t).sin()))] } else { vec![] };
        let mut case = problem(&diagonal(&[0.0, 3.0, 8.0]), vec![sparse(3, &[(1, 1, 1.0), (0, 2, 0.4)])], vec![(2.0, terms, vec![0.4])]);
        case = with_jumps(case, vec![Jump::out_of(3, 1, gamma)]);
        case.start = start(&[0.0, 1.0, 0.0]);
        let demand = Demand { time_in: true, ..Demand::default() };
        let mut runner = Trajectories::new(&case, &demand);
        for number in 0..50 {
            let mut stream = Stream::new(3, 0, 0, number);
            stream.uniform();
            let at = -stream.uniform().ln() / gamma;
            let mut seen = Densities { scale_s: 1.0, ..Densities::default() };
            runner.run(&mut Stream::new(3, 0, 0, number), &FINE, &mut seen);
            for (t, (rho, spent)) in [0.4, 2.0].iter().zip(seen.seen.iter().zip(&seen.time_in_s)) {
                assert!((rho[(1, 1)].re - if at > *t { 1.0 } else { 0.0 }).abs() < 1e-12);
                assert!((spent[1] - at.min(*t)).abs() < 1e-10, "{moving} {number}: {} against {}", spent[1], at.min(*t));
            }
        }
    }
}

/// Driven, damped, dephased, lossy; mixed start, turning jump, times spent; where nothing changes and where something does. Of
/// some hundred numbers in units of their standard error none is beyond 4.5, and they spread as they should.
#[test]
fn prop_means_tend_to_the_density_matrix() {
    let mut random = Random(0x5eed_0f7a_3e01_1234);
    let (mut count, mut square) = (0.0, 0.0);
    for number in 0..12 {
        let mut case = random_problem(&mut random);
        if case.dim() > 4 {
            continue;
        }
        let mut jumps = super::open::random_jumps(&mut random, case.dim());
        if number % 3 == 0 {
            let matrix = Matrix::from_fn(case.dim(), case.dim(), |_, _| random.complex() * 0.3);
            jumps[0].turning.push(TurningPart { matrix, turns_hz: random.between(-6.0, 6.0), phase_turns: random.unit() });
        }
        case = with_jumps(case, jumps);
        if number % 2 == 0 {
            let a = Matrix::from_fn(case.dim(), case.dim(), |_, _| random.complex());
            let rho = &a * a.adjoint();
            case.start = Start::Mixed(&rho / rho.trace());
        }
        let demand = Demand { time_in: true, ..Demand::default() };
        let truth = solve_open(&case, &demand, 1e-9, None);
        let (means, errors) = means(&case, &demand, number, 250, &Fine { tolerance: 1e-7, pieces: 1 });
        for ((mean, error), exact) in means.iter().zip(&errors).zip(truth.recorded.numbers()) {
            // numbers with next to no spread of their own are numerical
            if *error > 1e-4 {
                let apart = (mean - exact) / error;
                assert!(apart.abs() < 4.5, "number {number}: {mean} against {exact} with {error:e}");
                count += 1.0;
                square += apart * apart;
            } else {
                assert!((mean - exact).abs() < 5.0 * error + 1e-4);
            }
        }
    }
    assert!((square / count - 1.0f64).abs() < 0.5, "mean square deviation {}", square / count);
}

/// The same random numbers at a finer tolerance make the same trajectories.
#[test]
fn prop_fineness_changes_little() {
    let mut random = Random(99);
    for _ in 0..6 {
        let case = random_problem(&mut random);
        let jumps = super::open::random_jumps(&mut random, case.dim());
        let case = with_jumps(case, jumps);
        let [coarse, fine] = Fine::pair(1e-4);
        let (a, _) = means(&case, &Demand::default(), 5, 40, &coarse);
        let (b, _) = means(&case, &Demand::default(), 5, 40, &fine);
        let apart = a.iter().zip(&b).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
        assert!(apart < 1e-5, "{apart:e}");
    }
}

/// Over 200 seeds the true value lies within one standard error in 60 to 76 % of the cases: Gauss's law says 68 % (C. F. Gauss,
/// Theoria motus (1809)).
#[test]
fn prop_standard_errors_mean_what_they_say() {
    let (gamma, rabi) = (1.0, 2.5);
    let half = 0.5 * rabi / rad_s(1.0);
    let pulse = vec![(1.6, vec![term(0, 0.0, 0.0, flat(half))], vec![])];
    let case = with_jumps(problem(&Matrix::zeros(2, 2), vec![sparse(2, &[(1, 0, 1.0)])], pulse), vec![Jump::between(2, 1, 0, gamma)]);
    let exact = solve_open(&case, &Demand::default(), 1e-11, None).recorded.population(1);
    let within = (0..200)
        .filter(|seed| {
            let (means, errors) = means(&case, &Demand::default(), *seed, 150, &Fine { tolerance: 1e-8, pieces: 1 });
            // entry (1, 1) of a 2 x 2 matrix, real part
            (means[6] - exact).abs() <= errors[6]
        })
        .count();
    assert!((120..=152).contains(&within), "{within} of 200");
}
