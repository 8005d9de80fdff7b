//! A plot as SVG text: legible when small, on light and dark pages, printed in grey, and read aloud.
//!
//! Colour is never the only sign: each curve has a dash pattern and a marker of its own. Colours stand in attributes, so that
//! every reader of SVG shows them; a style sheet replaces them where the page is dark.

use std::fmt::Write;

use super::plot::{Axis, Curve, Fields, Limit, Marks, Panel, Plot, Scale, Tick};
use super::{Style, Title, notation};

/// Colours that stay apart for the common forms of colour blindness, and differ in lightness.
pub const COLOURS: [&str; 7] = ["#3051c9", "#9a6f1d", "#3ba778", "#f55cbf", "#283352", "#4f2506", "#615854"];
/// The same on a dark page.
pub const COLOURS_ON_DARK: [&str; 7] =
    ["#3b8bfd", "#bf7f3b", "#0eed97", "#fc3e97", "#5ab7c0", "#abac0a", "#e9cbcc"];
const DASHES: [&str; 7] = ["none", "8 4", "2 3", "10 3 2 3", "14 4", "5 2 1 2 1 2", "1 5"];

const WIDTH: f64 = 720.0;
const RIGHT: f64 = 34.0;
/// Height of the plotting area: alone, and as one of several.
const TALL: f64 = 340.0;
const SHORT: f64 = 210.0;
const FONT: f64 = 15.0;
const LINE: f64 = 21.0;
/// Rows and columns a field diagram is sampled at.
const FINE: usize = 320;

/// A file of its own, which follows the reader's light or dark setting.
#[must_use]
pub fn standalone(plot: &Plot) -> String {
    let text = fragment(plot);
    let head = text.find('>').map_or(0, |end| end + 1);
    format!("{}\n<style>{}</style>{}", &text[..head], style_sheet(), &text[head..])
}

/// The style sheet of drawings inside a page; needed once.
#[must_use]
pub fn style_sheet() -> String {
    let coloured = |colours: &[&str; 7]| -> String {
        let rule =
            |(i, colour): (usize, &&str)| format!(".ly-s{i}{{stroke:{colour}}}.ly-f{i}{{fill:{colour}}}");
        colours.iter().enumerate().map(rule).collect()
    };
    format!(
        "@media screen and (prefers-color-scheme:dark){{\
         .ly-paper{{fill:#16191d}}.ly-ink{{fill:#e6e8eb}}.ly-frame{{stroke:#8b929b}}.ly-grid{{stroke:#333941}}\
         .ly-edge{{stroke:#e6e8eb}}.ly-halo{{stroke:#16191d}}{}}}",
        coloured(&COLOURS_ON_DARK)
    )
}

/// The drawing alone, for a page that has the style sheet.
#[must_use]
pub fn fragment(plot: &Plot) -> String {
    Drawing::of(plot).text
}

struct Drawing {
    text: String,
    left: f64,
    width: f64,
}

impl Drawing {
    fn of(plot: &Plot) -> Self {
        let ticks: Vec<Vec<Tick>> = plot.panels.iter().map(|panel| panel.y.ticks(6)).collect();
        let widest = ticks.iter().flatten().map(|tick| text_width(&tick.text)).fold(20.0, f64::max);
        let left = widest + 50.0;
        let mut drawing = Self { text: String::new(), left, width: WIDTH - left - RIGHT };
        let mut y = 10.0;
        if let Some(title) = &plot.title {
            y += LINE;
            let size = FONT + 2.0;
            let title = escaped(&notation::shown(title, Style::default()));
            let _ = writeln!(
                drawing.text,
                "<text class=\"ly-ink\" x=\"{left}\" y=\"{y}\" font-size=\"{size}\" font-weight=\"600\" fill=\"#1b1f24\">{title}</text>"
            );
            y += 6.0;
        }
        let height = if plot.panels.len() == 1 { TALL } else { SHORT };
        for (i, (panel, ticks)) in plot.panels.iter().zip(&ticks).enumerate() {
            y = drawing.legend(panel, y + 6.0);
            let is_last = i + 1 == plot.panels.len();
            drawing.panel(&plot.x, panel, ticks, y, height, is_last);
            y += height + if is_last { 0.0 } else { 14.0 };
        }
        y += 20.0 + FONT + 11.0;
        let middle = left + drawing.width / 2.0;
        let label = escaped(&shown_label(&plot.x));
        let _ = writeln!(drawing.text, "{}", words(middle, y, "middle", &label));
        if plot.has_bands() {
            y += LINE;
            let note = "bands: one standard uncertainty either way";
            let _ = writeln!(
                drawing.text,
                "<text class=\"ly-ink\" x=\"{middle:.1}\" y=\"{y}\" text-anchor=\"middle\" font-size=\"13\" fill=\"#1b1f24\" opacity=\"0.75\">{note}</text>"
            );
        }
        let name = plot.title.clone().unwrap_or_else(|| "plot".to_owned());
        drawing.wrapped(y + 12.0, &name, &plot.description())
    }

    fn wrapped(self, height: f64, name: &str, description: &str) -> Self {
        let (name, description) = (escaped(name), escaped(description));
        let text = format!(
            "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 {WIDTH} {height:.0}\" width=\"{WIDTH}\" height=\"{height:.0}\" \
             role=\"img\" aria-label=\"{description}\" font-family=\"system-ui, 'Segoe UI', 'DejaVu Sans', sans-serif\" font-size=\"{FONT}\">\n\
             <title>{name}</title>\n<desc>{description}</desc>\n\
             <rect class=\"ly-paper\" width=\"{WIDTH}\" height=\"{height:.0}\" fill=\"#ffffff\"/>\n{}</svg>\n",
            self.text
        );
        Self { text, ..self }
    }

    /// Names of the curves with their line, left to right; returns where the panel begins. A single curve needs none: its
    /// axis names it.
    fn legend(&mut self, panel: &Panel, top: f64) -> f64 {
        let Marks::Curves(curves) = &panel.marks else { return top + 4.0 };
        if curves.len() < 2 {
            return top + 4.0;
        }
        let (mut x, mut y) = (self.left, top + 12.0);
        for (i, curve) in curves.iter().enumerate() {
            let name = shown_name(curve);
            let length = 34.0 + text_width(&name) + 18.0;
            if x > self.left && x + length > WIDTH - RIGHT {
                (x, y) = (self.left, y + LINE);
            }
            let middle = y - 4.5;
            if curve.is_line {
                let _ = writeln!(self.text, "<path d=\"M{x:.1} {middle:.1}h28\" {}/>", stroke(i));
            }
            let _ = writeln!(self.text, "{}", marker(i, x + 14.0, middle));
            let _ = writeln!(self.text, "{}", words(x + 34.0, y, "start", &escaped(&name)));
            x += length;
        }
        y + 10.0
    }

    fn panel(&mut self, x: &Axis, panel: &Panel, ticks: &[Tick], top: f64, height: f64, is_last: bool) {
        let (left, width, bottom) = (self.left, self.width, top + height);
        let right = left + width;
        let across = |place: f64| left + place * width;
        let up = |place: f64| bottom - place * height;
        let is_fields = matches!(panel.marks, Marks::Fields(_));
        if let Marks::Fields(fields) = &panel.marks {
            let area = Area { left, top, width: self.width, height };
            let to = |(a, b): (f64, f64)| (across(x.place(a)), up(panel.y.place(b)));
            let limits: String = fields.limits.iter().map(|limit| limit_line(limit, &area, to)).collect();
            self.text.push_str(&field_shapes(fields, &area, &limits));
        }
        for tick in x.ticks(8) {
            let at = across(x.place(tick.value));
            if !is_fields && !tick.text.is_empty() {
                let _ = writeln!(
                    self.text,
                    "<path class=\"ly-grid\" d=\"M{at:.1} {top:.1}V{bottom:.1}\" stroke=\"#e3e6ea\"/>"
                );
            }
            let length = if tick.text.is_empty() { 3.0 } else { 6.0 };
            let _ = writeln!(
                self.text,
                "<path class=\"ly-frame\" d=\"M{at:.1} {bottom:.1}v-{length}\" stroke=\"#5d656e\"/>"
            );
            if is_last {
                let _ = writeln!(self.text, "{}", words(at, bottom + 20.0, "middle", &tick.text));
            }
        }
        for tick in ticks {
            let at = up(panel.y.place(tick.value));
            if !is_fields && !tick.text.is_empty() {
                let _ = writeln!(
                    self.text,
                    "<path class=\"ly-grid\" d=\"M{left:.1} {at:.1}H{right:.1}\" stroke=\"#e3e6ea\"/>"
                );
            }
            let length = if tick.text.is_empty() { 3.0 } else { 6.0 };
            let _ = writeln!(
                self.text,
                "<path class=\"ly-frame\" d=\"M{left:.1} {at:.1}h{length}\" stroke=\"#5d656e\"/>"
            );
            let _ = writeln!(self.text, "{}", words(left - 8.0, at + 5.0, "end", &tick.text));
        }
        let (at, middle) = (left - 8.0 - self.widest(ticks) - 14.0, top + height / 2.0);
        let label = escaped(&shown_label(&panel.y));
        let _ = writeln!(
            self.text,
            "<text class=\"ly-ink\" transform=\"translate({at:.1} {middle:.1}) rotate(-90)\" text-anchor=\"middle\" fill=\"#1b1f24\">{label}</text>"
        );
        if let Marks::Curves(curves) = &panel.marks {
            // A drawing within the drawing cuts off what lies beyond the axes; markers on them stay whole.
            let (x0, y0, w, h) = (left - 5.0, top - 5.0, width + 10.0, height + 10.0);
            let _ = writeln!(
                self.text,
                "<svg x=\"{x0:.1}\" y=\"{y0:.1}\" width=\"{w:.1}\" height=\"{h:.1}\" viewBox=\"{x0:.1} {y0:.1} {w:.1} {h:.1}\" overflow=\"hidden\">"
            );
            for (i, curve) in curves.iter().enumerate() {
                self.curve(
                    i,
                    curve,
                    &panel.y,
                    |point| (across(x.place(point.0)), up(panel.y.place(point.1))),
                    (top, bottom),
                );
            }
            self.text.push_str("</svg>\n");
        }
        let _ = writeln!(
            self.text,
            "<rect class=\"ly-frame\" x=\"{left:.1}\" y=\"{top:.1}\" width=\"{:.1}\" height=\"{height:.1}\" fill=\"none\" stroke=\"#5d656e\"/>",
            self.width
        );
    }

    fn widest(&self, ticks: &[Tick]) -> f64 {
        ticks.iter().map(|tick| text_width(&tick.text)).fold(0.0, f64::max)
    }

    fn curve(
        &mut self,
        i: usize,
        curve: &Curve,
        y: &Axis,
        to: impl Fn((f64, f64)) -> (f64, f64),
        ends: (f64, f64),
    ) {
        let kept = |at: f64| at.clamp(ends.0, ends.1);
        for piece in curve.pieces() {
            // Numbers a logarithmic axis cannot show are left out.
            let places: Vec<(f64, f64)> = piece
                .iter()
                .map(|p| to((p.x, p.y)))
                .filter(|(x, y)| x.is_finite() && y.is_finite())
                .collect();
            if curve.has_band() && curve.is_line && piece.len() > 1 {
                let edge = |sign: f64, value: f64, sigma: f64| {
                    let moved = value + sign * sigma;
                    if y.scale == Scale::Log && moved <= 0.0 { y.from } else { moved }
                };
                let side = |sign: f64| {
                    let places = piece.iter().map(move |p| (p.x, edge(sign, p.y, p.sigma.unwrap_or(0.0))));
                    places.map(&to).map(|(x, at)| format!("{x:.1} {:.1}", kept(at))).collect::<Vec<_>>()
                };
                let (upper, mut lower) = (side(1.0), side(-1.0));
                lower.reverse();
                let outline = [upper, lower].concat().join("L");
                let n = i % COLOURS.len();
                let _ = writeln!(
                    self.text,
                    "<path class=\"ly-f{n}\" d=\"M{outline}Z\" fill=\"{}\" fill-opacity=\"0.18\"/>",
                    COLOURS[n]
                );
            }
            if curve.is_line && places.len() > 1 {
                let line: Vec<String> = places.iter().map(|(x, y)| format!("{x:.1} {y:.1}")).collect();
                let _ = writeln!(self.text, "<path d=\"M{}\" {}/>", line.join("L"), stroke(i));
            }
            for (x, y) in marked(&places, curve.is_line, i) {
                let _ = writeln!(self.text, "{}", marker(i, x, y));
            }
        }
        if !curve.is_line && curve.has_band() {
            for point in &curve.points {
                let sigma = point.sigma.unwrap_or(0.0);
                let ((x, low), (_, high)) = (to((point.x, point.y - sigma)), to((point.x, point.y + sigma)));
                if x.is_finite() && low.is_finite() && high.is_finite() {
                    let _ = writeln!(
                        self.text,
                        "<path d=\"M{x:.1} {:.1}V{:.1}\" class=\"ly-s{n}\" stroke=\"{}\" stroke-opacity=\"0.6\"/>",
                        kept(low),
                        kept(high),
                        COLOURS[i % COLOURS.len()],
                        n = i % COLOURS.len(),
                    );
                }
            }
        }
    }
}

/// Where the markers of a line stand: at every point of a short one, at some of a long one, set off from those of others.
fn marked(places: &[(f64, f64)], is_line: bool, i: usize) -> Vec<(f64, f64)> {
    const MOST: usize = 12;
    if !is_line || places.len() <= MOST {
        return places.to_vec();
    }
    let every = places.len().div_ceil(7);
    places.iter().skip((i * every / 3) % every).step_by(every).copied().collect()
}

fn stroke(i: usize) -> String {
    let n = i % COLOURS.len();
    format!(
        "class=\"ly-s{n}\" fill=\"none\" stroke=\"{}\" stroke-width=\"2\" stroke-linejoin=\"round\" stroke-dasharray=\"{}\"",
        COLOURS[n],
        // The eighth curve has the first colour again, and another dash.
        DASHES[(i + i / COLOURS.len()) % DASHES.len()]
    )
}

fn marker(i: usize, x: f64, y: f64) -> String {
    const R: f64 = 3.6;
    let n = i % COLOURS.len();
    let shape = match i % 7 {
        0 => return filled(n, &format!("<circle cx=\"{x:.1}\" cy=\"{y:.1}\" r=\"{R}\"")),
        1 => format!("M{:.1} {:.1}h6.8v6.8h-6.8z", x - 3.4, y - 3.4),
        2 => format!("M{x:.1} {:.1}l4.2 7.2h-8.4z", y - 4.6),
        3 => format!("M{x:.1} {:.1}l4.6 4.6l-4.6 4.6l-4.6 -4.6z", y - 4.6),
        4 => format!("M{x:.1} {:.1}l4.2 -7.2h-8.4z", y + 4.6),
        5 => format!("M{:.1} {:.1}h2.6v2.6h2.6v2.6h-2.6v2.6h-2.6v-2.6h-2.6v-2.6h2.6z", x - 1.3, y - 3.9),
        _ => format!("M{:.1} {:.1}h2.8v8h-2.8z", x - 1.4, y - 4.0),
    };
    filled(n, &format!("<path d=\"{shape}\""))
}

fn filled(n: usize, shape: &str) -> String {
    format!("{shape} class=\"ly-f{n}\" fill=\"{}\"/>", COLOURS[n])
}

struct Area {
    left: f64,
    top: f64,
    width: f64,
    height: f64,
}

/// Tinted fields, the lines between them, the limits across them, and their names where each is widest.
fn field_shapes(fields: &Fields, area: &Area, limits: &str) -> String {
    let place = |i: usize| (i as f64 + 0.5) / FINE as f64;
    let grid: Vec<Option<usize>> =
        (0..FINE * FINE).map(|k| fields.largest_at(place(k % FINE), place(k / FINE))).collect();
    let at = |i: usize, j: usize| grid[j * FINE + i];
    let (dx, dy) = (area.width / FINE as f64, area.height / FINE as f64);
    // Rows overlap a little, or the ground shows between them.
    let tall = dy + 0.6;
    let x = |i: usize| area.left + i as f64 * dx;
    let y = |j: usize| area.top + area.height - j as f64 * dy;
    let present = fields.present();
    let mut text = String::new();
    for (order, field) in present.iter().enumerate() {
        let mut path = String::new();
        for j in 0..FINE {
            for (start, end) in runs(|i| at(i, j) == Some(*field)) {
                let _ = write!(
                    path,
                    "M{:.1} {:.1}h{:.1}v-{tall:.2}h-{:.1}z",
                    x(start),
                    y(j),
                    (end - start) as f64 * dx,
                    (end - start) as f64 * dx
                );
            }
        }
        let n = order % COLOURS.len();
        let _ = writeln!(
            text,
            "<path class=\"ly-f{n}\" d=\"{path}\" fill=\"{}\" fill-opacity=\"{}\" shape-rendering=\"crispEdges\"/>",
            COLOURS[n],
            if order % 2 == 0 { 0.16 } else { 0.30 }
        );
    }
    let mut edges = String::new();
    for j in 0..FINE {
        for i in 0..FINE {
            if i + 1 < FINE && at(i, j) != at(i + 1, j) {
                let _ = write!(edges, "M{:.1} {:.1}v-{dy:.2}", x(i + 1), y(j));
            }
            if j + 1 < FINE && at(i, j) != at(i, j + 1) {
                let _ = write!(edges, "M{:.1} {:.1}h{dx:.2}", x(i), y(j + 1));
            }
        }
    }
    let _ = writeln!(
        text,
        "<path class=\"ly-edge\" d=\"{edges}\" stroke=\"#1b1f24\" stroke-width=\"1.4\" stroke-linecap=\"square\" fill=\"none\"/>"
    );
    text.push_str(limits);
    for field in present {
        if let Some((i, j)) = middle(&grid, field) {
            let name = escaped(&notation::shown(&fields.names[field], Style::default()));
            let _ = writeln!(
                text,
                "<text class=\"ly-ink ly-halo\" x=\"{:.1}\" y=\"{:.1}\" text-anchor=\"middle\" fill=\"#1b1f24\" stroke=\"#ffffff\" stroke-width=\"3\" paint-order=\"stroke\" font-weight=\"600\">{name}</text>",
                x(i),
                y(j) + 4.5
            );
        }
    }
    text
}

/// A dashed line across the fields, cut off at the axes, with its name along it.
fn limit_line(limit: &Limit, area: &Area, to: impl Fn((f64, f64)) -> (f64, f64)) -> String {
    let [(x0, y0), (x1, y1)] = limit.ends.map(to);
    let (left, top, width, height) = (area.left, area.top, area.width, area.height);
    let angle = (y1 - y0).atan2(x1 - x0).to_degrees();
    // The name stands near the start of the part that is seen: the middle is for the names of fields.
    let seen = |share: f64| (top..=top + height).contains(&(y0 + share * (y1 - y0)));
    let shares: Vec<f64> = (0..=100).map(|k| f64::from(k) / 100.0).filter(|share| seen(*share)).collect();
    let Some((first, last)) = shares.first().zip(shares.last()) else { return String::new() };
    let at = first + 0.14 * (last - first);
    let (x, y) = (x0 + at * (x1 - x0), y0 + at * (y1 - y0));
    let name = escaped(&notation::shown(&limit.name, Style::default()));
    format!(
        "<svg x=\"{left:.1}\" y=\"{top:.1}\" width=\"{width:.1}\" height=\"{height:.1}\" viewBox=\"{left:.1} {top:.1} {width:.1} {height:.1}\" overflow=\"hidden\">\
         <path class=\"ly-edge\" d=\"M{x0:.1} {y0:.1}L{x1:.1} {y1:.1}\" stroke=\"#1b1f24\" stroke-width=\"1.2\" stroke-dasharray=\"7 5\" fill=\"none\"/>\
         <text class=\"ly-ink ly-halo\" transform=\"translate({x:.1} {y:.1}) rotate({angle:.1})\" dy=\"-5\" text-anchor=\"middle\" fill=\"#1b1f24\" stroke=\"#ffffff\" stroke-width=\"3\" paint-order=\"stroke\">{name}</text></svg>\n"
    )
}

/// Stretches of columns for which `inside` holds.
fn runs(inside: impl Fn(usize) -> bool) -> Vec<(usize, usize)> {
    let mut runs: Vec<(usize, usize)> = Vec::new();
    for i in (0..FINE).filter(|i| inside(*i)) {
        match runs.last_mut() {
            Some((_, end)) if *end == i => *end += 1,
            _ => runs.push((i, i + 1)),
        }
    }
    runs
}

/// The middle of the widest place of a field: the cell furthest from any other field, by halving squares.
fn middle(grid: &[Option<usize>], field: usize) -> Option<(usize, usize)> {
    // Side of the largest square of the field that ends at each cell; names are wide, so width counts double.
    let mut side = vec![0usize; grid.len()];
    let mut best: Option<(usize, usize, usize)> = None;
    for j in 0..FINE {
        for i in 0..FINE {
            if grid[j * FINE + i] != Some(field) {
                continue;
            }
            let before = |di: usize, dj: usize| match (i.checked_sub(di), j.checked_sub(dj)) {
                (Some(i), Some(j)) => side[j * FINE + i],
                _ => 0,
            };
            let here = 1 + before(1, 0).min(before(0, 1)).min(before(1, 1));
            side[j * FINE + i] = here;
            if best.is_none_or(|(most, ..)| here > most) {
                best = Some((here, i + 1 - here / 2, j + 1 - here / 2));
            }
        }
    }
    best.map(|(_, i, j)| (i, j))
}

fn words(x: f64, y: f64, anchor: &str, escaped: &str) -> String {
    format!(
        "<text class=\"ly-ink\" x=\"{x:.1}\" y=\"{y:.1}\" text-anchor=\"{anchor}\" fill=\"#1b1f24\">{escaped}</text>"
    )
}

fn shown_label(axis: &Axis) -> String {
    let title = Title::parse(&axis.label);
    if title.name().is_empty() { axis.label.clone() } else { notation::shown_title(&title, Style::default()) }
}

fn shown_name(curve: &Curve) -> String {
    match curve.is_formula {
        true => notation::shown(&curve.name, Style::default()),
        false => notation::shown_name(&Title::parse(&curve.name), Style::default()),
    }
}

/// A generous guess, as the reader's font is not known.
fn text_width(text: &str) -> f64 {
    text.chars().count() as f64 * FONT * 0.58
}

/// Text between tags or in an attribute.
#[must_use]
pub fn escaped(text: &str) -> String {
    text.replace('&', "&amp;").replace('<', "&lt;").replace('>', "&gt;").replace('"', "&quot;")
}

#[cfg(test)]
mod tests {
    use super::super::{Column, Table, plot::Options};
    use super::*;

    fn plot() -> Plot {
        let table = Table::new([
            Column::numbers("pH", [4.0, 6.0, 8.0, 10.0]),
            Column::numbers("m(HCO3^-) [mmol/kg]", [0.1, 1.0, 2.0, 1.0]),
            Column::numbers("m(CO3^2-) [mmol/kg]", [0.0, 0.1, 0.5, 1.5]),
        ])
        .unwrap();
        let options = Options { title: Some("a < b & \"c\"".into()), ..Options::default() };
        Plot::of_table(&table, "pH", &["m(HCO3^-)", "m(CO3^2-)"], &options).unwrap()
    }

    #[test]
    fn the_text_is_named_escaped_and_set_as_chemistry() {
        let text = standalone(&plot());
        assert!(text.contains("<title>a &lt; b &amp; &quot;c&quot;</title>"), "{text}");
        assert!(text.contains("m(HCO₃⁻)") && text.contains("mmol/kg") && text.contains("aria-label="));
        assert!(text.contains("prefers-color-scheme:dark"));
        assert_eq!(
            text.matches("stroke-dasharray=\"none\"").count(),
            2,
            "a line and its entry in the legend"
        );
        assert!(!text.contains("NaN") && !text.contains("inf"));
    }

    /// Linear RGB of a colour as seen without one kind of cone (Machado, Oliveira & Fernandes 2009, severity 1; recalled).
    const SEEN: [[[f64; 3]; 3]; 4] = [
        [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]],
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]],
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]],
        [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]],
    ];

    /// CIE L*a*b* of a colour, under D65.
    fn lab(colour: &str, seen: [[f64; 3]; 3]) -> [f64; 3] {
        let channel = |i: usize| f64::from(u8::from_str_radix(&colour[i..i + 2], 16).unwrap()) / 255.0;
        let linear = |c: f64| if c <= 0.04045 { c / 12.92 } else { ((c + 0.055) / 1.055).powf(2.4) };
        let rgb = [1, 3, 5].map(|i| linear(channel(i)));
        let rgb = seen.map(|row| row.iter().zip(rgb).map(|(a, b)| a * b).sum::<f64>().clamp(0.0, 1.0));
        let weighted = |w: [f64; 3]| w.iter().zip(rgb).map(|(a, b)| a * b).sum::<f64>();
        let f = |t: f64| if t > 0.008856 { t.cbrt() } else { 7.787 * t + 16.0 / 116.0 };
        let x = f(weighted([0.4124, 0.3576, 0.1805]) / 0.9505);
        let y = f(weighted([0.2126, 0.7152, 0.0722]));
        let z = f(weighted([0.0193, 0.1192, 0.9505]) / 1.089);
        [116.0 * y - 16.0, 500.0 * (x - y), 200.0 * (y - z)]
    }

    #[test]
    fn colours_stay_apart_for_the_colour_blind() {
        for (colours, least) in [(COLOURS, 20.0), (COLOURS_ON_DARK, 15.0)] {
            for seen in SEEN {
                for (i, a) in colours.iter().enumerate() {
                    for b in &colours[..i] {
                        let (p, q) = (lab(a, seen), lab(b, seen));
                        let distance = p.iter().zip(q).map(|(p, q)| (p - q).powi(2)).sum::<f64>().sqrt();
                        assert!(distance > least, "{a} {b}: {distance}");
                    }
                }
            }
        }
    }

    #[test]
    fn numbers_without_a_value_leave_a_gap() {
        let mut plot = plot();
        if let Marks::Curves(curves) = &mut plot.panels[0].marks {
            curves[0].points[1].y = f64::NAN;
        }
        assert!(!fragment(&plot).contains("NaN"));
    }
}
