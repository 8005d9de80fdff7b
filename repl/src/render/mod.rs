//! Values and messages as characters on a terminal. Every function returns text; who called it writes it.

pub mod diagnostic;
pub mod highlight;
pub mod markdown;
mod notes;
pub mod page;
pub mod plot;
pub mod report;
pub mod table;

use std::io::IsTerminal;

use lysocline_engine::chem::Trail;
use lysocline_engine::present::plot::Plot;
use lysocline_engine::present::{self, Table};
use lysocline_engine::script::{ScriptEngine, Style};

/// Replaces the engine's plain forms by those that know the terminal.
pub fn draw_with(engine: &ScriptEngine) {
    // A file is as wide as it needs to be; only a terminal has an edge.
    let has_edge = std::io::stdout().is_terminal();
    engine.show_with(|shows| {
        shows.set::<Table>(move |drawn, style| table(drawn, style, has_edge));
        shows.set::<Plot>(move |drawn, style| {
            let look = plot::Look { plain: style.ascii, color: style.color, width: style.width };
            plot::draw(drawn, &look)
        });
        shows.set::<Trail>(move |trail, style| table(&trail.table(), style, has_edge));
    });
}

fn table(table: &Table, style: &Style, has_edge: bool) -> String {
    let drawn = present::Style { plain: style.ascii, width: has_edge.then_some(style.width) };
    let look = table::Look { style: drawn, color: style.color, rows: style.rows };
    table::draw(table, &look).trim_end().to_owned()
}
