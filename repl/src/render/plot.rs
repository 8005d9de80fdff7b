//! A plot in characters: dots of Braille for lines where the terminal has them, letters and signs where it has not.

use lysocline_engine::present::plot::{Axis, Curve, Fields, Marks, Panel, Plot, Tick};
use lysocline_engine::present::{Style, Title, notation};

/// How a plot is to be drawn.
#[derive(Debug, Clone, Copy)]
pub struct Look {
    /// Only ASCII characters.
    pub plain: bool,
    /// Escape sequences for colours.
    pub color: bool,
    /// Characters in a line.
    pub width: usize,
}

/// Signs of the curves where no colour tells them apart.
const SIGNS: [char; 7] = ['*', 'o', '+', 'x', '#', '@', '%'];
/// Colours of terminals that are told apart on dark and on light ground.
const COLOURS: [u8; 7] = [94, 33, 32, 35, 36, 31, 90];
/// Lines of a panel: alone, and as one of several.
const TALL: usize = 18;
const SHORT: usize = 10;
const WIDEST: usize = 100;

/// The plot as lines of text.
pub fn draw(plot: &Plot, look: &Look) -> String {
    let ticks: Vec<Vec<Tick>> = plot.panels.iter().map(|panel| panel.y.ticks(5)).collect();
    let texts = ticks.iter().flatten().map(|tick| tick.text.chars().count());
    let margin = texts.max().unwrap_or(0) + 1;
    let canvas =
        Canvas { margin, width: look.width.min(WIDEST).saturating_sub(margin + 3).max(16), look: *look };
    let mut lines = Vec::new();
    lines.extend(plot.title.iter().map(|title| format!("{:margin$} {}", "", shown(title, look))));
    let height = if plot.panels.len() == 1 { TALL } else { SHORT };
    for (panel, ticks) in plot.panels.iter().zip(&ticks) {
        lines.push(canvas.heading(panel));
        lines.extend(canvas.panel(&plot.x, panel, ticks, height));
    }
    lines.extend(canvas.below(&plot.x));
    lines.iter().map(|line| line.trim_end().to_owned()).collect::<Vec<_>>().join("\n")
}

fn style(look: &Look) -> Style {
    Style { plain: look.plain, width: None }
}

fn shown(text: &str, look: &Look) -> String {
    notation::shown(text, style(look))
}

fn label(text: &str, look: &Look) -> String {
    notation::shown_title(&Title::parse(text), style(look))
}

struct Canvas {
    margin: usize,
    width: usize,
    look: Look,
}

/// What stands in one character of a panel.
#[derive(Clone, Copy, Default)]
struct Cell {
    /// Dots of Braille, by their bits.
    dots: u8,
    /// A sign or letter, which hides the dots.
    sign: Option<char>,
    curve: usize,
}

impl Canvas {
    /// What the panel shows: its axis, and each curve with its sign.
    fn heading(&self, panel: &Panel) -> String {
        let start = format!("{:1$} {2}", "", self.margin, label(&panel.y.label, &self.look));
        match &panel.marks {
            Marks::Curves(curves) if curves.len() > 1 => {
                let entries = curves.iter().enumerate().map(|(i, curve)| {
                    let name = match curve.is_formula {
                        true => shown(&curve.name, &self.look),
                        false => notation::shown_name(&Title::parse(&curve.name), style(&self.look)),
                    };
                    self.painted(i, &format!("{} {name}", self.sign(i, curves.len())))
                });
                format!("{start}:  {}", entries.collect::<Vec<_>>().join("   "))
            }
            Marks::Curves(_) => start,
            Marks::Fields(fields) => {
                let entries = fields.present().into_iter().enumerate().map(|(order, field)| {
                    self.painted(
                        order,
                        &format!("{} {}", letter(order), shown(&fields.names[field], &self.look)),
                    )
                });
                format!("{start}:  {}", entries.collect::<Vec<_>>().join("   "))
            }
        }
    }

    fn panel(&self, x: &Axis, panel: &Panel, ticks: &[Tick], height: usize) -> Vec<String> {
        let mut cells = vec![vec![Cell::default(); self.width]; height];
        match &panel.marks {
            Marks::Curves(curves) => {
                for (i, curve) in curves.iter().enumerate() {
                    self.curve(&mut cells, x, &panel.y, curve, i, curves.len());
                }
            }
            Marks::Fields(fields) => fill(&mut cells, fields),
        }
        let row_of = |tick: &Tick| ((1.0 - panel.y.place(tick.value)) * (height - 1) as f64).round();
        cells
            .iter()
            .enumerate()
            .map(|(row, cells)| {
                let tick = ticks.iter().find(|tick| !tick.text.is_empty() && row_of(tick) == row as f64);
                let text = tick.map_or("", |tick| tick.text.as_str());
                let text = self.ascii(text);
                let edge = match (self.look.plain, tick.is_some()) {
                    (false, true) => '┤',
                    (false, false) => '│',
                    (true, true) => '+',
                    (true, false) => '|',
                };
                format!("{text:>width$}{edge}{row}", width = self.margin, row = self.row(cells))
            })
            .collect()
    }

    fn row(&self, cells: &[Cell]) -> String {
        cells
            .iter()
            .map(|cell| match (cell.sign, cell.dots) {
                (Some(sign), _) => self.painted(cell.curve, &sign.to_string()),
                (None, 0) => " ".to_owned(),
                (None, dots) => {
                    let braille = char::from_u32(0x2800 + u32::from(dots)).unwrap_or(' ');
                    self.painted(cell.curve, &braille.to_string())
                }
            })
            .collect()
    }

    /// Colours tell lines of dots apart; without them each curve is drawn in its sign.
    fn in_signs(&self, n_curves: usize) -> bool {
        self.look.plain || (n_curves > 1 && !self.look.color)
    }

    fn sign(&self, i: usize, n_curves: usize) -> char {
        if self.in_signs(n_curves) { SIGNS[i % SIGNS.len()] } else { '━' }
    }

    fn curve(&self, cells: &mut [Vec<Cell>], x: &Axis, y: &Axis, curve: &Curve, i: usize, n_curves: usize) {
        let (columns, rows) = (self.width * 2, cells.len() * 4);
        let to = |point: &lysocline_engine::present::plot::Point| {
            (x.place(point.x) * (columns - 1) as f64, (1.0 - y.place(point.y)) * (rows - 1) as f64)
        };
        let in_signs = self.in_signs(n_curves) || !curve.is_line;
        let sign = if self.look.plain || self.in_signs(n_curves) { SIGNS[i % SIGNS.len()] } else { '●' };
        let mut set = |across: f64, down: f64| {
            let inside =
                across >= -0.5 && down >= -0.5 && across < columns as f64 - 0.4 && down < rows as f64 - 0.4;
            if !inside {
                return;
            }
            let (column, row) = (across.round().max(0.0) as usize, down.round().max(0.0) as usize);
            let Some(cell) = cells.get_mut(row / 4).and_then(|line| line.get_mut(column / 2)) else { return };
            cell.curve = i;
            if in_signs {
                cell.sign = Some(sign);
            } else {
                cell.dots |= dot(column % 2, row % 4);
            }
        };
        for piece in curve.pieces() {
            let places: Vec<(f64, f64)> =
                piece.iter().map(to).filter(|(x, y)| x.is_finite() && y.is_finite()).collect();
            if !curve.is_line || places.len() == 1 {
                places.iter().for_each(|(x, y)| set(*x, *y));
                continue;
            }
            for pair in places.windows(2) {
                let ((x0, y0), (x1, y1)) = (pair[0], pair[1]);
                let n = (x1 - x0).abs().max((y1 - y0).abs()).ceil().clamp(1.0, 4000.0);
                for k in 0..=n as usize {
                    let share = k as f64 / n;
                    set(x0 + share * (x1 - x0), y0 + share * (y1 - y0));
                }
            }
        }
    }

    /// The horizontal axis with its numbers and its name.
    fn below(&self, x: &Axis) -> Vec<String> {
        let (corner, line, mark) = if self.look.plain { ('+', '-', '+') } else { ('└', '─', '┬') };
        let mut axis = vec![line; self.width];
        let mut numbers = vec![' '; self.width + 12];
        let mut free_from = 0;
        for tick in x.ticks((self.width / 10).clamp(2, 8)) {
            let column = (x.place(tick.value) * (self.width - 1) as f64).round();
            if tick.text.is_empty() || !(0.0..self.width as f64).contains(&column) {
                continue;
            }
            let text: Vec<char> = self.ascii(&tick.text).chars().collect();
            let start = (column as usize).saturating_sub(text.len() / 2);
            axis[column as usize] = mark;
            if start >= free_from && start + text.len() <= numbers.len() {
                numbers[start..start + text.len()].copy_from_slice(&text);
                free_from = start + text.len() + 1;
            }
        }
        let name = label(&x.label, &self.look);
        let indent = self.margin + 1 + self.width.saturating_sub(name.chars().count()) / 2;
        vec![
            format!("{:1$}{corner}{2}", "", self.margin, axis.into_iter().collect::<String>()),
            format!("{:1$} {2}", "", self.margin, numbers.into_iter().collect::<String>()),
            format!("{:indent$}{name}", ""),
        ]
    }

    fn painted(&self, i: usize, text: &str) -> String {
        match self.look.color {
            true => format!("\u{1b}[{}m{text}\u{1b}[0m", COLOURS[i % COLOURS.len()]),
            false => text.to_owned(),
        }
    }

    fn ascii(&self, text: &str) -> String {
        if !self.look.plain {
            return text.to_owned();
        }
        let raised = |c: char| "⁰¹²³⁴⁵⁶⁷⁸⁹".chars().position(|r| r == c).map(|digit| digit.to_string());
        let exponent = text.strip_prefix("10").filter(|rest| rest.chars().any(|c| raised(c).is_some()));
        match exponent {
            Some(rest) => {
                let digits: String = rest.chars().filter_map(raised).collect();
                format!("1e{}{digits}", if rest.contains('⁻') { "-" } else { "" })
            }
            None => text.replace('−', "-"),
        }
    }
}

fn letter(order: usize) -> char {
    char::from(b'a' + u8::try_from(order % 26).unwrap_or(0))
}

fn fill(cells: &mut [Vec<Cell>], fields: &Fields) {
    let present = fields.present();
    let (rows, columns) = (cells.len(), cells.first().map_or(0, Vec::len));
    for (row, line) in cells.iter_mut().enumerate() {
        for (column, cell) in line.iter_mut().enumerate() {
            let up = 1.0 - (row as f64 + 0.5) / rows as f64;
            let field = fields.largest_at((column as f64 + 0.5) / columns as f64, up);
            let order = field.and_then(|field| present.iter().position(|other| *other == field));
            cell.sign = order.map(letter);
            cell.curve = order.unwrap_or(0);
        }
    }
}

/// The bit of a dot in a Braille character of two columns and four rows.
fn dot(column: usize, row: usize) -> u8 {
    const BITS: [[u8; 4]; 2] = [[0x01, 0x02, 0x04, 0x40], [0x08, 0x10, 0x20, 0x80]];
    BITS[column][row]
}

#[cfg(test)]
mod tests {
    use lysocline_engine::present::plot::Options;
    use lysocline_engine::present::{Column, Table};

    use super::*;

    fn drawn(look: Look) -> String {
        let table = Table::new([
            Column::numbers("x [m]", (0..=10).map(f64::from)),
            Column::numbers("rises", (0..=10).map(f64::from)),
            Column::numbers("m(Ca^2+) [mmol/kg]", [1.0; 11]),
        ])
        .unwrap();
        draw(&Plot::of_table(&table, "x", &["rises", "m(Ca^2+)"], &Options::default()).unwrap(), &look)
    }

    #[test]
    fn no_line_is_wider_than_the_terminal() {
        for width in [20, 40, 80, 200] {
            let text = drawn(Look { plain: false, color: false, width });
            assert!(text.lines().all(|line| line.chars().count() <= width.max(40)), "{width}\n{text}");
        }
    }

    #[test]
    fn plain_is_plain() {
        let text = drawn(Look { plain: true, color: false, width: 60 });
        assert!(text.is_ascii(), "{text}");
        assert!(
            text.contains("m(Ca^2+) [mmol/kg]") && text.contains("x [m]") && text.contains('*'),
            "{text}"
        );
    }
}
