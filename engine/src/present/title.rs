//! Column titles: a name, and the unit of what stands below it.

use std::fmt;
use std::sync::Arc;

use super::notation;

/// The ending of the title under which the standard uncertainties of a column are written to a file.
pub const SIGMA_MARK: &str = "+/-";

/// The title of a column, written `name` or `name [unit]`.
///
/// Characters are kept in the typed form (`Ca^2+`, `umol/kg`), so `m(Ca²⁺) [µmol/kg]` and `m(Ca^2+) [umol/kg]`
/// are one title.
///
/// # Examples
///
/// ```
/// use lysocline_engine::present::Title;
///
/// let title = Title::parse("m(Ca²⁺) [mmol/kg]");
/// assert_eq!((title.name(), title.unit()), ("m(Ca^2+)", Some("mmol/kg")));
/// assert_eq!(title.to_string(), "m(Ca^2+) [mmol/kg]");
/// ```
#[derive(Debug, Clone, PartialEq, Eq, Hash)]
pub struct Title {
    name: Arc<str>,
    unit: Option<Arc<str>>,
}

impl Title {
    /// Reads `name` or `name [unit]`; a text with no unit in square brackets at its end is all name.
    #[must_use]
    pub fn parse(text: &str) -> Self {
        let text = text.trim();
        let split = text.strip_suffix(']').and_then(|rest| rest.rsplit_once('['));
        match split {
            Some((name, unit)) if !name.trim().is_empty() && !unit.trim().is_empty() => {
                Self::new(name, Some(unit))
            }
            _ => Self::new(text, None),
        }
    }

    /// A title from its two parts.
    #[must_use]
    pub fn new(name: &str, unit: Option<&str>) -> Self {
        Self {
            name: notation::typed(name.trim()).into(),
            unit: unit.map(|unit| notation::typed(unit.trim()).replace(['µ', 'μ'], "u").into()),
        }
    }

    /// What the column holds, without the unit.
    #[must_use]
    pub fn name(&self) -> &str {
        &self.name
    }

    /// The unit of its numbers; `None` for dimensionless numbers and for texts.
    #[must_use]
    pub fn unit(&self) -> Option<&str> {
        self.unit.as_deref()
    }

    /// The title under which the standard uncertainties of this column are written: `Ca +/- [mg/L]`.
    #[must_use]
    pub fn of_sigma(&self) -> Self {
        Self { name: format!("{} {SIGMA_MARK}", self.name).into(), unit: self.unit.clone() }
    }
}

impl fmt::Display for Title {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match &self.unit {
            Some(unit) => write!(f, "{} [{unit}]", self.name),
            None => f.write_str(&self.name),
        }
    }
}

impl From<&str> for Title {
    fn from(text: &str) -> Self {
        Self::parse(text)
    }
}

#[cfg(test)]
mod tests {
    use super::Title;

    #[track_caller]
    fn case(text: &str, name: &str, unit: Option<&str>) {
        let title = Title::parse(text);
        assert_eq!((title.name(), title.unit()), (name, unit));
    }

    #[test]
    fn names_and_units() {
        case("pH", "pH", None);
        case(" Ca [mg/L] ", "Ca", Some("mg/L"));
        case("NO₃⁻ [µmol/L]", "NO3^-", Some("umol/L"));
        case("alkalinity [mg/L as CaCO3]", "alkalinity", Some("mg/L as CaCO3"));
        case("f(CO2(g)) [uatm]", "f(CO2(g))", Some("uatm"));
        case("[mg/L]", "[mg/L]", None); // a unit of nothing
        case("Ca []", "Ca []", None);
    }
}
