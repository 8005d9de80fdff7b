//! The trail of an answer: every value it comes from, with what it weighs and where it was published.

use super::observable::{Asked, ObservableError};
use super::state::State;
use super::uncertainty::UNKNOWN_SLOPE;
use crate::chem::{History, Origin};
use crate::present::{Cell, Column, Table};
use crate::quantity::{Part, Quantity};

/// One input of an answer.
struct Source<'a> {
    part: &'a Part,
    /// Share of the variance, where the input states an uncertainty.
    share: Option<f64>,
    /// The published or typed constant it is, or acts on, if it does.
    origin: Option<&'a Origin>,
    /// Whether it is the value of that constant, not an enthalpy of it or the like.
    is_value: bool,
}

impl Source<'_> {
    fn is_assumed(&self) -> bool {
        self.part.input.name().is_some_and(|name| name.starts_with(UNKNOWN_SLOPE))
    }
}

/// The inputs of an observable, those with the largest share of its variance first: value as stated, sensitivity
/// (∂answer/∂input), sigma, share, provenance and source.
///
/// # Errors
///
/// As [`State::answer`].
pub fn trail(state: &State, asked: &Asked) -> Result<Table, ObservableError> {
    let answer = state.answer(asked)?;
    let mut sources: Vec<Source> = answer.parts().iter().map(|part| source(state, &answer, part)).collect();
    let weight = |source: &Source| (source.share.unwrap_or(0.0).abs(), source.part.sensitivity.abs());
    sources.sort_by(|a, b| weight(b).partial_cmp(&weight(a)).expect("no NaN"));
    let texts = |title: &str, text: &dyn Fn(&Source) -> String| {
        let texts: Vec<String> = sources.iter().map(text).collect();
        Column::texts(title, texts.iter().map(String::as_str))
    };
    let of_origin = |source: &Source, read: &dyn Fn(&Origin) -> String, otherwise: &str| {
        source.origin.map_or_else(|| otherwise.to_string(), read)
    };
    let stated = |source: &Source| match source.origin {
        Some(origin) if source.is_value => origin.stated.clone(),
        _ => String::new(),
    };
    let given = |source: &Source| if source.is_assumed() { "assumed" } else { "given" };
    let by = |source: &Source| if source.is_assumed() { "this project" } else { "this water" };
    let sigma = |source: &Source| match source.part.input.sigma() {
        Some(sigma) => Cell::number(sigma),
        None => Cell::missing_because("not stated"),
    };
    let share = |source: &Source| source.share.map_or_else(Cell::missing, Cell::number);
    Ok(Table::new([
        texts("input", &|source| source.part.input.label().to_string()),
        texts("as stated", &stated),
        Column::numbers("sensitivity", sources.iter().map(|source| source.part.sensitivity)),
        Column::new("sigma", sources.iter().map(sigma)),
        Column::new("share", sources.iter().map(share)),
        texts("provenance", &|source| {
            of_origin(source, &|origin| origin.provenance.to_string(), given(source))
        }),
        texts("source", &|source| of_origin(source, &cited, by(source))),
    ])
    .expect("columns of one length"))
}

fn source<'a>(state: &'a State, answer: &Quantity, part: &'a Part) -> Source<'a> {
    let is_this = |origin: &&Origin| origin.parts.iter().any(|own| own.input == part.input);
    let constants =
        || state.system().ledger().reactions().filter_map(|(_, reaction)| reaction.constant().ok());
    let mut origins = constants().flat_map(|constant| constant.history.uses()).map(|(origin, _)| &**origin);
    let value = origins.find(is_this);
    let acts = |history: &&History| history.influences().iter().any(|own| own.input == part.input);
    let acted_on = || {
        let history = constants().map(|constant| &constant.history).find(acts)?;
        history.uses().first().map(|(origin, _)| &**origin)
    };
    let rows = answer.budget().rows;
    let own = |row: &&crate::quantity::BudgetRow| {
        row.label == part.input.label() && row.sensitivity == part.sensitivity
    };
    let share = rows.iter().find(own).map(|row| row.share);
    Source { part, share, origin: value.or_else(acted_on), is_value: value.is_some() }
}

fn cited(origin: &Origin) -> String {
    origin.source.clone().unwrap_or_else(|| "no source given".into())
}
