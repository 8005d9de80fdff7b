//! What came out, under the names of the tableau.

use serde_json::{Map, Value, json};

use super::{Part, Tableau, log10};
use crate::solve::{Certificate, Converged};

/// The solution of a tableau, or why there is none.
#[derive(Debug, Clone)]
pub enum Answer {
    /// Certified.
    Solved(Box<Solution>),
    /// No composition has these totals; the combination of them that proves it.
    Infeasible(String),
    /// A phase would form without end; what supplies it.
    Unbounded(String),
}

/// A certified solution. Logarithms are decadic; that of an exact zero is minus infinity.
#[derive(Debug, Clone)]
pub struct Solution {
    /// Of each component. Shape `(n_components,)`.
    pub log_a: Vec<f64>,
    /// Of each species in the order of [`Tableau::species`]. Shape `(n_species,)`.
    pub log_c: Vec<f64>,
    /// Of each phase; of a mixture the sum over its members. Shape `(n_phases,)`.
    pub amounts: Vec<f64>,
    /// log10 of the saturation of each phase, 0 where it is present. Shape `(n_phases,)`.
    pub saturation: Vec<f64>,
    /// Mole fractions of the members of each phase, those it would have where it is absent.
    pub mole_fractions: Vec<Vec<f64>>,
    /// What is left over of each fixed component, so that its total is what species and phases hold and this; negative:
    /// supplied from outside to hold its activity. Shape `(n_fixed,)`.
    pub exchange: Vec<f64>,
    /// Names of the species that are exactly zero.
    pub zeros: Vec<String>,
    /// The same as the solver gives it.
    pub converged: Converged,
}

impl Answer {
    /// "solved", "solved with zeros", "infeasible" or "unbounded".
    #[must_use]
    pub fn status(&self) -> &'static str {
        match self {
            Self::Solved(solution) if solution.zeros.is_empty() => "solved",
            Self::Solved(_) => "solved with zeros",
            Self::Infeasible(_) => "infeasible",
            Self::Unbounded(_) => "unbounded",
        }
    }

    /// Why there is no solution; empty where there is one.
    #[must_use]
    pub fn reason(&self) -> &str {
        match self {
            Self::Solved(_) => "",
            Self::Infeasible(reason) | Self::Unbounded(reason) => reason,
        }
    }

    /// The solution, if there is one.
    #[must_use]
    pub fn solution(&self) -> Option<&Solution> {
        match self {
            Self::Solved(solution) => Some(solution),
            Self::Infeasible(_) | Self::Unbounded(_) => None,
        }
    }

    /// Everything as JSON, with the names of the tableau; what is infinite is `null`.
    #[must_use]
    pub fn to_json(&self, tableau: &Tableau) -> Value {
        let mut json = Map::new();
        json.insert("status".into(), self.status().into());
        let Some(solution) = self.solution() else {
            json.insert("reason".into(), self.reason().into());
            return Value::Object(json);
        };
        let rest = json!({
            "components": tableau.components(),
            "log_a": solution.log_a,
            "species": tableau.species(),
            "log_c": solution.log_c,
            "zeros": solution.zeros,
            "phases": tableau.phases().collect::<Vec<_>>(),
            "amounts": solution.amounts,
            "saturation": solution.saturation,
            "mole_fractions": solution.mole_fractions,
            "fixed": tableau.fixed().collect::<Vec<_>>(),
            "exchange": solution.exchange,
            "ionic_strength": solution.converged.ionic_strength,
            "iterations": solution.converged.effort.iterations,
            "certificate": certificate(&solution.converged.certificate),
        });
        if let Value::Object(rest) = rest {
            json.extend(rest);
        }
        Value::Object(json)
    }
}

impl Solution {
    pub(super) fn new(tableau: &Tableau, converged: Converged) -> Self {
        let is_zero = |(_, ln_c): &(&String, &f64)| **ln_c == f64::NEG_INFINITY;
        let zeros = tableau.species.iter().zip(&converged.ln_c).filter(is_zero).map(|(name, _)| name.clone());
        let phases = || tableau.phases.iter().map(|phase| phase.part);
        Self {
            log_a: converged.ln_a.iter().map(|ln_a| log10(*ln_a)).collect(),
            log_c: converged.ln_c.iter().map(|ln_c| log10(*ln_c)).collect(),
            amounts: phases()
                .map(|part| match part {
                    Part::Mineral(p) => converged.mineral_amount[p],
                    Part::Mixture(p) => converged.mixtures[p].amount,
                })
                .collect(),
            saturation: phases()
                .map(|part| match part {
                    Part::Mineral(p) => log10(converged.mineral_ln_saturation[p]),
                    Part::Mixture(p) => log10(converged.mixtures[p].ln_saturation),
                })
                .collect(),
            mole_fractions: phases()
                .map(|part| match part {
                    Part::Mineral(_) => vec![1.0],
                    Part::Mixture(p) => converged.mixtures[p].ln_x.iter().map(|ln_x| ln_x.exp()).collect(),
                })
                .collect(),
            exchange: converged.reservoir_amount.iter().map(|delivered| -delivered).collect(),
            zeros: zeros.collect(),
            converged,
        }
    }
}

fn certificate(certificate: &Certificate) -> Value {
    json!({
        "mass_balance": certificate.balance,
        "residual": certificate.residual,
        "log_c_error": certificate.ln_c_error.map(log10),
        "absent_saturation": log10(certificate.saturation),
        "present_saturation": log10(certificate.present_saturation),
        "smallest_amount": certificate.smallest_amount,
        "ionic_strength": certificate.ionic_strength,
        "ionic_strength_roots": certificate.ionic_strength_roots,
        "outside_validity": certificate.outside_validity,
        "condition": certificate.condition,
    })
}
