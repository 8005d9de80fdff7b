//! Why a file as a whole cannot be read.

/// Why a file as a whole cannot be read. Lines and columns are counted from 1.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum CsvError {
    /// The file holds two bytes a character.
    #[error("the file is in UTF-16: save it as UTF-8 (in a spreadsheet, `CSV UTF-8`)")]
    Utf16,
    /// A byte that UTF-8 does not have there.
    #[error("line {line}, character {character}: byte 0x{byte:02X} is not UTF-8{}: save the file as UTF-8 (in a spreadsheet, `CSV UTF-8`)", in_latin1(*.byte))]
    NotUtf8 {
        /// The line it is in.
        line: usize,
        /// Its place in the line.
        character: usize,
        /// The byte.
        byte: u8,
    },
    /// A quoted cell does not end.
    #[error("line {line}: a quote is opened and never closed")]
    UnclosedQuote {
        /// The line it is opened in.
        line: u64,
    },
    /// There is nothing in the file.
    #[error("the file is empty: a header line such as `name,pH,Ca [mg/L]` and one line a sample are needed")]
    Empty,
    /// There is nothing below the header.
    #[error("the file has a header and no rows")]
    HeaderOnly,
    /// Two separators stand equally often in the header line.
    #[error(
        "the header could be separated by {first} or by {second}: put header cells that hold one of them in quotes"
    )]
    UnclearSeparator {
        /// One of them, in words.
        first: &'static str,
        /// The other.
        second: &'static str,
    },
    /// A column with cells in it has no header.
    #[error("column {column} has no header, but line {line} holds `{text}` there")]
    EmptyHeader {
        /// Its position.
        column: usize,
        /// The first line with something in it.
        line: u64,
        /// What is there.
        text: String,
    },
    /// Two columns have the same header.
    #[error("columns {first} and {second} are both called `{header}`")]
    DuplicateHeader {
        /// The header.
        header: String,
        /// The position of the first.
        first: usize,
        /// The position of the second.
        second: usize,
    },
    /// An option names a column that is not there.
    #[error("`{option}` names a header `{asked}` that the file does not have: {}its headers are {}", did_you_mean(.nearest.as_deref()), listed(.headers))]
    NoSuchHeader {
        /// The option.
        option: &'static str,
        /// The header it names.
        asked: String,
        /// The header it is most likely a misspelling of.
        nearest: Option<String>,
        /// The headers there are.
        headers: Vec<String>,
    },
    /// A column is renamed to no characters.
    #[error("`columns` gives `{header}` no new header: write one, or leave the column as it is")]
    EmptyNewHeader {
        /// The header in the file.
        header: String,
    },
    /// A unit is given for a column that states one.
    #[error(
        "`units` gives `{unit}` for `{header}`, which states its unit: rename it in `columns` if the header is wrong"
    )]
    UnitTwice {
        /// The header.
        header: String,
        /// The unit given besides.
        unit: String,
    },
    /// Uncertainties of nothing.
    #[error("`{header}` has no column `{title}` to be the uncertainty of")]
    SigmaWithoutColumn {
        /// The header of the uncertainties.
        header: String,
        /// The title looked for.
        title: String,
    },
    /// Uncertainties in another unit than the values.
    #[error(
        "`{header}` and `{column}` have different units: give the uncertainty in the unit of the value, or in `%` of it"
    )]
    SigmaUnit {
        /// The header of the uncertainties.
        header: String,
        /// The header of the values.
        column: String,
    },
    /// Two columns of uncertainties for one of values.
    #[error("`{first}` and `{second}` are both uncertainties of `{column}`: leave one of them out")]
    SigmaTwice {
        /// The header of one.
        first: String,
        /// The header of the other.
        second: String,
        /// The header of the values.
        column: String,
    },
}

/// What stands in for a value below its detection limit is none of the four.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("`below` is `{asked}`: {}`half`, `zero`, `limit` and `skip` are understood", did_you_mean(.nearest.as_deref()))]
pub struct UnknownBelow {
    /// The text given.
    pub asked: String,
    /// The policy it is most likely a misspelling of.
    pub nearest: Option<String>,
}

/// What the byte most likely is, where it is a letter in Latin-1.
fn in_latin1(byte: u8) -> String {
    let letter = char::from(byte);
    if letter.is_alphabetic() || matches!(byte, 0xB0..=0xBF) {
        format!(" (it would be `{letter}` in Latin-1)")
    } else {
        String::new()
    }
}

fn did_you_mean(nearest: Option<&str>) -> String {
    nearest.map_or_else(String::new, |nearest| format!("did you mean `{nearest}`? "))
}

fn listed(headers: &[String]) -> String {
    headers.iter().map(|header| format!("`{header}`")).collect::<Vec<_>>().join(", ")
}
