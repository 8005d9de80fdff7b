//! The constant of an equation as a sum of other constants.
//!
//! The multiples are found by exact elimination. Where several sums reach the equation they differ by cycles, and one
//! has to be chosen:
//!
//! - If the uncertainties of enough constants are stated, the sum of least variance is taken (the best linear unbiased
//!   estimate, by the Gauss-Markov theorem): a weighted mean of all routes. Its weights are rounded to a millionth. The
//!   variance is flat there, and with exact rationals the equation stays exactly balanced.
//! - Otherwise the route with fewest constants is taken.
//!
//! Constants that are functions of temperature are preferred to those known at one temperature only.

use std::collections::{BTreeSet, VecDeque};

use num_traits::CheckedDiv;

use super::elimination::{Sparse, TooLarge, subtract};
use super::least_squares::{Scatter, Weights};
use super::ledger::LedgerError;
use super::network::{Eliminated, Network};
use crate::chem::{Constant, Equation, EquationError, Rational, Reaction, ReactionError, rational};
use crate::units::Temperature;

/// Weights are whole multiples of this part of one.
const PARTS: i64 = 1_000_000;
/// Beyond this a weight is absurd.
const MOST_PARTS: f64 = 1e15;

/// A combined constant, and the routes it could have been reached by.
#[derive(Debug, Clone)]
pub struct Combined {
    /// The equation asked for with its constant. Where there was a choice, its history says what was chosen.
    pub reaction: Reaction,
    /// `None` where only one sum reaches the equation.
    pub routes: Option<Routes>,
}

/// Several sums of constants that reach one equation.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Routes {
    /// How many are independent of each other.
    pub number: usize,
    /// The lowest log10 K of a single route, at 25 degC.
    pub lowest: f64,
    /// The highest.
    pub highest: f64,
    /// Largest misclosure of a cycle between them, in its standard deviations; `None` if uncertainties are not stated.
    pub sigmas: Option<f64>,
    /// Whether the routes were weighted; otherwise the one with fewest constants was taken.
    pub weighted: bool,
}

/// The constant of an equation as a sum of reactions; see [`combine`](self) for the choice among several.
///
/// # Errors
///
/// [`LedgerError::Unreachable`] with the species no combination accounts for, or why the constants do not add.
pub fn combine(target: &str, reactions: &[&Reaction]) -> Result<Reaction, LedgerError> {
    Ok(combine_routes(target, reactions)?.reaction)
}

/// As [`combine`], with what is to be said of the routes.
///
/// # Errors
///
/// As [`combine`].
pub fn combine_routes(target: &str, reactions: &[&Reaction]) -> Result<Combined, LedgerError> {
    let target = Equation::parse(target).map_err(ReactionError::from)?;
    let states_sigma = |reaction: &Reaction| reaction.log_k().is_ok_and(|log_k| log_k.sigma().is_some());
    let is_function = |reaction: &Reaction| reaction.constant().is_ok_and(|c| c.log_k.only_at().is_none());
    let select = |keep: &dyn Fn(&Reaction) -> bool| -> Vec<&Reaction> {
        reactions.iter().copied().filter(|reaction| keep(reaction)).collect()
    };
    let selections = [
        (true, select(&|reaction| states_sigma(reaction) && is_function(reaction))),
        (true, select(&states_sigma)),
        (false, select(&is_function)),
        (false, select(&|_| true)),
    ];
    let mut failure = None;
    for (weighted, selection) in &selections {
        match combine_over(&target, selection, *weighted) {
            Ok(combined) => return Ok(combined),
            // What all constants together say is the fullest account of what is missing.
            Err(error @ LedgerError::Unreachable { .. }) => failure = failure.or(Some(error)),
            Err(error) => failure = Some(error),
        }
        if let Some(LedgerError::Unreachable { .. }) = failure
            && selection.len() < reactions.len()
        {
            failure = None;
        }
    }
    Err(failure.expect("the last selection holds every reaction"))
}

fn combine_over(target: &Equation, reactions: &[&Reaction], weighted: bool) -> Result<Combined, LedgerError> {
    let network = Network::new(reactions.to_vec());
    let eliminated = network.eliminate(0..reactions.len())?;
    let first = network.reach(&eliminated.echelon, target)?;
    let cycles = connected(&eliminated, &first);
    if cycles.is_empty() {
        return Ok(Combined { reaction: sum(target, &first, reactions)?, routes: None });
    }
    let scatter = Scatter::of(reactions, Temperature::REFERENCE);
    let multiples = match weighted {
        true => least_variance(&first, &cycles, &scatter)
            .map_err(|TooLarge| LedgerError::TooLarge(target.to_string()))?,
        false => shortest(first.clone(), &cycles),
    };
    let routes = compare(&first, &cycles, &network, weighted.then_some(&scatter));
    let reaction = sum(target, &multiples, reactions)?;
    let constant = reaction.constant()?;
    let history = constant.history.converted(routes.to_string());
    Ok(Combined {
        reaction: Reaction::of(target.clone(), Constant { history, ..constant.clone() }),
        routes: Some(routes),
    })
}

/// The cycles that share a reaction with the route, or with a cycle that does.
fn connected(eliminated: &Eliminated, route: &Sparse) -> Vec<Sparse> {
    let mut reached: BTreeSet<usize> = route.keys().copied().collect();
    let mut waiting: Vec<&Sparse> = eliminated.cycles.iter().map(|(_, cycle)| cycle).collect();
    let mut found = Vec::new();
    loop {
        let (touching, rest): (Vec<_>, Vec<_>) =
            waiting.into_iter().partition(|cycle| cycle.keys().any(|index| reached.contains(index)));
        if touching.is_empty() {
            return found;
        }
        reached.extend(touching.iter().flat_map(|cycle| cycle.keys().copied()));
        found.extend(touching.into_iter().cloned());
        waiting = rest;
    }
}

/// n = n₀ + Cᵀ t with t = -(C Σ Cᵀ)⁻¹ C Σ n₀.
fn least_variance(route: &Sparse, cycles: &[Sparse], scatter: &Scatter) -> Result<Sparse, TooLarge> {
    let own = scatter.combined(route);
    let weights = Weights::of(cycles.iter().map(|cycle| scatter.combined(cycle)).collect());
    let covariance: Vec<f64> =
        weights.cycles.iter().map(|cycle| super::least_squares::dot(cycle, &own)).collect();
    let mut best = route.clone();
    for (cycle, share) in cycles.iter().zip(weights.times(&covariance)) {
        let parts = (share * PARTS as f64).round();
        if parts.abs() > MOST_PARTS {
            return Err(TooLarge);
        }
        subtract(&mut best, cycle, Rational::new(parts as i64, PARTS))?;
    }
    Ok(best)
}

/// Exchanges one constant of the route for another as long as that makes it shorter.
fn shortest(mut route: Sparse, cycles: &[Sparse]) -> Sparse {
    loop {
        let shorter = exchanges(&route, cycles).find(|other| other.len() < route.len());
        match shorter {
            Some(other) => route = other,
            None => return route,
        }
    }
}

/// Routes that do without one of the constants of this one, by going round a cycle; absurdly large ones are passed over.
fn exchanges(route: &Sparse, cycles: &[Sparse]) -> impl Iterator<Item = Sparse> {
    cycles.iter().flat_map(move |cycle| {
        let shared = route.iter().filter_map(|(index, n)| Some((n, cycle.get(index)?)));
        shared.filter_map(move |(n, in_cycle)| {
            let mut other = route.clone();
            subtract(&mut other, cycle, n.checked_div(in_cycle)?).ok()?;
            Some(other)
        })
    })
}

fn compare(route: &Sparse, cycles: &[Sparse], network: &Network<'_>, scatter: Option<&Scatter>) -> Routes {
    let total = |multiples: &Sparse| -> f64 {
        let terms =
            multiples.iter().map(|(k, n)| rational::to_f64(*n) * network.log_k(*k, Temperature::REFERENCE));
        terms.sum()
    };
    let values: Vec<f64> =
        exchanges(route, cycles).map(|other| total(&other)).chain([total(route)]).collect();
    let sigmas = scatter.map(|scatter| {
        let in_sigmas = cycles.iter().map(|cycle| total(cycle).abs() / scatter.sigma(cycle));
        in_sigmas.filter(|sigmas| !sigmas.is_nan()).fold(0.0, f64::max)
    });
    Routes {
        number: cycles.len() + 1,
        lowest: values.iter().copied().fold(f64::INFINITY, f64::min),
        highest: values.iter().copied().fold(f64::NEG_INFINITY, f64::max),
        sigmas,
        weighted: scatter.is_some(),
    }
}

/// The sum of reactions, written as the target. A sum that would cancel on the way is put off.
fn sum(target: &Equation, multiples: &Sparse, reactions: &[&Reaction]) -> Result<Reaction, LedgerError> {
    let terms = multiples.iter().map(|(index, multiple)| reactions[*index].times(*multiple));
    let mut waiting = terms.collect::<Result<VecDeque<_>, _>>()?;
    let nothing = || LedgerError::Unreachable { target: target.to_string(), left_over: vec![] };
    let mut sum = waiting.pop_front().ok_or_else(nothing)?;
    let mut put_off = 0;
    while let Some(term) = waiting.pop_front() {
        match sum.plus(&term) {
            Ok(more) => (sum, put_off) = (more, 0),
            Err(ReactionError::Equation(EquationError::Vanishes)) if put_off < waiting.len() => {
                waiting.push_back(term);
                put_off += 1;
            }
            Err(error) => return Err(error.into()),
        }
    }
    Ok(Reaction::of(target.clone(), sum.constant()?.clone()))
}

impl Routes {
    /// How far single routes lie apart, log10 units.
    #[must_use]
    pub fn spread(&self) -> f64 {
        self.highest - self.lowest
    }
}

impl std::fmt::Display for Routes {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let chosen =
            if self.weighted { "weighted by least variance" } else { "the one with fewest constants taken" };
        write!(
            f,
            "{} independent routes, {chosen}; singly they give log K {:.3} to {:.3} at 25 degC",
            self.number, self.lowest, self.highest
        )?;
        self.sigmas.map_or(Ok(()), |sigmas| write!(f, ", at most {sigmas:.1} standard deviations apart"))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::named::{Named, Value};
    use approx::assert_abs_diff_eq;

    fn reaction(equation: &str, log_k: &str) -> Reaction {
        let options = Named::new([("log_k".to_string(), Value::Text(log_k.into()))].into());
        Reaction::read(equation, None, options, None).unwrap()
    }

    const K1: &str = "CO2(aq) + H2O <=> HCO3^- + H^+";
    const K2: &str = "HCO3^- <=> CO3^2- + H^+";
    const BOTH: &str = "CO2(aq) + H2O <=> CO3^2- + 2 H^+";

    #[test]
    fn two_routes_are_weighted_by_their_variance() {
        // Directly -16.60 +/- 0.2, in two steps -16.68 +/- 0.1: weights 1/0.04 and 1/0.01, so 0.2 and 0.8.
        let steps = [
            reaction(K1, "-6.35 +/- 0.06"),
            reaction(K2, "-10.33 +/- 0.08"),
            reaction(BOTH, "-16.60 +/- 0.2"),
        ];
        let combined = combine_routes(BOTH, &steps.iter().collect::<Vec<_>>()).unwrap();
        let log_k = combined.reaction.log_k().unwrap();
        assert_abs_diff_eq!(log_k.value(), 0.8 * -16.68 + 0.2 * -16.60, epsilon = 1e-6);
        assert_abs_diff_eq!(
            log_k.sigma().unwrap(),
            (1.0_f64 / (1.0 / 0.04 + 1.0 / 0.01)).sqrt(),
            epsilon = 1e-9
        );
        let routes = combined.routes.unwrap();
        assert_eq!(
            routes.to_string(),
            "2 independent routes, weighted by least variance; singly they give log K -16.680 to -16.600 at 25 degC, \
             at most 0.4 standard deviations apart"
        );
        assert_eq!(combined.reaction.constant().unwrap().history.conversions(), [routes.to_string()]);
    }

    #[test]
    fn without_uncertainties_the_shortest_route_is_taken() {
        let steps = [reaction(K1, "-6.35"), reaction(K2, "-10.33"), reaction(BOTH, "-16.60")];
        let combined = combine_routes(BOTH, &steps.iter().collect::<Vec<_>>()).unwrap();
        assert_eq!(combined.reaction.log_k().unwrap().value(), -16.60);
        assert!(combined.routes.unwrap().to_string().contains("the one with fewest constants taken"));
    }

    #[test]
    fn what_no_combination_reaches_is_named() {
        let error = combine("HCO3^- <=> CO3^2- + H^+", &[&reaction(K1, "-6.35 +/- 0.1")]).unwrap_err();
        assert_eq!(
            error.to_string(),
            "`HCO3^- <=> CO3^2- + H^+` cannot be reached: no combination of the constants accounts for `CO3^2-`"
        );
    }
}
