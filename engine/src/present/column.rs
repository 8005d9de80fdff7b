//! A column: cells under a title, with the arithmetic and statistics of its numbers.

use std::sync::Arc;

use super::{Cell, TableError, Title, statistics};

/// A titled list of cells. Cloning shares the cells.
///
/// # Examples
///
/// ```
/// use lysocline_engine::present::{Column, Operation};
///
/// # fn main() -> Result<(), lysocline_engine::present::TableError> {
/// let calcium = Column::numbers("Ca [mg/L]", [40.0, 44.0]);
/// let magnesium = Column::numbers("Mg [mg/L]", [8.0, 9.0]);
/// let both = calcium.with_column(Operation::Add, &magnesium)?;
/// assert_eq!(both.title().to_string(), "Ca + Mg [mg/L]");
/// assert_eq!(both.mean()?, 50.5);
/// # Ok(())
/// # }
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Column {
    title: Title,
    cells: Arc<[Cell]>,
    content: Content,
}

/// What stands in a column, as far as it decides how cells are shown.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Content {
    /// Numbers of one quantity, or words.
    Ordinary,
    /// Formulas or equations, shown with raised charges and lowered subscripts.
    Chemistry,
    /// Titles of columns of another table.
    Titles,
    /// Numbers of different quantities, which share no decimals.
    Unlike,
}

/// Arithmetic between the rows of two columns, or between a column and a number.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Operation {
    /// left + right
    Add,
    /// left - right
    Subtract,
    /// left * right
    Multiply,
    /// left / right
    Divide,
}

impl Column {
    /// A column of any cells; `title` is read as `name [unit]`.
    #[must_use]
    pub fn new(title: impl Into<Title>, cells: impl IntoIterator<Item = impl Into<Cell>>) -> Self {
        Self {
            title: title.into(),
            cells: cells.into_iter().map(Into::into).collect(),
            content: Content::Ordinary,
        }
    }

    /// A column of numbers without stated uncertainty.
    #[must_use]
    pub fn numbers(title: impl Into<Title>, numbers: impl IntoIterator<Item = f64>) -> Self {
        Self::new(title, numbers)
    }

    /// A column of words.
    #[must_use]
    pub fn texts<'a>(title: impl Into<Title>, texts: impl IntoIterator<Item = &'a str>) -> Self {
        Self::new(title, texts)
    }

    /// A column of formulas or equations.
    #[must_use]
    pub fn chemistry<'a>(title: impl Into<Title>, texts: impl IntoIterator<Item = &'a str>) -> Self {
        Self::texts(title, texts).showing(Content::Chemistry)
    }

    /// The same cells, shown as this content is.
    #[must_use]
    pub fn showing(&self, content: Content) -> Self {
        Self { content, ..self.clone() }
    }

    /// The same cells under another title.
    #[must_use]
    pub fn titled(&self, title: impl Into<Title>) -> Self {
        Self { title: title.into(), ..self.clone() }
    }

    /// The title.
    #[must_use]
    pub fn title(&self) -> &Title {
        &self.title
    }

    /// The cells, in the order of the rows.
    #[must_use]
    pub fn cells(&self) -> &[Cell] {
        &self.cells
    }

    /// What stands in it.
    #[must_use]
    pub fn content(&self) -> Content {
        self.content
    }

    /// The number of rows.
    #[must_use]
    pub fn len(&self) -> usize {
        self.cells.len()
    }

    /// Whether there are no rows.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.cells.is_empty()
    }

    /// The cell of one row.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::NoSuchRow`] when `idx` is not below [`len`](Self::len).
    pub fn cell(&self, idx: usize) -> Result<&Cell, TableError> {
        self.cells.get(idx).ok_or(TableError::NoSuchRow { idx, n_rows: self.len() })
    }

    /// Whether it holds numbers, and nothing but numbers and missing values.
    #[must_use]
    pub fn is_numeric(&self) -> bool {
        self.cells.iter().all(|cell| cell.as_text().is_none())
            && self.cells.iter().any(|cell| cell.value().is_some())
    }

    /// Whether any number of it has a stated uncertainty.
    #[must_use]
    pub fn has_sigma(&self) -> bool {
        self.cells.iter().any(|cell| cell.sigma().is_some())
    }

    /// Row by row `self` and `other`; a missing value on either side gives a missing value.
    ///
    /// The standard uncertainty of the result is not stated: cells do not say how far they share their inputs,
    /// and values of one solution nearly always do.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::UnequalLengths`] when the columns differ in rows, [`TableError::DifferentUnits`]
    /// when a sum or difference mixes units, [`TableError::NotNumbers`] when a cell is a text.
    pub fn with_column(&self, operation: Operation, other: &Self) -> Result<Self, TableError> {
        if self.len() != other.len() {
            return Err(TableError::UnequalLengths {
                title: other.title.to_string(),
                n_rows: other.len(),
                expected: self.len(),
            });
        }
        self.require_numbers()?;
        other.require_numbers()?;
        let cells = self.cells.iter().zip(other.cells.iter()).map(|(left, right)| {
            let value = |(left, right)| Cell::number(operation.of(left, right));
            let missing = if left.is_missing() { left } else { right };
            left.value().zip(right.value()).map_or_else(|| missing.clone(), value)
        });
        Ok(Self::new(operation.title(&self.title, &other.title)?, cells))
    }

    /// Every row with a number on the right, `self - 2`; the number is exact and, in sums, in the column's unit.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::NotNumbers`] when a cell is a text.
    pub fn with_number(&self, operation: Operation, number: f64) -> Result<Self, TableError> {
        let name = format!("{} {} {number}", operation.grouped(self.title.name()), operation.sign());
        let title = Title::new(&name, self.title.unit());
        let slope = |_| match operation {
            Operation::Add | Operation::Subtract => 1.0,
            Operation::Multiply => number,
            Operation::Divide => number.recip(),
        };
        self.each(title, |value| operation.of(value, number), slope)
    }

    /// Every row with a number on the left, `2 - self`; the number is exact and, in sums, in the column's unit.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::NotNumbers`] when a cell is a text.
    pub fn after_number(&self, number: f64, operation: Operation) -> Result<Self, TableError> {
        let name = format!("{number} {} {}", operation.sign(), operation.grouped(self.title.name()));
        let unit = match (operation, self.title.unit()) {
            (Operation::Divide, Some(unit)) => Some(format!("1/{}", bracketed(unit))),
            (_, unit) => unit.map(str::to_owned),
        };
        let slope = |value: f64| match operation {
            Operation::Add | Operation::Subtract => 1.0,
            Operation::Multiply => number,
            Operation::Divide => number / (value * value),
        };
        self.each(Title::new(&name, unit.as_deref()), |value| operation.of(number, value), slope)
    }

    /// Sum of the numbers present; 0 where there is none.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::NotNumbers`] when a cell is a text.
    pub fn sum(&self) -> Result<f64, TableError> {
        self.present().map(|numbers| statistics::sum(&numbers))
    }

    /// Mean of the numbers present.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::NotNumbers`] when a cell is a text, [`TableError::TooFewNumbers`] of no numbers.
    pub fn mean(&self) -> Result<f64, TableError> {
        self.statistic("mean", "a number", statistics::mean)
    }

    /// Standard deviation (n - 1) of the numbers present.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::NotNumbers`] when a cell is a text, [`TableError::TooFewNumbers`] of fewer than two.
    pub fn standard_deviation(&self) -> Result<f64, TableError> {
        self.statistic("standard deviation", "two numbers", statistics::standard_deviation)
    }

    /// Median of the numbers present.
    ///
    /// # Errors
    ///
    /// As [`mean`](Self::mean).
    pub fn median(&self) -> Result<f64, TableError> {
        self.quantile_called("median", 0.5)
    }

    /// Smallest of the numbers present.
    ///
    /// # Errors
    ///
    /// As [`mean`](Self::mean).
    pub fn min(&self) -> Result<f64, TableError> {
        self.quantile_called("minimum", 0.0)
    }

    /// Largest of the numbers present.
    ///
    /// # Errors
    ///
    /// As [`mean`](Self::mean).
    pub fn max(&self) -> Result<f64, TableError> {
        self.quantile_called("maximum", 1.0)
    }

    /// The quantile of the numbers present at `probability`, 0 to 1; see [`statistics::quantile`].
    ///
    /// # Errors
    ///
    /// As [`mean`](Self::mean), and [`TableError::Probability`] outside 0 to 1.
    pub fn quantile(&self, probability: f64) -> Result<f64, TableError> {
        if !(0.0..=1.0).contains(&probability) {
            return Err(TableError::Probability { probability });
        }
        self.quantile_called("quantile", probability)
    }

    /// The numbers present, in the order of the rows.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::NotNumbers`] when a cell is a text.
    pub fn present(&self) -> Result<Vec<f64>, TableError> {
        self.require_numbers()?;
        Ok(self.cells.iter().filter_map(Cell::value).collect())
    }

    /// The cells of these rows, in this order.
    pub(super) fn taken(&self, rows: &[usize]) -> Self {
        Self { cells: rows.iter().map(|row| self.cells[*row].clone()).collect(), ..self.clone() }
    }

    /// Other cells under the same title.
    pub(super) fn holding(&self, cells: impl IntoIterator<Item = Cell>) -> Self {
        Self { cells: cells.into_iter().collect(), ..self.clone() }
    }

    fn quantile_called(&self, statistic: &'static str, probability: f64) -> Result<f64, TableError> {
        self.statistic(statistic, "a number", |numbers| statistics::quantile(numbers, probability))
    }

    fn statistic(
        &self,
        statistic: &'static str,
        needed: &'static str,
        of: impl Fn(&[f64]) -> Option<f64>,
    ) -> Result<f64, TableError> {
        let numbers = self.present()?;
        of(&numbers).ok_or_else(|| TableError::TooFewNumbers {
            statistic,
            title: self.title.to_string(),
            needed,
            found: numbers.len(),
        })
    }

    /// Each value through `function`, whose derivative is `slope`.
    fn each(
        &self,
        title: Title,
        function: impl Fn(f64) -> f64,
        slope: impl Fn(f64) -> f64,
    ) -> Result<Self, TableError> {
        self.require_numbers()?;
        let cells = self.cells.iter().map(|cell| match cell {
            Cell::Number { value, sigma } => Cell::Number {
                value: function(*value),
                sigma: sigma.map(|sigma| sigma * slope(*value).abs()),
            },
            Cell::Text(_) | Cell::Missing { .. } => cell.clone(),
        });
        Ok(Self::new(title, cells))
    }

    fn require_numbers(&self) -> Result<(), TableError> {
        let text = self.cells.iter().enumerate().find_map(|(idx, cell)| Some((idx, cell.as_text()?)));
        match text {
            None => Ok(()),
            Some((idx, text)) => {
                Err(TableError::NotNumbers { title: self.title.to_string(), text: text.to_owned(), idx })
            }
        }
    }
}

impl<'a> IntoIterator for &'a Column {
    type Item = &'a Cell;
    type IntoIter = std::slice::Iter<'a, Cell>;

    fn into_iter(self) -> Self::IntoIter {
        self.cells.iter()
    }
}

impl Operation {
    fn of(self, left: f64, right: f64) -> f64 {
        match self {
            Self::Add => left + right,
            Self::Subtract => left - right,
            Self::Multiply => left * right,
            Self::Divide => left / right,
        }
    }

    fn sign(self) -> char {
        match self {
            Self::Add => '+',
            Self::Subtract => '-',
            Self::Multiply => '*',
            Self::Divide => '/',
        }
    }

    fn title(self, left: &Title, right: &Title) -> Result<Title, TableError> {
        let name = match self {
            Self::Add => format!("{} + {}", left.name(), right.name()),
            _ => format!("{} {} {}", self.grouped(left.name()), self.sign(), self.grouped(right.name())),
        };
        Ok(Title::new(&name, self.unit(left, right)?.as_deref()))
    }

    fn unit(self, left: &Title, right: &Title) -> Result<Option<String>, TableError> {
        let unit = match (self, left.unit(), right.unit()) {
            (Self::Add | Self::Subtract, a, b) if a == b => a.map(str::to_owned),
            (Self::Add | Self::Subtract, ..) => {
                return Err(TableError::DifferentUnits { left: left.to_string(), right: right.to_string() });
            }
            (_, unit, None) => unit.map(str::to_owned),
            (Self::Multiply, None, unit) => unit.map(str::to_owned),
            (Self::Multiply, Some(a), Some(b)) => Some(format!("{}*{}", bracketed(a), bracketed(b))),
            (Self::Divide, None, Some(b)) => Some(format!("1/{}", bracketed(b))),
            (Self::Divide, Some(a), Some(b)) if a == b => None,
            (Self::Divide, Some(a), Some(b)) => Some(format!("{}/{}", bracketed(a), bracketed(b))),
        };
        Ok(unit)
    }

    /// A name as an operand: in brackets where it is itself a sum, so that `(a + b) / c` reads as computed.
    fn grouped(self, name: &str) -> String {
        let composed = [" + ", " - ", " * ", " / "].iter().any(|sign| name.contains(sign));
        if composed && self != Self::Add { format!("({name})") } else { name.to_owned() }
    }
}

/// A unit as a factor: in brackets where it is more than one word.
fn bracketed(unit: &str) -> String {
    if unit.chars().all(char::is_alphanumeric) { unit.to_owned() } else { format!("({unit})") }
}

#[cfg(test)]
mod tests {
    use super::{Cell, Column, Operation, TableError};

    fn calcium() -> Column {
        Column::new(
            "Ca [mg/L]",
            [Cell::uncertain(40.0, 2.0), Cell::missing_because("lost"), Cell::number(20.0)],
        )
    }

    #[track_caller]
    fn message<T: std::fmt::Debug>(result: Result<T, TableError>, expected: &str) {
        assert_eq!(result.unwrap_err().to_string(), expected);
    }

    #[test]
    fn two_columns() {
        let sulfur = Column::numbers("S [mmol/L]", [2.0, 3.0, 4.0]);
        let ratio = calcium().with_column(Operation::Divide, &sulfur).unwrap();
        assert_eq!(ratio.title().to_string(), "Ca / S [(mg/L)/(mmol/L)]");
        assert_eq!(ratio.cells(), [Cell::number(20.0), Cell::missing_because("lost"), Cell::number(5.0)]);

        let share = calcium().with_column(Operation::Divide, &calcium()).unwrap();
        assert_eq!(share.title().to_string(), "Ca / Ca");

        let sum = sulfur.with_column(Operation::Add, &sulfur).unwrap();
        let scaled = sum.with_column(Operation::Multiply, &Column::numbers("f", [1.0, 2.0, 3.0])).unwrap();
        assert_eq!(scaled.title().to_string(), "(S + S) * f [mmol/L]");
        assert_eq!(scaled.present().unwrap(), [4.0, 12.0, 24.0]);
    }

    #[test]
    fn a_column_and_a_number_carry_the_uncertainty() {
        let halved = calcium().with_number(Operation::Divide, 2.0).unwrap();
        assert_eq!(halved.title().to_string(), "Ca / 2 [mg/L]");
        assert_eq!(halved.cells()[0], Cell::uncertain(20.0, 1.0));

        let inverse = calcium().after_number(80.0, Operation::Divide).unwrap();
        assert_eq!(inverse.title().to_string(), "80 / Ca [1/(mg/L)]");
        assert_eq!(inverse.cells()[0], Cell::uncertain(2.0, 0.1)); // d(80/x)/dx = -80/1600 at 40

        let shifted = calcium().after_number(100.0, Operation::Subtract).unwrap();
        assert_eq!(shifted.cells()[0], Cell::uncertain(60.0, 2.0));
    }

    #[test]
    fn statistics_leave_missing_values_out() {
        assert_eq!(calcium().sum().unwrap(), 60.0);
        assert_eq!(calcium().mean().unwrap(), 30.0);
        assert_eq!(calcium().median().unwrap(), 30.0);
        assert_eq!((calcium().min().unwrap(), calcium().max().unwrap()), (20.0, 40.0));
        assert_eq!(calcium().quantile(0.25).unwrap(), 25.0);
        assert_eq!(calcium().standard_deviation().unwrap(), 200.0_f64.sqrt());
    }

    #[test]
    fn faults() {
        let names = Column::texts("name", ["north", "south", "east"]);
        message(names.mean(), "`name` holds text, `north` in row 0: numbers are needed here");
        message(
            calcium().with_column(Operation::Add, &Column::numbers("Mg [mmol/L]", [1.0, 2.0, 3.0])),
            "`Ca [mg/L]` and `Mg [mmol/L]` have different units: convert one of them first",
        );
        message(
            calcium().with_column(Operation::Add, &Column::numbers("Mg [mg/L]", [1.0])),
            "`Mg [mg/L]` has 1 rows where 3 are needed",
        );
        message(Column::numbers("pH", []).mean(), "the mean of `pH` needs a number, and the column has 0");
        message(
            Column::numbers("pH", [7.0]).standard_deviation(),
            "the standard deviation of `pH` needs two numbers, and the column has 1",
        );
        message(calcium().quantile(90.0), "no quantile at 90: give a probability from 0 to 1, as 0.9");
        message(calcium().cell(3), "no row 3: the table has rows 0 to 2");
    }
}
