//! A table written as CSV and read back is the same table.

use lysocline_engine::present::{Cell, Column, Table};
use lysocline_engine::water::csv_text::{ColumnKind, CsvCell, CsvOptions, CsvText};
use proptest::prelude::*;

fn read_back(csv: &str) -> Table {
    let file = CsvText::read(csv.as_bytes(), &CsvOptions::default(), |_| ColumnKind::ByContent).unwrap();
    assert!(file.rows.iter().all(|row| row.faults.is_empty()), "{csv}");
    let columns = file.columns.iter().enumerate().map(|(idx, header)| {
        let cells = file.rows.iter().map(|row| match &row.cells[idx] {
            CsvCell::Number { value, sigma } => Cell::Number { value: *value, sigma: *sigma },
            CsvCell::Text(text) => Cell::text(text),
            CsvCell::Missing => Cell::missing(),
        });
        Column::new(header.to_string().as_str(), cells)
    });
    Table::new(columns).unwrap()
}

/// Any finite number, with or without its uncertainty, or none.
fn number_cell() -> impl Strategy<Value = Cell> {
    let finite = prop::num::f64::NORMAL | prop::num::f64::SUBNORMAL | prop::num::f64::ZERO;
    prop_oneof![
        4 => finite.prop_map(Cell::number),
        2 => (finite, prop::num::f64::POSITIVE | prop::num::f64::ZERO)
            .prop_filter("finite", |(_, sigma)| sigma.is_finite() && sigma.is_sign_positive())
            .prop_map(|(value, sigma)| Cell::uncertain(value, sigma)),
        1 => Just(Cell::missing()),
    ]
}

/// A text that could not be taken for a number, with whatever CSV has to put in quotes.
fn text_cell() -> impl Strategy<Value = Cell> {
    prop_oneof![
        4 => "[a-zµ][a-z0-9,;\"\t\n \u{b1}ü|+-]{0,12}[a-z\"]".prop_map(|text| Cell::text(&text)),
        1 => Just(Cell::missing()),
    ]
}

fn table() -> impl Strategy<Value = Table> {
    (1..8_usize)
        .prop_flat_map(|rows| {
            let numbers = || prop::collection::vec(number_cell(), rows);
            (numbers(), numbers(), prop::collection::vec(text_cell(), rows))
        })
        .prop_map(|(ph, calcium, notes)| {
            // A row of nothing would be no row of a file.
            let rows = (0..notes.len()).map(|row| format!("row {row}")).collect::<Vec<_>>();
            Table::new([
                Column::texts("name", rows.iter().map(String::as_str)),
                Column::new("pH", ph),
                Column::new("Ca, \"dissolved\" [mg/L]", calcium),
                Column::new("note; remark", notes),
            ])
            .unwrap()
        })
}

proptest! {
    #[test]
    fn csv_reads_back_equal(table in table()) {
        prop_assert_eq!(read_back(&table.to_csv()), table);
    }
}
