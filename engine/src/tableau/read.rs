//! From JSON to a [`Tableau`], with every fault and its place.

use std::collections::BTreeSet;

use serde_json::{Map, Value};

use super::{Part, Phase, Tableau};
use crate::activity::{Davies, Model};
use crate::nearest::nearest;
use crate::physics::constants::LN_10;
use crate::solve::{Coefficient, Mineral, Mixture, Problem, Reservoir, Row, Total};
use crate::text;

/// What is wrong with a tableau, and where.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("`{place}`: {message}")]
pub struct Fault {
    /// The way to it from the top: `species[2].nu`.
    pub place: String,
    /// What is wrong and what would have been accepted.
    pub message: String,
}

const KEYS: &[&str] =
    &["components", "totals", "charges", "bare", "species", "fixed", "phases", "activity", "davies"];

impl Tableau {
    /// Reads a tableau from the text of a JSON file.
    ///
    /// # Errors
    ///
    /// Returns all faults.
    pub fn parse(json: &str) -> Result<Self, Vec<Fault>> {
        let value: Value = serde_json::from_str(json).map_err(|error| {
            vec![Fault { place: "the file".into(), message: format!("is not JSON: {error}") }]
        })?;
        Self::read(&value)
    }

    /// Reads a tableau from a JSON value.
    ///
    /// # Errors
    ///
    /// Returns all faults.
    pub fn read(value: &Value) -> Result<Self, Vec<Fault>> {
        let mut reader = Reader::default();
        match reader.tableau(value) {
            Some(tableau) if reader.faults.is_empty() => Ok(tableau),
            _ => Err(reader.faults),
        }
    }
}

/// Collects faults while it reads; what cannot be read is `None` and has left its fault.
#[derive(Default)]
struct Reader {
    faults: Vec<Fault>,
    n_components: usize,
}

impl Reader {
    fn tableau(&mut self, value: &Value) -> Option<Tableau> {
        let map = self.map(value, "the tableau", KEYS, &["components", "totals"])?;
        let components = self.names(map.get("components"), "components");
        self.n_components = components.len();
        let totals = self.numbers(map.get("totals"), "totals").into_iter().map(Total::from).collect();
        let charges = map.get("charges").map(|charges| self.numbers(Some(charges), "charges"));
        let bare = self.components(map.get("bare"), "bare", &components);
        let model = self.model(map);
        let mut problem = Problem { n_components: components.len(), totals, ..Problem::default() };
        let mut species = Vec::new();
        let charge_of =
            |j: usize| charges.as_ref().and_then(|charges| charges.get(j)).copied().unwrap_or(0.0);
        for (j, name) in components.iter().enumerate().filter(|(j, _)| !bare.contains(j)) {
            species.push(name.clone());
            problem.species.push(Row::new(&[(j, 1)], 0.0).with_charge(charge_of(j)));
        }
        if model.depends_on_ionic_strength() && charges.is_none() && !species.is_empty() {
            self.fault(
                "charges",
                "`activity` \"davies\" needs the charge of every component that is a species",
            );
        }
        for (item, place) in self.items(map.get("species"), "species") {
            let Some(entry) =
                self.map(item, &place, &["name", "nu", "log_k", "charge"], &["name", "nu", "log_k"])
            else {
                continue;
            };
            if let Some(name) = entry.get("name").and_then(|name| self.text(name, &format!("{place}.name"))) {
                species.push(name);
            }
            if let Some(row) = self.row(entry, &place) {
                let sum = || row.stoichiometry.iter().map(|(j, nu)| ratio(*nu) * charge_of(*j)).sum();
                let charge = match entry.get("charge") {
                    Some(charge) => self.number(charge, &format!("{place}.charge")).unwrap_or(0.0),
                    None => sum(),
                };
                problem.species.push(row.with_charge(charge));
            }
        }
        self.unique(&species, "species");
        let fixed = self.fixed(map.get("fixed"), &components, &mut problem);
        let phases = self.phases(map.get("phases"), &mut problem);
        self.unique(&phases.iter().map(|phase| phase.name.clone()).collect::<Vec<_>>(), "phases");
        Some(Tableau { components, species, phases, fixed, problem, model })
    }

    fn fixed(&mut self, value: Option<&Value>, components: &[String], problem: &mut Problem) -> Vec<usize> {
        let mut fixed = Vec::new();
        for (item, place) in self.items(value, "fixed") {
            let keys = &["component", "log_a"];
            let Some(entry) = self.map(item, &place, keys, keys) else { continue };
            let component = entry
                .get("component")
                .and_then(|name| self.component(name, &format!("{place}.component"), components));
            let log_a = entry.get("log_a").and_then(|log_a| self.number(log_a, &format!("{place}.log_a")));
            let (Some(component), Some(log_a)) = (component, log_a) else { continue };
            if fixed.contains(&component) {
                self.fault(&place, format!("`{}` is fixed twice", components[component]));
                continue;
            }
            fixed.push(component);
            problem
                .reservoirs
                .push(Reservoir { row: Row::new(&[(component, 1)], 0.0), ln_value: log_a * LN_10 });
        }
        fixed
    }

    fn phases(&mut self, value: Option<&Value>, problem: &mut Problem) -> Vec<Phase> {
        let mut phases = Vec::new();
        for (item, place) in self.items(value, "phases") {
            let keys = &["name", "members"];
            let Some(entry) = self.map(item, &place, keys, keys) else { continue };
            let name = entry.get("name").and_then(|name| self.text(name, &format!("{place}.name")));
            let place = format!("{place}.members");
            let mut members = Vec::new();
            let items = self.items(entry.get("members"), &place);
            if items.is_empty() && entry.get("members").is_some_and(Value::is_array) {
                self.fault(&place, "a phase has at least one member");
            }
            for (item, place) in items {
                let Some(entry) = self.map(item, &place, &["name", "nu", "log_k"], &["nu", "log_k"]) else {
                    continue;
                };
                members.extend(self.row(entry, &place));
            }
            let Some(name) = name else { continue };
            let part = if members.len() == 1 {
                problem.minerals.extend(members.into_iter().map(|row| Mineral { row, ln_target: 0.0 }));
                Part::Mineral(problem.minerals.len() - 1)
            } else {
                problem.mixtures.push(Mixture { members, ln_target: 0.0 });
                Part::Mixture(problem.mixtures.len() - 1)
            };
            phases.push(Phase { name, part });
        }
        phases
    }

    fn model(&mut self, map: &Map<String, Value>) -> Model {
        let asked = map.get("activity").and_then(|activity| self.text(activity, "activity"));
        let davies = map.get("davies").and_then(|davies| self.map(davies, "davies", &["A", "b"], &[]));
        let mut coefficient = |key: &str, default: f64| {
            let value = davies.and_then(|davies| davies.get(key));
            value
                .map_or(Some(default), |value| self.number(value, &format!("davies.{key}")))
                .unwrap_or(default)
        };
        let model = Davies::new(coefficient("A", 0.509)).with_b(coefficient("b", 0.3));
        match asked.as_deref() {
            Some("davies") => Model::davies(model),
            None | Some("ideal") => {
                if davies.is_some() {
                    self.fault("davies", "has no effect unless `activity` is \"davies\"");
                }
                Model::IDEAL
            }
            Some(other) => {
                self.fault(
                    "activity",
                    format!("there is no model `{other}`; there are `ideal` and `davies`"),
                );
                Model::IDEAL
            }
        }
    }

    /// `nu` and `log_k` of a species or a member.
    fn row(&mut self, entry: &Map<String, Value>, place: &str) -> Option<Row> {
        let log_k = entry.get("log_k").and_then(|log_k| self.number(log_k, &format!("{place}.log_k")));
        let place = format!("{place}.nu");
        let nu = self.numbers(entry.get("nu"), &place);
        let mut stoichiometry = Vec::new();
        for (j, value) in nu.iter().enumerate().filter(|(_, value)| **value != 0.0) {
            match coefficient(*value) {
                Some(nu) => stoichiometry.push((j, nu)),
                None => self.fault(
                    &format!("{place}[{j}]"),
                    "is neither a whole number nor a fraction with a denominator up to 10000",
                ),
            }
        }
        if stoichiometry.is_empty() && nu.len() == self.n_components {
            self.fault(&place, "has no coefficient other than zero");
        }
        Some(Row { stoichiometry, ..Row::new(&[], log_k? * LN_10) })
    }

    fn fault(&mut self, place: &str, message: impl Into<String>) {
        self.faults.push(Fault { place: place.into(), message: message.into() });
    }

    /// An object with these keys only, of which some are needed.
    fn map<'v>(
        &mut self,
        value: &'v Value,
        place: &str,
        keys: &[&str],
        needed: &[&str],
    ) -> Option<&'v Map<String, Value>> {
        let Some(map) = value.as_object() else {
            self.fault(place, format!("takes a map, not {}", kind(value)));
            return None;
        };
        for key in map.keys().filter(|key| !keys.contains(&key.as_str())) {
            let advice = match nearest(key, keys.iter().copied()) {
                Some(near) => format!("did you mean `{near}`?"),
                None => format!("the keys are {}", text::list(keys)),
            };
            self.fault(place, format!("unknown key `{key}`; {advice}"));
        }
        for key in needed.iter().filter(|key| !map.contains_key(**key)) {
            self.fault(place, format!("`{key}` is missing"));
        }
        Some(map)
    }

    /// The items of a list with their places; nothing for a list that is not there.
    fn items<'v>(&mut self, value: Option<&'v Value>, place: &str) -> Vec<(&'v Value, String)> {
        match value {
            None => vec![],
            Some(Value::Array(items)) => {
                items.iter().enumerate().map(|(i, item)| (item, format!("{place}[{i}]"))).collect()
            }
            Some(other) => {
                self.fault(place, format!("takes a list, not {}", kind(other)));
                vec![]
            }
        }
    }

    /// One number for each component.
    fn numbers(&mut self, value: Option<&Value>, place: &str) -> Vec<f64> {
        let items = self.items(value, place);
        if value.is_some_and(Value::is_array) && items.len() != self.n_components {
            let (found, wanted) = (items.len(), self.n_components);
            self.fault(
                place,
                format!("has {}, and there are {wanted} components", text::count(found, "number")),
            );
        }
        items.into_iter().map(|(item, place)| self.number(item, &place).unwrap_or(0.0)).collect()
    }

    fn number(&mut self, value: &Value, place: &str) -> Option<f64> {
        let number = match value {
            Value::Number(number) => number.as_f64(),
            Value::String(text) => text.trim().parse().ok(),
            _ => None,
        };
        let number = number.filter(|number: &f64| number.is_finite());
        if number.is_none() {
            let found = match value {
                Value::String(text) => format!("`{text}`"),
                Value::Number(number) => format!("`{number}`"),
                other => kind(other).into(),
            };
            self.fault(place, format!("takes a finite number or a decimal text, not {found}"));
        }
        number
    }

    fn text(&mut self, value: &Value, place: &str) -> Option<String> {
        match value {
            Value::String(text) if !text.trim().is_empty() => Some(text.clone()),
            Value::String(_) => {
                self.fault(place, "is empty");
                None
            }
            other => {
                self.fault(place, format!("takes a text, not {}", kind(other)));
                None
            }
        }
    }

    fn names(&mut self, value: Option<&Value>, place: &str) -> Vec<String> {
        let items = self.items(value, place);
        let names: Vec<String> =
            items.into_iter().map(|(item, place)| self.text(item, &place).unwrap_or_default()).collect();
        self.unique(&names, place);
        names
    }

    fn components(&mut self, value: Option<&Value>, place: &str, components: &[String]) -> Vec<usize> {
        let items = self.items(value, place);
        items.into_iter().filter_map(|(item, place)| self.component(item, &place, components)).collect()
    }

    fn component(&mut self, value: &Value, place: &str, components: &[String]) -> Option<usize> {
        let name = self.text(value, place)?;
        let found = components.iter().position(|component| *component == name);
        if found.is_none() {
            let advice = match nearest(&name, components.iter().map(String::as_str)) {
                Some(near) => format!("did you mean `{near}`?"),
                None => format!("the components are {}", text::list(components)),
            };
            self.fault(place, format!("there is no component `{name}`; {advice}"));
        }
        found
    }

    fn unique(&mut self, names: &[String], place: &str) {
        let (mut seen, mut told) = (BTreeSet::new(), BTreeSet::new());
        for name in names.iter().filter(|name| !name.is_empty()) {
            if !seen.insert(name) && told.insert(name) {
                self.fault(place, format!("the name `{name}` stands there twice"));
            }
        }
    }
}

/// What stands there, for messages.
fn kind(value: &Value) -> &'static str {
    match value {
        Value::Null => "nothing",
        Value::Bool(_) => "true or false",
        Value::Number(_) => "a number",
        Value::String(_) => "a text",
        Value::Array(_) => "a list",
        Value::Object(_) => "a map",
    }
}

/// The fraction of smallest denominator that a decimal stands for: 0.5 is 1/2, 0.333333333 is 1/3.
fn coefficient(value: f64) -> Option<Coefficient> {
    const LARGEST: f64 = (1 << 29) as f64;
    const CLOSE: f64 = 1e-9;

    #[allow(clippy::cast_possible_truncation, reason = "below LARGEST and whole")]
    let over = |denominator: i64| {
        let numerator = value * denominator as f64;
        let is_whole = (numerator - numerator.round()).abs() <= CLOSE * denominator as f64;
        (is_whole && numerator.abs() < LARGEST)
            .then(|| Coefficient::new(numerator.round() as i64, denominator))
    };
    if value.fract() == 0.0 { over(1) } else { (2..=10_000).find_map(over) }
}

fn ratio(nu: Coefficient) -> f64 {
    *nu.numer() as f64 / *nu.denom() as f64
}
