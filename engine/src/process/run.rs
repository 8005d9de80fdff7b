//! A run: states in order, a failed one as a row with its reason.

use std::collections::BTreeMap;
use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};

use rayon::prelude::*;

use super::titration::Titration;
use crate::equilibrium::{Asked, EquilibriumError, ObservableError, State, equilibrate};
use crate::ledger::Ledger;
use crate::present::{Cell, Column, Table, TableError};
use crate::quantity::Quantity;
use crate::solve::Settings;
use crate::text::count;
use crate::units::{KgOf, Style, Unit};
use crate::water::Sample;

/// States of many waters; cheap to clone.
#[derive(Clone, Debug)]
pub struct Run(Arc<Inner>);

#[derive(Debug)]
struct Inner {
    /// What tells the rows apart: the names of samples, or the values of axes.
    axes: Vec<Column>,
    outcomes: Vec<Result<State, String>>,
    origin: Origin,
}

/// What made a run, where more can be asked of it than of its states.
#[derive(Clone, Debug, Default)]
pub enum Origin {
    /// Nothing that matters any more.
    #[default]
    Any,
    /// A titration, which can be taken to any other volume.
    Titration(Box<Titration>),
    /// Random draws about the state of the water as given.
    Draws(Box<State>),
}

/// What a table shows of an answer.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Cells {
    /// The number.
    Plain,
    /// The number with its standard uncertainty.
    Uncertain,
}

/// Why a run has no table.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum RunError {
    /// An observable is at fault.
    #[error(transparent)]
    Observable(#[from] ObservableError),
    /// The table cannot be made.
    #[error(transparent)]
    Table(#[from] TableError),
}

/// Called with the number of states done, from any thread.
pub type OnProgress<'a> = &'a (dyn Fn(usize) + Sync);

impl Run {
    /// Rows by what tells them apart and what became of them.
    #[must_use]
    pub fn new(axes: Vec<Column>, outcomes: Vec<Result<State, String>>) -> Self {
        Self(Arc::new(Inner { axes, outcomes, origin: Origin::Any }))
    }

    /// The same with what made it.
    #[must_use]
    pub fn with_origin(&self, origin: Origin) -> Self {
        let Inner { axes, outcomes, .. } = &*self.0;
        Self(Arc::new(Inner { axes: axes.clone(), outcomes: outcomes.clone(), origin }))
    }

    /// What made it.
    #[must_use]
    pub fn origin(&self) -> &Origin {
        &self.0.origin
    }

    /// Equilibrates samples in parallel; the order and every bit of the results do not depend on the number of threads.
    ///
    /// # Errors
    ///
    /// [`EquilibriumError::Stopped`] if interrupted. A sample that fails becomes a failed row.
    pub fn equilibrate(
        samples: &[Sample],
        ledger: Option<&Ledger>,
        settings: &Settings,
        progress: OnProgress,
    ) -> Result<Self, EquilibriumError> {
        let outcomes = each(samples, progress, |sample| match equilibrate(sample, ledger, settings) {
            Err(EquilibriumError::Stopped) => Err(EquilibriumError::Stopped),
            other => Ok(other.map_err(|error| error.to_string())),
        })?;
        Ok(Self::new(labels(samples), outcomes))
    }

    /// What tells the rows apart.
    #[must_use]
    pub fn axes(&self) -> &[Column] {
        &self.0.axes
    }

    /// What became of each row.
    pub fn outcomes(&self) -> &[Result<State, String>] {
        &self.0.outcomes
    }

    /// States that were found, in order.
    pub fn states(&self) -> impl Iterator<Item = &State> {
        self.0.outcomes.iter().filter_map(|outcome| outcome.as_ref().ok())
    }

    /// Number of rows.
    #[must_use]
    pub fn len(&self) -> usize {
        self.0.outcomes.len()
    }

    /// Whether it has no rows.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.0.outcomes.is_empty()
    }

    /// A table of observables, each in the unit asked for; titles carry units. Names of axes and labels may be asked for
    /// among them, and stand first if none is.
    ///
    /// # Errors
    ///
    /// Returns an observable that cannot be read, or that no row can answer.
    pub fn table(&self, observables: &[String]) -> Result<Table, RunError> {
        self.table_of(observables, Cells::Plain)
    }

    /// The same, every number with its standard uncertainty.
    ///
    /// # Errors
    ///
    /// As [`Run::table`].
    pub fn table_with_sigma(&self, observables: &[String]) -> Result<Table, RunError> {
        self.table_of(observables, Cells::Uncertain)
    }

    fn table_of(&self, observables: &[String], cells: Cells) -> Result<Table, RunError> {
        let mut columns: Vec<Column> = Vec::new();
        let names_an_axis = |text: &str| self.axis(text).is_some();
        if !observables.iter().any(|text| names_an_axis(text)) {
            columns.extend(self.0.axes.iter().cloned());
        }
        for text in observables {
            columns.push(match self.axis(text) {
                Some(axis) => axis.clone(),
                None => self.column_of(text, cells)?,
            });
        }
        let failures = self.0.outcomes.iter().map(|outcome| outcome.as_ref().err().cloned());
        Ok(Table::new(columns)?.with_failures(failures)?)
    }

    /// One observable of every row; missing where a row failed, or has no answer.
    ///
    /// # Errors
    ///
    /// Returns an observable that cannot be read, or that no row can answer.
    pub fn column(&self, observable: &str) -> Result<Column, RunError> {
        self.column_of(observable, Cells::Plain)
    }

    fn column_of(&self, observable: &str, cells: Cells) -> Result<Column, RunError> {
        if let Some(axis) = self.axis(observable) {
            return Ok(axis.clone());
        }
        let asked = Asked::parse(observable)?;
        let answer = |state: &State| match cells {
            Cells::Plain => state.number(&asked).map(|(value, unit)| (Cell::number(value), unit)),
            Cells::Uncertain => state.answer(&asked).map(|answer| (cell(&answer), answer.unit().clone())),
        };
        let states: Vec<&State> = self.states().collect();
        let answers: Vec<Result<(Cell, Unit), ObservableError>> =
            states.into_par_iter().map(answer).collect();
        let mut found = answers.iter().filter_map(|answer| answer.as_ref().ok());
        let unit = match (found.next(), answers.iter().find_map(|answer| answer.as_ref().err())) {
            (Some((_, unit)), _) => unit.clone(),
            // An element that is in no row is absent from all of them; anything else no row answers is a fault.
            (None, Some(ObservableError::Absent { .. })) => Unit::one(),
            (None, Some(error)) => return Err(error.clone().into()),
            (None, None) => asked.unit.clone().map_or_else(Unit::one, |unit| unit.per_kg_of(KgOf::Water)),
        };
        let mut answers = answers.into_iter();
        let cells = self.0.outcomes.iter().map(|outcome| match outcome {
            Err(_) => Cell::missing(),
            Ok(_) => match answers.next() {
                Some(Ok((cell, _))) => cell,
                Some(Err(ObservableError::Absent { .. })) => Cell::missing_because("absent"),
                Some(Err(error)) => Cell::missing_because(&error.to_string()),
                None => Cell::missing(),
            },
        });
        let name = asked.observable.to_string();
        let title =
            if unit == Unit::one() { name } else { format!("{name} [{}]", unit.display(Style::Ascii)) };
        Ok(Column::new(title.as_str(), cells.collect::<Vec<_>>()))
    }

    /// Where the uncertainty of an observable comes from: the share of each input in its variance, averaged over the rows
    /// that have one. Inputs of one name, such as `Ca` of every water, count as one.
    ///
    /// # Errors
    ///
    /// As [`Run::column`].
    pub fn budget(&self, observable: &str) -> Result<Table, RunError> {
        let asked = Asked::parse(observable)?;
        let (mut shares, mut rows, mut fault) = (BTreeMap::<String, f64>::new(), 0, None);
        for answer in self.states().map(|state| state.answer(&asked)) {
            let budget = match answer {
                Ok(answer) => answer.budget().rows,
                Err(error) => {
                    fault = fault.or(Some(error));
                    continue;
                }
            };
            rows += usize::from(budget.iter().any(|row| row.share != 0.0));
            for row in budget {
                *shares.entry(row.label).or_default() += row.share;
            }
        }
        if let (0, Some(error)) = (rows, fault) {
            return Err(error.into());
        }
        let mut shares: Vec<(String, f64)> = shares.into_iter().collect();
        shares.sort_by(|a, b| b.1.abs().total_cmp(&a.1.abs()).then_with(|| a.0.cmp(&b.0)));
        let mean = |(_, share): &(String, f64)| share / rows.max(1) as f64;
        Ok(Table::new([
            Column::texts("input", shares.iter().map(|(label, _)| label.as_str())),
            Column::numbers("mean share", shares.iter().map(mean)),
        ])?)
    }

    /// Rows that failed, with their reasons.
    #[must_use]
    pub fn failures(&self) -> Table {
        let failed: Vec<usize> = (0..self.len()).filter(|row| self.0.outcomes[*row].is_err()).collect();
        let axes = self.0.axes.iter().map(|axis| {
            Column::new(
                axis.title().clone(),
                failed.iter().map(|row| axis.cells()[*row].clone()).collect::<Vec<_>>(),
            )
        });
        let reasons =
            failed.iter().map(|row| self.0.outcomes[*row].as_ref().err().map_or("", String::as_str));
        let rows = Column::numbers("row", failed.iter().map(|row| *row as f64));
        Table::new([rows].into_iter().chain(axes).chain([Column::texts("reason", reasons)]))
            .expect("columns of one length")
    }

    /// Warnings of all rows, each once, with the rows concerned.
    #[must_use]
    pub fn warnings(&self) -> Vec<String> {
        let mut rows: Vec<(String, Vec<usize>)> = Vec::new();
        for (row, outcome) in self.0.outcomes.iter().enumerate() {
            for warning in outcome.as_ref().map(State::warnings).unwrap_or_default() {
                match rows.iter_mut().find(|(known, _)| *known == warning) {
                    Some((_, concerned)) => concerned.push(row),
                    None => rows.push((warning, vec![row])),
                }
            }
        }
        rows.into_iter().map(|(warning, rows)| format!("{warning} ({})", which(&rows, self.len()))).collect()
    }

    fn axis(&self, title: &str) -> Option<&Column> {
        self.0.axes.iter().find(|axis| {
            let own = axis.title().to_string();
            own == title || own.split(" [").next() == Some(title)
        })
    }
}

/// Rows as people would say them.
fn which(rows: &[usize], all: usize) -> String {
    if rows.len() == all {
        return "every row".into();
    }
    let shown: Vec<String> = rows.iter().take(8).map(usize::to_string).collect();
    let more = if rows.len() > shown.len() {
        format!(" and {} more", count(rows.len() - shown.len(), "row"))
    } else {
        String::new()
    };
    format!("row{} {}{more}", if rows.len() == 1 { "" } else { "s" }, shown.join(", "))
}

fn cell(answer: &Quantity) -> Cell {
    match answer.sigma() {
        Some(sigma) => Cell::uncertain(answer.value(), sigma),
        None => Cell::number(answer.value()),
    }
}

/// Names and labels of samples as columns; a running number where none has a name.
#[must_use]
pub fn labels(samples: &[Sample]) -> Vec<Column> {
    let mut columns = Vec::new();
    if samples.iter().any(|sample| sample.name().is_some()) {
        columns.push(Column::texts("name", samples.iter().map(|sample| sample.name().unwrap_or(""))));
    } else {
        columns.push(Column::numbers("row", (0..samples.len()).map(|row| row as f64)));
    }
    let mut titles: Vec<&String> = samples.iter().flat_map(|sample| sample.labels().keys()).collect();
    titles.sort();
    titles.dedup();
    for title in titles {
        let texts = samples.iter().map(|sample| sample.labels().get(title).map_or("", String::as_str));
        columns.push(Column::texts(title.as_str(), texts));
    }
    columns
}

/// Does each piece of work on its own, in parallel, results in order.
///
/// # Errors
///
/// The first error in order of the items that were done.
pub fn each<T: Sync, R: Send, E: Send>(
    items: &[T],
    progress: OnProgress,
    work: impl Fn(&T) -> Result<R, E> + Sync,
) -> Result<Vec<R>, E> {
    let done = AtomicUsize::new(0);
    let work = |item: &T| {
        let result = work(item);
        progress(done.fetch_add(1, Ordering::Relaxed) + 1);
        result
    };
    items.par_iter().map(work).collect()
}
