//! The trail of a constant: what it was made of, as a table and as sentences.

use super::rational::{self, Rational};
use super::reaction::{Reaction, ReactionError};
use crate::present::{Cell, Column, Table};
use crate::quantity::{Input, Part, Quantity};
use crate::units::{Style, Unit};

/// Every value in a constant with its share of the variance, and every conversion.
#[derive(Debug, Clone, PartialEq)]
pub struct Trail {
    equation: String,
    log_k: String,
    conditions: String,
    rows: Vec<TrailRow>,
    conversions: Vec<String>,
}

/// One stated value, or one parameter of a conversion or of the dependence on temperature.
#[derive(Debug, Clone, PartialEq)]
pub struct TrailRow {
    /// Its name, or the equation where it has none.
    pub label: String,
    /// How many times it enters; `None` for a parameter.
    pub multiple: Option<Rational>,
    /// The equation it was stated for; empty for a parameter.
    pub equation: String,
    /// The value as stated.
    pub stated: String,
    /// Its standard uncertainty, in log10 units for a constant, in its own for a parameter; `None` where not stated.
    pub sigma: Option<f64>,
    /// Its share of the variance of log10 K; `None` where its uncertainty is not stated.
    pub share: Option<f64>,
    /// How the value got here.
    pub provenance: String,
    /// Its source.
    pub source: Option<String>,
}

impl Reaction {
    /// What the constant was made of, at the reaction's own temperature.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn trail(&self) -> Result<Trail, ReactionError> {
        let (constant, log_k) = (self.constant()?, self.log_k()?);
        let shares = Shares::of(&log_k);
        let mut seen: Vec<Input> = Vec::new();
        let mut rows = Vec::new();
        for (origin, multiple) in constant.history.uses() {
            let share = shares.of_parts(&origin.parts, &mut seen);
            let sigma = Quantity::from_parts(0.0, Unit::one(), origin.parts.clone()).sigma();
            rows.push(TrailRow {
                label: origin.label.clone(),
                multiple: Some(*multiple),
                equation: origin.equation.clone(),
                stated: origin.stated.clone(),
                sigma: sigma.filter(|_| !origin.parts.is_empty()),
                share,
                provenance: origin.provenance.to_string(),
                source: origin.source.clone(),
            });
        }
        for influence in constant.history.influences() {
            let part = influence.at(constant.temperature);
            if part.sensitivity != 0.0 {
                let (label, sigma) = (part.input.label().to_string(), part.input.sigma());
                let share = shares.of_parts(&[part], &mut seen);
                rows.push(TrailRow {
                    label,
                    multiple: None,
                    equation: String::new(),
                    stated: "parameter".into(),
                    sigma,
                    share,
                    provenance: "stated".into(),
                    source: None,
                });
            }
        }
        Ok(Trail {
            equation: self.equation().to_string(),
            log_k: format!(
                "{} at {} degC",
                log_k.display(Style::Ascii),
                celsius(constant.temperature.celsius())
            ),
            conditions: constant.conditions.describe(self.terms()?),
            rows,
            conversions: constant.history.conversions().to_vec(),
        })
    }
}

impl Trail {
    /// The values it was made of, in order of first use, then the parameters.
    #[must_use]
    pub fn rows(&self) -> &[TrailRow] {
        &self.rows
    }

    /// The conversions in the order they were made, in words.
    #[must_use]
    pub fn conversions(&self) -> &[String] {
        &self.conversions
    }

    /// One row a value, then one a conversion.
    #[must_use]
    pub fn table(&self) -> Table {
        let blank = vec![""; self.conversions.len()];
        let texts = |title: &str, text: &dyn Fn(&TrailRow) -> String, after: &[&str]| {
            let texts: Vec<String> =
                self.rows.iter().map(text).chain(after.iter().map(|text| (*text).to_string())).collect();
            Column::texts(title, texts.iter().map(String::as_str))
        };
        let numbers = |title: &str, number: &dyn Fn(&TrailRow) -> Option<f64>| {
            let cells = self.rows.iter().map(|row| number(row).map_or_else(Cell::missing, Cell::number));
            Column::new(title, cells.chain(self.conversions.iter().map(|_| Cell::missing())))
        };
        let equations = self.rows.iter().map(|row| row.equation.as_str()).chain(blank.iter().copied());
        let conversions: Vec<&str> = self.conversions.iter().map(String::as_str).collect();
        let kinds = vec!["conversion"; self.conversions.len()];
        Table::new([
            texts("constant", &|row| row.label.clone(), &kinds),
            numbers("multiple", &|row| row.multiple.map(rational::to_f64)),
            Column::chemistry("reaction", equations),
            texts("as stated", &|row| row.stated.clone(), &conversions),
            numbers("sigma", &|row| row.sigma),
            numbers("share of variance [%]", &|row| row.share.map(|share| 100.0 * share)),
            texts("provenance", &|row| row.provenance.clone(), &blank),
            texts("source", &TrailRow::cited, &blank),
        ])
        .expect("columns of one length")
    }

    /// Sentences for a methods section: the result, then each value with its multiple and source, each conversion, and
    /// where the uncertainty comes from.
    #[must_use]
    pub fn text(&self) -> String {
        let Self { equation, log_k, conditions, .. } = self;
        let constants: Vec<&TrailRow> = self.rows.iter().filter(|row| row.multiple.is_some()).collect();
        let mut sentences = vec![format!("The constant of {equation} is log K = {log_k} ({conditions}).")];
        match constants.as_slice() {
            [one] if one.multiple == Some(1.into()) && one.equation == *equation => {
                sentences.push(format!("It is the published value, {} [{}].", one.stated, one.cited()));
            }
            several => {
                let number = crate::text::count(several.len(), "stated constant");
                sentences.push(format!("It was derived from {number}."));
                sentences.extend(several.iter().map(|row| row.sentence()));
            }
        }
        if !self.conversions.is_empty() {
            sentences.push(format!("Converted: {}.", self.conversions.join("; ")));
        }
        sentences.extend(self.uncertainty());
        sentences.join(" ")
    }

    fn uncertainty(&self) -> Vec<String> {
        let mut stated: Vec<(f64, &str)> =
            self.rows.iter().filter_map(|row| Some((row.share?, row.label.as_str()))).collect();
        stated.sort_by(|a, b| b.0.total_cmp(&a.0));
        let mut sentences = Vec::new();
        if stated.len() > 1 && stated[0].0 > 0.0 {
            let shares: Vec<String> =
                stated.iter().map(|(share, label)| format!("{:.0} % from {label}", 100.0 * share)).collect();
            sentences.push(format!("Of the variance of log K come {}.", shares.join(", ")));
        }
        let n_unstated = self.rows.iter().filter(|row| row.sigma.is_none()).count();
        if n_unstated > 0 {
            let values = crate::text::count(n_unstated, "value");
            let verb = if n_unstated == 1 { "states" } else { "state" };
            sentences.push(format!("{values} {verb} no uncertainty, so that of log K is incomplete."));
        }
        sentences
    }
}

impl TrailRow {
    fn cited(&self) -> String {
        match (&self.source, self.multiple) {
            (Some(source), _) => source.clone(),
            (None, Some(_)) => "no source given".into(),
            (None, None) => String::new(),
        }
    }

    /// `HCO3^- <=> …, taken -1 times: log k = -10.329 at 25 degC, standard uncertainty 0.02 [source; recalled].`
    fn sentence(&self) -> String {
        let multiple = self.multiple.unwrap_or_else(|| 1.into());
        let taken = match rational::text(multiple).as_str() {
            "1" => "taken once".to_string(),
            "-1" => "reversed".to_string(),
            times if multiple < 0.into() => {
                format!("reversed and taken {} times", times.trim_start_matches('-'))
            }
            times => format!("taken {times} times"),
        };
        let sigma = self.sigma.map(|sigma| format!(", standard uncertainty {sigma}")).unwrap_or_default();
        let confirmed = if self.provenance == "memory" { "; recalled, to be confirmed" } else { "" };
        format!("{}, {taken}: {}{sigma} [{}{confirmed}].", self.equation, self.stated, self.cited())
    }
}

/// Shares of the variance of log10 K by input.
struct Shares {
    variance: f64,
    parts: Vec<Part>,
}

impl Shares {
    fn of(log_k: &Quantity) -> Self {
        let parts = log_k.parts().to_vec();
        let variance = parts.iter().filter_map(Self::square).sum();
        Self { variance, parts }
    }

    fn square(part: &Part) -> Option<f64> {
        Some((part.sensitivity * part.input.sigma()?).powi(2))
    }

    /// The share of these inputs; an input is counted with the first row that has it.
    fn of_parts(&self, parts: &[Part], seen: &mut Vec<Input>) -> Option<f64> {
        let mut squares = Vec::new();
        for part in parts {
            part.input.sigma()?;
            if !seen.contains(&part.input) {
                seen.push(part.input.clone());
                squares.extend(self.parts.iter().find(|own| own.input == part.input).and_then(Self::square));
            }
        }
        let share = squares.iter().sum::<f64>() / self.variance;
        if parts.is_empty() { None } else { Some(if share.is_finite() { share } else { 0.0 }) }
    }
}

fn celsius(celsius: f64) -> f64 {
    (celsius * 1e6).round() / 1e6
}
