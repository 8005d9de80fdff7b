//! Values and messages as characters on a terminal. Every function returns text; who called it writes it.

pub mod diagnostic;
mod notes;
pub mod table;

use lysocline_engine::present::{self, Table};
use lysocline_engine::script::{ScriptEngine, Style};

/// Replaces the engine's plain forms by those that know the terminal.
pub fn draw_with(engine: &ScriptEngine) {
    engine.show_with(|shows| shows.set::<Table>(table));
}

fn table(table: &Table, style: &Style) -> String {
    let drawn = present::Style { plain: style.ascii, width: Some(style.width) };
    let look = table::Look { style: drawn, color: style.color, rows: style.rows };
    table::draw(table, &look).trim_end().to_owned()
}
