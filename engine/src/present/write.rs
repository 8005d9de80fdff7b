//! Tables as files: CSV (RFC 4180), JSON and Markdown.
//!
//! CSV and JSON hold every digit: a number is written as the shortest text that reads back as the same number.
//! Markdown is for people and shows numbers as [`number`] does.

use std::io::Write as _;
use std::path::Path;

use atomic_write_file::AtomicWriteFile;
use serde_json::{Map, Value, json};

use super::{Cell, Column, Style, Table, TableError, notation, number};

/// Whether a file that exists may be replaced.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Overwrite {
    /// An existing file is an error.
    Refuse,
    /// An existing file is replaced.
    Allow,
}

impl Table {
    /// The table as comma-separated values (RFC 4180, lines ending in `\n`): a header line of titles with units,
    /// then one line a row.
    ///
    /// A column in which an uncertainty is stated is followed by one of standard uncertainties, `Ca +/- [mg/L]`.
    /// A missing value is an empty cell.
    #[must_use]
    pub fn to_csv(&self) -> String {
        let columns: Vec<CsvColumn> = self.columns().iter().flat_map(CsvColumn::of).collect();
        let mut lines = vec![columns.iter().map(|column| column.title.clone()).collect::<Vec<_>>()];
        lines.extend(
            (0..self.n_rows()).map(|row| columns.iter().map(|column| column.cell(row)).collect::<Vec<_>>()),
        );
        lines.iter().map(|line| csv_line(line)).collect()
    }

    /// The table as JSON: `{"columns": [{"title": "Ca", "unit": "mg/L", "values": […], "sigma": […]}]}`.
    ///
    /// `unit` is null where there is none, `sigma` is left out where no uncertainty is stated. Null stands for a
    /// missing value, and for a number JSON has no text for (infinite or not a number).
    #[must_use]
    pub fn to_json(&self) -> String {
        let columns: Vec<Value> = self.columns().iter().map(json_column).collect();
        let mut text = json!({ "columns": columns }).to_string();
        text.push('\n');
        text
    }

    /// The table in Markdown, numbers on the right.
    #[must_use]
    pub fn to_markdown(&self, style: Style) -> String {
        let titles = self.titles().map(|title| {
            let name = notation::shown_name(title, style);
            notation::shown_unit(title, style).map_or(name.clone(), |unit| format!("{name} [{unit}]"))
        });
        let rules = self.columns().iter().map(|c| if c.is_numeric() { "---:" } else { "---" }.to_owned());
        let columns: Vec<Vec<String>> =
            self.columns().iter().map(|column| number::shown_column(column, style)).collect();
        let rows = (0..self.n_rows()).map(|row| columns.iter().map(|c| c[row].trim().to_owned()).collect());
        let lines = [titles.collect(), rules.collect::<Vec<_>>()].into_iter().chain(rows);
        lines.map(|cells: Vec<String>| markdown_line(&cells)).collect()
    }

    /// The table in the form that the ending of a file name asks for: `.csv`, `.json` or `.md`.
    ///
    /// # Errors
    ///
    /// Returns [`TableError::UnknownExtension`] when the ending is none of the three.
    pub fn to_text_for(&self, path: &Path) -> Result<String, TableError> {
        let extension = path.extension().and_then(|e| e.to_str()).map(str::to_ascii_lowercase);
        match extension.as_deref() {
            Some("csv") => Ok(self.to_csv()),
            Some("json") => Ok(self.to_json()),
            Some("md") => Ok(self.to_markdown(Style::default())),
            _ => Err(TableError::UnknownExtension { path: path.to_owned() }),
        }
    }

    /// Writes the table to `path`, in the form its ending names: `.csv`, `.json` or `.md`.
    ///
    /// The file is complete or untouched: it is written beside its place and moved there.
    ///
    /// # Errors
    ///
    /// As [`to_text_for`](Self::to_text_for); [`TableError::FileExists`] when the file exists and `overwrite` refuses
    /// to replace it, [`TableError::Io`] when it cannot be written.
    pub fn save(&self, path: &Path, overwrite: Overwrite) -> Result<(), TableError> {
        let text = self.to_text_for(path)?;
        if overwrite == Overwrite::Refuse && path.exists() {
            return Err(TableError::FileExists { path: path.to_owned() });
        }
        write_whole(path, &text).map_err(|source| TableError::Io { path: path.to_owned(), source })
    }
}

/// The shortest text that reads back as the same number, with a power of ten where zeros would only fill space.
#[must_use]
pub fn exact(value: f64) -> String {
    let text = format!("{value:?}"); // `{}` would write 1e300 with three hundred zeros
    text.strip_suffix(".0").map_or(text.clone(), str::to_owned)
}

fn write_whole(path: &Path, text: &str) -> std::io::Result<()> {
    let mut file = AtomicWriteFile::open(path)?;
    file.write_all(text.as_bytes())?;
    file.commit()
}

/// One column of the file: values, or uncertainties, of one column of the table.
struct CsvColumn<'a> {
    title: String,
    column: &'a Column,
    of_cell: fn(&Cell) -> String,
}

impl<'a> CsvColumn<'a> {
    fn of(column: &'a Column) -> impl Iterator<Item = Self> {
        let values = Self { title: column.title().to_string(), column, of_cell: csv_value };
        let sigmas = column.has_sigma().then(|| Self {
            title: column.title().of_sigma().to_string(),
            column,
            of_cell: |cell| cell.sigma().map_or_else(String::new, exact),
        });
        [values].into_iter().chain(sigmas)
    }

    fn cell(&self, row: usize) -> String {
        (self.of_cell)(&self.column.cells()[row])
    }
}

fn csv_value(cell: &Cell) -> String {
    match cell {
        Cell::Number { value, .. } => exact(*value),
        Cell::Text(text) => text.to_string(),
        Cell::Missing { .. } => String::new(),
    }
}

fn csv_line(cells: &[String]) -> String {
    let mut writer = csv::Writer::from_writer(Vec::new());
    // Writing to memory cannot fail, and what was text stays text.
    let line = writer.write_record(cells).ok().and_then(|()| writer.into_inner().ok()).unwrap_or_default();
    String::from_utf8_lossy(&line).into_owned()
}

fn json_column(column: &Column) -> Value {
    let values: Vec<Value> = column.cells().iter().map(json_value).collect();
    let mut object = Map::new();
    object.insert("title".to_owned(), column.title().name().into());
    object.insert("unit".to_owned(), column.title().unit().into());
    object.insert("values".to_owned(), values.into());
    if column.has_sigma() {
        let sigmas: Vec<Value> = column.cells().iter().map(|cell| cell.sigma().into()).collect();
        object.insert("sigma".to_owned(), sigmas.into());
    }
    object.into()
}

fn json_value(cell: &Cell) -> Value {
    match cell {
        Cell::Number { value, .. } => (*value).into(),
        Cell::Text(text) => Value::String(text.to_string()),
        Cell::Missing { .. } => Value::Null,
    }
}

fn markdown_line(cells: &[String]) -> String {
    let cells: Vec<String> = cells.iter().map(|cell| markdown_cell(cell)).collect();
    format!("| {} |\n", cells.join(" | "))
}

/// A cell of one line, in which a bar or a backslash is itself.
fn markdown_cell(text: &str) -> String {
    let line = text.split_whitespace().collect::<Vec<_>>().join(" ");
    line.replace('\\', "\\\\").replace('|', "\\|")
}

#[cfg(test)]
mod tests {
    use std::path::{Path, PathBuf};

    use super::{Cell, Column, Overwrite, Style, Table, exact};

    fn lakes() -> Table {
        Table::new([
            Column::texts("name", ["north basin, 5 m", "the \"hole\"|"]),
            Column::new("pH", [Some(8.15), None]),
            Column::new("Ca [mg/L]", [Cell::uncertain(41.2, 0.8), Cell::number(1.0 / 3.0)]),
            Column::new("log_c(Ca^2+)", [f64::NEG_INFINITY, 1e-300]),
        ])
        .unwrap()
        .with_failures([None, Some("no\nequilibrium".to_owned())])
        .unwrap()
    }

    #[test]
    fn csv() {
        let expected = "name,pH,Ca [mg/L],Ca +/- [mg/L],log_c(Ca^2+),failure\n\
            \"north basin, 5 m\",8.15,41.2,0.8,-inf,\n\
            \"the \"\"hole\"\"|\",,0.3333333333333333,,1e-300,\"no\nequilibrium\"\n";
        assert_eq!(lakes().to_csv(), expected);
        assert_eq!(Table::new([Column::new("x", [None::<f64>])]).unwrap().to_csv(), "x\n\"\"\n");
    }

    #[test]
    fn json() {
        let read: serde_json::Value = serde_json::from_str(&lakes().to_json()).unwrap();
        let expected = serde_json::json!({ "columns": [
            { "title": "name", "unit": null, "values": ["north basin, 5 m", "the \"hole\"|"] },
            { "title": "pH", "unit": null, "values": [8.15, null] },
            { "title": "Ca", "unit": "mg/L", "values": [41.2, 1.0 / 3.0], "sigma": [0.8, null] },
            { "title": "log_c(Ca^2+)", "unit": null, "values": [null, 1e-300] },
            { "title": "failure", "unit": null, "values": [null, "no\nequilibrium"] },
        ] });
        assert_eq!(read, expected);
    }

    #[test]
    fn markdown() {
        let expected = "\
| name | pH | Ca [mg/L] | log_c(Ca²⁺) | failure |
| --- | ---: | ---: | ---: | --- |
| north basin, 5 m | 8.15 | 41.20 ± 0.80 | -inf | – |
| the \"hole\"\\| | – | 0.333 | 1e-300 | no equilibrium |
";
        assert_eq!(lakes().to_markdown(Style::default()), expected);
    }

    #[test]
    fn exact_numbers() {
        for (value, text) in
            [(8.0, "8"), (0.1 + 0.2, "0.30000000000000004"), (1e300, "1e300"), (1.5e-7, "1.5e-7")]
        {
            assert_eq!(exact(value), text);
            assert_eq!(text.parse::<f64>().unwrap().to_bits(), value.to_bits());
        }
    }

    /// A folder of its own for one test, gone when the test is.
    struct Folder(PathBuf);

    impl Folder {
        fn new(name: &str) -> Self {
            let path = std::env::temp_dir().join(format!("table-{name}-{}", std::process::id()));
            std::fs::create_dir_all(&path).unwrap();
            Self(path)
        }
    }

    impl Drop for Folder {
        fn drop(&mut self) {
            let _ = std::fs::remove_dir_all(&self.0);
        }
    }

    #[test]
    fn saving() {
        let folder = Folder::new("saving");
        let path = folder.0.join("lakes.CSV");
        lakes().save(&path, Overwrite::Refuse).unwrap();
        assert_eq!(std::fs::read_to_string(&path).unwrap(), lakes().to_csv());

        let refused = lakes().head(1).save(&path, Overwrite::Refuse).unwrap_err();
        let expected = "exists and is not overwritten: choose another name, or allow it with `--overwrite`";
        assert_eq!(refused.to_string(), format!("`{}` {expected}", path.display()));
        assert_eq!(std::fs::read_to_string(&path).unwrap(), lakes().to_csv());

        lakes().head(1).save(&path, Overwrite::Allow).unwrap();
        assert_eq!(std::fs::read_to_string(&path).unwrap(), lakes().head(1).to_csv());
        assert_eq!(std::fs::read_dir(&folder.0).unwrap().count(), 1); // nothing left beside it
    }

    #[test]
    fn refusing_to_save() {
        let refused = lakes().save(Path::new("lakes.xlsx"), Overwrite::Allow).unwrap_err();
        let expected = "`lakes.xlsx` has no ending that says how to write a table: `.csv`, `.json` and `.md` are understood";
        assert_eq!(refused.to_string(), expected);
        let nowhere = std::env::temp_dir().join("no-such-folder-for-tables/lakes.csv");
        let failed = lakes().save(&nowhere, Overwrite::Allow).unwrap_err().to_string();
        assert!(failed.starts_with(&format!("`{}` could not be written: ", nowhere.display())), "{failed}");
    }
}
