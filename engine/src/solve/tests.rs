//! The solver on systems whose answer is known from elsewhere, and on its own limits.

use super::scalar::{Tolerance, all_roots};
use super::*;
use crate::activity::Davies;
use std::sync::Arc;
use std::sync::atomic::AtomicBool;

const LN_10: f64 = std::f64::consts::LN_10;

fn row(stoichiometry: &[(usize, i64)], log_k: f64) -> Row {
    Row::new(stoichiometry, log_k * LN_10)
}

fn ion(stoichiometry: &[(usize, i64)], log_k: f64, charge: f64) -> Row {
    row(stoichiometry, log_k).with_charge(charge)
}

fn mineral(stoichiometry: &[(usize, i64)], log_k: f64) -> Mineral {
    Mineral { row: row(stoichiometry, log_k), ln_target: 0.0 }
}

fn totals(values: &[f64]) -> Vec<Total> {
    values.iter().map(|value| Total::from(*value)).collect()
}

fn ideal(problem: &Problem) -> Result<Converged, SolveError> {
    solve(problem, &Model::IDEAL, &Settings::default(), None)
}

/// The "easy" equilibrium test of the MoMaS benchmark (Carrayrou, Kern & Knabner 2010, Comput. Geosci. 14, 483-502;
/// tableau recalled) with initial water A.
fn momas() -> Problem {
    let (x1, x2, x3, x4, s) = (0, 1, 2, 3, 4);
    let species = vec![
        row(&[(x1, 1)], 0.0),
        row(&[(x2, 1)], 0.0),
        row(&[(x3, 1)], 0.0),
        row(&[(x4, 1)], 0.0),
        row(&[(s, 1)], 0.0),
        row(&[(x2, -1)], -12.0),
        row(&[(x2, 1), (x3, 1)], 0.0),
        row(&[(x2, -1), (x4, 1)], 0.0),
        row(&[(x2, -4), (x3, 1), (x4, 3)], -1.0),
        row(&[(x2, 4), (x3, 3), (x4, 1)], 35.0),
        row(&[(x2, 3), (x3, 1), (s, 1)], 6.0),
        row(&[(x2, -3), (x4, 1), (s, 2)], -1.0),
    ];
    Problem { n_components: 5, species, totals: totals(&[0.0, -2.0, 0.0, 2.0, 1.0]), ..Problem::default() }
}

/// Values computed by other means for the same tableau, five digits.
#[test]
fn momas_easy_has_its_known_solution_and_exact_zeros() {
    let converged = ideal(&momas()).unwrap();
    let expected = [(1, 0.25972), (3, 0.34954), (4, 0.39074), (7, 1.34583), (11, 0.30463)];
    for (species_idx, concentration) in expected {
        assert!((converged.ln_c[species_idx].exp() - concentration).abs() < 5e-6, "species {species_idx}");
    }
    for zero in [0, 2, 6, 8, 9, 10] {
        assert_eq!(converged.ln_c[zero], f64::NEG_INFINITY, "species {zero}");
    }
    assert_eq!((converged.ln_a[0], converged.ln_a[2]), (f64::NEG_INFINITY, f64::NEG_INFINITY));
}

/// A start taken where totals were zero serves where they are not.
#[test]
fn exact_zeros_end_with_the_totals_that_forced_them() {
    let mut problem = momas();
    let warm = ideal(&problem).unwrap().warm;
    problem.totals = totals(&[0.3, 0.3, 0.3, 0.0, 1.0]);
    let cold = ideal(&problem).unwrap();
    let warm = solve(&problem, &Model::IDEAL, &Settings::default(), Some(&warm)).unwrap();
    for (a, b) in cold.ln_c.iter().zip(&warm.ln_c) {
        assert!(a == b || (a - b).abs() < 1e-12, "{a} {b}");
    }
}

/// H, Ca, CO3 with calcite, a polymorph 0.14 log units less stable, carbon dioxide at 1 atm and portlandite; rounded
/// textbook constants, since only the course of the titration matters.
fn carbonate(total_h: Total) -> Problem {
    let (h, ca, co3) = (0, 1, 2);
    let species = vec![
        ion(&[(h, 1)], 0.0, 1.0),
        ion(&[(h, -1)], -14.0, -1.0),
        ion(&[(ca, 1)], 0.0, 2.0),
        ion(&[(co3, 1)], 0.0, -2.0),
        ion(&[(h, 1), (co3, 1)], 10.33, -1.0),
        row(&[(h, 2), (co3, 1)], 16.68),
        row(&[(ca, 1), (co3, 1)], 3.22),
        ion(&[(ca, 1), (h, 1), (co3, 1)], 11.43, 1.0),
        ion(&[(ca, 1), (h, -1)], -12.78, 1.0),
    ];
    let minerals = vec![
        mineral(&[(ca, 1), (co3, 1)], 8.48),
        mineral(&[(ca, 1), (co3, 1)], 8.34),
        mineral(&[(h, 2), (co3, 1)], 18.15),
        mineral(&[(ca, 1), (h, -2)], -22.8),
    ];
    let totals = vec![total_h, Total::from_ratio(1.0, 10.0), Total::from_ratio(5.0, 100.0)];
    Problem { n_components: 3, species, minerals, totals, ..Problem::default() }
}

/// T_H from -0.3 to 0.3: every other of 4001 points in sequence, each from the one before.
#[test]
fn a_carbonate_titration_meets_every_phase_but_the_unstable_one() {
    let mut warm: Option<Warm> = None;
    let (mut seen, mut most) = ([false; 4], 0);
    let (mut ph, mut present) = (Vec::new(), Vec::new());
    for point in (0..=4000).step_by(2) {
        let problem = carbonate(Total::from_ratio(f64::from(point) * 6.0 - 12000.0, 40000.0));
        let converged = solve(&problem, &Model::IDEAL, &Settings::default(), warm.as_ref()).unwrap();
        if point % 50 == 0 {
            let cold = ideal(&problem).unwrap();
            most = most.max(cold.effort.iterations);
            assert_eq!(cold.mineral_present, converged.mineral_present, "point {point}");
            assert!(
                cold.ln_c.iter().zip(&converged.ln_c).all(|(a, b)| (a - b).abs() < 1e-11),
                "point {point}"
            );
        }
        seen.iter_mut().zip(&converged.mineral_present).for_each(|(seen, present)| *seen |= *present);
        ph.push(-converged.ln_a[0] / LN_10);
        present.push(converged.mineral_present);
        warm = Some(converged.warm);
    }
    assert_eq!(seen, [true, false, true, true]);
    assert_eq!(present[0], [true, false, false, true], "calcite and portlandite in the base");
    assert_eq!(present[present.len() - 1], [false, false, true, false], "carbon dioxide over the acid");
    assert!(ph.windows(2).all(|pair| pair[1] <= pair[0] + 1e-12), "pH rises on adding acid");
    assert!(ph[0] > 13.0 && ph[ph.len() - 1] < 1.5, "pH {} to {}", ph[0], ph[ph.len() - 1]);
    assert!(most <= 20, "{most} iterations");
}

/// Redox titration H/e/Fe/S(VI): from the stability limit of water against H2 to that against O2, traces far below
/// what a concentration could hold.
#[test]
fn a_redox_titration_crosses_the_whole_range_of_water() {
    let (h, e, fe, so4) = (0, 1, 2, 3);
    let species = vec![
        ion(&[(h, 1)], 0.0, 1.0),
        ion(&[(h, -1)], -14.0, -1.0),
        ion(&[(fe, 1)], 0.0, 2.0),
        ion(&[(fe, 1), (e, -1)], -13.02, 3.0),
        ion(&[(fe, 1), (e, -1), (h, -1)], -15.21, 2.0),
        ion(&[(so4, 1)], 0.0, -2.0),
        ion(&[(so4, 1), (h, 1)], 1.99, -1.0),
        ion(&[(so4, 1), (h, 9), (e, 8)], 33.65, -1.0),
        row(&[(so4, 1), (h, 10), (e, 8)], 40.64),
        row(&[(h, 2), (e, 2)], -3.15),
        row(&[(h, -4), (e, -4)], -86.08),
    ];
    let minerals = vec![
        mineral(&[(fe, 1), (e, -1), (h, -3)], -17.91),
        mineral(&[(fe, 1), (so4, 1), (h, 8), (e, 8)], 37.5),
        mineral(&[(h, 2), (e, 2)], -0.05),
        mineral(&[(h, -4), (e, -4)], -83.1),
    ];
    let mut problem =
        Problem { n_components: 4, species, minerals, totals: totals(&[0.0; 4]), ..Problem::default() };
    let mut pe = Vec::new();
    for point in 0..=600 {
        let electrons = Total::from_ratio(f64::from(point) - 200.0, 20_000.0);
        problem.totals =
            vec![electrons + Total::from(0.001), electrons, Total::from(1e-3), Total::from(2e-3)];
        let converged = ideal(&problem).unwrap_or_else(|error| panic!("point {point}: {error}"));
        pe.push(-converged.ln_a[e] / LN_10);
    }
    assert!(pe.windows(2).all(|pair| pair[1] <= pair[0] + 1e-9), "pe rises on adding electrons");
    assert!(pe[0] > 15.0 && pe[600] < -3.0, "pe {} to {}", pe[0], pe[600]);
}

/// Alkalinity 4e-3 with [CO3] = 1e-3, pK2 = 10.33, pKw = 14: the condition is not a gradient and has two roots (the case
/// after Munhoven 2021, Geosci. Model Dev.; values by the quadratic in [H]: 2 [CO3] + [CO3][H]/K2 + Kw/[H] - [H] = Alk).
#[test]
fn alkalinity_beside_carbonate_has_two_ph_values() {
    let species =
        vec![row(&[(0, 1)], 0.0), row(&[(0, -1)], -14.0), row(&[(1, 1)], 0.0), row(&[(0, 1), (1, 1)], 10.33)];
    let mut problem = Problem { n_components: 2, species, totals: totals(&[0.0, 0.0]), ..Problem::default() };
    problem.reservoirs = vec![
        Reservoir { row: row(&[(0, 1)], 0.0), ln_value: 0.0 },
        Reservoir { row: row(&[(1, 1)], 0.0), ln_value: 1e-3_f64.ln() },
    ];
    let alkalinity_error = |ph: f64| -> Result<f64, SolveError> {
        problem.reservoirs[0].ln_value = -ph * LN_10;
        let c: Vec<f64> = ideal(&problem)?.ln_c.iter().map(|ln_c| ln_c.exp()).collect();
        Ok(c[3] + 2.0 * c[2] + c[1] - c[0] - 4e-3)
    };
    let roots = all_roots(alkalinity_error, (2.0, 13.0), 44, Tolerance { x: 1e-12, f: 0.0 }).unwrap().roots;
    assert_eq!(roots.len(), 2);
    assert!((roots[0].x - 10.0543).abs() < 5e-5, "{}", roots[0].x);
    assert!((roots[1].x - 11.2757).abs() < 5e-5, "{}", roots[1].x);
}

/// Davies: 0.1 mol/kg of a 1:1 salt and an acid with pKa 4.76, against the mass action written out by hand.
#[test]
fn davies_agrees_with_mass_action_at_its_own_ionic_strength() {
    let species = vec![
        ion(&[(0, 1)], 0.0, 1.0),
        ion(&[(0, -1)], -14.0, -1.0).with_water(1.0),
        ion(&[(1, 1)], 0.0, -1.0),
        row(&[(0, 1), (1, 1)], 4.76),
        ion(&[(2, 1)], 0.0, 1.0),
        ion(&[(3, 1)], 0.0, -1.0),
    ];
    let problem =
        Problem { n_components: 4, species, totals: totals(&[0.01, 0.01, 0.1, 0.1]), ..Problem::default() };
    let davies = Davies::new(0.5098);
    let converged = solve(&problem, &Model::davies(davies), &Settings::default(), None).unwrap();
    let m: Vec<f64> = converged.ln_c.iter().map(|ln_c| ln_c.exp()).collect();
    let ionic_strength = 0.5 * (m[0] + m[1] + m[2] + m[4] + m[5]);
    assert!((ionic_strength / converged.ionic_strength - 1.0).abs() < 1e-12);
    let gamma = davies.ln_gamma(1.0, ionic_strength).exp();
    assert!((m[3] / (m[0] * gamma * m[2] * gamma) / 10_f64.powf(4.76) - 1.0).abs() < 1e-11);
    let ln_water = davies.ln_water_activity(m.iter().sum(), ionic_strength);
    assert!((converged.ln_water_activity - ln_water).abs() < 1e-13);
    assert!((m[0] * m[1] * gamma * gamma / (1e-14 * ln_water.exp()) - 1.0).abs() < 1e-11);
    assert!(!converged.certificate.outside_validity);
    assert_eq!(converged.certificate.ionic_strength_roots, 1);
}

#[test]
fn ionic_strengths_beyond_the_model_are_flagged() {
    let species = vec![ion(&[(0, 1)], 0.0, 1.0), ion(&[(1, 1)], 0.0, -1.0), row(&[(0, 1), (1, 1)], -0.5)];
    let problem = Problem { n_components: 2, species, totals: totals(&[3.0, 3.0]), ..Problem::default() };
    let converged = solve(&problem, &Model::davies(Davies::new(0.51)), &Settings::default(), None).unwrap();
    assert!(converged.ionic_strength > 1.0 && converged.certificate.outside_validity);
}

/// A reservoir that supplies: pH held at 4 in water that has no acid; `reservoir_amount` is what was delivered.
#[test]
fn reservoirs_tell_what_they_delivered() {
    let species = vec![row(&[(0, 1)], 0.0), row(&[(0, -1)], -14.0)];
    let mut problem = Problem { n_components: 1, species, totals: totals(&[0.0]), ..Problem::default() };
    problem.reservoirs = vec![Reservoir { row: row(&[(0, 1)], 0.0), ln_value: -4.0 * LN_10 }];
    let delivered = ideal(&problem).unwrap().reservoir_amount[0];
    assert!((delivered - (1e-4 - 1e-10)).abs() < 1e-17, "{delivered}");
    problem.reservoirs.push(Reservoir { row: row(&[(0, 2)], 0.0), ln_value: -1.0 });
    assert_eq!(ideal(&problem).unwrap_err(), SolveError::Overdetermined { reservoir_idx: 1 });
}

#[test]
fn precipitation_without_end_is_recognised() {
    let mut problem = carbonate(Total::from(0.0));
    let hold = |j, log_value: f64| Reservoir { row: row(&[(j, 1)], 0.0), ln_value: log_value * LN_10 };
    problem.reservoirs = vec![hold(0, -13.0), hold(1, -1.0)];
    assert_eq!(ideal(&problem).unwrap_err(), SolveError::Unbounded { mineral_idx: 3 });
}

/// A and AB as the only species, more B than A: A - B cannot be negative. No column of the input has one sign only.
#[test]
fn impossible_totals_come_with_the_combination_that_proves_it() {
    let species = vec![row(&[(0, 1)], 0.0), row(&[(0, 1), (1, 1)], 5.0)];
    let problem = Problem { n_components: 2, species, totals: totals(&[1.0, 2.0]), ..Problem::default() };
    let SolveError::Infeasible { combination, value } = ideal(&problem).unwrap_err() else {
        panic!("not infeasible")
    };
    assert_eq!((combination, value), (vec![(0, 1.0), (1, -1.0)], -1.0));
    let boundary = Problem { totals: totals(&[2.0, 2.0]), ..problem };
    assert_eq!(ideal(&boundary).unwrap().ln_c[0], f64::NEG_INFINITY);
}

/// T_e - 2 T_X = 1e-11 between totals of 0.2: half an ulp of an input would change O2 by 1e-6 relative, decimals do not.
#[test]
fn totals_given_as_decimals_are_not_rounded() {
    let species =
        vec![row(&[(1, 1), (0, 2)], 30.0), row(&[(1, 1)], 0.0), row(&[(0, 4)], -5.0), row(&[(0, -1)], -40.0)];
    let excess = Total::from_ratio(1.0, 1e11);
    let x = Total::from_ratio(1.0, 10.0);
    let problem =
        Problem { n_components: 2, species, totals: vec![x * 2.0 + excess, x], ..Problem::default() };
    let converged = ideal(&problem).unwrap();
    let trace = 4.0 * converged.ln_c[2].exp() - converged.ln_c[3].exp() - 2.0 * converged.ln_c[1].exp();
    assert!((trace / 1e-11 - 1.0).abs() < 1e-12, "{trace:e}");
    assert!(converged.certificate.condition > 1e9);
}

/// Fractions in the stoichiometry: halving a species' formula squares its constant.
#[test]
fn fractional_coefficients_are_exact() {
    let half = Row {
        stoichiometry: vec![(0, Coefficient::new(1, 2)), (1, Coefficient::new(-2, 3))],
        ..row(&[(0, 1)], 1.0)
    };
    let species = vec![row(&[(0, 1)], 0.0), row(&[(1, 1)], 0.0), half, row(&[(1, -1)], -9.0)];
    let problem = Problem { n_components: 2, species, totals: totals(&[0.01, -0.002]), ..Problem::default() };
    let c: Vec<f64> = ideal(&problem).unwrap().ln_c.iter().map(|ln_c| ln_c.exp()).collect();
    assert!((c[0] + c[2] / 2.0 - 0.01).abs() < 1e-16);
    assert!((c[1] - 2.0 * c[2] / 3.0 - c[3] + 0.002).abs() < 1e-16);
    assert!((c[2] / (10.0 * c[0].sqrt() * c[1].powf(-2.0 / 3.0)) - 1.0).abs() < 1e-12);
}

#[test]
fn malformed_problems_say_where() {
    let good = carbonate(Total::from(0.0));
    let mut bad = good.clone();
    bad.species[4].ln_k = f64::NAN;
    assert_eq!(ideal(&bad).unwrap_err(), SolveError::BadInput { input: Input::Species, idx: 4 });
    let mut bad = good.clone();
    bad.minerals[2].row.stoichiometry[0].0 = 3;
    assert_eq!(ideal(&bad).unwrap_err(), SolveError::BadInput { input: Input::Mineral, idx: 2 });
    let bad = Problem { n_components: 4, ..good };
    assert_eq!(ideal(&bad).unwrap_err(), SolveError::BadInput { input: Input::Totals, idx: 3 });
}

#[test]
fn a_solve_can_be_interrupted() {
    let settings = Settings { stop: Some(Arc::new(AtomicBool::new(true))), ..Settings::default() };
    let outcome = solve(&carbonate(Total::from(0.0)), &Model::IDEAL, &settings, None);
    assert_eq!(outcome.unwrap_err(), SolveError::Stopped);
}

/// A component that only a mineral contains, and a balance that only a mineral can close.
#[test]
fn minerals_without_which_no_balance_closes_are_present() {
    let species = vec![row(&[(0, 1)], 0.0), row(&[(2, 1)], 0.0)];
    let minerals = vec![mineral(&[(1, 2)], -3.0), mineral(&[(0, -2), (2, 1)], -22.8)];
    let problem = Problem {
        n_components: 3,
        species,
        minerals,
        totals: totals(&[-0.1, 3.0, 0.2]),
        ..Problem::default()
    };
    let converged = ideal(&problem).unwrap();
    assert_eq!(converged.mineral_present, [true, true]);
    assert!((converged.mineral_amount[0] - 1.5).abs() < 1e-15);
    assert!((converged.ln_c[0].exp() - 2.0 * converged.mineral_amount[1] + 0.1).abs() < 1e-15);
    let impossible = Problem { totals: totals(&[-0.1, -3.0, 0.2]), ..problem };
    assert!(matches!(ideal(&impossible), Err(SolveError::Infeasible { value: -3.0, .. })));
}

/// Two identical minerals, and one exactly at saturation: the composition is unique, the amounts are one choice.
#[test]
fn ties_between_minerals_leave_the_composition_alone() {
    let free = carbonate(Total::from(0.0));
    let mut twins = free.clone();
    twins.minerals.push(twins.minerals[0].clone());
    let (free, twins) = (ideal(&free).unwrap(), ideal(&twins).unwrap());
    assert_eq!(free.ln_c, twins.ln_c);
    assert_eq!(free.mineral_amount[0], twins.mineral_amount[0] + twins.mineral_amount[4]);

    let species = vec![row(&[(0, 1)], 0.0)];
    let minerals = vec![mineral(&[(0, 1)], 2.0)];
    let saturated =
        Problem { n_components: 1, species, minerals, totals: totals(&[0.01]), ..Problem::default() };
    let converged = ideal(&saturated).unwrap();
    assert!((converged.ln_c[0].exp() - 0.01).abs() < 1e-16 && converged.mineral_amount[0] < 1e-16);
}

#[test]
fn components_that_nothing_contains_may_have_no_total() {
    assert!(ideal(&Problem::default()).unwrap().ln_c.is_empty());
    let species = vec![row(&[(0, 1)], 0.0)];
    let mut problem =
        Problem { n_components: 2, species, totals: totals(&[0.01, 0.0]), ..Problem::default() };
    assert!((ideal(&problem).unwrap().ln_c[0] - 0.01_f64.ln()).abs() < 1e-14);
    problem.totals[1] = Total::from(1e-9);
    assert!(matches!(ideal(&problem), Err(SolveError::Infeasible { .. })));
}

/// X and Y only together: the composition is determined, the two activities are not.
#[test]
fn components_that_only_occur_together_leave_their_activities_open() {
    let species = vec![row(&[(0, 1), (1, 1)], 0.0)];
    let mut problem =
        Problem { n_components: 2, species, totals: totals(&[0.01, 0.01]), ..Problem::default() };
    let converged = ideal(&problem).unwrap();
    assert!(
        (converged.ln_c[0] - 0.01_f64.ln()).abs() < 1e-14
            && converged.ln_a.iter().all(|ln_a| !ln_a.is_finite())
    );
    problem.totals[1] = Total::from(0.02);
    assert!(matches!(ideal(&problem), Err(SolveError::Infeasible { .. })));
}

/// The stated condition is the sum of difference quotients.
#[test]
fn the_condition_is_that_of_the_totals() {
    let condition = |problem: &Problem| ideal(problem).unwrap().certificate.condition;
    let species = vec![row(&[(0, 1)], 0.0), row(&[(0, -1)], -14.0)];
    let water = |total: f64| Problem {
        n_components: 1,
        species: species.clone(),
        totals: totals(&[total]),
        ..Problem::default()
    };
    let (total, step) = (3e-8, 1e-5);
    let ln_c = |total: f64| ideal(&water(total)).unwrap().ln_c[0];
    let quotient = (ln_c(total * (1.0 + step)) - ln_c(total * (1.0 - step))) / (2.0 * step);
    assert!((condition(&water(total)) / quotient - 1.0).abs() < 1e-8);
}

/// The same rows in other parts: a mineral becomes a reservoir, so an earlier end is no start.
#[test]
fn a_start_from_a_problem_with_other_parts_is_ignored() {
    let mut problem = carbonate(Total::from(0.0));
    let warm = ideal(&problem).unwrap().warm;
    let first = problem.minerals.remove(0);
    problem.reservoirs.push(Reservoir { row: first.row, ln_value: -1.0 });
    let cold = ideal(&problem).unwrap();
    let warm = solve(&problem, &Model::IDEAL, &Settings::default(), Some(&warm)).unwrap();
    assert_eq!(cold.ln_c, warm.ln_c);
}

/// Two gases at 1 bar, each with a dissolved form of which `k` is in equilibrium with 1 bar.
fn two_gases(totals: [f64; 2], k: [f64; 2]) -> Problem {
    let dissolved = vec![row(&[(0, 1)], 0.0), row(&[(1, 1)], 0.0)];
    let members = vec![row(&[(0, 1)], -k[0].log10()), row(&[(1, 1)], -k[1].log10())];
    Problem {
        n_components: 2,
        species: dissolved,
        mixtures: vec![Mixture { members, ln_target: 0.0 }],
        totals: self::totals(&totals),
        ..Problem::default()
    }
}

/// By hand: x_i = T_i/(N + k_i), so N is the positive root of (N + k1)(N + k2) = T1 (N + k2) + T2 (N + k1).
#[test]
fn a_gas_at_fixed_pressure_holds_what_the_quadratic_says() {
    let (t, k) = ([0.01, 0.002], [3e-2, 6e-4]);
    let converged = ideal(&two_gases(t, k)).unwrap();
    let (p, q) = (k[0] + k[1] - t[0] - t[1], k[0] * k[1] - t[0] * k[1] - t[1] * k[0]);
    let amount = -0.5 * p + (0.25 * p * p - q).sqrt();
    let gas = &converged.mixtures[0];
    assert!((gas.amount / amount - 1.0).abs() < 1e-12, "{} {amount}", gas.amount);
    for i in 0..2 {
        assert!((gas.ln_x[i].exp() - t[i] / (amount + k[i])).abs() < 1e-13);
        assert!((converged.ln_c[i].exp() / (k[i] * t[i] / (amount + k[i])) - 1.0).abs() < 1e-12);
    }
    assert!(converged.certificate.present_saturation < 1e-12);
}

/// Below saturation there is no bubble, and its saturation is the sum of the partial pressures.
#[test]
fn a_gas_below_its_pressure_is_absent() {
    let converged = ideal(&two_gases([0.01, 1e-4], [3e-2, 6e-4])).unwrap();
    assert_eq!(converged.mixtures[0].amount, 0.0);
    assert!((converged.mixtures[0].ln_saturation.exp() - (0.01 / 3e-2 + 1e-4 / 6e-4)).abs() < 1e-13);
}

/// From no gas to almost nothing but gas and back, each point from the one before: the amount grows with the total.
#[test]
fn a_gas_appears_and_vanishes_along_a_sweep() {
    let (mut warm, mut before): (Option<Warm>, f64) = (None, 0.0);
    for point in (0..=200).chain((0..200).rev()) {
        let problem = two_gases([10_f64.powf(-4.0 + f64::from(point) / 50.0), 1e-4], [3e-2, 6e-4]);
        let converged = solve(&problem, &Model::IDEAL, &Settings::default(), warm.as_ref()).unwrap();
        let cold = ideal(&problem).unwrap().mixtures[0].amount;
        let amount = converged.mixtures[0].amount;
        assert!((amount - cold).abs() <= 1e-12 * cold, "{amount} {cold}");
        if point == 0 {
            assert_eq!(amount, 0.0);
        }
        before = before.max(amount);
        warm = Some(converged.warm);
    }
    assert!(before > 0.9);
}

/// Calcite-magnesite with the pure end-members beside it: the solid solution is always the more stable, since mixing
/// lowers the activity of each member. Two solid solutions share the calcium where the second is richer in it.
#[test]
fn a_solid_solution_replaces_its_end_members() {
    let mut problem = carbonate(Total::from_ratio(-1.0, 10.0));
    problem.minerals.truncate(1);
    problem.n_components = 4;
    problem.totals.push(Total::from(0.01));
    problem.species.push(row(&[(3, 1)], 0.0));
    problem.minerals.push(mineral(&[(3, 1), (1, 1)], 8.0));
    let without = ideal(&problem).unwrap();
    assert_eq!(without.mineral_present, [true, true]);
    let members = problem.minerals.iter().map(|mineral| mineral.row.clone()).collect();
    problem.mixtures.push(Mixture { members, ln_target: 0.0 });
    let converged = ideal(&problem).unwrap();
    assert_eq!(converged.mineral_present, [false, false]);
    assert!(
        converged
            .mineral_ln_saturation
            .iter()
            .zip(&converged.mixtures[0].ln_x)
            .all(|(s, x)| (s - x).abs() < 1e-12)
    );
    assert!(converged.mixtures[0].amount > without.mineral_amount.iter().sum::<f64>());
}

/// A mixture of one member is a pure phase.
#[test]
fn a_mixture_of_one_is_a_mineral() {
    let pure = carbonate(Total::from_ratio(-1.0, 10.0));
    let mut mixed = pure.clone();
    let first = mixed.minerals.remove(0);
    mixed.mixtures.push(Mixture { members: vec![first.row], ln_target: first.ln_target });
    let (pure, mixed) = (ideal(&pure).unwrap(), ideal(&mixed).unwrap());
    assert!((pure.mineral_amount[0] / mixed.mixtures[0].amount - 1.0).abs() < 1e-12);
    assert!(pure.ln_c.iter().zip(&mixed.ln_c).all(|(a, b)| (a - b).abs() < 1e-12));
}

/// A component that only the members of a mixture contain.
#[test]
fn a_mixture_without_which_no_balance_closes_is_present() {
    let species = vec![row(&[(0, 1)], 0.0)];
    let mixtures = vec![Mixture { members: vec![row(&[(0, 1)], 1.0), row(&[(1, 1)], 3.0)], ln_target: 0.0 }];
    let problem =
        Problem { n_components: 2, species, mixtures, totals: totals(&[0.3, 0.1]), ..Problem::default() };
    let converged = ideal(&problem).unwrap();
    let mixture = &converged.mixtures[0];
    assert!((mixture.amount * mixture.ln_x[1].exp() - 0.1).abs() < 1e-14);
    assert!((mixture.ln_x[0].exp() - 10.0 * converged.ln_c[0].exp()).abs() < 1e-13);
}

/// A gas of one member at 1 bar over a component held above it would never stop to grow.
#[test]
fn a_gas_without_end_is_recognised() {
    let mut problem = two_gases([0.0, 0.0], [1e-2, 1e-2]);
    problem.reservoirs = vec![Reservoir { row: row(&[(0, 1)], 0.0), ln_value: -1.0 }];
    assert_eq!(ideal(&problem).unwrap_err(), SolveError::UnboundedMixture { mixture_idx: 0 });
}

/// A gas in a given volume needs nothing of its own: its members are species.
#[test]
fn a_gas_of_fixed_volume_is_a_species() {
    // 1 L of gas over 1 kg of water at 298.15 K: n = p V/(R T), so ln K of the gas counts in mol.
    let per_bar: f64 = 1e5 * 1e-3 / (8.314462618 * 298.15);
    let species = vec![row(&[(0, 1)], 0.0), row(&[(0, 1)], (per_bar / 3.4e-2).log10())];
    let problem = Problem { n_components: 1, species, totals: totals(&[0.01]), ..Problem::default() };
    let dissolved = ideal(&problem).unwrap().ln_c[0].exp();
    assert!((dissolved / (0.01 / (1.0 + per_bar / 3.4e-2)) - 1.0).abs() < 1e-13);
}

/// The redox titration with hydrogen and oxygen as one gas at 1 bar instead of two: its fractions always add up to one
/// where it is present, and it is present at both ends.
#[test]
fn a_redox_titration_meets_one_gas_at_both_ends() {
    let (h, e, fe) = (0, 1, 2);
    let species = vec![
        ion(&[(h, 1)], 0.0, 1.0),
        ion(&[(h, -1)], -14.0, -1.0),
        ion(&[(fe, 1)], 0.0, 2.0),
        ion(&[(fe, 1), (e, -1)], -13.02, 3.0),
        row(&[(h, 2), (e, 2)], -3.15),
        row(&[(h, -4), (e, -4)], -86.08),
    ];
    let gas = Mixture {
        members: vec![row(&[(h, 2), (e, 2)], -0.05), row(&[(h, -4), (e, -4)], -83.1)],
        ln_target: 0.0,
    };
    let minerals = vec![mineral(&[(fe, 1), (e, -1), (h, -3)], -17.91)];
    let mut problem = Problem {
        n_components: 3,
        species,
        minerals,
        mixtures: vec![gas],
        totals: totals(&[0.0; 3]),
        ..Problem::default()
    };
    let (mut pe, mut present) = (Vec::new(), Vec::new());
    for point in 0..=400 {
        let electrons = Total::from_ratio(f64::from(point) - 200.0, 10_000.0);
        problem.totals = vec![electrons + Total::from(0.001), electrons, Total::from(1e-3)];
        let converged = ideal(&problem).unwrap_or_else(|error| panic!("point {point}: {error}"));
        let gas = &converged.mixtures[0];
        assert!(gas.amount == 0.0 || gas.ln_saturation.abs() < 1e-12, "point {point}");
        pe.push(-converged.ln_a[e] / LN_10);
        present.push(gas.amount > 0.0);
    }
    assert!(pe.windows(2).all(|pair| pair[1] <= pair[0] + 1e-9), "pe rises on adding electrons");
    assert!(present[0] && present[400] && present.contains(&false));
}
