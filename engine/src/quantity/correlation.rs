//! Correlation declared between inputs, and the covariance of quantities that follows.
//!
//! Declared coefficients travel with the quantities they were declared for and with all that is computed from those,
//! as an immutable table. Nothing global changes, so a result depends on its own inputs only, on any number of threads.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use super::input::Key;
use super::{Quantity, QuantityError};

/// The same quantities, each pair of them correlated with coefficient `r`.
///
/// # Errors
///
/// As [`correlate_all`].
pub fn correlate(quantities: &[Quantity], r: f64) -> Result<Vec<Quantity>, QuantityError> {
    let n = quantities.len();
    let matrix: Vec<Vec<f64>> =
        (0..n).map(|i| (0..n).map(|j| if i == j { 1.0 } else { r }).collect()).collect();
    correlate_all(quantities, &matrix)
}

/// The same quantities with a whole matrix of correlation coefficients, shape `(n, n)`, symmetric, ones on the diagonal.
///
/// # Errors
///
/// [`QuantityError::Coefficient`] outside -1 to 1; [`QuantityError::MatrixShape`]; [`QuantityError::NotOneInput`] when
/// a quantity is not a single written value, or two are the same one; [`QuantityError::Impossible`] when no set of
/// numbers could be correlated like this; [`QuantityError::AlreadyCorrelated`] when a pair was given another
/// coefficient before.
pub fn correlate_all(quantities: &[Quantity], matrix: &[Vec<f64>]) -> Result<Vec<Quantity>, QuantityError> {
    check_matrix(matrix, quantities.len())?;
    let mut declared = BTreeMap::new();
    for (i, a) in quantities.iter().enumerate() {
        let (key_a, sign_a) = single_input(a)?;
        for (j, b) in quantities.iter().enumerate().skip(i + 1) {
            let (key_b, sign_b) = single_input(b)?;
            if key_a == key_b {
                return Err(QuantityError::NotOneInput { label: label(b), n_inputs: 1 });
            }
            declared.insert(pair(key_a, key_b), matrix[i][j] * sign_a * sign_b);
        }
    }
    let mut table = Correlations::of(declared);
    table.check_possible()?;
    for quantity in quantities {
        table = table.union(&quantity.correlations)?;
    }
    Ok(quantities
        .iter()
        .map(|quantity| Quantity { correlations: table.clone(), ..quantity.clone() })
        .collect())
}

/// The correlation coefficient of two quantities, from shared inputs and declared correlation.
///
/// # Returns
///
/// `None` when either has no uncertainty, stated or at all.
///
/// # Errors
///
/// When the correlations declared for the two contradict each other.
pub fn correlation(a: &Quantity, b: &Quantity) -> Result<Option<f64>, QuantityError> {
    let table = a.correlations.union(&b.correlations)?;
    let (Some(sigma_a), Some(sigma_b)) = (a.sigma(), b.sigma()) else { return Ok(None) };
    if sigma_a == 0.0 || sigma_b == 0.0 {
        return Ok(None);
    }
    Ok(Some((covariance(a, b, &table) / sigma_a / sigma_b).clamp(-1.0, 1.0)))
}

/// The covariance of two quantities, over the inputs that state their uncertainty.
///
/// The order in which inputs came into being leaves no trace.
pub(super) fn covariance(a: &Quantity, b: &Quantity, table: &Correlations) -> f64 {
    let mut terms = shared_terms(a, b);
    if table.0.is_some() {
        terms.extend(declared_terms(a, b, table));
    }
    sum_by_size(terms)
}

/// The terms of the inputs that both depend on. Parts are sorted by input, so one walk along both finds them.
fn shared_terms(a: &Quantity, b: &Quantity) -> Vec<f64> {
    let mut deviations_b = deviations(b).peekable();
    let term = |(key, deviation): (&Key, f64)| {
        while deviations_b.next_if(|(other, _)| *other < key).is_some() {}
        let (_, other) = deviations_b.next_if(|(other, _)| *other == key)?;
        Some(deviation * other)
    };
    deviations(a).filter_map(term).collect()
}

/// The terms of different inputs declared to be correlated.
fn declared_terms(a: &Quantity, b: &Quantity, table: &Correlations) -> Vec<f64> {
    let deviations_b: BTreeMap<&Key, f64> = deviations(b).collect();
    let mut terms = Vec::new();
    for (key, deviation) in deviations(a) {
        let partners = table.partners(key).filter_map(|(partner, r)| Some(r * deviations_b.get(partner)?));
        terms.extend(partners.map(|other| deviation * other));
    }
    terms
}

/// The sum in one order whatever the order given, so that it is the same to the last bit.
pub(super) fn sum_by_size(mut terms: Vec<f64>) -> f64 {
    terms.sort_by(f64::total_cmp);
    terms.iter().sum()
}

/// Each stated input with (∂y/∂x) u(x).
pub(super) fn deviations(quantity: &Quantity) -> impl Iterator<Item = (&Key, f64)> {
    let stated = |part: &super::Part| part.input.sigma().map(|sigma| part.sensitivity * sigma);
    quantity.parts.iter().filter_map(move |part| Some((part.input.key(), stated(part)?)))
}

type Pair = (Key, Key);

/// Declared coefficients by pair of inputs. Each pair is held both ways round, so that partners are found at once.
#[derive(Clone, Debug, Default)]
pub(super) struct Correlations(Option<Arc<BTreeMap<Pair, f64>>>);

impl Correlations {
    pub fn none() -> Self {
        Self(None)
    }

    fn of(declared: BTreeMap<Pair, f64>) -> Self {
        if declared.is_empty() {
            return Self::none();
        }
        let other_way = declared.iter().map(|((a, b), r)| ((b.clone(), a.clone()), *r)).collect::<Vec<_>>();
        let mut both_ways = declared;
        both_ways.extend(other_way);
        Self(Some(Arc::new(both_ways)))
    }

    /// What both tables declare.
    pub fn union(&self, other: &Self) -> Result<Self, QuantityError> {
        let (one, two) = match (&self.0, &other.0) {
            (Some(one), Some(two)) if !Arc::ptr_eq(one, two) => (one, two),
            (None, _) => return Ok(other.clone()),
            _ => return Ok(self.clone()),
        };
        let mut both = BTreeMap::clone(one);
        for (pair, &r) in two.iter() {
            match both.insert(pair.clone(), r) {
                Some(before) if before != r => {
                    return Err(QuantityError::AlreadyCorrelated { before, now: r });
                }
                _ => {}
            }
        }
        if both.len() == one.len() {
            return Ok(self.clone());
        }
        if both.len() == two.len() {
            return Ok(other.clone());
        }
        let union = Self(Some(Arc::new(both)));
        union.check_possible()?;
        Ok(union)
    }

    /// The coefficient declared for two different inputs, 0 where none was.
    pub fn coefficient(&self, a: &Key, b: &Key) -> f64 {
        self.0.as_ref().and_then(|table| table.get(&(a.clone(), b.clone()))).copied().unwrap_or(0.0)
    }

    /// The inputs correlated with one, each with its coefficient.
    pub fn partners<'a>(&'a self, key: &'a Key) -> impl Iterator<Item = (&'a Key, f64)> {
        self.0.iter().flat_map(move |table| {
            let lowest = (key.clone(), Key::Named(String::new()));
            table.range(lowest..).take_while(move |((a, _), _)| a == key).map(|((_, b), r)| (b, *r))
        })
    }

    fn check_possible(&self) -> Result<(), QuantityError> {
        let Some(table) = &self.0 else { return Ok(()) };
        let keys: BTreeSet<&Key> = table.keys().map(|(a, _)| a).collect();
        let coefficient = |a: &Key, b: &Key| if a == b { 1.0 } else { self.coefficient(a, b) };
        let matrix = keys.iter().map(|a| keys.iter().map(|b| coefficient(a, b)).collect()).collect();
        if is_positive_semidefinite(matrix) { Ok(()) } else { Err(QuantityError::Impossible) }
    }
}

fn pair(a: &Key, b: &Key) -> Pair {
    if a < b { (a.clone(), b.clone()) } else { (b.clone(), a.clone()) }
}

/// The one input of a quantity, and the sign of the sensitivity to it.
fn single_input(quantity: &Quantity) -> Result<(&Key, f64), QuantityError> {
    match quantity.parts() {
        [part] => Ok((part.input.key(), part.sensitivity.signum())),
        parts => Err(QuantityError::NotOneInput { label: label(quantity), n_inputs: parts.len() }),
    }
}

fn label(quantity: &Quantity) -> String {
    match quantity.parts() {
        [part] => part.input.label().to_owned(),
        _ => quantity.to_string(),
    }
}

fn check_matrix(matrix: &[Vec<f64>], n: usize) -> Result<(), QuantityError> {
    let is_square = matrix.len() == n && matrix.iter().all(|row| row.len() == n);
    let is_symmetric = || (0..n).all(|i| matrix[i][i] == 1.0 && (0..i).all(|j| matrix[i][j] == matrix[j][i]));
    if let Some(&r) = matrix.iter().flatten().find(|r| !(-1.0..=1.0).contains(*r)) {
        return Err(QuantityError::Coefficient { r });
    }
    if n < 2 || !is_square || !is_symmetric() {
        return Err(QuantityError::MatrixShape { n });
    }
    Ok(())
}

/// Outer-product Cholesky factorisation with the largest pivot first (Higham 2002, section 10.3): a symmetric matrix is
/// positive semidefinite when no pivot turns negative and nothing is left once the pivots are used up.
fn is_positive_semidefinite(mut a: Vec<Vec<f64>>) -> bool {
    const ROUNDING: f64 = 1e-9;
    let mut left: Vec<usize> = (0..a.len()).collect();
    while let Some(position) =
        (0..left.len()).max_by(|&i, &j| a[left[i]][left[i]].total_cmp(&a[left[j]][left[j]]))
    {
        let pivot = left.swap_remove(position);
        if a[pivot][pivot] <= ROUNDING {
            left.push(pivot);
            return left.iter().all(|&i| left.iter().all(|&j| a[i][j].abs() <= ROUNDING));
        }
        for &i in &left {
            for &j in &left {
                a[i][j] -= a[i][pivot] * a[pivot][j] / a[pivot][pivot];
            }
        }
    }
    true
}
