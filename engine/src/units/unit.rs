//! A unit composed of atoms, and how units compose.

use std::fmt;
use std::sync::Arc;

use super::atom::{self, Atom};
use super::dimension::{Dimension, Exponent};
use super::{UnitError, parse};

/// A unit of measurement as written: `mg/L as NO3^-`, `J/(mol K)`, `degC`.
///
/// Cheap to clone. Two units are equal when they are written alike; [`Unit::is_same_size`] compares what they mean.
#[derive(Clone, Debug, PartialEq)]
pub struct Unit {
    pub(super) factors: Arc<[Factor]>,
    pub(super) expressed_as: Option<Arc<str>>,
}

/// Which kilogram a bare `/kg` stands for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum KgOf {
    /// Solvent water: molality.
    Water,
    /// The whole solution: the marine convention.
    Solution,
}

/// How a unit or a quantity is written out.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Style {
    /// `µmol`, `°C`, `±`.
    #[default]
    Unicode,
    /// `umol`, `degC`, `+/-`.
    Ascii,
}

/// One atom raised to a power.
#[derive(Clone, Copy, Debug)]
pub(super) struct Factor {
    pub atom: &'static Atom,
    pub exponent: Exponent,
}

impl Unit {
    /// The unit of a pure number.
    #[must_use]
    pub fn one() -> Self {
        Self { factors: Arc::from([]), expressed_as: None }
    }

    /// Reads a unit: `mg/L as NO3^-`, `J/(mol K)`, `J mol^-1 K^-1`, `cm3/mol`, `umol/kg(solution)`.
    ///
    /// A product is written with a space, `*` or `·`, a power as `cm3`, `cm^3` or `kg^(1/2)`. Of what stands after
    /// `as`, the text is kept for the caller to read as a formula.
    ///
    /// # Errors
    ///
    /// [`UnitError::Unknown`] with the nearest spelling, or [`UnitError::Malformed`] saying what to write.
    pub fn parse(text: &str) -> Result<Self, UnitError> {
        parse::unit(text)
    }

    /// What the unit measures.
    #[must_use]
    pub fn dimension(&self) -> Dimension {
        self.factors.iter().fold(Dimension::NONE, |dimension, factor| {
            dimension.times(&factor.atom.dimension(), factor.exponent)
        })
    }

    /// Whether this is the unit of a pure number (`1`, `%` or, say, `mmol/mol`).
    #[must_use]
    pub fn is_dimensionless(&self) -> bool {
        self.dimension() == Dimension::NONE && self.expressed_as.is_none()
    }

    /// The formula text after `as`: `NO3^-` in `mg/L as NO3^-`.
    #[must_use]
    pub fn expressed_as(&self) -> Option<&str> {
        self.expressed_as.as_deref()
    }

    /// The same unit of another substance, or of none.
    #[must_use]
    pub fn with_expressed_as(&self, formula: Option<&str>) -> Self {
        Self { factors: Arc::clone(&self.factors), expressed_as: formula.map(Arc::from) }
    }

    /// Whether the unit holds a bare `/kg`, which may mean water or solution.
    #[must_use]
    pub fn has_bare_kg(&self) -> bool {
        self.factors.iter().any(Factor::is_bare_kg)
    }

    /// The same unit with every bare `/kg` made plain: `mol/kg` becomes `mol/kg(water)`.
    #[must_use]
    pub fn per_kg_of(&self, what: KgOf) -> Self {
        let symbol = match what {
            KgOf::Water => "kg(water)",
            KgOf::Solution => "kg(solution)",
        };
        let plain = atom::find(symbol).expect("both kilograms are in the table");
        let factors = self.factors.iter().map(|factor| {
            let atom = if factor.is_bare_kg() { plain } else { factor.atom };
            Factor { atom, ..*factor }
        });
        Self { factors: gather(factors), expressed_as: self.expressed_as.clone() }
    }

    /// The unit of a product.
    ///
    /// # Errors
    ///
    /// [`UnitError::NotConvertible`] when both are expressed as a substance, [`UnitError::Power`] when an exponent
    /// outgrows its range.
    pub fn times(&self, other: &Self) -> Result<Self, UnitError> {
        let expressed_as = match (&self.expressed_as, &other.expressed_as) {
            (Some(_), Some(_)) => return Err(self.different_substances(other)),
            (one, other) => one.clone().or_else(|| other.clone()),
        };
        Self { factors: gather(self.factors.iter().chain(other.factors.iter()).copied()), expressed_as }
            .checked()
    }

    /// The unit of a ratio; `as N` over `as N` cancels.
    ///
    /// # Errors
    ///
    /// As [`Unit::times`], for two different substances.
    pub fn over(&self, other: &Self) -> Result<Self, UnitError> {
        if self.expressed_as.is_some() && self.expressed_as == other.expressed_as {
            return self.with_expressed_as(None).over(&other.with_expressed_as(None));
        }
        self.times(&other.to_power(-Exponent::ONE)?)
    }

    /// The unit raised to a power.
    ///
    /// # Errors
    ///
    /// [`UnitError::Power`] when the exponent is no fraction with a denominator up to 12, or too large.
    pub fn powf(&self, power: f64) -> Result<Self, UnitError> {
        let fraction = (1..=MAX_DENOMINATOR)
            .find(|&denominator| is_whole(power * f64::from(denominator)))
            .filter(|_| power.abs() <= f64::from(MAX_EXPONENT))
            .map(|denominator| Exponent::new((power * f64::from(denominator)).round() as i32, denominator));
        match fraction {
            _ if self.factors.is_empty() => Ok(self.clone()),
            Some(fraction) => self.to_power(fraction),
            None => Err(UnitError::Power { unit: self.symbol(), power }),
        }
    }

    /// The unit in plain text, readable by [`Unit::parse`].
    #[must_use]
    pub fn symbol(&self) -> String {
        let (above, below): (Vec<_>, Vec<_>) =
            self.factors.iter().partition(|factor| factor.exponent > Exponent::ZERO);
        let product = |factors: &[&Factor]| {
            factors.iter().map(|factor| factor.without_sign()).collect::<Vec<_>>().join(" ")
        };
        let above = if above.is_empty() { "1".to_owned() } else { product(&above) };
        let fraction = match below.len() {
            0 => above,
            1 => format!("{above}/{}", product(&below)),
            _ => format!("{above}/({})", product(&below)),
        };
        match &self.expressed_as {
            Some(formula) => format!("{fraction} as {formula}"),
            None => fraction,
        }
    }

    /// The unit written out in a style.
    #[must_use]
    pub fn display(&self, style: Style) -> String {
        match style {
            Style::Ascii => self.symbol(),
            Style::Unicode => with_unicode_prefixes(&self.symbol()),
        }
    }

    /// A unit of the table, known to be there.
    pub(crate) fn known(symbol: &str) -> Self {
        Self::parse(symbol).expect("a unit named in this crate is in the table")
    }

    pub(super) fn of(
        factors: impl IntoIterator<Item = Factor>,
        expressed_as: Option<&str>,
    ) -> Result<Self, UnitError> {
        Self { factors: gather(factors), expressed_as: expressed_as.map(Arc::from) }.checked()
    }

    fn to_power(&self, power: Exponent) -> Result<Self, UnitError> {
        let factors =
            self.factors.iter().map(|factor| Factor { exponent: factor.exponent * power, ..*factor });
        Self { factors: gather(factors), expressed_as: self.expressed_as.clone() }.checked()
    }

    /// Refuses exponents that no quantity has.
    fn checked(self) -> Result<Self, UnitError> {
        match self.factors.iter().find(|factor| !factor.is_plausible()) {
            Some(Factor { atom, exponent }) => Err(UnitError::Power {
                unit: atom.symbol.to_owned(),
                power: f64::from(*exponent.numer()) / f64::from(*exponent.denom()),
            }),
            None => Ok(self),
        }
    }
}

const MAX_EXPONENT: i32 = 99;
const MAX_DENOMINATOR: i32 = 12;

impl Factor {
    fn is_bare_kg(&self) -> bool {
        std::ptr::eq(self.atom, &atom::BARE_KG)
    }

    /// Whether both are the same atom; above and below the fraction line a `kg` cancels.
    fn joins(&self, other: &Self) -> bool {
        self.atom.symbol == other.atom.symbol
    }

    /// Whether the exponent is one that some quantity has; the bounds keep its arithmetic from overflowing.
    pub fn is_plausible(&self) -> bool {
        let (numerator, denominator) = (self.exponent.numer().abs(), *self.exponent.denom());
        denominator <= MAX_DENOMINATOR && numerator <= MAX_EXPONENT * denominator
    }

    /// The atom with its power, as written on its side of the fraction line.
    fn without_sign(&self) -> String {
        let symbol = self.atom.symbol;
        let (numerator, denominator) = (self.exponent.numer().abs(), *self.exponent.denom());
        match (numerator, denominator) {
            (1, 1) => symbol.to_owned(),
            (_, 1) if symbol.ends_with(')') => format!("{symbol}^{numerator}"),
            (_, 1) => format!("{symbol}{numerator}"),
            _ => format!("{symbol}^({numerator}/{denominator})"),
        }
    }
}

impl PartialEq for Factor {
    fn eq(&self, other: &Self) -> bool {
        std::ptr::eq(self.atom, other.atom) && self.exponent == other.exponent
    }
}

impl fmt::Display for Unit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.symbol())
    }
}

/// Collects equal atoms, keeping the order of first appearance. A `kg` left below the fraction line is a bare one.
fn gather(factors: impl IntoIterator<Item = Factor>) -> Arc<[Factor]> {
    let mut gathered: Vec<Factor> = Vec::new();
    for factor in factors {
        match gathered.iter_mut().find(|known| known.joins(&factor)) {
            Some(known) => known.exponent += factor.exponent,
            None => gathered.push(factor),
        }
    }
    gathered.retain(|factor| factor.exponent != Exponent::ZERO && factor.atom.symbol != "1");
    for factor in &mut gathered {
        if factor.atom.symbol == atom::BARE_KG.symbol {
            factor.atom = if factor.exponent < Exponent::ZERO { &atom::BARE_KG } else { mass_kg() };
        }
    }
    gathered.into()
}

fn mass_kg() -> &'static Atom {
    atom::find("kg").expect("kg is in the table")
}

fn is_whole(x: f64) -> bool {
    (x - x.round()).abs() < 1e-9
}

/// `umol` as `µmol`, `degC` as `°C`: only where a unit begins, so that `as` formulas stay untouched.
fn with_unicode_prefixes(symbol: &str) -> String {
    let (unit, formula) = match symbol.split_once(" as ") {
        Some((unit, formula)) => (unit, format!(" as {formula}")),
        None => (symbol, String::new()),
    };
    let mut written = String::with_capacity(symbol.len() + 4);
    let mut rest = unit;
    while let Some(first) = rest.chars().next() {
        let word_end = rest.find(|c: char| !c.is_ascii_alphabetic()).unwrap_or(rest.len());
        let (word, tail) = rest.split_at(word_end.max(first.len_utf8()));
        match (word, word.strip_prefix('u')) {
            ("degC", _) => written.push_str("°C"),
            ("degF", _) => written.push_str("°F"),
            (_, Some(base)) => {
                written.push('µ');
                written.push_str(base);
            }
            _ => written.push_str(word),
        }
        rest = tail;
    }
    written + formula.as_str()
}
