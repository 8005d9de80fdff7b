//! The trail of an answer: every value it comes from, with what it weighs and where it was published.

use super::observable::{Asked, ObservableError};
use super::state::State;
use crate::chem::Origin;
use crate::present::{Cell, Column, Table};
use crate::quantity::{Part, Quantity};

/// One input of an answer.
struct Source<'a> {
    part: &'a Part,
    /// Share of the variance, where the input states an uncertainty.
    share: Option<f64>,
    /// The published or typed constant it is, if it is one.
    origin: Option<&'a Origin>,
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
    let sigma = |source: &Source| match source.part.input.sigma() {
        Some(sigma) => Cell::number(sigma),
        None => Cell::missing_because("not stated"),
    };
    let share = |source: &Source| source.share.map_or_else(Cell::missing, Cell::number);
    Ok(Table::new([
        texts("input", &|source| source.part.input.label().to_string()),
        texts("as stated", &|source| of_origin(source, &|origin| origin.stated.clone(), "")),
        Column::numbers("sensitivity", sources.iter().map(|source| source.part.sensitivity)),
        Column::new("sigma", sources.iter().map(sigma)),
        Column::new("share", sources.iter().map(share)),
        texts("provenance", &|source| of_origin(source, &|origin| origin.provenance.to_string(), "given")),
        texts("source", &|source| of_origin(source, &cited, "this water")),
    ])
    .expect("columns of one length"))
}

fn source<'a>(state: &'a State, answer: &Quantity, part: &'a Part) -> Source<'a> {
    let is_this = |origin: &&Origin| origin.parts.iter().any(|own| own.input == part.input);
    let constants = state.system().ledger().reactions().filter_map(|(_, reaction)| reaction.constant().ok());
    let mut origins = constants.flat_map(|constant| constant.history.uses()).map(|(origin, _)| &**origin);
    let rows = answer.budget().rows;
    let own = |row: &&crate::quantity::BudgetRow| {
        row.label == part.input.label() && row.sensitivity == part.sensitivity
    };
    Source { part, share: rows.iter().find(own).map(|row| row.share), origin: origins.find(is_this) }
}

fn cited(origin: &Origin) -> String {
    origin.source.clone().unwrap_or_else(|| "no source given".into())
}
