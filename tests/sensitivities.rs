//! Sensitivities against difference quotients of whole solves, and first-order uncertainty against random draws.
//!
//! The derivatives under test come from one linear system at the answer; what they are compared with moves an input and
//! solves everything again, outer roots and both stages included. Nothing is shared but the solver.

use std::collections::BTreeMap;

use lysocline_engine::activity::{Davies, Model};
use lysocline_engine::chem::{Constant, Reaction};
use lysocline_engine::equilibrium::{Asked, State, equilibrate};
use lysocline_engine::ledger::{ActivityChoice, Ledger};
use lysocline_engine::named::Value;
use lysocline_engine::quantity::Quantity;
use lysocline_engine::solve::sensitivity::{Found, Given, Sensitivities, own_supplies};
use lysocline_engine::solve::{Converged, Problem, Settings, solve};
use lysocline_engine::units::{Temperature, Unit};
use lysocline_engine::water::{Sample, Treatment};
use rayon::prelude::*;

use crate::random_systems::{self, Family, Random};
use crate::waters::freshwater;

/// Problems on which central differences in double precision can be judged.
const FAMILY: Family = Family { components: (2, 6), species: 20, log_k: 12.0 };

/// Central difference with one step of Richardson extrapolation.
fn derivative(f: impl Fn(f64) -> Vec<f64>, step: f64) -> Vec<f64> {
    let central = |h: f64| -> Vec<f64> {
        f(h).iter().zip(f(-h)).map(|(above, below)| (above - below) / (2.0 * h)).collect()
    };
    central(step / 2.0).iter().zip(central(step)).map(|(fine, coarse)| (4.0 * fine - coarse) / 3.0).collect()
}

fn flattened(found: &Found) -> Vec<f64> {
    [&found.ln_a, &found.ln_c, &found.ln_gamma, &found.reservoir_amount, &found.mineral_amount]
        .into_iter()
        .flatten()
        .copied()
        .chain([found.ionic_strength, found.ln_water_activity])
        .collect()
}

fn read(converged: &Converged) -> Vec<f64> {
    let (reservoirs, minerals) = (&converged.reservoir_amount, &converged.mineral_amount);
    flattened(&Found {
        ln_a: converged.ln_a.clone(),
        ln_c: converged.ln_c.clone(),
        ln_gamma: converged.ln_gamma.clone(),
        ionic_strength: converged.ionic_strength,
        ln_water_activity: converged.ln_water_activity,
        reservoir_amount: reservoirs.clone(),
        mineral_amount: minerals.clone(),
    })
}

/// A change of everything that is given.
fn any_change(random: &mut Random, problem: &Problem) -> Given {
    let mut change = Given::zero(problem);
    for value in change.ln_k.iter_mut().chain(&mut change.reservoirs).chain(&mut change.minerals) {
        *value = random.uniform(-1.0, 1.0);
    }
    for (change, total) in change.totals.iter_mut().zip(&problem.totals) {
        *change = total.to_f64() * random.uniform(-1.0, 1.0);
    }
    change
}

fn moved(problem: &Problem, change: &Given, step: f64) -> Problem {
    let mut problem = problem.clone();
    for (row, change) in problem.species.iter_mut().zip(&change.ln_k) {
        row.ln_k += step * change;
    }
    for (held, change) in problem.reservoirs.iter_mut().zip(&change.reservoirs) {
        held.ln_value += step * change;
    }
    for (mineral, change) in problem.minerals.iter_mut().zip(&change.minerals) {
        mineral.ln_target += step * change;
    }
    for (total, change) in problem.totals.iter_mut().zip(&change.totals) {
        *total = *total + lysocline_engine::solve::Total::from(step * change);
    }
    problem
}

/// A random problem with minerals in a third, a reservoir in a third, and the Davies equation in half of them.
fn random_problem(seed: u64) -> Option<(Problem, Model, Converged)> {
    let random = &mut Random(seed);
    let mut problem = random_systems::tableau(random, FAMILY);
    random_systems::add_charges(random, &mut problem);
    for row in &mut problem.species {
        row.water = random.integer(-1, 1) as f64;
    }
    let model = if seed % 2 == 0 { Model::IDEAL } else { Model::davies(Davies::new(0.509)) };
    let settings = Settings::default();
    let first = solve(&problem, &Model::IDEAL, &settings, None).ok()?;
    match seed % 3 {
        0 => random_systems::add_minerals(random, &mut problem, &first.ln_a, 2),
        1 => random_systems::hold_component(&mut problem, 0, first.ln_a[0] + 1.0),
        _ => {}
    }
    let converged = solve(&problem, &model, &settings, None).ok()?;
    let judged = converged.ionic_strength < 0.5
        && converged.certificate.condition < 1e3
        && converged.mineral_ln_saturation.iter().all(|saturation| *saturation == 0.0 || *saturation < -0.1)
        && converged.certificate.smallest_amount > 1e-3 * converged.ionic_strength.max(1e-9);
    judged.then_some((problem, model, converged))
}

#[test]
fn the_linear_system_is_the_difference_quotient_on_random_systems() {
    let compared: usize = (0..600_u64)
        .into_par_iter()
        .filter_map(|seed| random_problem(seed).map(|made| (seed, made)))
        .map(|(seed, (problem, model, converged))| {
            let random = &mut Random(seed ^ 0x5eed);
            let linear = Sensitivities::new(&problem, &model, &converged, &own_supplies(&problem)).unwrap();
            let change = any_change(random, &problem);
            let exact = flattened(&linear.push(&change));
            let settings = Settings::default();
            let quotient = derivative(
                |step| {
                    let moved = moved(&problem, &change, step);
                    read(&solve(&moved, &model, &settings, Some(&converged.warm)).unwrap())
                },
                2e-3,
            );
            for (k, (exact, quotient)) in exact.iter().zip(&quotient).enumerate() {
                if quotient.is_finite() {
                    let allowed = 1e-6 * quotient.abs().max(1e-3);
                    assert!((exact - quotient).abs() < allowed, "seed {seed}, {k}: {exact:e} {quotient:e}");
                }
            }
            1
        })
        .sum();
    println!("sensitivities: {compared} random systems compared");
    assert!(compared > 150, "{compared}");
}

#[test]
fn pull_is_the_transpose_of_push() {
    for (seed, (problem, model, converged)) in
        (0..200).filter_map(|seed| random_problem(seed).map(|made| (seed, made)))
    {
        let random = &mut Random(seed);
        let linear = Sensitivities::new(&problem, &model, &converged, &own_supplies(&problem)).unwrap();
        let mut change = any_change(random, &problem);
        change.ln_gamma.iter_mut().for_each(|value| *value = random.uniform(-1.0, 1.0));
        change.ln_water_activity = random.uniform(-1.0, 1.0);
        let mut weight = Found::zero(&problem);
        for value in weight.ln_a.iter_mut().chain(&mut weight.ln_c).chain(&mut weight.ln_gamma) {
            *value = random.uniform(-1.0, 1.0);
        }
        for value in weight.reservoir_amount.iter_mut().chain(&mut weight.mineral_amount) {
            *value = random.uniform(-1.0, 1.0);
        }
        (weight.ionic_strength, weight.ln_water_activity) = (random.uniform(-1.0, 1.0), 0.3);
        let (by, found) = (linear.pull(&weight), linear.push(&change));
        let given = |given: &Given| -> Vec<f64> {
            [&given.ln_k, &given.ln_gamma, &given.totals, &given.reservoirs, &given.minerals]
                .into_iter()
                .flatten()
                .copied()
                .chain([given.ln_water_activity])
                .collect()
        };
        let product = |a: Vec<f64>, b: Vec<f64>| -> (f64, f64) {
            let terms = a.iter().zip(&b).map(|(a, b)| a * b);
            terms.fold((0.0, 0.0), |(sum, size), term| (sum + term, size + term.abs()))
        };
        let (pulled, size) = product(given(&by), given(&change));
        let (pushed, other) = product(flattened(&weight), flattened(&found));
        assert!((pulled - pushed).abs() < 1e-10 * (size + other), "seed {seed}: {pulled:e} {pushed:e}");
    }
}
