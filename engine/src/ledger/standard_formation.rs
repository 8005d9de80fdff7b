//! Standard formation properties as equilibrium constants of formation from the elements.
//!
//! A species X with charge z is formed from the reference states of its elements, hydrogen ions and hydrogen:
//!
//! ```text
//! Σ νₑ E + z H^+ + (h - z)/2 H2(g) <=> X          νₑ reference substances E, h atoms of hydrogen in X
//! ΔG = ΔfH - T (S - Σ νₑ Sₑ - (h - z)/2 S(H2))    H^+: ΔfH = ΔfG = S = 0 at every temperature
//! ```
//!
//! so that formation data are reactions like any other, and a cycle through them an exact sum. Enthalpy, entropy and the
//! entropies of elements are inputs of their own; those of elements are shared by all species, so that they cancel in
//! reactions among compounds, with their uncertainties. log10 K away from 25 degC holds the enthalpy of formation
//! constant unless heat capacities are given.

use std::collections::BTreeMap;

use crate::chem::log_k::LogK;
use crate::chem::{
    Conditions, Constant, Element, Equation, History, Origin, Provenance, Rational, Reaction, Species,
    rational,
};
use crate::named::{KeyFault, Named};
use crate::physics::constants::GAS_CONSTANT;
use crate::quantity::{Input, Part, Quantity};
use crate::units::{Kind, Temperature};

const LN_10: f64 = std::f64::consts::LN_10;
/// Gas constant in kJ/(mol K).
const R_KJ: f64 = GAS_CONSTANT / 1000.0;

/// Entropies, and heat capacities where known, of the reference states of elements.
#[derive(Debug, Clone, Default)]
pub struct Elements(BTreeMap<Species, Standard>);

/// A property of a substance: its value at 25 degC and 1 bar, and the input behind it.
#[derive(Debug, Clone)]
struct Property {
    value: f64,
    input: Input,
}

#[derive(Debug, Clone)]
struct Standard {
    /// J/(mol K).
    entropy: Property,
    /// J/(mol K).
    heat_capacity: Option<f64>,
}

/// The reference state of an element at 25 degC and 1 bar: its stable form, but white phosphorus (Cox et al. 1989).
#[must_use]
pub fn reference_state(element: Element) -> Species {
    let formula = match element.symbol() {
        symbol @ ("H" | "N" | "O" | "F" | "Cl") => format!("{symbol}2(g)"),
        symbol @ ("He" | "Ne" | "Ar" | "Kr" | "Xe" | "Rn") => format!("{symbol}(g)"),
        "Br" => "Br2(l)".into(),
        "I" => "I2(cr)".into(),
        "Hg" => "Hg(l)".into(),
        "C" => "C(graphite)".into(),
        "S" => "S(rhombic)".into(),
        "P" => "P(white)".into(),
        symbol => format!("{symbol}(cr)"),
    };
    Species::parse(&formula).expect("a formula of one element")
}

/// The equation that forms a species from the reference states of its elements.
///
/// # Errors
///
/// The words for a species that is an element itself.
pub fn formation_equation(species: &Species) -> Result<Equation, String> {
    let charge = Rational::from_integer(i64::from(species.charge()));
    let mut terms = vec![];
    for (element, count) in species.composition() {
        let reference = reference_state(*element);
        let used = if *element == Element::H { count - charge } else { *count };
        terms.push((reference.clone(), -used / reference.count(*element)));
    }
    if species.count(Element::H) == 0.into() {
        terms.push((reference_state(Element::H), charge / 2));
    }
    terms.push((Species::proton(), -charge));
    terms.push((species.clone(), 1.into()));
    Equation::balanced(terms).map_err(|_| {
        format!(
            "`{species}` needs no formation: it is the reference state of an element, or the hydrogen ion"
        )
    })
}

impl Elements {
    /// Adds an `[[element]]`: `species`, `entropy`, and `heat_capacity` where known.
    ///
    /// # Errors
    ///
    /// A fault of a key.
    pub fn read(&mut self, file_key: &str, mut entry: Named) -> Result<(), KeyFault> {
        let species = read_species(&mut entry)?;
        let element = species.composition().first().map(|(element, _)| *element);
        let reference = element.map(reference_state);
        if reference.as_ref() != Some(&species) {
            let help = reference.map(|state| format!("; write `{state}`")).unwrap_or_default();
            return Err(KeyFault::new(
                "species",
                format!("`{species}` is no reference state of an element{help}"),
            ));
        }
        let coverage = read_coverage(&mut entry)?;
        let entropy = read_property(&mut entry, "entropy", Kind::Entropy, coverage, file_key, &species)?;
        let entropy = entropy
            .ok_or_else(|| KeyFault::new("species", format!("`{species}`: an element needs `entropy`")))?;
        let heat_capacity = entry
            .quantity("heat_capacity", Kind::Entropy)?
            .map(|quantity| in_default(&quantity, Kind::Entropy));
        for key in ["provenance", "note", "source"] {
            entry.take(key);
        }
        entry.finish()?;
        if self.0.insert(species.clone(), Standard { entropy, heat_capacity }).is_some() {
            return Err(KeyFault::new("species", format!("there is an element `{species}` already")));
        }
        Ok(())
    }

    /// The same with those of `others` that it lacks.
    #[must_use]
    pub fn or(mut self, others: &Self) -> Self {
        for (species, standard) in &others.0 {
            self.0.entry(species.clone()).or_insert_with(|| standard.clone());
        }
        self
    }

    fn of(&self, species: &Species) -> Result<&Standard, KeyFault> {
        self.0.get(species).ok_or_else(|| {
            KeyFault::new(
                "entropy",
                format!("no entropy of `{species}` is known: give it as an `[[element]]`, or state `gibbs`"),
            )
        })
    }
}

/// Reads a `[[formation]]`: `species`; `gibbs`, or `enthalpy` with `entropy`; `heat_capacity`, `coverage`, `name`,
/// `source`, `provenance`, `note`. Returns its name with the reaction from the elements.
///
/// # Errors
///
/// A fault of a key.
pub fn read(
    file_key: &str,
    citation: &str,
    elements: &Elements,
    mut entry: Named,
) -> Result<(String, Reaction), KeyFault> {
    let species = read_species(&mut entry)?;
    let equation = formation_equation(&species).map_err(|message| KeyFault::new("species", message))?;
    let coverage = read_coverage(&mut entry)?;
    let mut property = |key, kind| read_property(&mut entry, key, kind, coverage, file_key, &species);
    let (gibbs, enthalpy) = (property("gibbs", Kind::Energy)?, property("enthalpy", Kind::Energy)?);
    let entropy = property("entropy", Kind::Entropy)?;
    let heat_capacity = entry.quantity("heat_capacity", Kind::Entropy)?;
    let name = entry.text("name")?.unwrap_or_else(|| format!("formation of {species}{}", by(file_key)));
    let source = entry.text("source")?.unwrap_or_else(|| citation.to_string());
    let provenance = entry.text("provenance")?.as_deref().and_then(Provenance::parse).ok_or_else(|| {
        KeyFault::new(
            "provenance",
            format!("`{name}` needs `provenance`, one of `read`, `computed` and `memory`"),
        )
    })?;
    entry.take("note");
    entry.finish()?;

    let heat = match &heat_capacity {
        Some(own) => {
            Some(change_of_heat_capacity(in_default(own, Kind::Entropy), &species, &equation, elements)?)
        }
        None => None,
    };
    let (log_k, stated, parts) = match (gibbs, enthalpy, entropy) {
        (Some(gibbs), enthalpy, None) => of_gibbs(&gibbs, enthalpy.as_ref(), heat),
        (None, Some(enthalpy), Some(entropy)) => {
            of_enthalpy_and_entropy(&enthalpy, &entropy, heat, &species, &equation, elements)?
        }
        (Some(_), _, Some(_)) => {
            let message =
                format!("`{name}` states its Gibbs energy twice: keep `gibbs`, or `enthalpy` with `entropy`");
            return Err(KeyFault::new("gibbs", message));
        }
        _ => {
            let message = format!("`{name}` needs `gibbs`, or `enthalpy` with `entropy`");
            return Err(KeyFault::new("species", message));
        }
    };
    let origin = Origin {
        label: name.clone(),
        equation: equation.to_string(),
        stated,
        source: Some(source),
        provenance,
        parts,
    };
    let constant = Constant {
        log_k,
        temperature: Temperature::REFERENCE,
        conditions: Conditions::default(),
        volume: None,
        history: History::of(origin),
    };
    Ok((name, Reaction::of(equation, constant)))
}

type Read = (LogK, String, Vec<Part>);

/// d log10 K / d ΔG, per kJ/mol, at 25 degC.
fn per_kilojoule() -> f64 {
    -1.0 / (R_KJ * Temperature::REFERENCE.kelvin() * LN_10)
}

fn of_gibbs(gibbs: &Property, enthalpy: Option<&Property>, heat: Option<f64>) -> Read {
    let at = Temperature::REFERENCE;
    let value = gibbs.value * per_kilojoule();
    let log_k = match enthalpy {
        Some(enthalpy) => LogK::van_t_hoff(value, at, enthalpy.value, heat.unwrap_or(0.0)),
        None => LogK::only(value, at),
    };
    let stated = format!("Gibbs energy of formation {} kJ/mol", gibbs.value);
    (log_k, stated, vec![Part { input: gibbs.input.clone(), sensitivity: per_kilojoule() }])
}

fn of_enthalpy_and_entropy(
    enthalpy: &Property,
    entropy: &Property,
    heat: Option<f64>,
    species: &Species,
    equation: &Equation,
    elements: &Elements,
) -> Result<Read, KeyFault> {
    let at = Temperature::REFERENCE;
    let per_joule_a_kelvin = -at.kelvin() / 1000.0 * per_kilojoule();
    let mut parts = vec![
        Part { input: enthalpy.input.clone(), sensitivity: per_kilojoule() },
        Part { input: entropy.input.clone(), sensitivity: per_joule_a_kelvin },
    ];
    let mut change = entropy.value;
    for (element, coefficient) in from_elements(equation, species) {
        let standard = elements.of(element)?;
        change += coefficient * standard.entropy.value;
        let sensitivity = coefficient * per_joule_a_kelvin;
        parts.push(Part { input: standard.entropy.input.clone(), sensitivity });
    }
    let gibbs = enthalpy.value - at.kelvin() * change / 1000.0;
    let log_k = LogK::van_t_hoff(gibbs * per_kilojoule(), at, enthalpy.value, heat.unwrap_or(0.0));
    let stated =
        format!("enthalpy of formation {} kJ/mol, entropy {} J/(mol K)", enthalpy.value, entropy.value);
    Ok((log_k, stated, parts))
}

/// kJ/(mol K).
fn change_of_heat_capacity(
    own: f64,
    species: &Species,
    equation: &Equation,
    elements: &Elements,
) -> Result<f64, KeyFault> {
    let mut change = own;
    for (element, coefficient) in from_elements(equation, species) {
        let known = elements.of(element)?.heat_capacity.ok_or_else(|| {
            let message = format!(
                "`heat_capacity` of `{species}` needs that of `{element}`: give it with the `[[element]]`"
            );
            KeyFault::new("heat_capacity", message)
        })?;
        change += coefficient * known;
    }
    Ok(change / 1000.0)
}

/// The elements of a formation with their coefficients; the hydrogen ion, whose properties are zero, left out.
fn from_elements<'a>(
    equation: &'a Equation,
    species: &'a Species,
) -> impl Iterator<Item = (&'a Species, f64)> {
    let others =
        equation.terms().iter().filter(move |(other, _)| other != species && *other != Species::proton());
    others.map(|(element, coefficient)| (element, rational::to_f64(*coefficient)))
}

fn read_species(entry: &mut Named) -> Result<Species, KeyFault> {
    let text = entry.text("species")?.ok_or_else(|| KeyFault::new("species", "a `species` is needed"))?;
    Species::parse(&text).map_err(|error| KeyFault::new("species", error.to_string()))
}

/// How many standard uncertainties the stated ones are; 1 where absent.
fn read_coverage(entry: &mut Named) -> Result<f64, KeyFault> {
    match entry.number("coverage")? {
        Some(coverage) if coverage <= 0.0 => {
            Err(KeyFault::new("coverage", format!("`coverage` must be above zero, not {coverage}")))
        }
        coverage => Ok(coverage.unwrap_or(1.0)),
    }
}

fn read_property(
    entry: &mut Named,
    key: &'static str,
    kind: Kind,
    coverage: f64,
    file_key: &str,
    species: &Species,
) -> Result<Option<Property>, KeyFault> {
    let Some(quantity) = entry.quantity(key, kind)? else { return Ok(None) };
    let quantity =
        quantity.to(&kind.default_unit()).map_err(|error| KeyFault::new(key, error.to_string()))?;
    let sigma = quantity.sigma().map(|expanded| expanded / coverage);
    let label = format!("{key} of {species}{}", by(file_key));
    let input = Input::named(&format!("{file_key}/{key} of {species}"), &label, sigma);
    let input = input.map_err(|error| KeyFault::new(key, error.to_string()))?;
    Ok(Some(Property { value: quantity.value(), input }))
}

fn in_default(quantity: &Quantity, kind: Kind) -> f64 {
    quantity.to(&kind.default_unit()).map_or(quantity.value(), |quantity| quantity.value())
}

/// `, Cox 1989` for the file `cox1989`; nothing where the key is no author and year.
pub(super) fn by(file_key: &str) -> String {
    let author = file_key.trim_end_matches(|c: char| c.is_ascii_digit());
    let year = &file_key[author.len()..];
    let capital = |name: &str| {
        let mut letters = name.chars();
        letters
            .next()
            .map_or_else(String::new, |first| format!("{}{}", first.to_uppercase(), letters.as_str()))
    };
    // `refit` and the like say what of an author is meant.
    let word = |name: &str| match name {
        "refit" | "seawater" | "total" | "pressure" => name.to_string(),
        author => capital(author),
    };
    let is_author = !author.is_empty() && author.chars().all(|c| c.is_alphabetic() || c == '-');
    if year.len() != 4 || !is_author {
        return String::new();
    }
    format!(", {} {year}", author.split('-').map(word).collect::<Vec<_>>().join(" "))
}
