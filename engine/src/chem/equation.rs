//! Reaction equations: species with stoichiometric coefficients, balanced when they are made.
//!
//! Sign convention of the whole engine, stated once: **products are positive, reactants negative**. An equation is a
//! vector, so equations add and scale; species that cancel leave.

use std::collections::BTreeMap;
use std::fmt;

use num_traits::CheckedMul;

use super::element::Element;
use super::formula::{FormulaError, Species};
use super::rational::{self, Rational};

/// A balanced equation.
#[derive(Clone, PartialEq, Eq)]
pub struct Equation {
    /// In the order written, reactants first; no species twice, no zero.
    terms: Vec<(Species, Rational)>,
}

/// Why a text is no balanced equation.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum EquationError {
    /// No arrow, or more than one.
    #[error("`{0}` needs one arrow between its sides: write `A + B <=> C` (`⇌` and `=` are read too)")]
    Arrow(String),
    /// A side without a species.
    #[error("the {side} side of `{equation}` is empty")]
    EmptySide {
        /// `left` or `right`.
        side: &'static str,
        /// The equation as written.
        equation: String,
    },
    /// A coefficient that is no number.
    #[error("`{0}` is no coefficient: write `2`, `0.5` or `1/2` before the formula")]
    Coefficient(String),
    /// A species that cannot be read.
    #[error(transparent)]
    Formula(#[from] FormulaError),
    /// Elements or charge differ between the sides.
    #[error("`{equation}` is not balanced: {imbalance}")]
    Unbalanced {
        /// The equation as written.
        equation: String,
        /// What is short, by how much, on which side.
        imbalance: Imbalance,
    },
    /// Everything cancels.
    #[error("nothing is left of the equation: its species cancel")]
    Vanishes,
    /// Coefficients beyond what is counted exactly.
    #[error("its coefficients are too large, or have too many digits, to be counted exactly")]
    TooLarge,
}

/// What an equation lacks: right side minus left side.
#[derive(Debug, Clone, PartialEq)]
pub struct Imbalance {
    elements: Vec<(Element, Rational)>,
    charge: Rational,
}

impl Equation {
    /// Reads and balances an equation such as `CO2(aq) + H2O <=> HCO3^- + H^+`.
    ///
    /// # Errors
    ///
    /// Returns a missing arrow, an unreadable species or coefficient, or the imbalance of elements and charge with,
    /// where `H2O`, `H^+` or `e^-` would settle it, how many.
    ///
    /// # Examples
    ///
    /// ```
    /// use lysocline_engine::chem::Equation;
    ///
    /// assert!(Equation::parse("CO2(aq) + H2O ⇌ HCO3^- + H^+").is_ok());
    /// let short = Equation::parse("CO2(aq) <=> HCO3^- + H^+").unwrap_err();
    /// assert!(short.to_string().ends_with("add `H2O` to the left side"));
    /// ```
    pub fn parse(text: &str) -> Result<Self, EquationError> {
        let (left, right) = sides(text)?;
        let mut terms = Vec::new();
        for (side, name, sign) in [(left, "left", -1), (right, "right", 1)] {
            if side.trim().is_empty() {
                return Err(EquationError::EmptySide { side: name, equation: text.trim().into() });
            }
            for term in split_terms(side) {
                let (species, coefficient) = read_term(term)?;
                terms.push((species, coefficient * sign));
            }
        }
        Self::balanced(terms).map_err(|error| match error {
            EquationError::Unbalanced { imbalance, .. } => {
                EquationError::Unbalanced { equation: text.trim().into(), imbalance }
            }
            other => other,
        })
    }

    /// An equation from its terms, products positive.
    ///
    /// # Errors
    ///
    /// Returns the imbalance, [`EquationError::Vanishes`] if the terms cancel, or [`EquationError::TooLarge`].
    pub fn balanced(terms: Vec<(Species, Rational)>) -> Result<Self, EquationError> {
        if !are_countable(&terms) {
            return Err(EquationError::TooLarge);
        }
        let equation = Self { terms: merge(terms) };
        if equation.terms.is_empty() {
            return Err(EquationError::Vanishes);
        }
        let imbalance = Imbalance::of(&equation.terms);
        if imbalance.is_nothing() {
            Ok(equation)
        } else {
            Err(EquationError::Unbalanced { equation: equation.to_string(), imbalance })
        }
    }

    /// Species with their coefficients, in the order written; products positive.
    #[must_use]
    pub fn terms(&self) -> &[(Species, Rational)] {
        &self.terms
    }

    /// The coefficient of a species; 0 if it takes no part.
    #[must_use]
    pub fn coefficient(&self, species: &Species) -> Rational {
        let found = self.terms.iter().find(|(present, _)| present == species);
        found.map_or_else(|| 0.into(), |(_, coefficient)| *coefficient)
    }

    /// Moles of gas made, less moles of gas used up.
    #[must_use]
    pub fn gas_made(&self) -> Rational {
        self.terms.iter().filter(|(species, _)| species.is_gas()).map(|(_, coefficient)| *coefficient).sum()
    }

    /// The equation `multiple` times over; a negative multiple writes it the other way round.
    ///
    /// # Errors
    ///
    /// [`EquationError::Vanishes`] if `multiple` is zero, [`EquationError::TooLarge`] if it is not countable.
    pub fn times(&self, multiple: Rational) -> Result<Self, EquationError> {
        let scaled = |(species, coefficient): &(Species, Rational)| {
            Some((species.clone(), coefficient.checked_mul(&multiple)?))
        };
        let mut terms: Vec<_> =
            self.terms.iter().map(scaled).collect::<Option<_>>().ok_or(EquationError::TooLarge)?;
        // Reactants come first, as they would be written.
        terms.sort_by_key(|(_, coefficient)| *coefficient > 0.into());
        Self::balanced(terms)
    }

    /// The sum of two equations.
    ///
    /// # Errors
    ///
    /// [`EquationError::Vanishes`] if everything cancels.
    pub fn plus(&self, other: &Self) -> Result<Self, EquationError> {
        Self::balanced(self.terms.iter().chain(&other.terms).cloned().collect())
    }

    /// With subscripts, superscripts and `⇌`.
    #[must_use]
    pub fn pretty(&self) -> String {
        self.written(" ⇌ ", Species::pretty)
    }

    fn written(&self, arrow: &str, formula: impl Fn(&Species) -> String) -> String {
        let side = |sign: i64| {
            let terms = self.terms.iter().filter(|(_, c)| (*c * sign) > 0.into());
            let terms: Vec<String> = terms
                .map(|(species, c)| match rational::text(*c * sign).as_str() {
                    "1" => formula(species),
                    number => format!("{number} {}", formula(species)),
                })
                .collect();
            terms.join(" + ")
        };
        format!("{}{arrow}{}", side(-1), side(1))
    }
}

impl fmt::Display for Equation {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.written(" <=> ", |species| species.key().to_string()))
    }
}

impl fmt::Debug for Equation {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        fmt::Display::fmt(self, f)
    }
}

impl Imbalance {
    fn of(terms: &[(Species, Rational)]) -> Self {
        let mut elements = BTreeMap::<Element, Rational>::new();
        let mut charge = Rational::from_integer(0);
        for (species, coefficient) in terms {
            charge += *coefficient * i64::from(species.charge());
            for (element, count) in species.composition() {
                *elements.entry(*element).or_insert_with(|| 0.into()) += coefficient * count;
            }
        }
        elements.retain(|_, difference| *difference != 0.into());
        Self { elements: elements.into_iter().collect(), charge }
    }

    fn is_nothing(&self) -> bool {
        self.elements.is_empty() && self.charge == 0.into()
    }

    /// How many H2O, H^+ and e^- would settle it, positive on the right; `None` if another element is off.
    fn cure(&self) -> Option<[(&'static str, Rational); 3]> {
        if self.elements.iter().any(|(element, _)| *element != Element::H && *element != Element::O) {
            return None;
        }
        let short = |element| -> Rational {
            let found = self.elements.iter().find(|(e, _)| *e == element);
            -found.map_or_else(|| 0.into(), |(_, difference)| *difference)
        };
        let water = short(Element::O);
        let protons = short(Element::H) - water * 2;
        let electrons = self.charge + protons;
        Some([("H2O", water), ("H^+", protons), ("e^-", electrons)])
    }
}

impl fmt::Display for Imbalance {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let side = |difference: Rational| if difference > 0.into() { "left" } else { "right" };
        let size = |difference: Rational| {
            rational::text(if difference < 0.into() { -difference } else { difference })
        };
        let mut faults: Vec<String> = self
            .elements
            .iter()
            .map(|(element, d)| format!("the {} side is short of {} {element}", side(*d), size(*d)))
            .collect();
        if self.charge != 0.into() {
            let sign = if self.charge > 0.into() { "+" } else { "-" };
            faults.push(format!("the charges differ: the right side has {sign}{} more", size(self.charge)));
        }
        f.write_str(&faults.join(", "))?;
        let Some(cure) = self.cure() else { return Ok(()) };
        let additions: Vec<String> = cure
            .iter()
            .filter(|(_, amount)| *amount != 0.into())
            .map(|(species, amount)| {
                let number = match size(*amount).as_str() {
                    "1" => String::new(),
                    number => format!("{number} "),
                };
                format!(
                    "`{number}{species}` to the {} side",
                    if *amount > 0.into() { "right" } else { "left" }
                )
            })
            .collect();
        write!(f, "; add {}", additions.join(" and "))
    }
}

/// Whether sums over atoms and charges stay within 64 bits when brought to one denominator.
fn are_countable(terms: &[(Species, Rational)]) -> bool {
    const LARGEST_DENOMINATOR: i64 = 1_000_000_000;
    const LARGEST_SUM: f64 = 1e18;
    let mut denominator = 1;
    let mut sum = 0.0;
    for (species, coefficient) in terms {
        let counts = species.composition().iter().map(|(_, count)| *count);
        for count in counts.chain([1.into(), i64::from(species.charge()).into()]) {
            let Some(own) = coefficient.denom().checked_mul(count.denom()) else { return false };
            if own > LARGEST_DENOMINATOR {
                return false;
            }
            // The least common multiple: both factors are within bounds, so the product fits.
            denominator *= *Rational::new(own, denominator).numer();
            if denominator > LARGEST_DENOMINATOR {
                return false;
            }
            sum += rational::to_f64(*coefficient).abs() * rational::to_f64(count).abs();
        }
    }
    sum * (denominator as f64) < LARGEST_SUM
}

/// Adds equal species up and drops what cancels, keeping the order of first appearance.
fn merge(terms: Vec<(Species, Rational)>) -> Vec<(Species, Rational)> {
    let mut merged: Vec<(Species, Rational)> = Vec::with_capacity(terms.len());
    for (species, coefficient) in terms {
        match merged.iter_mut().find(|(present, _)| *present == species) {
            Some((_, sum)) => *sum += coefficient,
            None => merged.push((species, coefficient)),
        }
    }
    merged.retain(|(_, coefficient)| *coefficient != 0.into());
    merged
}

fn sides(text: &str) -> Result<(&str, &str), EquationError> {
    for arrow in ["<=>", "⇌", "<->", "="] {
        let mut parts = text.split(arrow);
        if let (Some(left), Some(right), None) = (parts.next(), parts.next(), parts.next()) {
            return Ok((left, right));
        }
    }
    Err(EquationError::Arrow(text.trim().into()))
}

/// A plus sign separates terms when a blank stands before it; in `H^+` and `Ca^2+` none does.
fn split_terms(side: &str) -> Vec<&str> {
    let mut terms = Vec::new();
    let mut start = 0;
    for (index, _) in side.match_indices('+') {
        if side[..index].ends_with(char::is_whitespace) {
            terms.push(&side[start..index]);
            start = index + 1;
        }
    }
    terms.push(&side[start..]);
    terms
}

fn read_term(term: &str) -> Result<(Species, Rational), EquationError> {
    let term = term.trim();
    let length = term.find(|c: char| !(c.is_ascii_digit() || c == '.' || c == '/')).unwrap_or(term.len());
    let (number, formula) = term.split_at(length);
    let coefficient = match number {
        "" => 1.into(),
        number => rational::parse(number)
            .filter(|value| *value > 0.into())
            .ok_or_else(|| EquationError::Coefficient(number.into()))?,
    };
    // The coefficient may be set off by `*`, as in arithmetic.
    let formula = formula.trim_start().trim_start_matches('*');
    Ok((Species::parse(formula)?, coefficient))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn case(text: &str, shown: &str) {
        assert_eq!(Equation::parse(text).unwrap().to_string(), shown);
    }

    #[test]
    fn equations_are_read() {
        case("CO2(aq) + H2O <=> HCO3^- + H^+", "CO2(aq) + H2O <=> HCO3^- + H^+");
        case("CO2 + H2O = HCO3^- + H^+", "CO2(aq) + H2O <=> HCO3^- + H^+");
        case(
            "CaMg(CO3)2(dolomite) ⇌ Ca^2+ + Mg^2+ + 2CO3^2-",
            "CaMg(CO3)2(dolomite) <=> Ca^2+ + Mg^2+ + 2 CO3^2-",
        );
        case("1/2 O2(g) + 2 H^+ + 2e^- <=> H2O", "0.5 O2(g) + 2 H^+ + 2 e^- <=> H2O");
        case("2 H2O <=> H2O + H^+ + OH^-", "H2O <=> H^+ + OH^-");
    }

    #[track_caller]
    fn fault(text: &str, message: &str) {
        assert_eq!(Equation::parse(text).unwrap_err().to_string(), message);
    }

    #[test]
    fn faults_say_what_is_short_and_where() {
        fault(
            "CO2(aq) <=> HCO3^- + H^+",
            "`CO2(aq) <=> HCO3^- + H^+` is not balanced: the left side is short of 2 H, the left side is short of 1 O; \
             add `H2O` to the left side",
        );
        fault(
            "Fe^3+ <=> Fe^2+",
            "`Fe^3+ <=> Fe^2+` is not balanced: the charges differ: the right side has -1 more; \
             add `e^-` to the left side",
        );
        fault(
            "CaCO3(calcite) <=> Ca^2+",
            "`CaCO3(calcite) <=> Ca^2+` is not balanced: the right side is short of 1 C, the right side is short of 3 O, \
             the charges differ: the right side has +2 more",
        );
        fault(
            "CO2(aq)",
            "`CO2(aq)` needs one arrow between its sides: write `A + B <=> C` (`⇌` and `=` are read too)",
        );
        fault("H2O <=> ", "the right side of `H2O <=>` is empty");
        fault(
            "1/0 H2O <=> H^+ + OH^-",
            "`1/0` is no coefficient: write `2`, `0.5` or `1/2` before the formula",
        );
        fault("H^+ <=> H^+", "nothing is left of the equation: its species cancel");
    }

    #[test]
    fn written_backwards_twice_is_the_same() {
        let equation = Equation::parse("H2O <=> H^+ + OH^-").unwrap();
        let back = equation.times((-1).into()).unwrap();
        assert_eq!(back.to_string(), "H^+ + OH^- <=> H2O");
        assert_eq!(back.times((-1).into()).unwrap().to_string(), equation.to_string());
    }
}
