//! Tables and their rows in scripts.

use std::any::TypeId;
use std::path::Path;

use rhai::plugin::*;
use rhai::{Array, Dynamic, FnPtr, INT, Map};

use super::closure::Closure;
use super::column::{self, cell, drawn, index, value_of};
use super::{Fail, Host, ScriptResult, Vocabulary, docs, fail};
use crate::present::{Cell, Column, Order, Row, Table, TableError, Title};

/// The types and their functions.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    let mut steps = Module::new();
    steps.set_iter(TypeId::of::<Table>(), |table| Box::new(rows_of(&table.cast::<Table>()).into_iter()));
    vocabulary
        .native::<Table>("Table", drawn)
        .native::<Row>("Row", |row, style| match alone(row) {
            Ok(table) => drawn(&table, style),
            Err(error) => error.to_string(),
        })
        .module(rhai::exported_module!(table_functions))
        .module(rhai::exported_module!(row_functions))
        .module(steps)
        .pure(&["table", "column", "rows", "row", "titles", "where", "sorted_by", "with_column", "without"])
        .pure(&["match_with", "summary", "ok", "head", "tail", "get"]);
    column::register_comparison::<Table>(vocabulary.engine(), |a, b| a == b);
    column::register_comparison::<Row>(vocabulary.engine(), |a, b| a.cells().eq(b.cells()));
}

/// The row as a table of one row.
fn alone(row: &Row) -> Result<Table, TableError> {
    Table::new(row.cells().map(|(title, cell)| Column::new(title.clone(), [cell.clone()])))
}

fn rows_of(table: &Table) -> Array {
    table.rows().map(Dynamic::from).collect()
}

/// A table from an array: rows as maps, or columns as `[title, values]`, or columns.
fn from_items(items: &[Dynamic]) -> Result<Table, Fail> {
    match items.first() {
        Some(first) if first.is_map() => from_rows(items),
        _ => Ok(Table::new(items.iter().map(column_of_item).collect::<Result<Vec<_>, _>>()?)?),
    }
}

/// Columns in alphabetical order, since a map does not remember another; a key that a row lacks is a missing value.
fn from_rows(rows: &[Dynamic]) -> Result<Table, Fail> {
    let maps = rows.iter().map(|row| {
        let unfit = || fail(format!("every row must be a map, not {}", docs::described(row)));
        row.read_lock::<Map>().map(|map| map.clone()).ok_or_else(unfit)
    });
    let maps: Vec<Map> = maps.collect::<Result<_, _>>()?;
    let titles: std::collections::BTreeSet<&str> =
        maps.iter().flat_map(|map| map.keys().map(|key| key.as_str())).collect();
    let columns = titles.into_iter().map(|title| {
        let values = maps.iter().map(|map| map.get(title).cloned().unwrap_or(Dynamic::UNIT));
        column_of(title, values).map_err(|fail| fail.key(title))
    });
    Ok(Table::new(columns.collect::<Result<Vec<_>, _>>()?)?)
}

fn column_of_item(item: &Dynamic) -> Result<Column, Fail> {
    if let Some(column) = item.read_lock::<Column>() {
        return Ok(column.clone());
    }
    let pair = item.read_lock::<Array>();
    match pair.as_deref().map(Vec::as_slice) {
        Some([title, values]) if title.is_string() => titled(&title.to_string(), values),
        _ => Err(fail(format!("a table is not made of {}", docs::described(item))).help(FORMS)),
    }
}

const FORMS: &str = "write rows, `[#{ pH: 8.1 }, #{ pH: 8.2 }]`, or columns, `#{ pH: [8.1, 8.2] }` or `[[\"pH\", [8.1, 8.2]]]`";

fn titled(title: &str, values: &Dynamic) -> Result<Column, Fail> {
    if let Some(column) = values.read_lock::<Column>() {
        return Ok(column.titled(title));
    }
    match values.read_lock::<Array>() {
        Some(values) => column_of(title, values.iter().cloned()),
        None => Err(fail(format!(
            "the column `{title}` takes an array of values, not {}",
            docs::described(values)
        ))),
    }
}

fn column_of(title: &str, values: impl Iterator<Item = Dynamic>) -> Result<Column, Fail> {
    let parsed = Title::parse(title);
    let cells = values.map(|value| cell(&parsed, &value)).collect::<Result<Vec<Cell>, _>>()?;
    Ok(Column::new(title, cells))
}

/// How many rows were asked for.
fn count(n: INT) -> Result<usize, Fail> {
    usize::try_from(n).map_err(|_| fail(format!("a number of rows cannot be {n}")).argument(0))
}

fn order(word: &str) -> Result<Order, Fail> {
    match word {
        "ascending" => Ok(Order::Ascending),
        "descending" => Ok(Order::Descending),
        _ => Err(fail(format!("unknown order `{word}`"))
            .help("write \"ascending\" or \"descending\"")
            .argument(1)),
    }
}

fn at_first(error: impl Into<Fail>) -> Fail {
    error.into().argument(0)
}

fn print(context: &NativeCallContext, table: Table) {
    Host::of(context).display(&Dynamic::from(table));
}

/// Making tables, choosing and changing their rows and columns, writing them.
#[export_module]
mod table_functions {
    /// A table from rows written as maps, or from columns written as `[title, values]`. A title states the unit,
    /// `Ca [mg/L]`; a quantity is converted into it; `()` is a missing value.
    ///
    /// ```rhai
    /// table([#{ name: "north", pH: 8.1 }, #{ name: "south", pH: 7.9 }]).len   // 2
    /// ```
    #[rhai_fn(return_raw)]
    pub fn table(rows: Array) -> ScriptResult<Table> {
        Ok(from_items(&rows)?)
    }

    /// A table from columns, each an array of values or a Column under its title; in alphabetical order.
    ///
    /// ```rhai
    /// table(#{ "Ca [mg/L]": [41.2, 39.8], pH: [8.1, 7.9] }).titles   // ["Ca [mg/L]", "pH"]
    /// ```
    #[rhai_fn(name = "table", return_raw)]
    pub fn table_of_columns(columns: Map) -> ScriptResult<Table> {
        let columns = columns
            .iter()
            .map(|(title, values)| titled(title, values).map_err(|fail| fail.key(title.as_str())));
        Ok(Table::new(columns.collect::<Result<Vec<_>, _>>()?)?)
    }

    /// Prints the table.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, 7.9] }).show()
    /// ```
    #[rhai_fn(pure)]
    pub fn show(context: NativeCallContext, table: &mut Table) {
        print(&context, table.clone());
    }

    /// Prints the first n rows of the table.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, 7.9] }).show(1)
    /// ```
    #[rhai_fn(name = "show", return_raw, pure)]
    pub fn show_first(context: NativeCallContext, table: &mut Table, n: INT) -> ScriptResult<()> {
        let shown = table.head(count(n)?);
        let left_out = table.n_rows() - shown.n_rows();
        print(&context, shown);
        if left_out > 0 {
            Host::of(&context).print(&format!("and {} more", crate::text::count(left_out, "row")));
        }
        Ok(())
    }

    /// The column with this title; the unit may be left out where only one column has the name.
    ///
    /// ```rhai
    /// table(#{ "Ca [mg/L]": [40, 44] }).column("Ca").mean   // 42
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn column(table: &mut Table, title: &str) -> ScriptResult<Column> {
        Ok(table.column(title).map_err(at_first)?.clone())
    }

    /// The rows, as an array of Row.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, 7.9] }).rows.map(|row| row["pH"])   // [8.1, 7.9]
    /// ```
    #[rhai_fn(name = "rows", get = "rows", pure)]
    pub fn rows(table: &mut Table) -> Array {
        rows_of(table)
    }

    /// One row, counted from 0; -1 is the last.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, 7.9] }).row(-1)["pH"]   // 7.9
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn row(table: &mut Table, idx: INT) -> ScriptResult<Row> {
        let idx = index("table", idx, table.n_rows()).map_err(at_first)?;
        Ok(table.row(idx)?)
    }

    /// The number of rows.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, 7.9] }).len   // 2
    /// ```
    #[rhai_fn(name = "len", get = "len", pure)]
    pub fn len(table: &mut Table) -> INT {
        INT::try_from(table.n_rows()).unwrap_or(INT::MAX)
    }

    /// The titles with their units, from left to right.
    ///
    /// ```rhai
    /// table(#{ "Ca [mg/L]": [40], pH: [8.1] }).titles   // ["Ca [mg/L]", "pH"]
    /// ```
    #[rhai_fn(name = "titles", get = "titles", pure)]
    pub fn titles(table: &mut Table) -> Array {
        table.titles().map(|title| title.to_string().into()).collect()
    }

    /// The rows for which the closure says true. A comparison with a missing number is false.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, 7.9, ()] }).where(|row| row["pH"] < 8).len   // 1
    /// ```
    #[rhai_fn(name = "where", return_raw, pure)]
    pub fn where_rows(context: NativeCallContext, table: &mut Table, keep: FnPtr) -> ScriptResult<Table> {
        let closure = Closure::new(&context, &keep);
        let keep = closure.worker();
        table.filter(|row| {
            let answer = keep.call((row,))?;
            let unfit = || {
                fail(format!(
                    "the closure of `where` must say true or false, not {}",
                    docs::described(&answer)
                ))
            };
            Ok(answer.as_bool().map_err(|_| unfit().argument(0))?)
        })
    }

    /// The rows in rising order of one column: numbers, then texts, then missing values.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, 7.9] }).sorted_by("pH").column("pH").values   // [7.9, 8.1]
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn sorted_by(table: &mut Table, title: &str) -> ScriptResult<Table> {
        Ok(table.sorted_by(title, Order::Ascending).map_err(at_first)?)
    }

    /// The rows in "ascending" or "descending" order of one column; missing values last either way.
    ///
    /// ```rhai
    /// table(#{ pH: [7.9, 8.1] }).sorted_by("pH", "descending").column("pH").values   // [8.1, 7.9]
    /// ```
    #[rhai_fn(name = "sorted_by", return_raw, pure)]
    pub fn sorted_in_order(table: &mut Table, title: &str, order: &str) -> ScriptResult<Table> {
        Ok(table.sorted_by(title, super::order(order)?).map_err(at_first)?)
    }

    /// The table with one more column, computed row by row by a closure; its numbers are in the unit that the title
    /// states, and a quantity is converted into it.
    ///
    /// ```rhai
    /// let t = table(#{ "Ca [mg/L]": [40.1] });
    /// t.with_column("Ca [g/L]", |row| row["Ca"] / 1000).column("Ca [g/L]").values   // [0.0401]
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn with_column(
        context: NativeCallContext,
        table: &mut Table,
        title: &str,
        of: FnPtr,
    ) -> ScriptResult<Table> {
        let (closure, parsed) = (Closure::new(&context, &of), Title::parse(title));
        let of = closure.worker();
        table.with_column(title, |row| Ok(cell(&parsed, &of.call((row,))?)?))
    }

    /// The table with one more column of given values, an array or a Column.
    ///
    /// ```rhai
    /// let t = table(#{ "Ca [mg/L]": [40, 44], "Mg [mg/L]": [8, 9] });
    /// t.with_column("ratio", t.column("Ca") / t.column("Mg")).column("ratio").values[0]   // 5
    /// ```
    #[rhai_fn(name = "with_column", return_raw, pure)]
    pub fn with_values(table: &mut Table, title: &str, values: Dynamic) -> ScriptResult<Table> {
        Ok(table.with(titled(title, &values).map_err(|fail| fail.argument(1))?)?)
    }

    /// All columns but this one.
    ///
    /// ```rhai
    /// table(#{ "Ca [mg/L]": [40], pH: [8.1] }).without("Ca").titles   // ["pH"]
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn without(table: &mut Table, title: &str) -> ScriptResult<Table> {
        Ok(table.without(title).map_err(at_first)?)
    }

    /// The rows of this table, then those of another with the same titles.
    ///
    /// ```rhai
    /// let t = table(#{ pH: [8.1, 7.9] });
    /// t.append(t).len   // 4
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn append(table: &mut Table, other: Table) -> ScriptResult<Table> {
        Ok(table.append(&other)?)
    }

    /// This table with the columns of another to its right, matched by the values in one column. Every row is kept;
    /// where the other table has no such row, its cells are missing.
    ///
    /// ```rhai
    /// let waters = table(#{ name: ["north", "south"], pH: [8.1, 7.9] });
    /// let depths = table(#{ name: ["south", "north"], "depth [m]": [12, 30] });
    /// waters.match_with(depths, "name").column("depth").values   // [30, 12]
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn match_with(table: &mut Table, other: Table, title: &str) -> ScriptResult<Table> {
        Ok(table.match_with(&other, title)?)
    }

    /// One row for each column of numbers: how many there are, mean, standard deviation, extremes and quartiles, in
    /// the unit of the column.
    ///
    /// ```rhai
    /// table(#{ pH: [7.5, 8.5] }).summary().row(0)["mean"]   // 8
    /// ```
    #[rhai_fn(pure)]
    pub fn summary(table: &mut Table) -> Table {
        table.summary()
    }

    /// The rows that did not fail, without the column of reasons.
    ///
    /// ```rhai
    /// table(#{ failure: [(), "no equilibrium"], pH: [8.1, ()] }).ok().len   // 1
    /// ```
    #[rhai_fn(pure)]
    pub fn ok(table: &mut Table) -> Table {
        table.ok()
    }

    /// The first n rows, or all where there are fewer.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, 7.9, 8.0] }).head(2).column("pH").values   // [8.1, 7.9]
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn head(table: &mut Table, n: INT) -> ScriptResult<Table> {
        Ok(table.head(count(n)?))
    }

    /// The last n rows, or all where there are fewer.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, 7.9, 8.0] }).tail(2).column("pH").values   // [7.9, 8]
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn tail(table: &mut Table, n: INT) -> ScriptResult<Table> {
        Ok(table.tail(count(n)?))
    }

    /// Writes the table to a file in the output folder, as its ending says: `.csv`, `.json` or `.md`. Numbers are
    /// written with every digit in CSV and JSON, each in the unit its title states.
    ///
    /// ```rhai
    /// table(#{ "Ca [mg/L]": [41.2] }).save("calcium.csv")
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn save(context: NativeCallContext, table: &mut Table, file: &str) -> ScriptResult<()> {
        let text = table.to_text_for(Path::new(file)).map_err(at_first)?;
        let host = Host::of(&context);
        let path = host.files().write(file, text.as_bytes()).map_err(at_first)?;
        host.message(&format!("wrote {}", path.display()));
        Ok(())
    }
}

/// Members of rows.
#[export_module]
mod row_functions {
    /// The value in the column with this title, in the unit of the column: a number or a text. A missing number is NaN, so
    /// that no comparison with it is true and a sum with it is NaN too; a missing text is `()`.
    ///
    /// ```rhai
    /// table(#{ "Ca [mg/L]": [41.2] }).row(0).get("Ca")   // 41.2
    /// ```
    #[rhai_fn(name = "get", index_get, return_raw, pure)]
    pub fn get(row: &mut Row, title: &str) -> ScriptResult<Dynamic> {
        let cell = row.get(title).map_err(at_first)?;
        let is_number = row.column(title).map_err(at_first)?.is_numeric();
        Ok(if cell.is_missing() && is_number { f64::NAN.into() } else { value_of(cell) })
    }

    /// Whether the column with this title has no value in this row.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1, ()] }).where(|row| row.is_missing("pH")).len   // 1
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn is_missing(row: &mut Row, title: &str) -> ScriptResult<bool> {
        Ok(row.get(title).map_err(at_first)?.is_missing())
    }

    /// The titles with their units, from left to right.
    ///
    /// ```rhai
    /// table(#{ pH: [8.1] }).row(0).titles   // ["pH"]
    /// ```
    #[rhai_fn(name = "titles", get = "titles", pure)]
    pub fn titles_of_row(row: &mut Row) -> Array {
        row.cells().map(|(title, _)| title.to_string().into()).collect()
    }
}
