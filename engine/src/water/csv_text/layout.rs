//! From bytes to lines of cells: encoding, separator, quotes, header.

use super::CsvError;

/// The lines of a file, cells without the white space around them.
#[derive(Debug)]
pub(super) struct Lines {
    /// One text for each column, none of them empty.
    pub header: Vec<String>,
    /// Those with anything in them.
    pub rows: Vec<Line>,
}

/// One row of cells; it may run over several lines of the file.
#[derive(Debug)]
pub(super) struct Line {
    /// The line it begins in, counted from 1.
    pub line: u64,
    pub cells: Vec<String>,
}

/// The text of a file, without its byte-order mark.
pub(super) fn decoded(bytes: &[u8]) -> Result<&str, CsvError> {
    let is_utf16 = bytes.starts_with(&[0xFF, 0xFE]) || bytes.starts_with(&[0xFE, 0xFF]) || bytes.contains(&0);
    if is_utf16 {
        return Err(CsvError::Utf16);
    }
    let bytes = bytes.strip_prefix(b"\xEF\xBB\xBF").unwrap_or(bytes);
    std::str::from_utf8(bytes).map_err(|error| {
        let (good, bad) = bytes.split_at(error.valid_up_to());
        let good = String::from_utf8_lossy(good);
        let last_line = good.rsplit('\n').next().unwrap_or_default();
        CsvError::NotUtf8 {
            line: good.matches('\n').count() + 1,
            character: last_line.chars().count() + 1,
            byte: bad[0],
        }
    })
}

impl Lines {
    pub(super) fn read(text: &str) -> Result<Self, CsvError> {
        let separator = separator(header_text(text.trim_start()))?;
        if let Some(line) = unclosed_quote(text, separator) {
            return Err(CsvError::UnclosedQuote { line });
        }
        let mut lines = split(text, separator).into_iter().filter(|line| width_in_use(&line.cells) > 0);
        let header = lines.next().ok_or(CsvError::Empty)?;
        let rows: Vec<Line> = lines.collect();
        if rows.is_empty() {
            return Err(CsvError::HeaderOnly);
        }
        Self { header: header.cells, rows }.without_empty_columns()
    }

    /// Spreadsheets save columns that were once used: those without header and cells go, if they come last.
    fn without_empty_columns(mut self) -> Result<Self, CsvError> {
        let in_rows = self.rows.iter().map(|row| width_in_use(&row.cells)).max().unwrap_or(0);
        let width = width_in_use(&self.header).max(in_rows.min(self.header.len()));
        self.header.truncate(width);
        for row in &mut self.rows {
            row.cells.truncate(width_in_use(&row.cells).max(width));
        }
        match self.header.iter().position(String::is_empty) {
            None => Ok(self),
            Some(column) => Err(self.empty_header(column)),
        }
    }

    fn empty_header(&self, column: usize) -> CsvError {
        let cells = self.rows.iter().filter_map(|row| Some((row.line, row.cells.get(column)?)));
        let found = cells.clone().find(|(_, text)| !text.is_empty()).or_else(|| cells.clone().next());
        let (line, text) = found.map_or((1, String::new()), |(line, text)| (line, text.clone()));
        CsvError::EmptyHeader { column: column + 1, line, text }
    }
}

/// The number of cells up to the last that is not empty.
fn width_in_use(cells: &[String]) -> usize {
    cells.iter().rposition(|text| !text.is_empty()).map_or(0, |last| last + 1)
}

/// The text up to the first line end outside quotes.
fn header_text(text: &str) -> &str {
    let mut in_quotes = false;
    let end = text.find(|c| {
        in_quotes ^= c == '"';
        !in_quotes && matches!(c, '\n' | '\r')
    });
    &text[..end.unwrap_or(text.len())]
}

/// The separators understood, with their names.
const SEPARATORS: [(u8, &str); 3] = [(b',', "`,`"), (b';', "`;`"), (b'\t', "tabs")];

/// The separator that stands most often in the header, outside quotes; a comma where there is none.
fn separator(header: &str) -> Result<u8, CsvError> {
    let mut counts: Vec<(usize, u8, &str)> = SEPARATORS
        .iter()
        .map(|(separator, name)| (outside_quotes(header, *separator), *separator, *name))
        .collect();
    counts.sort_by_key(|(count, ..)| std::cmp::Reverse(*count)); // stable: a comma first among equals
    match counts.as_slice() {
        [(first, _, a), (second, _, b), ..] if first == second && *first > 0 => {
            Err(CsvError::UnclearSeparator { first: a, second: b })
        }
        [(_, separator, _), ..] => Ok(*separator),
        [] => Ok(b','),
    }
}

fn outside_quotes(text: &str, separator: u8) -> usize {
    text.split('"').step_by(2).map(|outside| outside.bytes().filter(|byte| *byte == separator).count()).sum()
}

fn split(text: &str, separator: u8) -> Vec<Line> {
    let mut reader = csv::ReaderBuilder::new()
        .delimiter(separator)
        .has_headers(false)
        .flexible(true)
        .from_reader(text.as_bytes());
    let mut counter = LineCounter { text, at: 0, line: 1 };
    // Reading text from memory cannot fail: rows of unequal length are allowed, and it is UTF-8.
    let records = reader.records().filter_map(Result::ok);
    let lines = records.map(|record| Line {
        line: counter.line_of(record.position().map_or(0, csv::Position::byte)),
        cells: record.iter().map(|cell| cell.trim().to_owned()).collect(),
    });
    lines.collect()
}

/// Counts lines ahead of the reader, whose own count is behind by empty lines and by the second half of `\r\n`.
struct LineCounter<'a> {
    text: &'a str,
    at: usize,
    line: u64,
}

impl LineCounter<'_> {
    /// The line of the first character of the record that begins at `byte` or after the line ends there.
    fn line_of(&mut self, byte: u64) -> u64 {
        let byte = usize::try_from(byte).unwrap_or(usize::MAX).min(self.text.len());
        let rest = &self.text.as_bytes()[byte..];
        let start = byte + rest.iter().take_while(|byte| matches!(byte, b'\r' | b'\n')).count();
        let passed = &self.text.as_bytes()[self.at.min(start)..start];
        let ends = passed.iter().enumerate().filter(|(at, byte)| match byte {
            b'\n' => true,
            b'\r' => passed.get(at + 1) != Some(&b'\n'),
            _ => false,
        });
        self.line += ends.count() as u64;
        self.at = start;
        self.line
    }
}

/// The line of a quote that is opened at the beginning of a cell and not closed before the end of the file.
fn unclosed_quote(text: &str, separator: u8) -> Option<u64> {
    let (mut line, mut opened, mut at_start) = (1, None, true);
    for byte in text.bytes() {
        match (byte, opened) {
            // A doubled quote closes and opens again: the same in the end.
            (b'"', Some(_)) => (opened, at_start) = (None, true),
            (b'"', None) if at_start => opened = Some(line),
            (_, None) => at_start = byte == separator || byte == b'\n' || byte == b'\r',
            _ => {}
        }
        line += u64::from(byte == b'\n');
    }
    opened
}
