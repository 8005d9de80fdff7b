//! Which activity model a ledger asks for, with the parameters of its ions.
//!
//! Parameters are tables by species, or by pair of species: those that are shipped, and over them what a script or a ledger
//! file gives under the same names.

use std::collections::BTreeMap;
use std::fmt;
use std::sync::LazyLock;

use lysocline_stdlib::ACTIVITY;

use super::file::{FileFault, read_tables};
use super::ledger::{Ledger, LedgerError};
use crate::chem::Species;
use crate::named::{self, KeyFault, Named, Value};
use crate::nearest::nearest;
use crate::quantity::Quantity;
use crate::text::list;
use crate::units::{Kind, Unit};

/// Which activity model a ledger asks for; its coefficients at a temperature are the activity room's business.
#[derive(Debug, Clone)]
pub enum ActivityChoice {
    /// γ = 1.
    Ideal,
    /// Davies (1962).
    Davies {
        /// The Debye-Hückel A (log10 basis, kg½ mol-½) used at every temperature; `None`: from the properties of water.
        a: Option<f64>,
        /// The coefficient of the linear term, 0.3.
        b: f64,
        /// The activity of water used throughout; `None`: from the same model.
        water: Option<f64>,
    },
    /// Extended Debye-Hückel with the sizes of Kielland (1937).
    DebyeHuckel(IonParameters),
    /// Truesdell and Jones (1974).
    TruesdellJones(IonParameters),
    /// Specific ion interaction theory.
    Sit(Interactions),
}

/// Parameters of single ions.
#[derive(Clone)]
pub struct IonParameters {
    /// As in [`ActivityChoice::Davies`].
    pub a: Option<f64>,
    /// As in [`ActivityChoice::Davies`].
    pub water: Option<f64>,
    /// Ion size, angstrom.
    pub ion_size: BTreeMap<Species, Quantity>,
    /// Coefficient of the linear term (log10), kg/mol.
    pub b: BTreeMap<Species, Quantity>,
    given: Given,
}

/// Parameters of pairs of solutes.
#[derive(Clone)]
pub struct Interactions {
    /// As in [`ActivityChoice::Davies`].
    pub a: Option<f64>,
    /// As in [`ActivityChoice::Davies`].
    pub water: Option<f64>,
    /// Interaction coefficients ε (log10), kg/mol; each pair in the order of its species.
    pub epsilon: BTreeMap<(Species, Species), Quantity>,
    given: Given,
}

/// Species that a script or file named, with the key they stand in.
type Given = Vec<(String, Species)>;

impl Default for ActivityChoice {
    fn default() -> Self {
        Self::Davies { a: None, b: 0.3, water: None }
    }
}

impl ActivityChoice {
    /// The models by name.
    pub const NAMES: [&str; 5] = ["ideal", "davies", "debye-hueckel", "truesdell-jones", "sit"];

    /// A model by name with its options. All but `ideal` take `A` and `water_activity`; `davies` takes `b`, `debye-hueckel` a table
    /// `ion_size`, `truesdell-jones` tables `ion_size` and `b`, `sit` a table `epsilon`.
    ///
    /// # Errors
    ///
    /// A fault of the name, under the key `activity_model`, or of an option.
    pub fn read(name: &str, mut options: Named) -> Result<Self, KeyFault> {
        let choice = match name {
            "ideal" => Self::Ideal,
            "davies" => {
                let (a, water) = common(&mut options)?;
                Self::Davies { a, b: options.number("b")?.unwrap_or(0.3), water }
            }
            "debye-hueckel" => {
                Self::DebyeHuckel(IonParameters::read(&mut options, &["kielland1937"], &["ion_size"])?)
            }
            "truesdell-jones" => {
                let files = ["kielland1937", "truesdell1974"];
                Self::TruesdellJones(IonParameters::read(&mut options, &files, &["ion_size", "b"])?)
            }
            "sit" => Self::Sit(Interactions::read(&mut options)?),
            other => {
                let help = nearest(other, Self::NAMES).map(|near| format!(", did you mean `{near}`?"));
                let help = help.unwrap_or_else(|| ".".into());
                let message = format!("no activity model `{other}`{help} There are {}", list(&Self::NAMES));
                return Err(KeyFault::new("activity_model", message));
            }
        };
        options.finish()?;
        Ok(choice)
    }

    /// The name that [`ActivityChoice::read`] knows it by.
    #[must_use]
    pub fn name(&self) -> &'static str {
        match self {
            Self::Ideal => "ideal",
            Self::Davies { .. } => "davies",
            Self::DebyeHuckel(_) => "debye-hueckel",
            Self::TruesdellJones(_) => "truesdell-jones",
            Self::Sit(_) => "sit",
        }
    }

    /// Refuses a parameter of a species that the ledger does not know.
    ///
    /// # Errors
    ///
    /// A fault of the key the species stands in, with the nearest species.
    pub fn check(&self, ledger: &Ledger) -> Result<(), KeyFault> {
        let given = match self {
            Self::Ideal | Self::Davies { .. } => return Ok(()),
            Self::DebyeHuckel(own) | Self::TruesdellJones(own) => &own.given,
            Self::Sit(own) => &own.given,
        };
        for (key, species) in given {
            ledger
                .find_species(species.key())
                .map_err(|error: LedgerError| KeyFault::new(key.clone(), format!("`{key}`: {error}")))?;
        }
        Ok(())
    }

    /// Its options as [`ActivityChoice::read`] takes them, in TOML; of tables, what concerns the species asked for.
    #[must_use]
    pub fn written(&self, concerns: impl Fn(&Species) -> bool) -> Vec<(&'static str, String)> {
        let numbers = |numbers: [(&'static str, Option<f64>); 2]| -> Vec<(&'static str, String)> {
            numbers.into_iter().filter_map(|(key, value)| Some((key, format!("{:?}", value?)))).collect()
        };
        let mut options = vec![];
        match self {
            Self::Ideal => {}
            Self::Davies { a, b, water } => {
                options.extend(numbers([("A", *a), ("b", Some(*b))]));
                options.extend(numbers([("water_activity", *water), ("", None)]));
            }
            Self::DebyeHuckel(own) | Self::TruesdellJones(own) => {
                options.extend(numbers([("A", own.a), ("water_activity", own.water)]));
                let ions = |table: &BTreeMap<Species, Quantity>| {
                    table_of(
                        table
                            .iter()
                            .filter(|(ion, _)| concerns(ion))
                            .map(|(ion, q)| (ion.key().to_string(), q)),
                    )
                };
                options.push(("ion_size", ions(&own.ion_size)));
                if matches!(self, Self::TruesdellJones(_)) {
                    options.push(("b", ions(&own.b)));
                }
            }
            Self::Sit(own) => {
                options.extend(numbers([("A", own.a), ("water_activity", own.water)]));
                let pairs = own.epsilon.iter().filter(|((j, k), _)| concerns(j) && concerns(k));
                let pairs = pairs.map(|((j, k), q)| (format!("{} {}", j.key(), k.key()), q));
                options.push(("epsilon", table_of(pairs)));
            }
        }
        options
    }
}

impl IonParameters {
    fn read(options: &mut Named, files: &[&str], tables: &[&str]) -> Result<Self, KeyFault> {
        let (a, water) = common(options)?;
        let mut own = Self { a, water, ion_size: BTreeMap::new(), b: BTreeMap::new(), given: vec![] };
        for file in files {
            for key in tables {
                own.take(key, shipped(file, key)?)?;
            }
        }
        own.given.clear();
        for key in tables {
            own.take(key, table(options, key)?)?;
        }
        Ok(own)
    }

    fn take(&mut self, key: &str, entries: BTreeMap<String, Value>) -> Result<(), KeyFault> {
        for (name, value) in entries {
            let ion = solute(&name, &name)?;
            if key == "ion_size" {
                self.ion_size.insert(ion.clone(), ion_size(&name, value)?);
            } else {
                self.b.insert(ion.clone(), coefficient(&name, value)?);
            }
            self.given.push((name, ion));
        }
        Ok(())
    }

    /// The size of an ion, and whether it is one of the table rather than of its charge.
    #[must_use]
    pub fn size(&self, ion: &Species) -> (f64, bool) {
        match self.ion_size.get(ion) {
            Some(size) => (size.value(), true),
            None => (size_by_charge(ion.charge()), false),
        }
    }
}

/// The middle of Kielland's classes, angstrom: an assumption of this project.
fn size_by_charge(charge: i32) -> f64 {
    match (charge.abs(), charge > 0) {
        (0, _) => 0.0,
        (1, _) | (3, false) => 4.0,
        (2, _) => 5.0,
        (3, true) => 9.0,
        (_, true) => 11.0,
        (_, false) => 5.0,
    }
}

impl Interactions {
    fn read(options: &mut Named) -> Result<Self, KeyFault> {
        let (a, water) = common(options)?;
        let mut own = Self { a, water, epsilon: BTreeMap::new(), given: vec![] };
        for (pair, value) in shipped("grenthe1992", "epsilon")? {
            let epsilon = epsilon(&pair, value)?;
            let published =
                epsilon.published_as(&format!("epsilon of {pair}, grenthe1992"), &format!("epsilon({pair})"));
            let published = published.map_err(|error| KeyFault::new(&pair, error.to_string()))?;
            own.insert(&pair, published)?;
        }
        own.given.clear();
        for (pair, value) in table(options, "epsilon")? {
            let epsilon = epsilon(&pair, value)?;
            own.insert(&pair, epsilon)?;
        }
        Ok(own)
    }

    fn insert(&mut self, pair: &str, epsilon: Quantity) -> Result<(), KeyFault> {
        let (j, k) = solutes(pair)?;
        self.given.extend([(pair.to_string(), j.clone()), (pair.to_string(), k.clone())]);
        let pair = if j <= k { (j, k) } else { (k, j) };
        self.epsilon.insert(pair, epsilon);
        Ok(())
    }
}

/// `A` and `water_activity`.
fn common(options: &mut Named) -> Result<(Option<f64>, Option<f64>), KeyFault> {
    Ok((positive(options, "A")?, positive(options, "water_activity")?))
}

fn positive(options: &mut Named, key: &str) -> Result<Option<f64>, KeyFault> {
    match options.number(key)? {
        Some(number) if number <= 0.0 => {
            Err(KeyFault::new(key, format!("`{key}` must be above zero, not {number}")))
        }
        number => Ok(number),
    }
}

/// A table among the options.
fn table(options: &mut Named, key: &str) -> Result<BTreeMap<String, Value>, KeyFault> {
    match options.take(key) {
        None => Ok(BTreeMap::new()),
        Some(Value::Map(table)) => Ok(table),
        Some(other) => {
            let example =
                if key == "epsilon" { "\"Na^+ Cl^-\": \"0.03 +/- 0.01 kg/mol\"" } else { "\"Na^+\": 4.0" };
            let message = format!("`{key}` takes a table such as #{{ {example} }}, not {}", other.kind());
            Err(KeyFault::new(key, message))
        }
    }
}

fn solute(name: &str, key: &str) -> Result<Species, KeyFault> {
    let species = Species::parse(name).map_err(|error| KeyFault::new(key, format!("`{key}`: {error}")))?;
    if species.is_solute() {
        Ok(species)
    } else {
        Err(KeyFault::new(
            key,
            format!("`{key}`: `{name}` is no solute, and only solutes have activity coefficients"),
        ))
    }
}

/// The two solutes of a key such as `Na^+ Cl^-`.
fn solutes(pair: &str) -> Result<(Species, Species), KeyFault> {
    let fault = |message: String| KeyFault::new(pair, format!("`{pair}`: {message}"));
    let names: Vec<&str> = pair.split_whitespace().collect();
    let [j, k] = names.as_slice() else {
        return Err(fault("two solutes with a space between, such as `Na^+ Cl^-`".into()));
    };
    let (j, k) = (solute(j, pair)?, solute(k, pair)?);
    if j == k || j.charge() * k.charge() > 0 {
        return Err(fault("ions of one sign do not interact in this model; a cation and an anion do".into()));
    }
    Ok((j, k))
}

/// A size in angstrom; a number by itself is a convention, without uncertainty.
fn ion_size(key: &str, value: Value) -> Result<Quantity, KeyFault> {
    const LARGEST: f64 = 30.0;

    let fault = |message: String| KeyFault::new(key, format!("the ion size of `{key}` {message}"));
    let angstrom = Unit::parse("angstrom").map_err(|error| fault(error.to_string()))?;
    let size = match value {
        Value::Number(size) => Ok(Quantity::exact(size, angstrom.clone())),
        Value::Text(text) => Quantity::parse_any(&text, &angstrom, &format!("ion size of {key}")),
        Value::Quantity(size) => Ok(size),
        other => return Err(fault(format!("is a number of angstrom, not {}", other.kind()))),
    };
    let size = size
        .and_then(|size| size.to(&angstrom))
        .map_err(|error| fault(format!("cannot be read: {error}")))?;
    if (0.0..=LARGEST).contains(&size.value()) {
        Ok(size)
    } else {
        Err(fault(format!(
            "has to lie between 0 and {LARGEST} angstrom (Na^+ has 4, Ca^2+ has 6), not at {}",
            size.value()
        )))
    }
}

fn coefficient(key: &str, value: Value) -> Result<Quantity, KeyFault> {
    match value {
        Value::Number(b) => Ok(Quantity::exact(b, Kind::InteractionCoefficient.default_unit())),
        other => named::quantity(key, other, Kind::InteractionCoefficient),
    }
}

fn epsilon(pair: &str, value: Value) -> Result<Quantity, KeyFault> {
    named::quantity(pair, value, Kind::InteractionCoefficient)
}

/// A table of a shipped file; empty where the file has none of the name.
fn shipped(file: &str, key: &str) -> Result<BTreeMap<String, Value>, KeyFault> {
    type Files = BTreeMap<&'static str, Result<BTreeMap<String, Value>, Vec<FileFault>>>;
    static FILES: LazyLock<Files> =
        LazyLock::new(|| ACTIVITY.iter().map(|(name, text)| (*name, read_tables(text))).collect());
    match FILES.get(file) {
        Some(Ok(tables)) => match tables.get(key) {
            Some(Value::Map(table)) => Ok(table.clone()),
            _ => Ok(BTreeMap::new()),
        },
        // A defect of the program, kept from panicking.
        _ => Err(KeyFault::new("activity_model", format!("the shipped parameters `{file}` cannot be read"))),
    }
}

/// An inline table in TOML.
fn table_of<'a>(entries: impl Iterator<Item = (String, &'a Quantity)>) -> String {
    let entries: Vec<String> =
        entries.map(|(key, quantity)| format!("\"{key}\" = {}", in_toml(quantity))).collect();
    format!("{{ {} }}", entries.join(", "))
}

/// A number where nothing is uncertain, else the value with what follows +/-.
fn in_toml(quantity: &Quantity) -> String {
    match quantity.sigma() {
        Some(sigma) if !quantity.parts().is_empty() => format!("\"{:?} +/- {sigma:?}\"", quantity.value()),
        _ => format!("{:?}", quantity.value()),
    }
}

// Inputs are numbered as they are made; what is shown, and what a digest is made of, has to be the same each time.
impl fmt::Debug for IonParameters {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let ions = |table: &BTreeMap<Species, Quantity>| {
            table_of(table.iter().map(|(ion, quantity)| (ion.key().to_string(), quantity)))
        };
        write!(f, "{:?} {:?} {} {}", self.a, self.water, ions(&self.ion_size), ions(&self.b))
    }
}

impl fmt::Debug for Interactions {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let pairs = self.epsilon.iter().map(|((j, k), q)| (format!("{} {}", j.key(), k.key()), q));
        write!(f, "{:?} {:?} {}", self.a, self.water, table_of(pairs))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn options(entries: &[(&str, Value)]) -> Named {
        Named::new(entries.iter().map(|(key, value)| ((*key).to_string(), value.clone())).collect())
    }

    fn map(entries: &[(&str, Value)]) -> Value {
        Value::Map(entries.iter().map(|(key, value)| ((*key).to_string(), value.clone())).collect())
    }

    #[test]
    fn what_is_shipped_can_be_read_and_is_complete() {
        for name in ActivityChoice::NAMES {
            let choice = ActivityChoice::read(name, Named::default()).unwrap();
            assert_eq!(choice.name(), name);
        }
        let ActivityChoice::TruesdellJones(own) =
            ActivityChoice::read("truesdell-jones", Named::default()).unwrap()
        else {
            panic!("another model")
        };
        let ion = |name: &str| Species::parse(name).unwrap();
        assert_eq!(own.b.len(), 11);
        assert_eq!(own.size(&ion("Ca^2+")), (5.0, true), "the fitted size stands over Kielland's");
        assert_eq!(own.size(&ion("NH4^+")), (2.5, true));
        assert_eq!(own.size(&ion("CaHCO3^+")), (4.0, false));
        let ActivityChoice::Sit(own) = ActivityChoice::read("sit", Named::default()).unwrap() else {
            panic!("another model")
        };
        assert_eq!(own.epsilon.len(), 33);
    }

    #[test]
    fn own_parameters_stand_over_the_shipped() {
        let own = options(&[("epsilon", map(&[("Cl^- Na^+", Value::Text("0.05 +/- 0.01".into()))]))]);
        let ActivityChoice::Sit(own) = ActivityChoice::read("sit", own).unwrap() else {
            panic!("another model")
        };
        assert_eq!(own.epsilon.len(), 33);
        let pair = solutes("Na^+ Cl^-").unwrap();
        let pair = if pair.0 <= pair.1 { pair } else { (pair.1, pair.0) };
        assert_eq!((own.epsilon[&pair].value(), own.epsilon[&pair].sigma()), (0.05, Some(0.01)));
        assert_eq!(own.given.len(), 2);
    }

    #[test]
    fn faults_name_their_key_and_what_is_right() {
        let refused = |name: &str, key: &str, value: Value| {
            let fault = ActivityChoice::read(name, options(&[(key, value)])).unwrap_err();
            (fault.key, fault.message)
        };
        let (key, message) = refused("debye-hueckel", "ion_size", map(&[("Na^+", Value::Number(-4.0))]));
        assert_eq!(key, "Na^+");
        assert_eq!(
            message,
            "the ion size of `Na^+` has to lie between 0 and 30 angstrom (Na^+ has 4, Ca^2+ has 6), not at -4"
        );
        let (key, message) = refused("sit", "epsilon", map(&[("Na^+ K^+", Value::Number(0.1))]));
        assert_eq!(key, "Na^+ K^+");
        assert!(message.contains("a cation and an anion do"), "{message}");
        let (_, message) = refused("sit", "epsilon", map(&[("Na^+", Value::Number(0.1))]));
        assert!(message.contains("two solutes with a space between"), "{message}");
        let (key, message) = refused("sit", "epsilon", Value::Number(0.1));
        assert_eq!(key, "epsilon");
        assert!(message.contains("takes a table"), "{message}");
        let (key, message) = refused("debye-hueckel", "b", Value::Number(0.1));
        assert!(key == "b" && message.contains("unknown key"), "{message}");
        let fault = ActivityChoice::read("debye-huckel", Named::default()).unwrap_err();
        assert!(fault.message.contains("did you mean `debye-hueckel`?"), "{}", fault.message);
    }

    #[test]
    fn what_is_written_can_be_read_back() {
        let all = |_: &Species| true;
        for name in ActivityChoice::NAMES {
            let choice = ActivityChoice::read(name, Named::default()).unwrap();
            let text: String =
                choice.written(all).iter().map(|(key, value)| format!("{key} = {value}\n")).collect();
            let again = ActivityChoice::read(name, Named::new(read_tables(&text).unwrap())).unwrap();
            assert_eq!(format!("{choice:?}"), format!("{again:?}"));
        }
    }
}
