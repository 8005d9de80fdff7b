//! A table on a terminal: one thin rule below the titles, units on a line of their own, numbers aligned by their
//! decimal points, rows numbered as `.row(i)` counts them.
//!
//! What does not fit is not drawn, and a line below the table says what that is and how to see it. Reasons of
//! failure are too long for a column: they stand below, each with its row.

use comfy_table::{Attribute, Cell, CellAlignment, Color, ColumnConstraint, LineStyle, TableStyle, Width};
use lysocline_engine::present::{Column, Style, Table, notation, number, table::FAILURE};

use super::notes;

/// How a table is to be drawn.
#[derive(Debug, Clone, Copy)]
pub struct Look {
    /// Characters, and the width of the terminal.
    pub style: Style,
    /// Whether to send escape sequences for bold, dim and red.
    pub color: bool,
    /// Rows to be drawn at most; of a longer table the beginning and the end are drawn.
    pub rows: usize,
}

impl Default for Look {
    fn default() -> Self {
        Self { style: Style::default(), color: false, rows: 20 }
    }
}

/// The table as lines of text, each ending in a line end.
pub fn draw(table: &Table, look: &Look) -> String {
    let excerpt = Excerpt::of(table, look.rows);
    let columns: Vec<Drawn> = table
        .columns()
        .iter()
        .zip(excerpt.table.columns())
        .filter(|(column, _)| column.title().name() != FAILURE)
        .map(|(_, shown)| Drawn::of(shown, &excerpt, look.style))
        .collect();
    let index = Drawn::index(table, &excerpt, look.style);
    let fit = Fit::of(&index, &columns, look.style.width);
    let drawn: Vec<&Drawn> = [&index].into_iter().chain(&columns[..fit.widths.len()]).collect();

    let grid = if columns.is_empty() { String::new() } else { grid(&drawn, &fit, &excerpt, table, look) };
    let hidden_rows = table.n_rows() - excerpt.rows.len();
    let left_out: Vec<&str> = columns[fit.widths.len()..].iter().map(|c| c.title.as_str()).collect();
    grid + notes::below(table, hidden_rows, &left_out, look.style).as_str()
}

/// The rows that are drawn.
struct Excerpt {
    /// These rows only.
    table: Table,
    /// Their positions in the whole table.
    rows: Vec<usize>,
    /// After how many of them rows are left out.
    gap: Option<usize>,
}

impl Excerpt {
    /// Two thirds of the rows allowed from the beginning, the others from the end.
    fn of(table: &Table, allowed: usize) -> Self {
        let (n, allowed) = (table.n_rows(), allowed.max(2));
        if n <= allowed {
            return Self { table: table.clone(), rows: (0..n).collect(), gap: None };
        }
        let head = (2 * allowed).div_ceil(3).min(allowed - 1);
        let tail = allowed - head;
        let ends = table.head(head).append(&table.tail(tail));
        Self {
            // Both ends are of one table, so they have the same columns.
            table: ends.unwrap_or_else(|_| table.clone()),
            rows: (0..head).chain(n - tail..n).collect(),
            gap: Some(head),
        }
    }

    /// One text for each line of the body: those of the rows, and `gap` where rows are left out.
    fn with_gap(&self, mut texts: Vec<String>, gap: &str) -> Vec<String> {
        if let Some(at) = self.gap {
            texts.insert(at, gap.to_owned());
        }
        texts
    }
}

/// One column as texts.
struct Drawn {
    /// The title to name it by in a script.
    title: String,
    name: String,
    unit: Option<String>,
    body: Vec<String>,
    is_text: bool,
    is_index: bool,
}

/// Text columns are folded to this width before any column is left out.
const NARROW: usize = 16;

/// Blanks on either side of a column, together.
const PADDING: usize = 2;

impl Drawn {
    fn of(column: &Column, excerpt: &Excerpt, style: Style) -> Self {
        let texts = number::shown_column(column, style).iter().map(|text| one_line(text)).collect();
        Self {
            title: column.title().to_string(),
            name: one_line(&notation::shown_name(column.title(), style)),
            unit: column
                .title()
                .unit()
                .map(|unit| format!("[{}]", one_line(&notation::shown_unit(unit, style)))),
            body: excerpt.with_gap(texts, gap(style)),
            is_text: column.cells().iter().any(|cell| cell.as_text().is_some()),
            is_index: false,
        }
    }

    /// The numbers of the rows; those that failed have a mark.
    fn index(table: &Table, excerpt: &Excerpt, style: Style) -> Self {
        let any_failed = excerpt.rows.iter().any(|row| table.failure(*row).is_some());
        let mark = |row: usize| match (any_failed, table.failure(row), style.plain) {
            (false, ..) => "",
            (true, None, _) => "  ",
            (true, Some(_), false) => " ✗",
            (true, Some(_), true) => " x",
        };
        let texts = excerpt.rows.iter().map(|row| format!("{row}{}", mark(*row))).collect();
        let gap = if any_failed { format!("{}  ", gap(style)) } else { gap(style).to_owned() };
        Self {
            title: String::new(),
            name: String::new(),
            unit: None,
            body: excerpt.with_gap(texts, &gap),
            is_text: false,
            is_index: true,
        }
    }

    fn width(&self) -> usize {
        let mut probe = comfy_table::Table::new();
        probe.set_header([format!("{}\n{}", self.name, self.unit.as_deref().unwrap_or_default())]);
        probe.add_rows(self.body.iter().map(|text| [text]));
        probe.column_max_content_widths().first().map_or(0, |width| usize::from(*width)) + PADDING
    }

    fn narrow_width(&self) -> usize {
        if self.is_text { self.width().min(NARROW + PADDING) } else { self.width() }
    }

    fn alignment(&self) -> CellAlignment {
        if self.is_text { CellAlignment::Left } else { CellAlignment::Right }
    }

    fn header(&self, has_units: bool) -> Cell {
        let text = match (&self.unit, has_units) {
            (Some(unit), _) => format!("{}\n{unit}", self.name),
            (None, true) => format!("{}\n", self.name),
            (None, false) => self.name.clone(),
        };
        Cell::new(text).set_alignment(self.alignment()).add_attribute(Attribute::Bold)
    }
}

/// The columns that have a place, by their widths.
struct Fit {
    index_width: usize,
    /// Widths of the first columns; the others have no place.
    widths: Vec<usize>,
}

impl Fit {
    /// As many columns from the left as there is a place for when texts are folded; what is left over goes to the
    /// texts. The first column is always drawn.
    fn of(index: &Drawn, columns: &[Drawn], width: Option<usize>) -> Self {
        let index_width = index.width();
        let Some(available) = width.map(|width| width.saturating_sub(index_width)) else {
            return Self { index_width, widths: columns.iter().map(Drawn::width).collect() };
        };
        let mut left = available;
        let mut widths = Vec::new();
        for column in columns {
            let needed = column.narrow_width();
            if needed > left && !widths.is_empty() {
                break;
            }
            widths.push(needed.min(left.max(PADDING + 1)));
            left = left.saturating_sub(needed);
        }
        for (width, column) in widths.iter_mut().zip(columns) {
            let more = column.width().saturating_sub(*width).min(left);
            *width += more;
            left -= more;
        }
        Self { index_width, widths }
    }
}

fn grid(columns: &[&Drawn], fit: &Fit, excerpt: &Excerpt, table: &Table, look: &Look) -> String {
    let mut grid = comfy_table::Table::new();
    grid.load_style(rules(look.style)).force_no_tty();
    if look.color {
        grid.enforce_styling();
    }
    let has_units = columns.iter().any(|column| column.unit.is_some());
    grid.set_header(columns.iter().map(|column| column.header(has_units)));
    let lines = columns.first().map_or(0, |column| column.body.len());
    for line in 0..lines {
        let row = row_of_line(line, excerpt);
        let failed = row.is_some_and(|row| table.failure(row).is_some());
        grid.add_row(columns.iter().map(|column| body_cell(column, line, failed)));
    }
    let widths = [fit.index_width].into_iter().chain(fit.widths.iter().copied());
    let constraints = widths
        .map(|width| ColumnConstraint::Absolute(Width::Fixed(u16::try_from(width).unwrap_or(u16::MAX))));
    grid.set_constraints(constraints);
    grid.trim_fmt() + "\n"
}

fn body_cell(column: &Drawn, line: usize, failed: bool) -> Cell {
    let cell = Cell::new(&column.body[line]).set_alignment(column.alignment());
    match (failed, column.is_index) {
        (true, _) => cell.fg(Color::Red),
        (false, true) => cell.add_attribute(Attribute::Dim),
        (false, false) => cell,
    }
}

/// The row drawn in this line of the body, unless it stands for rows left out.
fn row_of_line(line: usize, excerpt: &Excerpt) -> Option<usize> {
    match excerpt.gap {
        Some(gap) if line == gap => None,
        Some(gap) if line > gap => excerpt.rows.get(line - 1).copied(),
        _ => excerpt.rows.get(line).copied(),
    }
}

fn rules(style: Style) -> TableStyle {
    let rule = if style.plain { '-' } else { '─' };
    TableStyle::new().header_separator(LineStyle::none().fill(rule))
}

fn gap(style: Style) -> &'static str {
    if style.plain { ":" } else { "⋮" }
}

/// Text from a file may hold line ends, or escape sequences meant for the terminal: neither is drawn.
pub fn one_line(text: &str) -> String {
    text.chars().map(|c| if c.is_control() { ' ' } else { c }).collect()
}

#[cfg(test)]
mod tests {
    use super::{Look, Style, draw};
    use lysocline_engine::present::{Cell, Column, Table};

    fn survey() -> Table {
        Table::new([
            Column::texts("name", ["north basin, 5 m", "south basin", "inflow", "brine"]),
            Column::new("pH", [Cell::uncertain(8.153, 0.021), 7.9.into(), 7.42.into(), Cell::missing()]),
            Column::new(
                "m(Ca^2+) [mmol/kg]",
                [Cell::uncertain(1.0287, 0.02), 0.993.into(), 2.5.into(), Cell::missing()],
            ),
            Column::new(
                "SI(calcite)",
                [0.3412.into(), (-0.0213).into(), Cell::missing_because("absent"), Cell::missing()],
            ),
            Column::new(
                "m(CO3^2-) [mol/kg]",
                [1.234e-5, 3.4567e-6, 2.0e-8].map(Some).into_iter().chain([None]),
            ),
            Column::numbers("Cl [mg/L]", [9.8, 350.0, 0.4213, 18_500.0]),
        ])
        .unwrap()
        .with_failures([
            None,
            None,
            None,
            Some(
                "no equilibrium after 200 iterations: the `Ca` balance is still off by 1.2e-3 mol/kg(water)"
                    .to_owned(),
            ),
        ])
        .unwrap()
    }

    #[track_caller]
    fn case(table: &Table, look: &Look, expected: &str) {
        let drawn = draw(table, look);
        assert_eq!(format!("\n{drawn}"), expected, "\n{drawn}");
    }

    fn of_width(width: usize) -> Look {
        Look { style: Style { plain: false, width: Some(width) }, ..Look::default() }
    }

    #[test]
    fn a_table() {
        let expected = "
      name                         pH         m(Ca²⁺)  SI(calcite)  m(CO₃²⁻)          Cl
                                            [mmol/kg]               [mol/kg]      [mg/L]
─────────────────────────────────────────────────────────────────────────────────────────
 0    north basin, 5 m  8.153 ± 0.021  1.029  ± 0.020       0.3412  1.234e-5      9.8
 1    south basin       7.900          0.9930              -0.0213  3.457e-6    350
 2    inflow            7.420          2.5000               absent  2.000e-8      0.4213
 3 ✗  brine                         –               –            –         –  18500
 1 row failed:
   row 3: no equilibrium after 200 iterations: the `Ca` balance is still off by 1.2e-3 mol/kg(water)
";
        case(&survey(), &Look::default(), expected);
    }

    #[test]
    fn in_plain_style_on_a_narrow_terminal() {
        let expected = "
      name                           pH          m(Ca^2+)
                                                [mmol/kg]
----------------------------------------------------------
 0    north basin, 5 m  8.153 +/- 0.021  1.029  +/- 0.020
 1    south basin       7.900            0.9930
 2    inflow            7.420            2.5000
 3 x  brine                           -                 -
 ... 3 more columns to the right: `SI(calcite)`, `m(CO3^2-)
   [mol/kg]`, `Cl [mg/L]`; widen the terminal, or choose with
   `.select([\"SI(calcite)\"])`
 1 row failed:
   row 3: no equilibrium after 200 iterations: the `Ca` balance
     is still off by 1.2e-3 mol/kg(water)
";
        let style = Style { plain: true, width: Some(64) };
        case(&survey(), &Look { style, ..Look::default() }, expected);
    }

    #[test]
    fn texts_are_folded_before_columns_are_left_out() {
        let table = Table::new([
            Column::texts("name", ["outlet of the upper lake", "spring"]),
            Column::numbers("pH", [8.15, 7.9]),
            Column::texts("remark", ["sampled from the bank during the flood", "clear"]),
        ]);
        let expected = "
    name                   pH  remark
────────────────────────────────────────────────
 0  outlet of the upper  8.15  sampled from the
    lake                       bank during the
                               flood
 1  spring               7.90  clear
";
        case(&table.unwrap(), &of_width(48), expected);
    }

    #[test]
    fn a_long_table() {
        let volumes = Column::numbers("added(HCl) [mL]", (0..41).map(|i| f64::from(i) * 0.125));
        let ph = Column::numbers("pH", (0..41).map(|i| 9.1 - f64::from(i) * 0.137));
        let failures = (0..41).map(|row| match row {
            0 | 26..=38 => Some("the water is supersaturated with `calcite`".to_owned()),
            39 => Some("no equilibrium".to_owned()),
            _ => None,
        });
        let titration = Table::new([volumes, ph]).unwrap().with_failures(failures).unwrap();
        let expected = "
       added(HCl)     pH
             [mL]
─────────────────────────
  0 ✗       0.000  9.100
  1         0.125  8.963
  2         0.250  8.826
  3         0.375  8.689
  ⋮             ⋮      ⋮
 39 ✗       4.875  3.757
 40         5.000  3.620
 … 35 rows not shown: `.show(41)` shows all 41
 15 rows failed:
   rows 0, 26 to 38: the water is supersaturated with `calcite`
   row 39: no equilibrium
";
        case(&titration, &Look { rows: 6, ..Look::default() }, expected);
    }

    #[test]
    fn a_summary() {
        let expected = "
    column             n      mean        sd      min  quartile 1    median  quartile 3       max
──────────────────────────────────────────────────────────────────────────────────────────────────
 0  pH                 3     7.824    0.3723     7.42        7.66       7.9       8.027     8.153
 1  m(Ca²⁺) [mmol/kg]  3     1.507    0.8599    0.993       1.011     1.029       1.764       2.5
 2  SI(calcite)        2    0.1600    0.2563  -0.0213     0.06932    0.1599      0.2506    0.3412
 3  m(CO₃²⁻) [mol/kg]  3  5.272e-6  6.357e-6     2e-8    1.738e-6  3.457e-6    7.898e-6  1.234e-5
 4  Cl [mg/L]          4      4715      9191   0.4213       7.455     179.9        4888     18500
";
        case(&survey().summary(), &Look::default(), expected);
    }

    #[test]
    fn nothing_to_draw() {
        case(
            &survey().select(&["pH", "Cl"]).unwrap().head(0),
            &Look::default(),
            "
    pH      Cl
        [mg/L]
───────────────
 no rows
",
        );
        case(&Table::new([]).unwrap(), &Look::default(), "\n a table without columns\n");
    }

    #[test]
    fn no_line_is_wider_than_the_terminal() {
        for width in 30..130 {
            for table in [survey(), survey().summary()] {
                let drawn = draw(&table, &of_width(width));
                let widest = drawn.lines().map(|line| line.chars().count()).max();
                assert!(widest <= Some(width), "{width}:\n{drawn}");
            }
        }
    }

    #[test]
    fn escape_sequences_are_sent_only_when_asked_for() {
        let hostile = Table::new([Column::texts("a\u{1b}[2J [x\u{7}]", ["b\u{1b}[31m\nc"])]);
        let hostile = hostile.unwrap().with_failures([Some("d\u{1b}[0m".to_owned())]).unwrap();
        let drawn = draw(&hostile, &Look::default());
        assert!(drawn.chars().all(|c| c == '\n' || !c.is_control()), "{drawn:?}");
        assert!(draw(&survey(), &Look { color: true, ..Look::default() }).contains("\u{1b}[1m"));
    }
}
