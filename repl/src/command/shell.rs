//! What other programs read about this one: completions for shells, a manual page, definitions for editors.

use std::io::Write;

use clap::CommandFactory;
use lysocline_engine::script::ScriptEngine;

use crate::cli::Cli;

/// Completions for a shell.
pub fn completions(shell: clap_complete::Shell) -> bool {
    let mut text = Vec::new();
    clap_complete::generate(shell, &mut Cli::command(), "lysocline", &mut text);
    print(&text)
}

/// The manual page, in roff: one section for each subcommand.
pub fn manual() -> bool {
    let command = Cli::command();
    let mut text = Vec::new();
    let mut written = clap_mangen::Man::new(command.clone()).render(&mut text).is_ok();
    for part in command.get_subcommands().filter(|part| !part.is_hide_set()) {
        let name = format!("lysocline {}", part.get_name());
        let man = clap_mangen::Man::new(part.clone().bin_name(&name).display_name(&name));
        written &= writeln!(text, ".SH \"{}\"", name.to_uppercase()).is_ok()
            && man.render_synopsis_section(&mut text).is_ok()
            && man.render_description_section(&mut text).is_ok()
            && man.render_options_section(&mut text).is_ok();
    }
    written && print(&text)
}

/// Declarations of every script function with its documentation.
pub fn definitions() -> bool {
    print(ScriptEngine::default().definitions().as_bytes())
}

/// To standard output; a reader who left early is no failure.
fn print(text: &[u8]) -> bool {
    match std::io::stdout().write_all(text) {
        Err(error) => error.kind() == std::io::ErrorKind::BrokenPipe,
        Ok(()) => true,
    }
}
