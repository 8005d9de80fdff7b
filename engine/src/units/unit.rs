//! A unit composed of atoms, and conversion between units.

use std::fmt;
use std::sync::Arc;

use super::atom::{self, Atom};
use super::dimension::{Base, Dimension, Exponent};
use super::{UnitError, parse};

/// A unit of measurement as written: `mg/L as NO3^-`, `J/(mol K)`, `degC`.
///
/// Cheap to clone. Two units are equal when they are written alike; [`Unit::is_same_size`] compares what they mean.
#[derive(Clone, Debug, PartialEq)]
pub struct Unit {
    factors: Arc<[Factor]>,
    expressed_as: Option<Arc<str>>,
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

    /// Whether one of this unit is exactly one of the other, however they are written.
    #[must_use]
    pub fn is_same_size(&self, other: &Self) -> bool {
        self.dimension() == other.dimension()
            && self.expressed_as == other.expressed_as
            && self.scale_to(other) == (1.0, 0)
            && self.zero() == other.zero()
    }

    /// A value given in this unit, in another unit.
    ///
    /// degC, degF and dbar count from their own zero: 25 degC is 298.15 K, 0 dbar is 1.01325 bar. Two exchanges are
    /// made silently because the numbers are the same: mol for eq (1 mol of charge is 1 eq), and a bare `/kg` for a
    /// mass.
    ///
    /// # Errors
    ///
    /// [`UnitError::NotConvertible`] when the units measure different things or hold for different substances.
    pub fn convert(&self, value: f64, to: &Self) -> Result<f64, UnitError> {
        self.check_convertible(to)?;
        if self == to {
            return Ok(value);
        }
        Ok(rescale(value + self.zero(), self.scale_to(to)) - to.zero())
    }

    /// What one step of this unit is in steps of another: 1 degF is 5/9 K, whatever their zeros.
    ///
    /// # Errors
    ///
    /// As [`Unit::convert`].
    pub fn interval_in(&self, to: &Self) -> Result<f64, UnitError> {
        self.check_convertible(to)?;
        Ok(rescale(1.0, self.scale_to(to)))
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

    /// The unit in which a product with this one is taken: `K` for degC and degF, `bar` for dbar.
    #[must_use]
    pub fn counted_from_absolute_zero(&self) -> Self {
        match self.own_zero() {
            None => self.clone(),
            Some(_) if self.dimension().exponent(Base::Temperature) != Exponent::ZERO => Self::known("K"),
            Some(_) => Self::known("bar"),
        }
    }

    /// Whether the unit counts from a zero of its own, as degC does; `J/degC` does not.
    #[must_use]
    pub fn has_own_zero(&self) -> bool {
        self.own_zero().is_some()
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

    fn own_zero(&self) -> Option<f64> {
        match &*self.factors {
            [Factor { atom, exponent }] if atom.has_own_zero() && *exponent == Exponent::ONE => {
                Some(atom.zero)
            }
            _ => None,
        }
    }

    fn zero(&self) -> f64 {
        self.own_zero().unwrap_or(0.0)
    }

    fn check_convertible(&self, to: &Self) -> Result<(), UnitError> {
        if self.expressed_as != to.expressed_as {
            return Err(self.different_substances(to));
        }
        let loosely = |unit: &Self| {
            unit.dimension().counting(Base::Equivalents, Base::Amount).counting(Base::BareKg, Base::Mass)
        };
        if loosely(self) == loosely(to) {
            return Ok(());
        }
        Err(UnitError::NotConvertible {
            from: self.symbol(),
            to: to.symbol(),
            reason: self.difference_in_words(to),
        })
    }

    fn difference_in_words(&self, to: &Self) -> String {
        let (from, to) = (self.dimension(), to.dimension());
        let differ = |base| from.exponent(base) != to.exponent(base);
        let kilograms =
            [Base::WaterMass, Base::SolutionMass, Base::BareKg].into_iter().filter(|&b| differ(b)).count();
        if differ(Base::PracticalSalinity) {
            "practical salinity is a conductivity ratio, no mass fraction".to_owned()
        } else if kilograms > 1 {
            "water and solution weigh differently; say `kg(water)` or `kg(solution)` on both sides".to_owned()
        } else if kilograms == 1 && differ(Base::Length) {
            "the density is needed".to_owned()
        } else if differ(Base::Amount) && differ(Base::Mass) {
            "the molar mass is needed".to_owned()
        } else {
            "they measure different things".to_owned()
        }
    }

    fn different_substances(&self, other: &Self) -> UnitError {
        UnitError::NotConvertible {
            from: self.symbol(),
            to: other.symbol(),
            reason: "they are expressed as different substances".to_owned(),
        }
    }

    /// The size of this unit in the other, as a number times a power of ten.
    fn scale_to(&self, to: &Self) -> (f64, i32) {
        let ((above, power_above), (below, power_below)) = (self.size(), to.size());
        (above / below, power_above - power_below)
    }

    /// The size in SI base units. Equal factors meet the same arithmetic, so that a ratio of equal sizes is exactly 1.
    fn size(&self) -> (f64, i32) {
        self.factors
            .iter()
            .map(Factor::size)
            .fold((1.0, 0), |(mantissa, power_of_ten), (m, p)| (mantissa * m, power_of_ten + p))
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

    fn size(&self) -> (f64, i32) {
        if self.exponent.is_integer() {
            let power = *self.exponent.numer();
            return (self.atom.mantissa.powi(power), self.atom.power_of_ten * power);
        }
        let power = f64::from(*self.exponent.numer()) / f64::from(*self.exponent.denom());
        (self.atom.mantissa.powf(power) * 10f64.powf(f64::from(self.atom.power_of_ten) * power), 0)
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

/// Multiplies by an exact power of ten, or divides by one, so that a decimal shift rounds once.
fn rescale(value: f64, (mantissa, power_of_ten): (f64, i32)) -> f64 {
    let value = value * mantissa;
    match power_of_ten {
        0 => value,
        1.. => value * 10f64.powi(power_of_ten),
        _ => value / 10f64.powi(-power_of_ten),
    }
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
    written + &formula
}
