//! Why a table could not be made, read or written.

use std::path::PathBuf;

/// A fault in the use of a table. Titles are full titles, rows are counted from 0.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum TableError {
    /// No column has this title.
    #[error("no column `{asked}`: {}the columns are {}", did_you_mean(.nearest.as_deref()), listed(.columns))]
    UnknownColumn {
        /// The title asked for.
        asked: String,
        /// The title it is most likely a misspelling of.
        nearest: Option<String>,
        /// Every title of the table.
        columns: Vec<String>,
    },
    /// Columns in several units have this name.
    #[error("`{asked}` could be {}: write the title with its unit", either(.candidates))]
    AmbiguousColumn {
        /// The name asked for.
        asked: String,
        /// The titles it could stand for.
        candidates: Vec<String>,
    },
    /// The row does not exist.
    #[error("no row {idx}: {}", row_range(*.n_rows))]
    NoSuchRow {
        /// The row asked for.
        idx: usize,
        /// The number of rows there are.
        n_rows: usize,
    },
    /// A column has a title of no characters.
    #[error("column {position} has no title")]
    EmptyTitle {
        /// Its position, counted from 1.
        position: usize,
    },
    /// Two columns of one table have the same title.
    #[error("two columns are called `{title}`: give one of them another title")]
    DuplicateTitle {
        /// The title in question.
        title: String,
    },
    /// A title ends like those under which uncertainties are written to files.
    #[error(
        "`{title}` is how a file calls the standard uncertainty of `{of}`: give the numbers of `{of}` their uncertainty, or choose another title"
    )]
    SigmaTitle {
        /// The title in question.
        title: String,
        /// The title without its ending.
        of: String,
    },
    /// Columns differ in their number of rows.
    #[error("`{title}` has {n_rows} rows where {expected} are needed")]
    UnequalLengths {
        /// The column that differs.
        title: String,
        /// The rows it has.
        n_rows: usize,
        /// The rows of the columns before it.
        expected: usize,
    },
    /// Tables to be put below one another differ in their titles.
    #[error("the tables have different columns: {}", differing(.lacking, .besides))]
    DifferentColumns {
        /// Titles only the first table has.
        lacking: Vec<String>,
        /// Titles only the table to be appended has.
        besides: Vec<String>,
    },
    /// Columns to be compared, added or subtracted differ in their units.
    #[error("`{left}` and `{right}` have different units: convert one of them first")]
    DifferentUnits {
        /// The title on the left.
        left: String,
        /// The title on the right.
        right: String,
    },
    /// A value that should tell rows apart stands in several of them.
    #[error("`{key}` stands in rows {} of column `{title}`: a key must be unique in the table matched with", .rows.iter().map(ToString::to_string).collect::<Vec<_>>().join(" and "))]
    DuplicateKey {
        /// The column that holds the keys.
        title: String,
        /// The key in question.
        key: String,
        /// The first two rows that have it.
        rows: [usize; 2],
    },
    /// Numbers were needed and a text was found.
    #[error("`{title}` holds text, `{text}` in row {idx}: numbers are needed here")]
    NotNumbers {
        /// The column in question.
        title: String,
        /// The first text in it.
        text: String,
        /// The row of that text.
        idx: usize,
    },
    /// A statistic of too few numbers.
    #[error("the {statistic} of `{title}` needs {needed}, and the column has {found}")]
    TooFewNumbers {
        /// The statistic asked for.
        statistic: &'static str,
        /// The column in question.
        title: String,
        /// What it needs, in words.
        needed: &'static str,
        /// The numbers there are.
        found: usize,
    },
    /// A quantile outside 0 to 1.
    #[error("no quantile at {probability}: give a probability from 0 to 1, as 0.9")]
    Probability {
        /// The probability asked for.
        probability: f64,
    },
    /// The file name does not say in which form the table should be written.
    #[error("`{}` has no ending that says how to write a table: `.csv`, `.json` and `.md` are understood", .path.display())]
    UnknownExtension {
        /// The file name given.
        path: PathBuf,
    },
    /// The file exists and may not be replaced.
    #[error("`{}` exists and is not overwritten: choose another name, or allow it with `--overwrite`", .path.display())]
    FileExists {
        /// The file in question.
        path: PathBuf,
    },
    /// The system did not write the file.
    #[error("`{}` could not be written: {reason}", .path.display())]
    Io {
        /// The file in question.
        path: PathBuf,
        /// What the system said.
        reason: String,
    },
}

fn did_you_mean(nearest: Option<&str>) -> String {
    nearest.map_or_else(String::new, |nearest| format!("did you mean `{nearest}`? "))
}

fn listed(names: &[String]) -> String {
    if names.is_empty() {
        return "none".to_owned();
    }
    names.iter().map(|name| format!("`{name}`")).collect::<Vec<_>>().join(", ")
}

fn either(names: &[String]) -> String {
    names.iter().map(|name| format!("`{name}`")).collect::<Vec<_>>().join(" or ")
}

fn row_range(n_rows: usize) -> String {
    match n_rows {
        0 => "the table has none".to_owned(),
        1 => "the table has only row 0".to_owned(),
        n => format!("the table has rows 0 to {}", n - 1),
    }
}

fn differing(lacking: &[String], besides: &[String]) -> String {
    let mut parts = Vec::new();
    if !lacking.is_empty() {
        parts.push(format!("the second lacks {}", listed(lacking)));
    }
    if !besides.is_empty() {
        parts.push(format!("only the second has {}", listed(besides)));
    }
    parts.join("; ")
}
