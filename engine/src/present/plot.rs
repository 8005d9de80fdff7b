//! Plots: what is drawn, without saying how. Terminal and file draw the same [`Plot`].
//!
//! ```
//! use lysocline_engine::present::{Column, Table, plot::Plot};
//!
//! let table = Table::new([
//!     Column::numbers("f(CO2(g)) [uatm]", [200.0, 400.0, 800.0]),
//!     Column::numbers("pH", [8.4, 8.1, 7.8]),
//! ])?;
//! let plot = Plot::of_table(&table, "f(CO2(g))", &["pH"], &Default::default())?;
//! assert_eq!(plot.panels.len(), 1);
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```

use std::collections::BTreeSet;

pub use super::plot_axis::{Axis, Scale, Tick};
use super::{Cell, Column, Table, TableError, Title};

/// A drawing: panels above one another over one horizontal axis.
#[derive(Debug, Clone, PartialEq)]
pub struct Plot {
    /// What stands above it.
    pub title: Option<String>,
    /// The axis all panels share.
    pub x: Axis,
    /// From top to bottom. Numbers of different units never share one.
    pub panels: Vec<Panel>,
}

/// One vertical axis and what is drawn against it.
#[derive(Debug, Clone, PartialEq)]
pub struct Panel {
    /// The vertical axis.
    pub y: Axis,
    /// What is drawn.
    pub marks: Marks,
}

/// What a panel shows.
#[derive(Debug, Clone, PartialEq)]
pub enum Marks {
    /// Lines or points.
    Curves(Vec<Curve>),
    /// Which of several is the largest, over the plane.
    Fields(Fields),
}

/// One line, or one set of points.
#[derive(Debug, Clone, PartialEq)]
pub struct Curve {
    /// As typed, without the unit: `m(Ca^2+)`.
    pub name: String,
    /// Whether the whole name is a formula.
    pub is_formula: bool,
    /// In the order they are joined.
    pub points: Vec<Point>,
    /// Whether neighbours are joined by a line.
    pub is_line: bool,
}

/// One point.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Point {
    /// Along the horizontal axis.
    pub x: f64,
    /// Along the vertical axis; not a number where there is no value, which breaks a line.
    pub y: f64,
    /// Standard uncertainty of `y`; `None` where not known.
    pub sigma: Option<f64>,
}

/// Amounts of several candidates over a grid: a predominance diagram.
#[derive(Debug, Clone, PartialEq)]
pub struct Fields {
    /// Candidates as typed.
    pub names: Vec<String>,
    /// Grid along the horizontal axis, evenly spaced on it, rising.
    pub x: Vec<f64>,
    /// Grid along the vertical axis, evenly spaced on it, rising.
    pub y: Vec<f64>,
    /// For each candidate log10 of its amount, rows of `y` of columns of `x`: shape `(y.len() * x.len(),)`; not a number
    /// where it was not found.
    pub log_amounts: Vec<Vec<f64>>,
    /// Straight limits drawn across the fields, such as those of the stability of water.
    pub limits: Vec<Limit>,
}

/// A straight line across a field diagram.
#[derive(Debug, Clone, PartialEq)]
pub struct Limit {
    /// What lies along it, as typed: `O2(g) 1 bar`.
    pub name: String,
    /// Its two ends, (x, y) in the units of the axes; they may lie beyond the axes.
    pub ends: [(f64, f64); 2],
}

/// What may be said about a plot; what is not said is chosen by the numbers.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Options {
    /// What stands above it.
    pub title: Option<String>,
    /// Horizontal scale.
    pub x_scale: Option<Scale>,
    /// Vertical scale.
    pub y_scale: Option<Scale>,
}

/// Why a plot cannot be drawn.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum PlotError {
    /// A column that is not there.
    #[error(transparent)]
    Table(#[from] TableError),
    /// Texts where numbers are needed.
    #[error("the column `{0}` holds texts; a plot is made of numbers")]
    Texts(String),
    /// No columns to draw.
    #[error("a plot needs at least one column to draw: `.plot(\"{0}\", [\"pH\"])`")]
    NoColumns(String),
    /// No row has both numbers.
    #[error("no row has a number both in `{x}` and in `{y}`")]
    NoPoints {
        /// The horizontal column.
        x: String,
        /// The vertical column.
        y: String,
    },
    /// A logarithmic scale with nothing to show.
    #[error("a logarithmic scale shows numbers above zero, and `{0}` has none")]
    NotPositive(String),
}

/// The part of a vertical axis left free above and below.
const ROOM: f64 = 0.06;

impl Plot {
    /// Columns of a table against another. Columns of one unit share a panel; without a unit those of one kind do, such as
    /// saturation indices. Points whose x rises or falls throughout are joined by lines.
    ///
    /// # Errors
    ///
    /// [`PlotError`] when a column is unknown, holds texts or has nothing to show.
    pub fn of_table(table: &Table, x: &str, ys: &[&str], options: &Options) -> Result<Self, PlotError> {
        let across = numeric(table.column(x)?)?;
        let columns = ys
            .iter()
            .map(|title| table.column(title).map_err(PlotError::from).and_then(numeric))
            .collect::<Result<Vec<&Column>, _>>()?;
        if columns.is_empty() {
            return Err(PlotError::NoColumns(across.title().to_string()));
        }
        let values: Vec<f64> = across.cells().iter().filter_map(Cell::value).collect();
        let x_scale = options.x_scale.unwrap_or_else(|| Scale::fitting(&values));
        check(x_scale, &values, across.title())?;
        let mut families: Vec<(String, Vec<&Column>)> = Vec::new();
        for column in columns {
            let family = family(column.title());
            match families.iter_mut().find(|(own, _)| *own == family) {
                Some((_, members)) => members.push(column),
                None => families.push((family, vec![column])),
            }
        }
        let panels = families.iter().map(|(_, members)| panel(across, members, options));
        Ok(Self {
            title: options.title.clone(),
            x: Axis::holding(&across.title().to_string(), x_scale, &values, 0.0),
            panels: panels.collect::<Result<_, _>>()?,
        })
    }

    /// Whether one of its curves is called so.
    #[must_use]
    pub fn shows(&self, curve: &str) -> bool {
        self.panels.iter().any(|panel| panel.shows(curve))
    }

    /// Single points named together, in the panel of a curve; without points or such a curve the plot stays as it is.
    pub fn mark(&mut self, curve: &str, name: &str, points: impl IntoIterator<Item = (f64, f64)>) {
        let points: Vec<Point> = points.into_iter().map(|(x, y)| Point { x, y, sigma: None }).collect();
        let panel = self.panels.iter_mut().find(|panel| panel.shows(curve));
        if let (Some(Panel { marks: Marks::Curves(curves), .. }), false) = (panel, points.is_empty()) {
            curves.push(Curve { name: name.to_owned(), is_formula: false, points, is_line: false });
        }
    }

    /// Whether any curve has an uncertainty to draw.
    #[must_use]
    pub fn has_bands(&self) -> bool {
        self.panels.iter().any(|panel| match &panel.marks {
            Marks::Curves(curves) => curves.iter().any(Curve::has_band),
            Marks::Fields(_) => false,
        })
    }

    /// One sentence for those who cannot see it.
    #[must_use]
    pub fn description(&self) -> String {
        let panels = self.panels.iter().map(|panel| match &panel.marks {
            Marks::Curves(curves) => {
                let names: Vec<&str> = curves.iter().map(|curve| curve.name.as_str()).collect();
                format!("{} from {} to {}", names.join(", "), shown(panel.y.from), shown(panel.y.to))
            }
            Marks::Fields(fields) => {
                let names: Vec<&str> =
                    fields.present().iter().map(|field| fields.names[*field].as_str()).collect();
                format!("fields of {} over {}", names.join(", "), panel.y.label)
            }
        });
        format!(
            "{} against {} from {} to {}{}",
            panels.collect::<Vec<_>>().join("; "),
            self.x.label,
            shown(self.x.from),
            shown(self.x.to),
            if self.has_bands() { "; bands of one standard uncertainty" } else { "" }
        )
    }
}

fn shown(value: f64) -> String {
    super::number::shown(value)
}

impl Panel {
    fn shows(&self, curve: &str) -> bool {
        matches!(&self.marks, Marks::Curves(curves) if curves.iter().any(|own| own.name == curve))
    }
}

impl Curve {
    /// Whether any of its points has an uncertainty above zero.
    #[must_use]
    pub fn has_band(&self) -> bool {
        self.points.iter().any(|point| point.sigma.is_some_and(|sigma| sigma > 0.0))
    }

    /// Its points cut where there is no value.
    pub fn pieces(&self) -> impl Iterator<Item = &[Point]> {
        self.points
            .split(|point| !(point.x.is_finite() && point.y.is_finite()))
            .filter(|piece| !piece.is_empty())
    }
}

impl Fields {
    /// The candidate with the largest amount at a place between 0 and 1 along both axes, amounts taken as log-linear
    /// between grid points; `None` where nothing is known.
    #[must_use]
    pub fn largest_at(&self, across: f64, up: f64) -> Option<usize> {
        let ((i, right), (j, above)) = (cell(across, self.x.len())?, cell(up, self.y.len())?);
        let n = self.x.len();
        let (i1, j1) = ((i + 1).min(n - 1), (j + 1).min(self.y.len() - 1));
        let amount = |amounts: &Vec<f64>| {
            let at = |i: usize, j: usize| amounts.get(j * n + i).copied().unwrap_or(f64::NAN);
            let along = |j: usize| mixed(at(i, j), at(i1, j), right);
            mixed(along(j), along(j1), above)
        };
        let amounts = self.log_amounts.iter().map(amount).enumerate().filter(|(_, amount)| !amount.is_nan());
        // The first of equals, so that the drawing does not depend on rounding.
        amounts
            .fold(None, |best: Option<(usize, f64)>, (k, a)| match best {
                Some((_, most)) if a <= most => best,
                _ => Some((k, a)),
            })
            .map(|(k, _)| k)
    }

    /// The candidates that are largest somewhere on the grid, in order.
    #[must_use]
    pub fn present(&self) -> Vec<usize> {
        let place = |i: usize, n: usize| i as f64 / (n.max(2) - 1) as f64;
        let mut present = BTreeSet::new();
        for j in 0..self.y.len() {
            for i in 0..self.x.len() {
                present.extend(self.largest_at(place(i, self.x.len()), place(j, self.y.len())));
            }
        }
        present.into_iter().collect()
    }
}

/// The grid line before a place and how far beyond it the place is.
fn cell(place: f64, n: usize) -> Option<(usize, f64)> {
    let position = place * n.checked_sub(1)? as f64;
    let line = (position.floor().max(0.0) as usize).min(n - 1);
    Some((line, position - line as f64))
}

fn mixed(a: f64, b: f64, share: f64) -> f64 {
    if share <= 0.0 { a } else { a * (1.0 - share) + b * share }
}

/// What has to agree for two columns to share an axis.
fn family(title: &Title) -> String {
    match title.unit() {
        Some(unit) => format!("[{unit}]"),
        None => title.name().split('(').next().unwrap_or("").to_owned(),
    }
}

fn panel(across: &Column, members: &[&Column], options: &Options) -> Result<Panel, PlotError> {
    let curves = members.iter().map(|column| curve(across, column)).collect::<Result<Vec<_>, _>>()?;
    let points = || curves.iter().flat_map(|curve| &curve.points).filter(|point| point.x.is_finite());
    let values: Vec<f64> = points().map(|point| point.y).filter(|y| y.is_finite()).collect();
    let scale = options.y_scale.unwrap_or_else(|| Scale::fitting(&values));
    check(scale, &values, members[0].title())?;
    let ends = points().flat_map(|point| {
        let sigma = point.sigma.unwrap_or(0.0);
        [point.y - sigma, point.y, point.y + sigma]
    });
    let ends: Vec<f64> = ends.filter(|end| scale == Scale::Linear || *end > 0.0).collect();
    // An uncertainty as large as the value must not stretch a logarithmic axis without end.
    let held = if scale == Scale::Log { &values } else { &ends };
    Ok(Panel { y: Axis::holding(&label(members), scale, held, ROOM), marks: Marks::Curves(curves) })
}

fn curve(across: &Column, column: &Column) -> Result<Curve, PlotError> {
    let point = |(x, y): (&Cell, &Cell)| {
        let number = |cell: &Cell| cell.value().unwrap_or(f64::NAN);
        Point { x: number(x), y: number(y), sigma: y.sigma() }
    };
    let points: Vec<Point> = across.cells().iter().zip(column.cells()).map(point).collect();
    if !points.iter().any(|point| point.x.is_finite() && point.y.is_finite()) {
        let (x, y) = (across.title().to_string(), column.title().to_string());
        return Err(PlotError::NoPoints { x, y });
    }
    let xs: Vec<f64> = points.iter().map(|point| point.x).filter(|x| x.is_finite()).collect();
    let goes = |step: fn(&f64, &f64) -> bool| xs.windows(2).all(|pair| step(&pair[0], &pair[1]));
    let is_line = xs.len() > 1 && (goes(|a, b| a < b) || goes(|a, b| a > b));
    Ok(Curve { name: column.title().name().to_owned(), is_formula: false, points, is_line })
}

/// What the vertical axis of these columns is called.
fn label(members: &[&Column]) -> String {
    const LONGEST: usize = 40;
    let names: Vec<&str> = members.iter().map(|column| column.title().name()).collect();
    let all = names.join(", ");
    let kind = names[0].split('(').next().unwrap_or("");
    let same_kind = names.iter().all(|name| name.split('(').next() == Some(kind));
    let name = match all.chars().count() <= LONGEST {
        true => all.as_str(),
        false if same_kind => kind,
        false => "",
    };
    Title::new(name, members[0].title().unit()).to_string()
}

fn numeric(column: &Column) -> Result<&Column, PlotError> {
    let is_text = column.cells().iter().any(|cell| cell.as_text().is_some());
    if is_text { Err(PlotError::Texts(column.title().to_string())) } else { Ok(column) }
}

fn check(scale: Scale, values: &[f64], title: &Title) -> Result<(), PlotError> {
    let none = scale == Scale::Log && !values.iter().any(|value| *value > 0.0);
    if none { Err(PlotError::NotPositive(title.to_string())) } else { Ok(()) }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn lake() -> Table {
        Table::new([
            Column::numbers("f(CO2(g)) [uatm]", [100.0, 200.0, 400.0, 800.0, 1600.0]),
            Column::new(
                "pH",
                [Cell::uncertain(8.7, 0.02), Cell::missing(), 8.1.into(), 7.8.into(), 7.5.into()],
            ),
            Column::numbers("SI(calcite)", [0.9, 0.6, 0.3, 0.0, -0.3]),
            Column::numbers("SI(gypsum)", [-2.0; 5]),
            Column::texts("name", ["a", "b", "c", "d", "e"]),
        ])
        .unwrap()
    }

    #[test]
    fn unlike_columns_get_panels_of_their_own() {
        let options = Options::default();
        let plot =
            Plot::of_table(&lake(), "f(CO2(g))", &["pH", "SI(calcite)", "SI(gypsum)"], &options).unwrap();
        let labels: Vec<&str> = plot.panels.iter().map(|panel| panel.y.label.as_str()).collect();
        assert_eq!(labels, ["pH", "SI(calcite), SI(gypsum)"]);
        assert_eq!(plot.x.scale, Scale::Log);
        let Marks::Curves(curves) = &plot.panels[0].marks else { panic!("curves") };
        assert_eq!(curves[0].pieces().map(<[Point]>::len).collect::<Vec<_>>(), [1, 3]);
        assert!(curves[0].is_line && plot.has_bands());
    }

    #[test]
    fn what_cannot_be_drawn_is_said() {
        let error = |x: &str, ys: &[&str], options: &Options| {
            Plot::of_table(&lake(), x, ys, options).unwrap_err().to_string()
        };
        let plain = Options::default();
        assert_eq!(
            error("name", &["pH"], &plain),
            "the column `name` holds texts; a plot is made of numbers"
        );
        assert!(error("pH", &[], &plain).starts_with("a plot needs at least one column"));
        assert!(error("pH", &["SI(calcit)"], &plain).contains("SI(calcite)"));
        let log = Options { y_scale: Some(Scale::Log), ..plain };
        assert!(error("pH", &["SI(gypsum)"], &log).contains("above zero"));
    }

    #[test]
    fn the_largest_changes_where_amounts_are_equal() {
        // a falls from 0 to -2, b rises from -2 to 0 along x: equal in the middle.
        let fields = Fields {
            names: vec!["a".into(), "b".into()],
            x: vec![0.0, 1.0],
            y: vec![0.0, 1.0],
            log_amounts: vec![vec![0.0, -2.0, 0.0, -2.0], vec![-2.0, 0.0, -2.0, 0.0]],
            limits: vec![],
        };
        assert_eq!(
            [0.0, 0.49, 0.51, 1.0].map(|x| fields.largest_at(x, 0.3)),
            [Some(0), Some(0), Some(1), Some(1)]
        );
        assert_eq!(fields.present(), [0, 1]);
    }
}
