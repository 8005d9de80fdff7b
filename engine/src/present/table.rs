//! Tables: columns of equal length, and the operations on their rows.

use std::cmp::Ordering;
use std::collections::HashMap;
use std::sync::Arc;

use super::column::Content;
use super::title::SIGMA_MARK;
use super::{Cell, Column, TableError, Title, statistics};
use crate::nearest::nearest;

/// The title of the column that says why a row failed; the cell of a row that did not fail is missing.
pub const FAILURE: &str = "failure";

/// Columns of equal length under different titles. A value: cloning shares it, every operation returns a new one.
///
/// Wherever a column is asked for by `title`, the name alone will do as long as only one column has it.
/// Such a look-up returns [`TableError::UnknownColumn`] when there is no such column and
/// [`TableError::AmbiguousColumn`] when several have the name.
///
/// # Examples
///
/// ```
/// use lysocline_engine::present::{Column, Order, Table};
///
/// # fn main() -> Result<(), lysocline_engine::present::TableError> {
/// let lakes = Table::new([
///     Column::texts("name", ["north basin", "south basin"]),
///     Column::numbers("pH", [8.15, 7.92]),
///     Column::numbers("Ca [mg/L]", [41.2, 39.8]),
/// ])?;
/// let acid_first = lakes.sorted_by("pH", Order::Ascending)?;
/// assert_eq!(acid_first.row(0)?.get("Ca")?.value(), Some(39.8));
/// assert_eq!(
///     lakes.column("PH").unwrap_err().to_string(),
///     "no column `PH`: did you mean `pH`? the columns are `name`, `pH`, `Ca [mg/L]`"
/// );
/// # Ok(())
/// # }
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Table {
    /// One column per title, each of `n_rows` cells.
    columns: Arc<[Column]>,
    n_rows: usize,
}

/// One row of a table.
#[derive(Debug, Clone)]
pub struct Row {
    table: Table,
    idx: usize,
}

/// Which rows come first.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Order {
    /// Small numbers, and the beginning of the alphabet.
    Ascending,
    /// Large numbers, and the end of the alphabet.
    Descending,
}

impl Table {
    /// A table of these columns.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::UnequalLengths`] when the columns differ in rows; [`TableError::EmptyTitle`],
    /// [`TableError::DuplicateTitle`] or [`TableError::SigmaTitle`] when a title could not be told apart, here or
    /// in a file.
    pub fn new(columns: impl IntoIterator<Item = Column>) -> Result<Self, TableError> {
        let columns: Arc<[Column]> = columns.into_iter().collect();
        let n_rows = columns.first().map_or(0, Column::len);
        for (idx, column) in columns.iter().enumerate() {
            check_title(column.title(), &columns[..idx])?;
            if column.len() != n_rows {
                return Err(TableError::UnequalLengths {
                    title: column.title().to_string(),
                    n_rows: column.len(),
                    expected: n_rows,
                });
            }
        }
        Ok(Self { columns, n_rows })
    }

    /// The same table with a column saying why rows failed; unchanged where none did.
    ///
    /// # Errors
    ///
    /// As [`with`](Self::with).
    pub fn with_failures(
        &self,
        reasons: impl IntoIterator<Item = Option<String>>,
    ) -> Result<Self, TableError> {
        let column = Column::new(FAILURE, reasons.into_iter().map(|reason| Cell::from(reason.as_deref())));
        let none_failed = column.cells().iter().all(Cell::is_missing);
        if none_failed { Ok(self.clone()) } else { self.with(column) }
    }

    /// The number of rows.
    #[must_use]
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// The columns, from left to right.
    #[must_use]
    pub fn columns(&self) -> &[Column] {
        &self.columns
    }

    /// The titles, from left to right.
    pub fn titles(&self) -> impl Iterator<Item = &Title> {
        self.columns.iter().map(Column::title)
    }

    /// The column with this title.
    ///
    /// # Errors
    ///
    /// When the look-up fails (see [`Table`]).
    pub fn column(&self, title: &str) -> Result<&Column, TableError> {
        self.column_idx(title).map(|idx| &self.columns[idx])
    }

    /// The row at `idx`, counted from 0.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::NoSuchRow`] when the table has no such row.
    pub fn row(&self, idx: usize) -> Result<Row, TableError> {
        if idx >= self.n_rows {
            return Err(TableError::NoSuchRow { idx, n_rows: self.n_rows });
        }
        Ok(Row { table: self.clone(), idx })
    }

    /// The rows, from the first to the last.
    pub fn rows(&self) -> impl Iterator<Item = Row> + '_ {
        (0..self.n_rows).map(|idx| Row { table: self.clone(), idx })
    }

    /// Why this row failed; `None` where it did not, or where there is no such row.
    #[must_use]
    pub fn failure(&self, idx: usize) -> Option<&str> {
        self.failures()?.cells().get(idx)?.as_text()
    }

    /// The rows that did not fail. The column of reasons is left out.
    #[must_use]
    pub fn ok(&self) -> Self {
        let good: Vec<usize> = (0..self.n_rows).filter(|idx| self.failure(*idx).is_none()).collect();
        self.taken(&good).without_failures()
    }

    /// The rows for which `keep` says so.
    ///
    /// # Errors
    ///
    /// The first error of `keep`.
    pub fn filter<E>(&self, mut keep: impl FnMut(Row) -> Result<bool, E>) -> Result<Self, E> {
        let mut kept = Vec::new();
        for row in self.rows() {
            let idx = row.idx;
            if keep(row)? {
                kept.push(idx);
            }
        }
        Ok(self.taken(&kept))
    }

    /// The rows in the order of one column: numbers first, then texts in alphabetical order (capitals count as
    /// small letters), missing values last either way. Equal rows stay in the order they had.
    ///
    /// # Errors
    ///
    /// When the look-up fails (see [`Table`]).
    pub fn sorted_by(&self, title: &str, order: Order) -> Result<Self, TableError> {
        let cells = self.column(title)?.cells();
        let mut rows: Vec<usize> = (0..self.n_rows).collect();
        rows.sort_by(|a, b| compare(&cells[*a], &cells[*b], order));
        Ok(self.taken(&rows))
    }

    /// The same table with one more column.
    ///
    /// # Errors
    ///
    /// As [`new`](Self::new).
    pub fn with(&self, column: Column) -> Result<Self, TableError> {
        Self::new(self.columns.iter().cloned().chain([column]))
    }

    /// The same table with one more column, computed row by row.
    ///
    /// # Errors
    ///
    /// The first error of `cell`; otherwise as [`new`](Self::new).
    pub fn with_column<C: Into<Cell>, E: From<TableError>>(
        &self,
        title: &str,
        cell: impl FnMut(Row) -> Result<C, E>,
    ) -> Result<Self, E> {
        check_title(&Title::parse(title), &self.columns)?;
        let cells = self.rows().map(cell).collect::<Result<Vec<C>, E>>()?;
        Ok(self.with(Column::new(title, cells))?)
    }

    /// These columns only, in this order.
    ///
    /// # Errors
    ///
    /// When a look-up fails (see [`Table`]); [`TableError::DuplicateTitle`] when a column is named twice.
    pub fn select(&self, titles: &[&str]) -> Result<Self, TableError> {
        let columns: Result<Vec<Column>, TableError> =
            titles.iter().map(|title| self.column(title).cloned()).collect();
        Self::new(columns?)
    }

    /// All columns but this one.
    ///
    /// # Errors
    ///
    /// When the look-up fails (see [`Table`]).
    pub fn without(&self, title: &str) -> Result<Self, TableError> {
        let left_out = self.column_idx(title)?;
        let columns = self.columns.iter().enumerate().filter(|(idx, _)| *idx != left_out);
        Self::new(columns.map(|(_, column)| column.clone()))
    }

    /// The same table with another title for one column.
    ///
    /// # Errors
    ///
    /// When the look-up fails (see [`Table`]); otherwise as [`new`](Self::new).
    pub fn renamed(&self, title: &str, new_title: &str) -> Result<Self, TableError> {
        let renamed = self.column_idx(title)?;
        let columns = self
            .columns
            .iter()
            .enumerate()
            .map(|(idx, column)| if idx == renamed { column.titled(new_title) } else { column.clone() });
        Self::new(columns)
    }

    /// The rows of this table, then those of `other`. Columns go by title, in the order of this table; reasons of
    /// failure may stand in either of them.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::DifferentColumns`] when the other titles differ.
    pub fn append(&self, other: &Self) -> Result<Self, TableError> {
        if self.failures().is_none() && other.failures().is_some() {
            return self.with_empty_failures().append(other);
        }
        let lacking = titles_only_in(self, other);
        let besides = titles_only_in(other, self);
        if !lacking.is_empty() || !besides.is_empty() {
            return Err(TableError::DifferentColumns { lacking, besides });
        }
        let columns = self.columns.iter().map(|column| {
            let below = other.with_title(column.title()).map_or(&[][..], Column::cells);
            let missing = (below.len()..other.n_rows).map(|_| Cell::missing());
            column.holding(column.cells().iter().chain(below).cloned().chain(missing))
        });
        Self::new(columns)
    }

    /// The rows of several tables below one another; a table without columns where there is none.
    ///
    /// # Errors
    ///
    /// As [`append`](Self::append).
    pub fn concat<'a>(tables: impl IntoIterator<Item = &'a Self>) -> Result<Self, TableError> {
        let mut tables = tables.into_iter();
        let Some(first) = tables.next() else { return Self::new([]) };
        tables.try_fold(first.clone(), |above, below| above.append(below))
    }

    /// This table with the columns of `other` to its right, matched by the values of the column `key`.
    ///
    /// Every row of this table is kept, once and in order. Where `other` has no row of that key, or the key is
    /// missing, its cells are missing, for the reason `no match`. A row has failed if either had.
    ///
    /// # Errors
    ///
    /// When the look-up of `key` fails in either table (see [`Table`]); [`TableError::DifferentUnits`] when the
    /// keys have different units; [`TableError::DuplicateKey`] when a key stands twice in `other`;
    /// [`TableError::DuplicateTitle`] when another title stands in both.
    pub fn match_with(&self, other: &Self, key: &str) -> Result<Self, TableError> {
        let (left, right) = (self.column(key)?, other.column(key)?);
        if left.title() != right.title() {
            return Err(TableError::DifferentUnits {
                left: left.title().to_string(),
                right: right.title().to_string(),
            });
        }
        let rows = rows_by_key(right)?;
        let matches: Vec<Option<usize>> =
            left.cells().iter().map(|cell| rows.get(&Key::of(cell)?).copied()).collect();
        let others = other.columns.iter().filter(|column| !is_either(column, right.title(), FAILURE));
        let added = others.map(|column| column.holding(matched(column, &matches)));
        let own = self.columns.iter().filter(|column| column.title().name() != FAILURE);
        let failures = matches.iter().enumerate().map(|(idx, matching)| {
            let reason = self.failure(idx).or_else(|| other.failure((*matching)?));
            reason.map(str::to_owned)
        });
        Self::new(own.cloned().chain(added))?.with_failures(failures)
    }

    /// One row for each column of numbers: how many there are (`n`), `mean`, `sd` (n - 1), `min`, `quartile 1`,
    /// `median`, `quartile 3`, `max`; quartiles by [`statistics::quantile`].
    #[must_use]
    pub fn summary(&self) -> Self {
        let numeric: Vec<(&Column, Vec<f64>)> = self
            .columns
            .iter()
            .filter(|column| column.is_numeric())
            .map(|column| (column, column.cells().iter().filter_map(Cell::value).collect()))
            .collect();
        let names = numeric.iter().map(|(column, _)| Cell::text(&column.title().to_string()));
        let row = |title: &str, of: &dyn Fn(&[f64]) -> Option<f64>| {
            Column::new(title, numeric.iter().map(|(_, numbers)| of(numbers))).showing(Content::Unlike)
        };
        let at = |probability| move |numbers: &[f64]| statistics::quantile(numbers, probability);
        let columns = [
            Column::new("column", names).showing(Content::Titles),
            row("n", &|numbers| Some(numbers.len() as f64)),
            row("mean", &statistics::mean),
            row("sd", &statistics::standard_deviation),
            row("min", &at(0.0)),
            row("quartile 1", &at(0.25)),
            row("median", &at(0.5)),
            row("quartile 3", &at(0.75)),
            row("max", &at(1.0)),
        ];
        Self { columns: columns.into(), n_rows: numeric.len() }
    }

    /// The first `n` rows, or all where there are fewer.
    #[must_use]
    pub fn head(&self, n: usize) -> Self {
        self.taken(&(0..n.min(self.n_rows)).collect::<Vec<_>>())
    }

    /// The last `n` rows, or all where there are fewer.
    #[must_use]
    pub fn tail(&self, n: usize) -> Self {
        self.taken(&(self.n_rows.saturating_sub(n)..self.n_rows).collect::<Vec<_>>())
    }

    fn failures(&self) -> Option<&Column> {
        self.columns.iter().find(|column| column.title().name() == FAILURE)
    }

    fn without_failures(&self) -> Self {
        let columns = self.columns.iter().filter(|column| column.title().name() != FAILURE);
        Self { columns: columns.cloned().collect(), n_rows: self.n_rows }
    }

    fn with_empty_failures(&self) -> Self {
        let none = Column::new(FAILURE, (0..self.n_rows).map(|_| Cell::missing()));
        Self { columns: self.columns.iter().cloned().chain([none]).collect(), n_rows: self.n_rows }
    }

    fn with_title(&self, title: &Title) -> Option<&Column> {
        self.columns.iter().find(|column| column.title() == title)
    }

    fn taken(&self, rows: &[usize]) -> Self {
        let columns = self.columns.iter().map(|column| column.taken(rows));
        Self { columns: columns.collect(), n_rows: rows.len() }
    }

    fn column_idx(&self, asked: &str) -> Result<usize, TableError> {
        let title = Title::parse(asked);
        if let Some(idx) = self.titles().position(|other| *other == title) {
            return Ok(idx);
        }
        let namesakes: Vec<usize> =
            (0..self.columns.len()).filter(|idx| self.columns[*idx].title().name() == title.name()).collect();
        match (namesakes.as_slice(), title.unit()) {
            ([only], None) => Ok(*only),
            ([_, _, ..], None) => Err(TableError::AmbiguousColumn {
                asked: asked.to_owned(),
                candidates: namesakes.iter().map(|idx| self.columns[*idx].title().to_string()).collect(),
            }),
            (namesakes, _) => Err(self.unknown(asked, &title, namesakes.first().copied())),
        }
    }

    fn unknown(&self, asked: &str, title: &Title, namesake: Option<usize>) -> TableError {
        let nearest_name = || nearest(title.name(), self.titles().map(Title::name));
        let near = match namesake {
            Some(idx) => Some(self.columns[idx].title()),
            None => nearest_name().and_then(|name| self.titles().find(|title| title.name() == name)),
        };
        TableError::UnknownColumn {
            asked: asked.to_owned(),
            nearest: near.map(Title::to_string),
            columns: self.titles().map(Title::to_string).collect(),
        }
    }
}

impl Row {
    /// Its position in the table, counted from 0.
    #[must_use]
    pub fn idx(&self) -> usize {
        self.idx
    }

    /// The cell under this title.
    ///
    /// # Errors
    ///
    /// When the look-up fails (see [`Table`]).
    pub fn get(&self, title: &str) -> Result<&Cell, TableError> {
        self.table.column(title).map(|column| &column.cells()[self.idx])
    }

    /// The column with this title, of which the row is one cell.
    ///
    /// # Errors
    ///
    /// When the look-up fails (see [`Table`]).
    pub fn column(&self, title: &str) -> Result<&Column, TableError> {
        self.table.column(title)
    }

    /// The titles and cells, from left to right.
    pub fn cells(&self) -> impl Iterator<Item = (&Title, &Cell)> {
        self.table.columns.iter().map(|column| (column.title(), &column.cells()[self.idx]))
    }

    /// A table of this row alone.
    #[must_use]
    pub fn to_table(&self) -> Table {
        self.table.taken(&[self.idx])
    }

    /// Why this row failed, if it did.
    #[must_use]
    pub fn failure(&self) -> Option<&str> {
        self.table.failure(self.idx)
    }
}

fn check_title(title: &Title, before: &[Column]) -> Result<(), TableError> {
    if title.name().is_empty() {
        return Err(TableError::EmptyTitle { position: before.len() + 1 });
    }
    if let Some(of) = title.name().strip_suffix(SIGMA_MARK) {
        return Err(TableError::SigmaTitle { title: title.to_string(), of: of.trim().to_owned() });
    }
    if before.iter().any(|column| column.title() == title) {
        return Err(TableError::DuplicateTitle { title: title.to_string() });
    }
    Ok(())
}

fn titles_only_in(table: &Table, other: &Table) -> Vec<String> {
    let lacking = |title: &&Title| title.name() != FAILURE && other.with_title(title).is_none();
    table.titles().filter(lacking).map(Title::to_string).collect()
}

fn is_either(column: &Column, title: &Title, name: &str) -> bool {
    column.title() == title || column.title().name() == name
}

fn compare(left: &Cell, right: &Cell, order: Order) -> Ordering {
    let rank = |cell: &Cell| match cell {
        Cell::Number { .. } => 0,
        Cell::Text(_) => 1,
        Cell::Missing { .. } => 2,
    };
    let by_value = match (left, right) {
        (Cell::Number { value: left, .. }, Cell::Number { value: right, .. }) => left.total_cmp(right),
        (Cell::Text(left), Cell::Text(right)) => left.to_lowercase().cmp(&right.to_lowercase()),
        _ => Ordering::Equal,
    };
    let by_value = if order == Order::Descending { by_value.reverse() } else { by_value };
    rank(left).cmp(&rank(right)).then(by_value)
}

/// A cell as a key: texts letter by letter, numbers bit by bit.
#[derive(PartialEq, Eq, Hash)]
enum Key {
    Text(Arc<str>),
    Number(u64),
}

impl Key {
    fn of(cell: &Cell) -> Option<Self> {
        match cell {
            Cell::Number { value, .. } => Some(Self::Number((value + 0.0).to_bits())), // -0 + 0 is 0
            Cell::Text(text) => Some(Self::Text(text.clone())),
            Cell::Missing { .. } => None,
        }
    }
}

fn rows_by_key(column: &Column) -> Result<HashMap<Key, usize>, TableError> {
    let mut rows = HashMap::new();
    for (idx, cell) in column.cells().iter().enumerate() {
        let Some(key) = Key::of(cell) else { continue };
        if let Some(first) = rows.insert(key, idx) {
            let key =
                cell.value().map_or_else(|| cell.as_text().unwrap_or_default().to_owned(), |v| v.to_string());
            let title = column.title().to_string();
            return Err(TableError::DuplicateKey { title, key, rows: [first, idx] });
        }
    }
    Ok(rows)
}

fn matched(column: &Column, matches: &[Option<usize>]) -> Vec<Cell> {
    let no_match = Cell::missing_because("no match");
    matches
        .iter()
        .map(|row| row.map_or_else(|| no_match.clone(), |row| column.cells()[row].clone()))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::{Cell, Column, Order, Table, TableError};

    fn lakes() -> Table {
        Table::new([
            Column::texts("name", ["north", "south", "East"]),
            Column::new("pH", [Some(8.15), None, Some(7.5)]),
            Column::new("Ca [mg/L]", [Cell::uncertain(41.2, 0.8), Cell::number(39.8), Cell::number(50.0)]),
        ])
        .unwrap()
    }

    fn names(table: &Table) -> Vec<String> {
        table.column("name").unwrap().cells().iter().map(|cell| cell.as_text().unwrap().to_owned()).collect()
    }

    #[track_caller]
    fn message<T: std::fmt::Debug>(result: Result<T, TableError>, expected: &str) {
        assert_eq!(result.unwrap_err().to_string(), expected);
    }

    #[test]
    fn tables_go_between_threads() {
        fn shared<T: Clone + Send + Sync + 'static>() {}
        shared::<(Table, super::Row, Column, Cell, TableError)>();
    }

    #[test]
    fn looking_up_columns() {
        let two_units = lakes().with(Column::numbers("Ca [mmol/L]", [1.03, 0.99, 1.25])).unwrap();
        assert_eq!(lakes().column("Ca").unwrap().title().to_string(), "Ca [mg/L]");
        assert_eq!(two_units.column("Ca [mmol/L]").unwrap().cells()[0], Cell::number(1.03));
        message(
            two_units.column("Ca"),
            "`Ca` could be `Ca [mg/L]` or `Ca [mmol/L]`: write the title with its unit",
        );
        message(
            lakes().column("Ca [mmol/L]"),
            "no column `Ca [mmol/L]`: did you mean `Ca [mg/L]`? the columns are `name`, `pH`, `Ca [mg/L]`",
        );
        message(
            lakes().column("nmae"),
            "no column `nmae`: did you mean `name`? the columns are `name`, `pH`, `Ca [mg/L]`",
        );
        message(
            lakes().column("alkalinity"),
            "no column `alkalinity`: the columns are `name`, `pH`, `Ca [mg/L]`",
        );
        message(Table::new([]).unwrap().column("pH"), "no column `pH`: the columns are none");

        let ions = Table::new([Column::numbers("m(Ca^2+) [umol/kg]", [1.0])]).unwrap();
        assert!(ions.column("m(Ca²⁺)").is_ok() && ions.column("m(Ca²⁺) [µmol/kg]").is_ok());
    }

    #[test]
    fn rows() {
        let row = lakes().row(2).unwrap();
        assert_eq!(row.get("Ca").unwrap().value(), Some(50.0));
        assert_eq!(row.to_table().to_csv(), "name,pH,Ca [mg/L]\nEast,7.5,50\n");
        assert!(matches!(row.get("ca"), Err(TableError::UnknownColumn { .. })));
        message(lakes().row(3), "no row 3: the table has rows 0 to 2");
        message(Table::new([]).unwrap().row(0), "no row 0: the table has none");
        assert_eq!(lakes().rows().map(|row| row.idx()).collect::<Vec<_>>(), [0, 1, 2]);
    }

    #[test]
    fn filtering() {
        let hard = lakes().filter(|row| Ok::<_, TableError>(row.get("Ca")?.value() > Some(40.0))).unwrap();
        assert_eq!(names(&hard), ["north", "East"]);
        let faulty = lakes().filter(|row| Ok::<_, TableError>(row.get("Mg")?.value() > Some(40.0)));
        message(faulty, "no column `Mg`: the columns are `name`, `pH`, `Ca [mg/L]`");
    }

    #[test]
    fn sorting() {
        let by = |title, order| names(&lakes().sorted_by(title, order).unwrap());
        assert_eq!(by("pH", Order::Ascending), ["East", "north", "south"]);
        assert_eq!(by("pH", Order::Descending), ["north", "East", "south"]); // missing last either way
        assert_eq!(by("name", Order::Ascending), ["East", "north", "south"]);

        let numbers = [f64::NAN, f64::INFINITY, 0.0, -0.0, f64::NEG_INFINITY];
        let odd =
            Table::new([Column::numbers("x", numbers), Column::numbers("was", [0.0, 1.0, 2.0, 3.0, 4.0])]);
        let sorted = odd.unwrap().sorted_by("x", Order::Ascending).unwrap();
        assert_eq!(sorted.column("was").unwrap().present().unwrap(), [4.0, 3.0, 2.0, 1.0, 0.0]);

        let equal =
            Table::new([Column::numbers("x", [1.0; 40]), Column::numbers("was", (0..40).map(f64::from))]);
        let sorted = equal.unwrap().sorted_by("x", Order::Descending).unwrap();
        assert_eq!(
            sorted.column("was").unwrap().present().unwrap(),
            (0..40).map(f64::from).collect::<Vec<_>>()
        );
    }

    #[test]
    fn more_columns() {
        let table = lakes()
            .with_column("Ca [g/L]", |row| Ok::<_, TableError>(row.get("Ca")?.value().map(|ca| ca / 1000.0)));
        assert_eq!(table.unwrap().column("Ca [g/L]").unwrap().cells()[2], Cell::number(0.05));
        message(
            lakes().with_column("pH", |_| Ok::<_, TableError>(7.0)),
            "two columns are called `pH`: give one of them another title",
        );
        message(lakes().with(Column::numbers("Mg", [1.0])), "`Mg` has 1 rows where 3 are needed");
        message(lakes().with(Column::numbers(" ", [1.0; 3])), "column 4 has no title");
        message(
            lakes().with(Column::numbers("pH +/-", [0.1; 3])),
            "`pH +/-` is how a file calls the standard uncertainty of `pH`: give the numbers of `pH` their uncertainty, or choose another title",
        );
        let chosen = lakes().select(&["Ca", "name"]).unwrap();
        assert_eq!(chosen.titles().map(ToString::to_string).collect::<Vec<_>>(), ["Ca [mg/L]", "name"]);
        assert_eq!(lakes().without("pH").unwrap().columns().len(), 2);
        assert!(lakes().renamed("pH", "pH (lab)").unwrap().column("pH (lab)").is_ok());
    }

    #[test]
    fn failures() {
        let reasons = [None, Some("no equilibrium".to_owned()), None];
        let run = lakes().with_failures(reasons).unwrap();
        assert_eq!(run.failure(1), Some("no equilibrium"));
        assert_eq!(names(&run.ok()), ["north", "East"]);
        assert_eq!(run.ok().columns().len(), 3);
        assert_eq!(lakes().with_failures([None, None, None]).unwrap(), lakes());
        assert_eq!(lakes().ok(), lakes());
    }

    #[test]
    fn appending() {
        let other = lakes().select(&["Ca", "name", "pH"]).unwrap();
        let both = lakes().append(&other).unwrap();
        assert_eq!(names(&both), ["north", "south", "East", "north", "south", "East"]);
        assert_eq!(both.column("Ca").unwrap().cells()[5], Cell::number(50.0));

        let failed = lakes().with_failures([None, None, Some("lost".to_owned())]).unwrap();
        assert_eq!(lakes().append(&failed).unwrap().failure(5), Some("lost"));
        assert_eq!(failed.append(&lakes()).unwrap().failure(2), Some("lost"));
        assert_eq!(failed.append(&lakes()).unwrap().n_rows(), 6);
        assert_eq!(Table::concat([&lakes(), &failed, &lakes()]).unwrap().n_rows(), 9);

        let renamed = lakes().renamed("Ca", "Ca [mmol/L]").unwrap();
        message(
            lakes().append(&renamed),
            "the tables have different columns: the second lacks `Ca [mg/L]`; only the second has `Ca [mmol/L]`",
        );
    }

    #[test]
    fn matching() {
        let areas = Table::new([
            Column::texts("name", ["south", "north", "west"]),
            Column::numbers("area [km2]", [2.0, 1.0, 9.0]),
        ])
        .unwrap();
        let matched = lakes().match_with(&areas, "name").unwrap();
        assert_eq!(
            matched.column("area").unwrap().cells(),
            [Cell::number(1.0), Cell::number(2.0), Cell::missing_because("no match")]
        );
        message(
            lakes().match_with(&areas.append(&areas).unwrap(), "name"),
            "`south` stands in rows 0 and 3 of column `name`: a key must be unique in the table matched with",
        );
        message(
            lakes().match_with(&lakes(), "name"),
            "two columns are called `pH`: give one of them another title",
        );
        message(areas.match_with(&lakes(), "pH"), "no column `pH`: the columns are `name`, `area [km2]`");

        let failed = areas.with_failures([None, Some("dry".to_owned()), None]).unwrap();
        assert_eq!(lakes().match_with(&failed, "name").unwrap().failure(0), Some("dry"));
    }

    #[test]
    fn summary() {
        let summary = lakes().summary();
        assert_eq!(summary.n_rows(), 2);
        let ca = summary.row(1).unwrap();
        let get = |title| ca.get(title).unwrap().clone();
        assert_eq!(get("column"), Cell::text("Ca [mg/L]"));
        assert_eq!(get("n"), Cell::number(3.0));
        assert_eq!(get("quartile 1"), Cell::number(40.5)); // halfway from 39.8 to 41.2
        assert_eq!(get("median"), Cell::number(41.2));
        assert_eq!(get("max"), Cell::number(50.0));
        let one = Table::new([Column::numbers("pH", [7.0])]).unwrap().summary();
        assert!(one.row(0).unwrap().get("sd").unwrap().is_missing());
        assert_eq!(Table::new([]).unwrap().summary().n_rows(), 0);
    }
}
