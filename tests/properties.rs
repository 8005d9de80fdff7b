//! Properties of the solver that need no reference value, on thousands of random problems.

use crate::kkt::check;
use crate::random_systems::{self, HARD, Random};
use lysocline_engine::activity::{Composition, Davies, Model};
use lysocline_engine::solve::{
    Coefficient, Converged, Effort, Prepared, Problem, Row, Settings, SolveError, solve,
};
use rayon::prelude::*;

/// The activity coefficients are those of the composition, and so is the activity of water.
fn check_activities(problem: &Problem, model: &Model, converged: &Converged) -> Result<(), String> {
    let charges: Vec<f64> = problem.species.iter().map(|row| row.charge).collect();
    let molalities: Vec<f64> = converged.ln_c.iter().map(|ln_c| ln_c.exp()).collect();
    let ionic_strength: f64 = charges.iter().zip(&molalities).map(|(z, m)| z * z * m / 2.0).sum();
    let at = Composition { charges: &charges, molalities: &molalities, ionic_strength };
    for (i, (own, found)) in model.ln_gammas(at).iter().zip(&converged.ln_gamma).enumerate() {
        let close = (own - found).abs() <= 1e-10 * (1.0 + own.abs());
        if !close {
            return Err(format!("ln gamma of species {i} is {found}, and {own} of its composition"));
        }
    }
    let solvent_matters = problem.species.iter().any(|row| row.water != 0.0);
    let difference = (model.ln_water_activity(at) - converged.ln_water_activity).abs();
    let close = !solvent_matters || difference <= 1e-10;
    if close { Ok(()) } else { Err(format!("ln of the activity of water is off by {difference:e}")) }
}

/// Solves a family of problems; fails if any fails, and tells how hard they were.
fn sweep(name: &str, count: u64, model: Model, make: impl Fn(&mut Random) -> Option<Problem> + Sync) {
    sweep_with(name, count, |random| Some((make(random)?, model.clone())));
}

/// The same with a model for each problem.
fn sweep_with(name: &str, count: u64, make: impl Fn(&mut Random) -> Option<(Problem, Model)> + Sync) {
    let attempt = |seed: u64| -> Result<Option<Effort>, String> {
        let Some((problem, model)) = make(&mut Random(seed * 7919 + 1)) else { return Ok(None) };
        let converged = match solve(&problem, &model, &Settings::default(), None) {
            Ok(converged) => converged,
            Err(SolveError::NoIonicStrength { .. }) if dissolves_without_end(&problem, &model) => {
                return Ok(None);
            }
            Err(SolveError::Unbounded { .. } | SolveError::UnboundedMixture { .. })
                if !problem.reservoirs.is_empty() =>
            {
                return Ok(None);
            }
            Err(error) => return Err(format!("seed {seed}: {error}")),
        };
        let checked =
            check(&problem, &converged).and_then(|()| check_activities(&problem, &model, &converged));
        checked.map_err(|message| format!("seed {seed}: {message}"))?;
        Ok(Some(converged.effort))
    };
    let outcomes: Vec<_> = (0..count).into_par_iter().map(attempt).collect();
    let failures: Vec<&String> = outcomes.iter().filter_map(|outcome| outcome.as_ref().err()).collect();
    let first = &failures[..failures.len().min(10)];
    assert!(failures.is_empty(), "{name}: {} of {count} failed\n{first:#?}", failures.len());

    let efforts: Vec<Effort> = outcomes.into_iter().filter_map(|outcome| outcome.ok().flatten()).collect();
    assert!(
        efforts.len() as u64 >= count * 9 / 10,
        "{name}: only {} of {count} have a solution",
        efforts.len()
    );
    let (iterations, most_iterations) = spread(efforts.iter().map(|effort| effort.iterations));
    let (strengths, most_strengths) = spread(efforts.iter().map(|effort| effort.ionic_strengths));
    println!(
        "{name}: {} solved; iterations median {iterations}, most {most_iterations}; ionic strengths median {strengths}, most {most_strengths}",
        efforts.len()
    );
}

/// Median and largest.
fn spread(counts: impl Iterator<Item = usize>) -> (usize, usize) {
    let mut counts: Vec<usize> = counts.collect();
    counts.sort_unstable();
    (counts[counts.len() / 2], counts[counts.len() - 1])
}

fn plain(random: &mut Random) -> Option<Problem> {
    Some(random_systems::tableau(random, HARD))
}

fn with_fixed_component(random: &mut Random) -> Option<Problem> {
    let mut problem = random_systems::tableau(random, HARD);
    random_systems::hold_component(&mut problem, 0, -random.uniform(0.0, 14.0) * random_systems::LN_10);
    Some(problem)
}

/// Up to `most` minerals around the saturation of the mineral-free solution.
fn with_minerals(random: &mut Random, mut problem: Problem, most: i64) -> Option<Problem> {
    let ln_a = solve(&problem, &Model::IDEAL, &Settings::default(), None).ok()?.ln_a;
    let count = random.integer(1, most) as usize;
    random_systems::add_minerals(random, &mut problem, &ln_a, count);
    Some(problem)
}

/// Mixtures around the saturation of the solution without them, then minerals.
fn with_phases(
    random: &mut Random,
    mut problem: Problem,
    mixtures: usize,
    minerals: usize,
) -> Option<Problem> {
    let ln_a = solve(&problem, &Model::IDEAL, &Settings::default(), None).ok()?.ln_a;
    random_systems::add_mixtures(random, &mut problem, &ln_a, mixtures);
    random_systems::add_minerals(random, &mut problem, &ln_a, minerals);
    Some(problem)
}

fn davies() -> Model {
    Model::davies(Davies::new(0.509))
}

/// Whether a mineral, whose ions need not balance their charges here, outruns the ionic strength by the electrostatic part
/// alone: there is no solution then to find.
fn dissolves_without_end(problem: &Problem, model: &Model) -> bool {
    let electrostatic = solve(problem, &model.with_specific_scaled(0.0), &Settings::default(), None);
    !problem.minerals.is_empty() && matches!(electrostatic, Err(SolveError::NoIonicStrength { .. }))
}

#[test]
fn random_tableaux_are_solved() {
    sweep("tableaux", 10_000, Model::IDEAL, plain);
}

#[test]
fn random_tableaux_with_a_fixed_component_are_solved() {
    sweep("fixed component", 4000, Model::IDEAL, with_fixed_component);
}

#[test]
fn random_tableaux_with_minerals_are_solved() {
    sweep("minerals", 5000, Model::IDEAL, |random| {
        let problem = plain(random)?;
        with_minerals(random, problem, 8)
    });
}

#[test]
fn random_tableaux_with_minerals_and_a_fixed_component_are_solved() {
    sweep("minerals, fixed component", 5000, Model::IDEAL, |random| {
        let problem = with_fixed_component(random)?;
        with_minerals(random, problem, 8)
    });
}

/// A gas at fixed pressure or a solid solution beside three minerals.
#[test]
fn random_tableaux_with_a_mixture_and_minerals_are_solved() {
    sweep("mixture, 3 minerals", 3000, Model::IDEAL, |random| {
        let problem = plain(random)?;
        with_phases(random, problem, 1, 3)
    });
}

#[test]
fn random_tableaux_with_two_mixtures_and_minerals_are_solved() {
    sweep("2 mixtures, 3 minerals", 2000, Model::IDEAL, |random| {
        let problem = plain(random)?;
        with_phases(random, problem, 2, 3)
    });
}

#[test]
fn random_tableaux_with_mixtures_minerals_and_a_fixed_component_are_solved() {
    sweep("2 mixtures, 2 minerals, fixed component", 2000, Model::IDEAL, |random| {
        let problem = with_fixed_component(random)?;
        with_phases(random, problem, 2, 2)
    });
}

#[test]
fn random_tableaux_with_davies_and_a_mixture_are_solved() {
    sweep("davies, mixture, 2 minerals", 1000, davies(), |random| {
        let problem = plain(random)?;
        let mut problem = with_phases(random, problem, 1, 2)?;
        random_systems::add_charges(random, &mut problem);
        Some(problem)
    });
}

#[test]
fn random_tableaux_with_davies_are_solved() {
    sweep("davies", 4000, davies(), |random| {
        let mut problem = plain(random)?;
        random_systems::add_charges(random, &mut problem);
        Some(problem)
    });
}

#[test]
fn random_tableaux_with_davies_and_minerals_are_solved() {
    sweep("davies, minerals", 3000, davies(), |random| {
        let problem = plain(random)?;
        let mut problem = with_minerals(random, problem, 5)?;
        random_systems::add_charges(random, &mut problem);
        Some(problem)
    });
}

/// Ionic strengths tried on the way give logarithms of thousands, where some balances end at their rounding and others
/// meet the tolerance: number 28873 of the family stopped there.
#[test]
fn balances_at_their_rounding_and_within_the_tolerance_are_both_settled() {
    let random = &mut Random(28_873 * 7919 + 1);
    let problem = plain(random).unwrap();
    let mut problem = with_minerals(random, problem, 5).unwrap();
    random_systems::add_charges(random, &mut problem);
    let converged = solve(&problem, &davies(), &Settings::default(), None).unwrap();
    check(&problem, &converged).unwrap();
}

/// The same answers from a problem that is prepared once and from one that is new each time.
#[test]
fn a_prepared_problem_gives_the_same_answers() {
    (0..300_u64).into_par_iter().for_each(|seed| {
        let random = &mut Random(seed * 31 + 5);
        let Some(problem) = plain(random).and_then(|problem| with_phases(random, problem, 1, 2)) else {
            return;
        };
        let mut prepared = Prepared::new(problem.clone()).unwrap();
        let last = problem.n_components - 1;
        for factor in [1.0, 1.3, 2.0, 0.0, -1.0, 0.7] {
            let total = problem.totals[last] * factor;
            prepared.set_total(last, total).unwrap();
            prepared.set_ln_k(0, 0.1 * factor).unwrap();
            let fresh = solve(prepared.problem(), &Model::IDEAL, &Settings::default(), None);
            match (prepared.solve(&Model::IDEAL, &Settings::default()), fresh) {
                (Ok(near), Ok(fresh)) => {
                    let condition = fresh.certificate.condition;
                    assert_same_composition("prepared", seed, &fresh.ln_c, near.ln_c.clone(), condition);
                }
                (Err(SolveError::Infeasible { .. }), Err(SolveError::Infeasible { .. })) => {}
                (near, fresh) => panic!("seed {seed}: {:?} {:?}", near.err(), fresh.err()),
            }
        }
    });
}

#[test]
fn random_tableaux_with_ion_sizes_are_solved() {
    sweep_with("ion sizes", 5000, |random| charged(random, random_systems::ion_sizes));
}

#[test]
fn random_tableaux_with_specific_interactions_are_solved() {
    sweep_with("specific interactions", 5000, |random| charged(random, random_systems::interactions));
}

#[test]
fn random_tableaux_with_specific_interactions_and_minerals_are_solved() {
    sweep_with("specific interactions, minerals", 3000, |random| match random.0 {
        UNSETTLED => None,
        _ => interacting_with_minerals(random),
    });
}

/// The one of the systems above whose activity coefficients do not settle as its minerals come and go: open.
const UNSETTLED: u64 = 2343 * 7919 + 1;

#[test]
#[ignore = "open: Newton's method and the fixed point both stop short at a change of phases"]
fn a_random_tableau_with_specific_interactions_that_does_not_settle() {
    let (problem, model) = interacting_with_minerals(&mut Random(UNSETTLED)).unwrap();
    solve(&problem, &model, &Settings::default(), None).unwrap();
}

fn interacting_with_minerals(random: &mut Random) -> Option<(Problem, Model)> {
    let problem = plain(random)?;
    let mut problem = with_minerals(random, problem, 5)?;
    random_systems::add_charges(random, &mut problem);
    problem.species.iter_mut().for_each(|row| row.charge = row.charge.clamp(-4.0, 4.0));
    let model = random_systems::interactions(random, &problem);
    Some((problem, model))
}

/// Charged, with the solvent in some of the rows. Charges end at 4: random redox couples reach 16, and as the electrostatic
/// term of these equations levels off with I, ever more of such ions would form from water and nothing.
fn charged(random: &mut Random, model: fn(&mut Random, &Problem) -> Model) -> Option<(Problem, Model)> {
    let mut problem = plain(random)?;
    random_systems::add_charges(random, &mut problem);
    for row in &mut problem.species {
        row.water = random.integer(-1, 1) as f64;
        row.charge = row.charge.clamp(-4.0, 4.0);
    }
    let model = model(random, &problem);
    Some((problem, model))
}

/// The same families at ten times the size and with many minerals; some minutes.
#[test]
#[ignore = "a long campaign"]
fn a_long_campaign_of_random_systems_is_solved() {
    sweep("tableaux", 100_000, Model::IDEAL, plain);
    sweep("fixed component", 100_000, Model::IDEAL, with_fixed_component);
    for (name, count, most) in [("1 to 8 minerals", 100_000, 8), ("1 to 40 minerals", 20_000, 40)] {
        sweep(name, count, Model::IDEAL, |random| {
            let problem = plain(random)?;
            with_minerals(random, problem, most)
        });
    }
    sweep("minerals, fixed component", 100_000, Model::IDEAL, |random| {
        let problem = with_fixed_component(random)?;
        with_minerals(random, problem, 8)
    });
    sweep("davies", 100_000, davies(), |random| {
        let mut problem = plain(random)?;
        random_systems::add_charges(random, &mut problem);
        Some(problem)
    });
    sweep("davies, minerals", 50_000, davies(), |random| {
        let problem = plain(random)?;
        let mut problem = with_minerals(random, problem, 5)?;
        random_systems::add_charges(random, &mut problem);
        Some(problem)
    });
}

/// The same problem with components renamed by an integer matrix of determinant one: λ' = U λ, ν' = ν U⁻¹, T' = U⁻ᵀ T.
///
/// A sequence of elementary steps, each `ν_b += s ν_a` in every row and `T_b += s T_a`.
fn mix_components(random: &mut Random, problem: &Problem) -> Problem {
    let mut mixed = problem.clone();
    for _ in 0..problem.n_components {
        let a = random.integer(0, problem.n_components as i64 - 1) as usize;
        let b = random.integer(0, problem.n_components as i64 - 1) as usize;
        let s = random.integer(-2, 2);
        if a == b || s == 0 {
            continue;
        }
        for row in &mut mixed.species {
            let of = |j| row.stoichiometry.iter().find(|(k, _)| *k == j).map_or(0, |(_, nu)| *nu.numer());
            let sum = of(b) + s * of(a);
            row.stoichiometry.retain(|(k, _)| *k != b);
            if sum != 0 {
                row.stoichiometry.push((b, Coefficient::from_integer(sum)));
            }
        }
        mixed.totals[b] = mixed.totals[b] + mixed.totals[a] * s as f64;
    }
    mixed
}

fn assert_same_composition(
    what: &str,
    seed: u64,
    a: &[f64],
    b: impl IntoIterator<Item = f64>,
    condition: f64,
) {
    for (i, (a, b)) in a.iter().zip(b).enumerate() {
        let tolerance = 1e-11 + 1e-15 * condition + 1e-14 * a.abs();
        assert!(
            *a == b || (a - b).abs() <= tolerance,
            "{what}, seed {seed}, species {i}: {a} {b} ({condition:e})"
        );
    }
}

#[test]
fn the_composition_does_not_depend_on_how_it_is_asked_for() {
    let settings = Settings::default();
    (0..1500_u64).into_par_iter().for_each(|seed| {
        let random = &mut Random(seed);
        let problem = random_systems::tableau(random, HARD);
        let solve = |problem: &Problem| {
            let outcome = solve(problem, &Model::IDEAL, &settings, None);
            outcome.unwrap_or_else(|error| panic!("seed {seed}: {error}"))
        };
        let reference = solve(&problem);
        let condition = reference.certificate.condition;

        let mixed = solve(&mix_components(random, &problem));
        assert_same_composition("mixed components", seed, &reference.ln_c, mixed.ln_c, condition);

        let mut turned = problem.clone();
        turned.species.reverse();
        let turned = solve(&turned);
        assert_same_composition(
            "reversed species",
            seed,
            &reference.ln_c,
            turned.ln_c.into_iter().rev(),
            condition,
        );

        let mut split = problem.clone();
        let half = split.species.len() - 1;
        split.species[half].ln_k -= std::f64::consts::LN_2;
        split.species.push(split.species[half].clone());
        let split = solve(&split).ln_c;
        let halves = split
            .iter()
            .enumerate()
            .map(|(i, ln_c)| if i == half { ln_c + std::f64::consts::LN_2 } else { *ln_c });
        assert_same_composition("a species in two halves", seed, &reference.ln_c, halves, condition);

        let mut inert = problem.clone();
        inert.species.push(Row::new(&[(inert.n_components, 1)], 0.0));
        inert.n_components += 1;
        inert.totals.push(0.5.into());
        assert_same_composition("an inert component", seed, &reference.ln_c, solve(&inert).ln_c, condition);
    });
}

#[test]
fn a_warm_start_leads_to_the_cold_answer_bit_for_bit_each_time() {
    let settings = Settings::default();
    let outcomes: Vec<(usize, bool)> = (0..2000_u64)
        .into_par_iter()
        .map(|seed| {
            let random = &mut Random(seed);
            let mut problem = random_systems::tableau(random, HARD);
            let before = solve(&problem, &Model::IDEAL, &settings, None).unwrap();
            let minerals = random.integer(0, 4) as usize;
            random_systems::add_minerals(random, &mut problem, &before.ln_a, minerals);
            let before = solve(&problem, &Model::IDEAL, &settings, None).unwrap();
            for row in &mut problem.species {
                row.ln_k += random.uniform(-0.1, 0.1);
            }
            for total in &mut problem.totals {
                *total = *total * random.uniform(0.99, 1.01);
            }
            let cold = solve(&problem, &Model::IDEAL, &settings, None).unwrap();
            let warm = solve(&problem, &Model::IDEAL, &settings, Some(&before.warm));
            let warm = warm.unwrap_or_else(|error| panic!("seed {seed}: {error}"));
            let again = solve(&problem, &Model::IDEAL, &settings, Some(&before.warm)).unwrap();
            assert_eq!(warm.ln_c, again.ln_c, "seed {seed}");
            assert_same_composition("warm start", seed, &cold.ln_c, warm.ln_c, cold.certificate.condition);
            let bounds = (cold.certificate.ln_c_error, warm.certificate.ln_c_error);
            if let (Some(cold_bound), Some(warm_bound)) = bounds {
                let difference = largest_difference(&cold.ln_c, &again.ln_c);
                let bound = cold_bound + warm_bound;
                assert!(
                    difference <= bound,
                    "seed {seed}: two answers differ by {difference:e}, bound {bound:e}"
                );
            }
            (warm.effort.iterations, bounds.0.is_some())
        })
        .collect();
    let (median, most) = spread(outcomes.iter().map(|(iterations, _)| *iterations));
    let bounded = outcomes.iter().filter(|(_, bounded)| *bounded).count();
    println!("warm start: iterations median {median}, most {most}; error bound applies to {bounded} of 2000");
    assert!(bounded > 1900);
}

fn largest_difference(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).filter(|(a, b)| a != b).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max)
}

/// Coefficients of a row with an integer in each component.
fn integers(row: &Row, n_components: usize) -> Vec<i64> {
    let mut nu = vec![0; n_components];
    row.stoichiometry.iter().for_each(|(j, value)| nu[*j] = *value.numer());
    nu
}

/// A problem with one component, of positive coefficients only, whose total is `sign` times its size, hidden by mixing
/// the components; with the species that contain it, and the problem before it was mixed.
fn hidden(seed: u64, sign: f64) -> Option<(Problem, Problem, Vec<bool>)> {
    let random = &mut Random(seed * 104_729 + 7);
    let mut problem = random_systems::tableau(random, HARD);
    let last = problem.n_components - 1;
    let contains = |row: &Row| row.stoichiometry.iter().any(|(j, _)| *j == last);
    let marked: Vec<bool> = problem.species.iter().map(contains).collect();
    let is_one_sided = problem.species.iter().flat_map(|row| &row.stoichiometry);
    if is_one_sided.filter(|(j, _)| *j == last).any(|(_, nu)| *nu.numer() < 0) {
        return None;
    }
    problem.totals[last] = problem.totals[last] * sign;
    let mut mixed = problem.clone();
    for _ in 0..3 {
        mixed = mix_components(random, &mixed);
    }
    Some((problem, mixed, marked))
}

#[test]
fn hidden_infeasible_problems_are_refused_with_a_proof() {
    let proven = (0..220_u64).into_par_iter().filter(|seed| {
        let Some((_, mixed, _)) = hidden(*seed, -1.0) else { return false };
        let outcome = solve(&mixed, &Model::IDEAL, &Settings::default(), None);
        let Err(SolveError::Infeasible { combination, value }) = outcome else {
            panic!("seed {seed}: {:?}", outcome.err())
        };
        let of = |nu: &[i64]| combination.iter().map(|(j, factor)| factor * nu[*j] as f64).sum::<f64>();
        for row in &mixed.species {
            assert!(of(&integers(row, mixed.n_components)) * value <= 0.0, "seed {seed}");
        }
        let total: f64 = combination.iter().map(|(j, factor)| factor * mixed.totals[*j].to_f64()).sum();
        assert!((total - value).abs() <= 1e-9 * value.abs().max(1.0), "seed {seed}: {total:e} {value:e}");
        true
    });
    assert!(proven.count() >= 200);
}

#[test]
fn hidden_boundary_problems_have_exact_zeros() {
    let solved = (0..220_u64).into_par_iter().filter(|seed| {
        let Some((plain, mixed, marked)) = hidden(*seed, 0.0) else { return false };
        let solve = |problem: &Problem| {
            let outcome = solve(problem, &Model::IDEAL, &Settings::default(), None);
            outcome.unwrap_or_else(|error| panic!("seed {seed}: {error}"))
        };
        let (plain, mixed) = (solve(&plain), solve(&mixed));
        for (i, is_zero) in marked.iter().enumerate() {
            assert_eq!(mixed.ln_c[i] == f64::NEG_INFINITY, *is_zero, "seed {seed}, species {i}");
        }
        assert_same_composition("boundary", *seed, &plain.ln_c, mixed.ln_c, plain.certificate.condition);
        true
    });
    assert!(solved.count() >= 200);
}

#[test]
fn hidden_interior_problems_are_solved() {
    let solved = (0..220_u64).into_par_iter().filter(|seed| {
        let Some((plain, mixed, _)) = hidden(*seed, 1.0) else { return false };
        let solve = |problem: &Problem| {
            let outcome = solve(problem, &Model::IDEAL, &Settings::default(), None);
            outcome.unwrap_or_else(|error| panic!("seed {seed}: {error}"))
        };
        let (plain, mixed) = (solve(&plain), solve(&mixed));
        assert_same_composition("interior", *seed, &plain.ln_c, mixed.ln_c, plain.certificate.condition);
        true
    });
    assert!(solved.count() >= 200);
}
