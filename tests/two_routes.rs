//! The solver against a slow second route that shares nothing with it: nested bisection on the activities.
//!
//! With all other balances closed, the balance of one component grows strictly with the logarithm of its activity. So
//! bisection closes the innermost balance, a bisection around it the next, and so on: exponential in the number of
//! components, but free of Newton steps, bases and merit functions.

use crate::random_systems::{self, Random, SMALL};
use lysocline_engine::activity::{Davies, Model};
use lysocline_engine::solve::{Problem, Row, Settings, solve};
use rayon::prelude::*;

/// Plain numbers of a problem with integer stoichiometry, γ folded into the constants.
struct Route {
    nu: Vec<Vec<f64>>,
    ln_k: Vec<f64>,
    totals: Vec<f64>,
}

impl Route {
    fn new(problem: &Problem) -> Self {
        let coefficient = |row: &Row, j: usize| {
            row.stoichiometry.iter().filter(|(k, _)| *k == j).map(|(_, nu)| *nu.numer() as f64).sum()
        };
        let rows = &problem.species;
        Self {
            nu: rows
                .iter()
                .map(|row| (0..problem.n_components).map(|j| coefficient(row, j)).collect())
                .collect(),
            ln_k: rows.iter().map(|row| row.ln_k).collect(),
            totals: problem.totals.iter().map(|total| total.to_f64()).collect(),
        }
    }

    fn ln_c(&self, lambda: &[f64]) -> Vec<f64> {
        let formed = self.nu.iter().map(|nu| nu.iter().zip(lambda).map(|(nu, l)| nu * l).sum::<f64>());
        formed.zip(&self.ln_k).map(|(sum, ln_k)| sum + ln_k).collect()
    }

    /// Sign of the balance of component `j`: supply minus total.
    fn excess(&self, lambda: &[f64], j: usize) -> f64 {
        let c = self.ln_c(lambda);
        self.nu.iter().zip(c).map(|(nu, ln_c)| nu[j] * ln_c.exp()).sum::<f64>() - self.totals[j]
    }

    /// Closes the balances of components `j` and above, given the activities below it.
    fn close(&self, lambda: &mut [f64], j: usize) {
        if j == lambda.len() {
            return;
        }
        let (mut low, mut high) = (-150.0, 60.0);
        for _ in 0..58 {
            lambda[j] = 0.5 * (low + high);
            self.close(lambda, j + 1);
            if self.excess(lambda, j) > 0.0 {
                high = lambda[j];
            } else {
                low = lambda[j];
            }
        }
    }
}

/// ln c by the slow route.
pub fn bisect(problem: &Problem) -> Vec<f64> {
    let route = Route::new(problem);
    let mut lambda = vec![0.0; problem.n_components];
    route.close(&mut lambda, 0);
    route.ln_c(&lambda)
}

/// Totals of the proton that are not lost beside the large terms of its balance, so that bisection in `f64` resolves it.
fn problem(seed: u64) -> Problem {
    loop_until(seed, |random| {
        let problem = random_systems::tableau(random, SMALL);
        let smallest = problem.totals.iter().map(|total| total.to_f64().abs()).fold(f64::INFINITY, f64::min);
        let has_electron =
            problem.species.iter().any(|row| row.stoichiometry.iter().any(|(_, nu)| *nu.numer() < -1));
        (smallest > 1e-6 && !has_electron).then_some(problem)
    })
}

fn loop_until(seed: u64, make: impl Fn(&mut Random) -> Option<Problem>) -> Problem {
    let mut random = Random(seed);
    (0..10_000).find_map(|_| make(&mut random)).expect("a suitable problem")
}

#[test]
fn nested_bisection_finds_the_same_composition() {
    let worst: Vec<f64> = (0..160_u64)
        .into_par_iter()
        .map(|seed| {
            let problem = problem(seed);
            let fast = solve(&problem, &Model::IDEAL, &Settings::default(), None).unwrap().ln_c;
            let differences = fast.iter().zip(bisect(&problem)).map(|(a, b)| (a - b).abs());
            let worst = differences.fold(0.0, f64::max);
            assert!(worst < 1e-9, "seed {seed}: {worst:e}");
            worst
        })
        .collect();
    println!("two routes: largest difference of ln c {:e}", worst.into_iter().fold(0.0, f64::max));
}

/// With Davies: the slow route bisects the ionic strength as well, outermost. Only answers below I = 1 are compared, where
/// the model has one root.
#[test]
fn nested_bisection_finds_the_same_ionic_strength() {
    let davies = Davies::new(0.509);
    let compared = (0..60_u64).into_par_iter().filter(|seed| {
        let problem = loop_until(*seed, |random| {
            let mut problem =
                random_systems::tableau(random, random_systems::Family { components: (1, 2), ..SMALL });
            random_systems::add_charges(random, &mut problem);
            problem.totals.iter().all(|total| total.to_f64().abs() > 1e-6).then_some(problem)
        });
        let fast = solve(&problem, &Model::davies(davies), &Settings::default(), None).unwrap();
        if fast.ionic_strength > 1.0 {
            return false;
        }
        let slow = bisect_ionic_strength(problem, davies);
        let worst = fast.ln_c.iter().zip(slow).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
        assert!(worst < 1e-9, "seed {seed}: {worst:e}");
        true
    });
    assert!(compared.count() >= 30);
}

fn bisect_ionic_strength(mut problem: Problem, davies: Davies) -> Vec<f64> {
    let ln_k: Vec<f64> = problem.species.iter().map(|row| row.ln_k).collect();
    let (mut low, mut high) = (0.0, 2.0);
    let mut ln_c = Vec::new();
    for _ in 0..58 {
        let ionic_strength: f64 = 0.5 * (low + high);
        for (row, ln_k) in problem.species.iter_mut().zip(&ln_k) {
            row.ln_k = ln_k - davies.ln_gamma(row.charge, ionic_strength);
        }
        ln_c = bisect(&problem);
        let charges = problem.species.iter().map(|row| row.charge.powi(2));
        let implied: f64 = charges.zip(&ln_c).map(|(z2, ln_c)| 0.5 * z2 * ln_c.exp()).sum();
        if implied > ionic_strength {
            low = ionic_strength;
        } else {
            high = ionic_strength;
        }
    }
    ln_c
}
