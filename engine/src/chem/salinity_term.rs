//! The salinity factor of a term of log K, and how a term is written.
//!
//! Constants of seawater are published as functions of temperature and practical salinity S, or of the ionic strength
//! `I = 19.924 S/(1000 - 1.005 S)` that belongs to it. Multiplied out, each is a sum of products of one function of
//! temperature and one of salinity, so it is a vector like any other log K, and adds up exactly.

use super::log_k::Term;
use crate::physics::seawater;

/// The factor of a term that depends on practical salinity S.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum SalinityTerm {
    /// 1.
    One,
    /// √S.
    SqrtS,
    /// S.
    S,
    /// S^1.5.
    S15,
    /// S².
    S2,
    /// √I, with I the ionic strength of seawater in mol/kg(water).
    SqrtI,
    /// I.
    I,
    /// I^1.5.
    I15,
    /// I².
    I2,
    /// ln(1 - 0.001005 S), which turns mol/kg(water) into mol/kg(solution).
    LnWater,
    /// √S/(1 + 1.11 √S), a Debye-Hückel form.
    DebyeHuckel,
}

/// One term of the vector: a function of temperature times one of salinity.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct Product {
    /// The factor of temperature.
    pub temperature: Term,
    /// The factor of salinity.
    pub salinity: SalinityTerm,
}

impl SalinityTerm {
    /// Every factor, in the order coefficients are kept.
    pub const ALL: [Self; 11] = [
        Self::One,
        Self::SqrtS,
        Self::S,
        Self::S15,
        Self::S2,
        Self::SqrtI,
        Self::I,
        Self::I15,
        Self::I2,
        Self::LnWater,
        Self::DebyeHuckel,
    ];

    /// Its value at a practical salinity.
    #[must_use]
    pub fn at(self, salinity: f64) -> f64 {
        let ionic_strength = || seawater::ionic_strength(salinity);
        match self {
            Self::One => 1.0,
            Self::SqrtS => salinity.sqrt(),
            Self::S => salinity,
            Self::S15 => salinity * salinity.sqrt(),
            Self::S2 => salinity * salinity,
            Self::SqrtI => ionic_strength().sqrt(),
            Self::I => ionic_strength(),
            Self::I15 => ionic_strength().powf(1.5),
            Self::I2 => ionic_strength().powi(2),
            Self::LnWater => seawater::water_content(salinity).ln(),
            Self::DebyeHuckel => salinity.sqrt() / (1.0 + 1.11 * salinity.sqrt()),
        }
    }

    /// As it is written in `log_k_terms`.
    #[must_use]
    pub fn written(self) -> &'static str {
        match self {
            Self::One => "1",
            Self::SqrtS => "sqrt(S)",
            Self::S => "S",
            Self::S15 => "S^1.5",
            Self::S2 => "S^2",
            Self::SqrtI => "sqrt(I)",
            Self::I => "I",
            Self::I15 => "I^1.5",
            Self::I2 => "I^2",
            Self::LnWater => "ln(1-0.001005*S)",
            Self::DebyeHuckel => "sqrt(S)/(1+1.11*sqrt(S))",
        }
    }
}

impl Product {
    /// A function of temperature alone.
    #[must_use]
    pub fn of(temperature: Term) -> Self {
        Self { temperature, salinity: SalinityTerm::One }
    }

    /// Reads a term as it is written: `1/T`, `sqrt(S)*ln(T)`, `S^2`, `S*T/100`.
    ///
    /// # Returns
    ///
    /// The terms it stands for with the factor that the coefficient of each takes: one term, two for `ln(T/100)`; `None`
    /// if it is no product of a function of temperature and one of salinity.
    #[must_use]
    pub fn parse(text: &str) -> Option<Vec<(Self, f64)>> {
        let text = text.replace(' ', "");
        let (salinity, rest) = split_salinity(&text)?;
        let temperature = parse_temperature(&rest)?;
        Some(temperature.into_iter().map(|(temperature, f)| (Self { temperature, salinity }, f)).collect())
    }

    /// As it is written in `log_k_terms`.
    #[must_use]
    pub fn written(self) -> String {
        match (self.temperature.written(), self.salinity.written()) {
            (temperature, "1") => temperature.to_string(),
            ("1", salinity) => salinity.to_string(),
            (temperature, salinity) => match temperature.strip_prefix("1/") {
                Some(divisor) => format!("{salinity}/{divisor}"),
                None => format!("{salinity}*{temperature}"),
            },
        }
    }
}

/// The salinity factor, and what is left: `sqrt(S)/T` leaves `1/T`.
fn split_salinity(text: &str) -> Option<(SalinityTerm, String)> {
    // The longest spelling first: `sqrt(S)` begins the Debye-Hückel form.
    let mut factors = SalinityTerm::ALL;
    factors.sort_by_key(|factor| std::cmp::Reverse(factor.written().len()));
    let others = factors.into_iter().filter(|factor| *factor != SalinityTerm::One);
    for factor in others {
        if let Some(rest) = text.strip_prefix(factor.written()) {
            return match rest.chars().next() {
                None => Some((factor, "1".into())),
                Some('*') => Some((factor, rest[1..].into())),
                Some('/') => Some((factor, format!("1{rest}"))),
                Some(_) => continue,
            };
        }
        if let Some(rest) = text.strip_suffix(factor.written()).and_then(|rest| rest.strip_suffix('*')) {
            return Some((factor, rest.into()));
        }
    }
    Some((SalinityTerm::One, text.into()))
}

/// Weiss (1974) and those after him count T in hundreds of kelvin.
fn parse_temperature(text: &str) -> Option<Vec<(Term, f64)>> {
    Some(match text {
        "100/T" => vec![(Term::InverseT, 100.0)],
        "1*T/100" | "T/100" | "1T/100" => vec![(Term::T, 0.01)],
        "(T/100)^2" => vec![(Term::T2, 1e-4)],
        "ln(T/100)" => {
            let (log, ln_10) = Term::parse("ln(T)")?;
            vec![(log, ln_10), (Term::One, -(100.0_f64.ln()))]
        }
        other => vec![Term::parse(other)?],
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn terms_are_read_back_as_they_are_written() {
        for temperature in Term::ALL {
            for salinity in SalinityTerm::ALL {
                let product = Product { temperature, salinity };
                assert_eq!(
                    Product::parse(&product.written()),
                    Some(vec![(product, 1.0)]),
                    "{}",
                    product.written()
                );
            }
        }
    }

    #[test]
    fn hundreds_of_kelvin_are_expanded() {
        let value = |text: &str, t: f64, s: f64| -> f64 {
            let terms = Product::parse(text).unwrap();
            terms.iter().map(|(p, f)| f * p.temperature.at(t) * p.salinity.at(s)).sum()
        };
        assert!((value("ln(T/100)", 298.15, 0.0) - 2.9815_f64.ln()).abs() < 1e-15);
        assert!((value("S*(T/100)^2", 298.15, 35.0) - 35.0 * 2.9815_f64.powi(2)).abs() < 1e-12);
        assert_eq!(value("100/T", 200.0, 0.0), 0.5);
        assert_eq!(Product::parse("S*S"), None);
        assert_eq!(Product::parse("sqrt(T)*T"), None);
    }
}
