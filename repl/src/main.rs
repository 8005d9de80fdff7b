//! The program: a prompt without a subcommand, and one file for each subcommand.

mod cli;
mod command;
mod editor;
mod job;
mod journal;
mod memory;
mod progress;
mod prompt;
mod render;
mod seal;

use std::process::ExitCode;

fn main() -> ExitCode {
    command::dispatch(cli::parse())
}
