//! Where the uncertainty of a quantity comes from.

use super::correlation::{covariance, deviations, sum_by_size};
use super::{Part, Quantity};

/// The shares of the variance by input.
#[derive(Clone, Debug, PartialEq)]
pub struct Budget {
    /// The inputs that state their uncertainty, largest share first.
    pub rows: Vec<BudgetRow>,
    /// How many inputs do not.
    pub n_unstated: usize,
    /// The five of these that the quantity is most sensitive to.
    pub most_sensitive_unstated: Vec<UnstatedInput>,
}

/// One input with a stated uncertainty.
#[derive(Clone, Debug, PartialEq)]
pub struct BudgetRow {
    /// The input.
    pub label: String,
    /// ∂y/∂x, in units of y per unit of x.
    pub sensitivity: f64,
    /// u(x), in the input's own unit.
    pub sigma: f64,
    /// |∂y/∂x| u(x), in the unit of y.
    pub contribution: f64,
    /// Part of the variance of y. The shares sum to 1 (all are 0 where the variance is 0); declared correlation can
    /// make one negative.
    pub share: f64,
}

/// One input without a stated uncertainty.
#[derive(Clone, Debug, PartialEq)]
pub struct UnstatedInput {
    /// The input.
    pub label: String,
    /// ∂y/∂x, in units of y per unit of x.
    pub sensitivity: f64,
}

pub(super) fn budget(quantity: &Quantity) -> Budget {
    let unstated = unstated(quantity);
    Budget {
        rows: rows(quantity),
        n_unstated: unstated.len(),
        most_sensitive_unstated: unstated.into_iter().take(N_UNSTATED_SHOWN).collect(),
    }
}

const N_UNSTATED_SHOWN: usize = 5;

fn rows(quantity: &Quantity) -> Vec<BudgetRow> {
    let covariances: Vec<(&Part, f64, f64)> = quantity
        .parts
        .iter()
        .filter_map(|part| Some((part, part.input.sigma()?, covariance_with(quantity, part)?)))
        .collect();
    let variance = covariance(quantity, quantity, &quantity.correlations);
    let mut rows: Vec<BudgetRow> = covariances
        .into_iter()
        .map(|(part, sigma, covariance)| BudgetRow {
            label: part.input.label().to_owned(),
            sensitivity: part.sensitivity,
            sigma,
            contribution: part.sensitivity.abs() * sigma,
            share: if variance > 0.0 { covariance / variance } else { 0.0 },
        })
        .collect();
    rows.sort_by(|a, b| b.share.abs().total_cmp(&a.share.abs()).then_with(|| a.label.cmp(&b.label)));
    rows
}

/// What one input brings to the variance: its own square, and half of each cross term it takes part in.
fn covariance_with(quantity: &Quantity, part: &Part) -> Option<f64> {
    let deviation = part.sensitivity * part.input.sigma()?;
    let partners = quantity
        .correlations
        .partners(part.input.key())
        .filter_map(|(key, r)| Some(r * deviations(quantity).find(|(other, _)| *other == key)?.1))
        .collect();
    Some(deviation * (deviation + sum_by_size(partners)))
}

fn unstated(quantity: &Quantity) -> Vec<UnstatedInput> {
    let mut unstated: Vec<UnstatedInput> = quantity
        .parts
        .iter()
        .filter(|part| part.input.sigma().is_none())
        .map(|part| UnstatedInput { label: part.input.label().to_owned(), sensitivity: part.sensitivity })
        .collect();
    unstated.sort_by(|a, b| {
        b.sensitivity.abs().total_cmp(&a.sensitivity.abs()).then_with(|| a.label.cmp(&b.label))
    });
    unstated
}
