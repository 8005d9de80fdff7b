//! Properties of the solver that need no reference value, on thousands of random problems.

use crate::random_systems::{self, HARD, Random};
use lysocline_engine::activity::Model;
use lysocline_engine::solve::{Converged, Problem, Settings, SolveError, solve};
use rayon::prelude::*;

/// Balances and mass action, recomputed here from the answer alone.
fn check(problem: &Problem, converged: &Converged) -> Result<(), String> {
    for (i, row) in problem.species.iter().enumerate() {
        let terms = row.stoichiometry.iter().map(|(j, nu)| *nu.numer() as f64 / *nu.denom() as f64 * converged.ln_a[*j]);
        let ln_a = terms.clone().sum::<f64>() + row.ln_k + row.water * converged.ln_water_activity;
        let magnitude = terms.map(f64::abs).sum::<f64>() + row.ln_k.abs() + 1.0;
        let difference = ln_a - converged.ln_gamma[i] - converged.ln_c[i];
        if !(difference.abs() <= 1e-14 * magnitude) {
            return Err(format!("mass action of species {i} is off by {difference:e} of {magnitude}"));
        }
    }
    for j in 0..problem.n_components {
        let of = |row: &lysocline_engine::solve::Row| {
            let entry = row.stoichiometry.iter().find(|(k, _)| *k == j);
            entry.map_or(0.0, |(_, nu)| *nu.numer() as f64 / *nu.denom() as f64)
        };
        let species = problem.species.iter().zip(&converged.ln_c).map(|(row, ln_c)| of(row) * ln_c.exp());
        let minerals = problem.minerals.iter().zip(&converged.mineral_amount).map(|(p, n)| of(&p.row) * n);
        let reservoirs = problem.reservoirs.iter().zip(&converged.reservoir_amount).map(|(r, e)| -of(&r.row) * e);
        let terms: Vec<f64> =
            species.chain(minerals).chain(reservoirs).chain([-problem.totals[j].to_f64()]).collect();
        let (sum, magnitude) = (terms.iter().sum::<f64>(), terms.iter().map(|t| t.abs()).sum::<f64>());
        if !(sum.abs() <= 1e-12 * magnitude) {
            return Err(format!("balance {j} is off by {sum:e} of {magnitude:e}"));
        }
    }
    for (p, saturation) in converged.mineral_ln_saturation.iter().enumerate() {
        let (present, amount) = (converged.mineral_present[p], converged.mineral_amount[p]);
        if *saturation > 1e-10 || amount < 0.0 || (!present && amount != 0.0) || (present && saturation.abs() > 1e-10) {
            return Err(format!("mineral {p}: saturation {saturation:e}, amount {amount:e}, present {present}"));
        }
    }
    Ok(())
}

/// Solves a family of problems; fails on the first that fails, and tells how hard they were.
fn sweep(name: &str, count: u64, model: Model, make: impl Fn(&mut Random) -> Option<Problem> + Sync) {
    let outcome: Vec<Option<(usize, usize)>> = (0..count)
        .into_par_iter()
        .map(|seed| {
            let problem = make(&mut Random(seed * 7919 + 1))?;
            let converged = match solve(&problem, &model, &Settings::default(), None) {
                Ok(converged) => converged,
                Err(SolveError::Unbounded { .. }) if !problem.reservoirs.is_empty() => return None,
                Err(error) => panic!("{name}, seed {seed}: {error}"),
            };
            if let Err(message) = check(&problem, &converged) {
                panic!("{name}, seed {seed}: {message}");
            }
            Some((converged.effort.iterations, converged.effort.evaluations))
        })
        .collect();
    let mut iterations: Vec<usize> = outcome.iter().flatten().map(|(iterations, _)| *iterations).collect();
    iterations.sort_unstable();
    let (median, most) = (iterations[iterations.len() / 2], iterations[iterations.len() - 1]);
    println!("{name}: {} solved, iterations median {median}, most {most}", iterations.len());
    assert!(iterations.len() as u64 >= count * 9 / 10, "{name}: only {} of {count} posed", iterations.len());
}

#[test]
fn random_tableaux_are_solved() {
    sweep("tableaux", 10_000, Model::IDEAL, |random| Some(random_systems::tableau(random, HARD)));
}

#[test]
fn random_tableaux_with_a_fixed_component_are_solved() {
    sweep("fixed component", 4000, Model::IDEAL, |random| {
        let mut problem = random_systems::tableau(random, HARD);
        random_systems::hold_component(&mut problem, 0, -random.uniform(0.0, 14.0) * random_systems::LN_10);
        Some(problem)
    });
}

#[test]
fn random_tableaux_with_minerals_are_solved() {
    sweep("minerals", 5000, Model::IDEAL, |random| {
        let mut problem = random_systems::tableau(random, HARD);
        let ln_a = solve(&problem, &Model::IDEAL, &Settings::default(), None).ok()?.ln_a;
        let count = random.integer(1, 8) as usize;
        random_systems::add_minerals(random, &mut problem, &ln_a, count);
        Some(problem)
    });
}
