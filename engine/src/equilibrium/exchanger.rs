//! Ion exchangers.
//!
//! The sites X of an exchanger are a component that is conserved; which species carries it is the ledger's choice. The
//! activity of an ion on it is its equivalent fraction or its mole fraction:
//!
//! ```text
//! E_i = s_i n_i / Σ s n = s_i n_i / T     rows with amounts, shift ln(T / s_i), T the sites, s_i those that i takes
//! x_i = n_i / Σ n                         an ideal mixture, always there since nothing else holds the sites
//! ```
//!
//! An exchanger that is put into a water as it is found there starts in equilibrium with the water as analysed, which it
//! leaves as it is.

use super::assemble::System;
use super::beside::{ActsOn, Host, HostKind, Load, Member, Place, Stated, change, on_sites, site_components};
use super::error::EquilibriumError;
use super::gas_phase::moles;
use super::uncertainty::Variable;
use crate::chem::{Rational, Species, rational};
use crate::ledger::{Formation, Ledger};
use crate::physics::constants::LN_10;
use crate::quantity::Quantity;
use crate::solve::Settings;
use crate::text::list;
use crate::units::Unit;
use crate::water::Sample;
use crate::water::neighbour::{Convention, Exchanger};

/// An exchanger in indices, with what is on it at the start.
pub(super) fn read(
    given: &Exchanger,
    sample: &Sample,
    system: &System,
    settings: &Settings,
) -> Result<(Host, Vec<Load>), EquilibriumError> {
    let ledger = system.ledger();
    let site = site(given, ledger)?;
    let sites = given.capacity.moles.value();
    let is_mixture = given.convention == Convention::Vanselow;
    let mut members = Vec::new();
    for formed in on_sites(ledger, &given.name) {
        let Some(row) = system.formed_row(&formed.species).filter(|_| holds_an_ion(&formed.species)) else {
            continue;
        };
        let mut row = row.clone();
        if !is_mixture {
            row.ln_k += (sites / taken(&formed.species)).ln();
        }
        members.push(Member { species: formed.species.clone(), row });
    }
    let stated = Stated {
        quantity: given.capacity.moles.clone(),
        acts_on: ActsOn::Rows(0..members.len()),
        by: 1.0 / sites,
    };
    let host = Host {
        name: given.name.clone(),
        kind: HostKind::Exchanger(given.convention),
        members,
        place: if is_mixture { Place::Mixture(0) } else { Place::Rows(0) },
        stated: if is_mixture { vec![] } else { vec![stated] },
    };
    let loads = match &given.form {
        Some(form) => {
            let formed = holder(form, &given.name, ledger)?;
            let per_site = 1.0 / taken(&formed.species);
            let on_it = moles(sites * per_site, &[(&given.capacity.moles, per_site)])?;
            vec![(on_it, change(system, &formed.stoichiometry))]
        }
        None => in_equilibrium(given, site, &host, sample, system, settings)?,
    };
    Ok((host, loads))
}

/// Whether it is more than an empty site.
fn holds_an_ion(species: &Species) -> bool {
    species.composition().len() > 1
}

/// Sites that a mole takes.
fn taken(species: &Species) -> f64 {
    rational::to_f64(species.sites())
}

/// The component that its sites are, after a look at its reactions.
fn site(given: &Exchanger, ledger: &Ledger) -> Result<usize, EquilibriumError> {
    let name = &given.name;
    let fault = |why: String| EquilibriumError::Analyte { key: name.clone(), why };
    let species = on_sites(ledger, name);
    let holders = species.iter().filter(|formed| holds_an_ion(&formed.species)).count();
    if holders < 2 {
        let why = format!(
            "the ledger has no exchange reactions of it; give them by `.with_reaction`, such as \
             `2 NaX({name}) + Ca^2+ <=> CaX2({name}) + 2 Na^+`"
        );
        return Err(fault(why));
    }
    let mut sites: Vec<usize> = species.iter().flat_map(|formed| site_components(ledger, formed)).collect();
    sites.sort_unstable();
    sites.dedup();
    let [site] = sites.as_slice() else {
        let names: Vec<&str> = sites.iter().map(|j| ledger.formations().components[*j].key()).collect();
        return Err(fault(format!("no reaction leads from one to another of {}", list(&names))));
    };
    let one: Rational = 1.into();
    let several = species.iter().find(|formed| formed.species.sites() != one);
    if let (Convention::Gapon, Some(formed)) = (given.convention, several) {
        let why = format!(
            "by the Gapon convention every species takes one site: write `Ca0.5X({name})`, not `{}`",
            formed.species
        );
        return Err(fault(why));
    }
    Ok(*site)
}

/// The species in which an ion is on an exchanger.
pub(super) fn holder<'a>(
    ion: &str,
    exchanger: &str,
    ledger: &'a Ledger,
) -> Result<&'a Formation, EquilibriumError> {
    let fault = |why: String| EquilibriumError::Analyte { key: exchanger.into(), why };
    let wanted = Species::parse(ion).map_err(|error| fault(error.to_string()))?;
    let species = on_sites(ledger, exchanger);
    let holds = |formed: &&&Formation| {
        let own: Vec<_> =
            formed.species.composition().iter().filter(|(e, _)| *e != crate::chem::Element::SITE).collect();
        let wanted = wanted.composition();
        own.len() == wanted.len()
            && !own.is_empty()
            && own.iter().all(|(element, count)| {
                let ratio = own[0].1 / wanted[0].1;
                wanted.iter().any(|(other, there)| other == element && *count == there * ratio)
            })
    };
    species.iter().find(holds).copied().ok_or_else(|| {
        let there: Vec<&str> = species.iter().map(|formed| formed.species.key()).collect();
        fault(format!("no species of the ledger holds {wanted} on it; there are {}", list(&there)))
    })
}

/// What is on an exchanger in equilibrium with the water as analysed, one load for each species.
fn in_equilibrium(
    given: &Exchanger,
    site: usize,
    host: &Host,
    sample: &Sample,
    system: &System,
    settings: &Settings,
) -> Result<Vec<Load>, EquilibriumError> {
    let ledger = system.ledger();
    let found = super::equilibrate(&sample.with_treatments(vec![]), Some(ledger), settings)?;
    let (converged, analysed) = (found.converged(), found.system());
    let system = &system.at(found.temperature());
    let sites = given.capacity.moles.value();
    let site_column = system.components().iter().position(|own| *own == site);
    // Saturations at an activity of 1 of the sites, with their slopes.
    let mut there = Vec::new();
    for member in &host.members {
        let formed = ledger.formations().formation(&member.species).expect("members are formed");
        let row = system.formed_row(&member.species).expect("members are formed");
        let mut ln_saturation = row.ln_k + row.water * converged.ln_water_activity;
        let mut slopes = vec![(Variable::LnWaterActivity, row.water)];
        let mut on_sites = 0.0;
        for (k, nu) in &row.stoichiometry {
            let nu = rational::to_f64(*nu);
            if Some(*k) == site_column {
                on_sites = nu;
            } else {
                let own = analysed.component(system.component_species(*k));
                ln_saturation += nu * own.map_or(f64::NEG_INFINITY, |own| converged.ln_a[own]);
                slopes.extend(own.map(|own| (Variable::LnActivity(own), nu)));
            }
        }
        if ln_saturation.is_finite() {
            there.push((formed, ln_saturation, slopes, on_sites));
        }
    }
    if there.is_empty() {
        let why = format!(
            "the water has no ion that goes onto it; say by `form` which ion `{}` comes with",
            given.name
        );
        return Err(EquilibriumError::Analyte { key: given.name.clone(), why });
    }
    let terms: Vec<(f64, f64)> = there.iter().map(|(_, ln_s, _, on_sites)| (*ln_s, *on_sites)).collect();
    let ln_site = ln_site(&terms);
    let fractions: Vec<f64> = terms.iter().map(|(ln_s, nu)| (ln_s + nu * ln_site).exp()).collect();
    let mean: f64 = fractions.iter().zip(&terms).map(|(x, (_, nu))| x * nu).sum();
    // Moles of all species on it: of mole fractions, so many that the sites are taken.
    let taken_on_average: f64 =
        fractions.iter().zip(&there).map(|(x, (formed, ..))| x * taken(&formed.species)).sum();
    let mut loads = Vec::new();
    for (i, (formed, ..)) in there.iter().enumerate() {
        let s = taken(&formed.species);
        let amount = match given.convention {
            Convention::Vanselow => fractions[i] * sites / taken_on_average,
            _ => fractions[i] * sites / s,
        };
        // d ln x_i = du_i - ν_i Σ x du / Σ x ν; of mole fractions, less d ln of the mean number of sites.
        let weight = |l: usize| {
            let own = if l == i { 1.0 } else { 0.0 };
            let by_site = -fractions[l] / mean;
            let of_mean = |l: usize| fractions[l] * taken(&there[l].0.species) / taken_on_average;
            let mean_by_site: f64 = (0..there.len()).map(|k| of_mean(k) * terms[k].1).sum();
            match given.convention {
                Convention::Vanselow => own + terms[i].1 * by_site - of_mean(l) - mean_by_site * by_site,
                _ => own + terms[i].1 * by_site,
            }
        };
        let mut slopes = Vec::new();
        let mut constants = Vec::new();
        for (l, (other, _, own, _)) in there.iter().enumerate() {
            let factor = amount * weight(l);
            slopes.extend(own.iter().map(|(variable, slope)| (*variable, slope * factor)));
            constants
                .extend(log_k(ledger, other).into_iter().map(|(log_k, by)| (log_k, by * factor * LN_10)));
        }
        let by_water = found.quantity(amount, slopes);
        let mut partials = vec![(&by_water, 1.0), (&given.capacity.moles, amount / sites)];
        partials.extend(constants.iter().map(|(log_k, by)| (log_k, *by)));
        loads.push((moles(amount, &partials)?, change(system, &formed.stoichiometry)));
    }
    Ok(loads)
}

/// λ with `Σ exp(u + ν λ) = 1`, for (u, ν) with ν above zero: Newton's method on the ln of the sum, which is convex.
fn ln_site(terms: &[(f64, f64)]) -> f64 {
    let mut ln_site = terms.iter().map(|(u, nu)| -u / nu).fold(f64::INFINITY, f64::min);
    for _ in 0..100 {
        let parts: Vec<f64> = terms.iter().map(|(u, nu)| (u + nu * ln_site).exp()).collect();
        let sum: f64 = parts.iter().sum();
        let slope: f64 = parts.iter().zip(terms).map(|(part, (_, nu))| part * nu).sum::<f64>() / sum;
        let step = sum.ln() / slope;
        ln_site -= step;
        if step.abs() < 1e-15 * ln_site.abs().max(1.0) {
            break;
        }
    }
    ln_site
}

/// The constants behind a species, each a zero with the uncertainty of its log10 K, and their multiples.
fn log_k(ledger: &Ledger, formed: &Formation) -> Vec<(Quantity, f64)> {
    let constant = |(k, multiple): &(usize, Rational)| {
        let (_, reaction) = ledger.reactions().nth(*k)?;
        let parts = reaction.constant().ok()?.history.parts();
        Some((Quantity::from_parts(0.0, Unit::one(), parts), rational::to_f64(*multiple)))
    };
    formed.multiples.iter().filter_map(constant).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_activity_of_sites_makes_fractions_add_up() {
        let terms = [(3.0, 1.0), (-2.0, 2.0), (0.5, 1.0)];
        let found = ln_site(&terms);
        let sum: f64 = terms.iter().map(|(u, nu)| (u + nu * found).exp()).sum();
        assert!((sum - 1.0).abs() < 1e-14);
    }
}
