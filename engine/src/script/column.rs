//! Columns in scripts: arithmetic row by row, statistics, and the cells of tables as script values.

use std::any::TypeId;

use rhai::plugin::*;
use rhai::{Array, Dynamic, Engine, FLOAT, INT, ImmutableString, Variant};

use super::compare::ORDERINGS;
use super::numbers::{DIVIDE, real};
use super::{Fail, ScriptResult, Style, Vocabulary, docs, fail, named};
use crate::present::{self, Cell, Column, Operation, Table, TableError, Title};
use crate::quantity::Quantity;
use crate::units::Unit;

/// The type, its operators and its functions.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    let mut steps = Module::new();
    steps
        .set_iter(TypeId::of::<Column>(), |column| Box::new(values_of(&column.cast::<Column>()).into_iter()));
    vocabulary
        .native::<Column>("Column", |column, style| {
            Table::new([column.clone()]).map_or_else(|error| error.to_string(), |table| drawn(&table, style))
        })
        .module(rhai::exported_module!(column_functions))
        .module(steps)
        .pure(&["sum", "mean", "sd", "median", "quantile", "values", "title"]);
    register_arithmetic(vocabulary.engine());
    register_comparison::<Column>(vocabulary.engine(), |a, b| a == b);
}

/// A table in characters: the plain form, which the program may replace.
#[must_use]
pub fn drawn(table: &Table, style: &Style) -> String {
    let style = present::Style { plain: style.ascii, width: Some(style.width) };
    table.to_markdown(style).trim_end().to_owned()
}

/// A cell as a script value: a number, a text, or `()`.
pub fn value_of(cell: &Cell) -> Dynamic {
    match cell {
        Cell::Number { value, .. } => (*value).into(),
        Cell::Text(text) => text.to_string().into(),
        Cell::Missing { .. } => Dynamic::UNIT,
    }
}

/// The cells of a column as script values.
#[must_use]
pub fn values_of(column: &Column) -> Array {
    column.cells().iter().map(value_of).collect()
}

/// A script value as a cell under `title`. A quantity keeps its standard uncertainty and is converted into the unit of
/// the title.
///
/// # Errors
///
/// Fails for what is no number, text, quantity, truth value or `()`, and when the units do not fit.
pub fn cell(title: &Title, value: &Dynamic) -> Result<Cell, Fail> {
    if let Some(number) = named::number(value) {
        return Ok(Cell::number(number));
    }
    if let Some(quantity) = value.read_lock::<Quantity>() {
        return quantity_cell(title, &quantity);
    }
    if let Some(text) = value.read_lock::<ImmutableString>() {
        return Ok(Cell::text(&text));
    }
    match value.as_bool() {
        Ok(flag) => Ok(Cell::text(if flag { "true" } else { "false" })),
        Err(_) if value.is_unit() => Ok(Cell::missing()),
        Err(_) => Err(fail(format!("`{title}`: {} cannot stand in a table", docs::described(value)))
            .help("a number, a text, a quantity, true or false, or `()` for a missing value can")),
    }
}

fn quantity_cell(title: &Title, quantity: &Quantity) -> Result<Cell, Fail> {
    let unit = match title.unit() {
        Some(unit) => Unit::parse(unit)?,
        None if quantity.unit().is_dimensionless() => Unit::one(),
        None => {
            let unit = quantity.unit().symbol();
            return Err(fail(format!("the title `{title}` has no unit for a value in `{unit}`"))
                .help(format!("call the column `{title} [{unit}]`")));
        }
    };
    let converted = quantity.to(&unit)?;
    Ok(Cell::Number { value: converted.value(), sigma: converted.sigma() })
}

/// The place of an index that may count from the end, as in arrays.
///
/// # Errors
///
/// Fails when nothing stands there.
pub fn index(what: &str, idx: INT, length: usize) -> Result<usize, Fail> {
    let size = INT::try_from(length).unwrap_or(INT::MAX);
    let from_start = if idx < 0 { idx.saturating_add(size) } else { idx };
    let found = usize::try_from(from_start).ok().filter(|idx| *idx < length);
    found.ok_or_else(|| {
        fail(format!("there is no row {idx}: this {what} has {}", crate::text::count(length, "row"))).help(
            match length {
                0 => "it is empty".to_owned(),
                _ => format!("they are counted from 0 to {}, or from the end: -1 is the last", length - 1),
            },
        )
    })
}

/// Equality between two values of a type; every other comparison is refused, where the interpreter would answer
/// `false`.
pub(super) fn register_comparison<T: Variant + Clone>(engine: &mut Engine, same: fn(&T, &T) -> bool) {
    let equal = move |a: &Dynamic, b: &Dynamic| match (a.read_lock::<T>(), b.read_lock::<T>()) {
        (Some(a), Some(b)) => Ok(same(&a, &b)),
        _ => no_comparison(a, b).raise(),
    };
    engine.register_fn("==", move |a: T, b: Dynamic| equal(&Dynamic::from(a), &b));
    engine.register_fn("==", move |a: Dynamic, b: T| equal(&a, &Dynamic::from(b)));
    engine.register_fn("!=", move |a: T, b: Dynamic| equal(&Dynamic::from(a), &b).map(|same| !same));
    engine.register_fn("!=", move |a: Dynamic, b: T| equal(&a, &Dynamic::from(b)).map(|same| !same));
    for (name, _) in ORDERINGS {
        let refused = |a: Dynamic, b: Dynamic| no_comparison(&a, &b).raise::<bool>();
        engine.register_fn(name, move |a: T, b: Dynamic| refused(Dynamic::from(a), b));
        engine.register_fn(name, move |a: Dynamic, b: T| refused(a, Dynamic::from(b)));
    }
}

fn no_comparison(a: &Dynamic, b: &Dynamic) -> Fail {
    fail(format!("cannot compare {} with {}", docs::described(a), docs::described(b)))
        .help("to choose rows write `table.where(|row| row[\"pH\"] < 8)`")
}

/// The four operators between columns, and with whole numbers and decimals on either side.
fn register_arithmetic(engine: &mut Engine) {
    let operators = [
        ("+", Operation::Add),
        ("-", Operation::Subtract),
        ("*", Operation::Multiply),
        (DIVIDE, Operation::Divide),
    ];
    for (name, operation) in operators {
        let raised = |result: Result<Column, TableError>| -> ScriptResult<Column> { Ok(result?) };
        engine.register_fn(name, move |a: Column, b: Column| raised(a.with_column(operation, &b)));
        engine.register_fn(name, move |a: Column, b: FLOAT| raised(a.with_number(operation, b)));
        engine.register_fn(name, move |a: FLOAT, b: Column| raised(b.after_number(a, operation)));
        engine.register_fn(name, move |a: Column, b: INT| raised(a.with_number(operation, b as FLOAT)));
        engine.register_fn(name, move |a: INT, b: Column| raised(b.after_number(a as FLOAT, operation)));
    }
}

/// Statistics and members of columns.
#[export_module]
mod column_functions {
    /// Sum of the numbers present, in the unit of the column; missing values are left out.
    ///
    /// ```rhai
    /// table(#{ "V [mL]": [1, 2, 4.5] }).column("V").sum   // 7.5
    /// ```
    #[rhai_fn(name = "sum", get = "sum", return_raw, pure)]
    pub fn sum(column: &mut Column) -> ScriptResult<FLOAT> {
        Ok(column.sum()?)
    }

    /// Mean of the numbers present, in the unit of the column.
    ///
    /// ```rhai
    /// table(#{ pH: [8.0, 8.5] }).column("pH").mean   // 8.25
    /// ```
    #[rhai_fn(name = "mean", get = "mean", return_raw, pure)]
    pub fn mean(column: &mut Column) -> ScriptResult<FLOAT> {
        Ok(column.mean()?)
    }

    /// Standard deviation of the numbers present (n - 1 in the denominator), in the unit of the column.
    ///
    /// ```rhai
    /// table(#{ pH: [8.0, 8.5, 9.0] }).column("pH").sd   // 0.5
    /// ```
    #[rhai_fn(name = "sd", get = "sd", return_raw, pure)]
    pub fn sd(column: &mut Column) -> ScriptResult<FLOAT> {
        Ok(column.standard_deviation()?)
    }

    /// Median of the numbers present, in the unit of the column.
    ///
    /// ```rhai
    /// table(#{ pH: [8.0, 8.5, 9.9] }).column("pH").median   // 8.5
    /// ```
    #[rhai_fn(name = "median", get = "median", return_raw, pure)]
    pub fn median(column: &mut Column) -> ScriptResult<FLOAT> {
        Ok(column.median()?)
    }

    /// Smallest of the numbers present, in the unit of the column.
    ///
    /// ```rhai
    /// table(#{ pH: [8.5, 8.0] }).column("pH").min   // 8
    /// ```
    #[rhai_fn(name = "min", get = "min", return_raw, pure)]
    pub fn smallest(column: &mut Column) -> ScriptResult<FLOAT> {
        Ok(column.min()?)
    }

    /// Largest of the numbers present, in the unit of the column.
    ///
    /// ```rhai
    /// table(#{ pH: [8.5, 8.0] }).column("pH").max   // 8.5
    /// ```
    #[rhai_fn(name = "max", get = "max", return_raw, pure)]
    pub fn largest(column: &mut Column) -> ScriptResult<FLOAT> {
        Ok(column.max()?)
    }

    /// The value below which this fraction (0 to 1) of the numbers present lies, in the unit of the column.
    ///
    /// ```rhai
    /// table(#{ pH: [7, 8, 9] }).column("pH").quantile(0.75)   // 8.5
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn quantile(column: &mut Column, fraction: Dynamic) -> ScriptResult<FLOAT> {
        let fraction = real("quantile", &fraction)?;
        Ok(column.quantile(fraction)?)
    }

    /// The cells as an array, numbers in the unit of the column; a missing one is `()`.
    ///
    /// ```rhai
    /// table(#{ pH: [8.0, 8.5] }).column("pH").values   // [8, 8.5]
    /// ```
    #[rhai_fn(name = "values", get = "values", pure)]
    pub fn values(column: &mut Column) -> Array {
        values_of(column)
    }

    /// The number of rows.
    ///
    /// ```rhai
    /// table(#{ pH: [8.0, 8.5] }).column("pH").len   // 2
    /// ```
    #[rhai_fn(name = "len", get = "len", pure)]
    pub fn len(column: &mut Column) -> INT {
        INT::try_from(column.len()).unwrap_or(INT::MAX)
    }

    /// The title, with its unit.
    ///
    /// ```rhai
    /// table(#{ "Ca [mg/L]": [41.2] }).column("Ca").title   // "Ca [mg/L]"
    /// ```
    #[rhai_fn(name = "title", get = "title", pure)]
    pub fn title(column: &mut Column) -> String {
        column.title().to_string()
    }

    /// The unit of the numbers, as text; "" when the title states none.
    ///
    /// ```rhai
    /// table(#{ "Ca [mg/L]": [41.2] }).column("Ca").unit   // "mg/L"
    /// ```
    #[rhai_fn(name = "unit", get = "unit", pure)]
    pub fn unit_of_column(column: &mut Column) -> String {
        column.title().unit().unwrap_or_default().to_owned()
    }

    #[rhai_fn(index_get, return_raw, pure)]
    pub fn member(column: &mut Column, row: INT) -> ScriptResult<Dynamic> {
        Ok(value_of(&column.cells()[index("column", row, column.len())?]))
    }
}
