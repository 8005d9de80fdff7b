//! The conditions of equilibrium, recomputed from an answer alone.

use lysocline_engine::solve::{Converged, Problem, Row};

/// Checks balances, mass action and the rules of phases.
///
/// ln a of a component is itself a sum over the species of the dominant basis, with terms of hundreds; 1e-12 is their
/// rounding.
pub fn check(problem: &Problem, converged: &Converged) -> Result<(), String> {
    for (i, row) in problem.species.iter().enumerate() {
        let (ln_a, magnitude) = product(row, converged);
        let difference = ln_a - converged.ln_gamma[i] - converged.ln_c[i];
        let close = difference.abs() <= 1e-12 + 1e-14 * magnitude;
        if !close && converged.ln_c[i] != f64::NEG_INFINITY {
            return Err(format!("mass action of species {i} is off by {difference:e} of {magnitude}"));
        }
    }
    check_balances(problem, converged)?;
    for (p, saturation) in converged.mineral_ln_saturation.iter().enumerate() {
        let (present, amount) = (converged.mineral_present[p], converged.mineral_amount[p]);
        phase(*saturation, amount, present).map_err(|fault| format!("mineral {p}: {fault}"))?;
    }
    for (p, (mixture, mixed)) in problem.mixtures.iter().zip(&converged.mixtures).enumerate() {
        let saturation = mixed.ln_saturation;
        phase(saturation, mixed.amount, mixed.amount > 0.0)
            .map_err(|fault| format!("mixture {p}: {fault}"))?;
        for (k, (member, ln_x)) in mixture.members.iter().zip(&mixed.ln_x).enumerate() {
            let (ln_product, magnitude) = product(member, converged);
            let difference = ln_product - mixture.ln_target - saturation - ln_x;
            if difference.abs() > 1e-11 + 1e-14 * magnitude {
                return Err(format!("mixture {p}, member {k}: the fraction is off by {difference:e}"));
            }
        }
    }
    Ok(())
}

/// A phase is there at saturation, or not there below it.
fn phase(saturation: f64, amount: f64, present: bool) -> Result<(), String> {
    let wrong = saturation > 1e-10
        || !(0.0..).contains(&amount)
        || (!present && amount != 0.0)
        || (present && saturation.abs() > 1e-10);
    if wrong {
        Err(format!("saturation {saturation:e}, amount {amount:e}, present {present}"))
    } else {
        Ok(())
    }
}

/// ln K plus the logarithms of the activities that a row is formed from, and the sum of the absolute terms.
fn product(row: &Row, converged: &Converged) -> (f64, f64) {
    let ratio = |nu: &lysocline_engine::solve::Coefficient| *nu.numer() as f64 / *nu.denom() as f64;
    let terms = row.stoichiometry.iter().map(|(j, nu)| ratio(nu) * converged.ln_a[*j]);
    let sum = terms.clone().sum::<f64>() + row.ln_k + row.water * converged.ln_water_activity;
    (sum, terms.map(f64::abs).sum::<f64>() + row.ln_k.abs() + 1.0)
}

fn check_balances(problem: &Problem, converged: &Converged) -> Result<(), String> {
    for j in 0..problem.n_components {
        let of = |row: &Row| {
            let entry = row.stoichiometry.iter().find(|(k, _)| *k == j);
            entry.map_or(0.0, |(_, nu)| *nu.numer() as f64 / *nu.denom() as f64)
        };
        let species = problem.species.iter().zip(&converged.ln_c).map(|(row, ln_c)| of(row) * ln_c.exp());
        let minerals = problem.minerals.iter().zip(&converged.mineral_amount).map(|(p, n)| of(&p.row) * n);
        let reservoirs =
            problem.reservoirs.iter().zip(&converged.reservoir_amount).map(|(r, e)| -of(&r.row) * e);
        let mixtures = problem.mixtures.iter().zip(&converged.mixtures).flat_map(|(mixture, mixed)| {
            let amount = |(row, ln_x): (&Row, &f64)| match mixed.amount {
                0.0 => 0.0,
                amount => of(row) * (ln_x + amount.ln()).exp(),
            };
            mixture.members.iter().zip(&mixed.ln_x).map(amount).collect::<Vec<_>>()
        });
        let terms: Vec<f64> = species
            .chain(minerals)
            .chain(reservoirs)
            .chain(mixtures)
            .chain([-problem.totals[j].to_f64()])
            .collect();
        let (sum, magnitude) = (terms.iter().sum::<f64>(), terms.iter().map(|t| t.abs()).sum::<f64>());
        let closed = sum.abs() <= 1e-12 * magnitude;
        if !closed {
            return Err(format!("balance {j} is off by {sum:e} of {magnitude:e}"));
        }
    }
    Ok(())
}
