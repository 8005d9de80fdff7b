//! One file for each subcommand, and what they share: exit codes.

mod check;
mod interactive;
mod piped;
mod report;
mod run;
mod seal;
mod shell;
mod solve;
mod verify;
mod watch;

pub use run::read as read_script;
use run::read_text;

use std::io::IsTerminal;
use std::process::ExitCode;

use lysocline_engine::script::Stop;

use crate::cli::{Cli, Command};

/// Runs what the command line asks for. 0: done; 1: the script or calculation failed (2, a wrong command line, is left
/// to the reader of the command line).
pub fn dispatch(cli: Cli) -> ExitCode {
    let done = match &cli.command {
        Some(Command::Run(run)) => run::run(run, &cli.look, &cli.limits),
        Some(Command::Report(report)) => report::run(report, &cli.look, &cli.limits),
        Some(Command::Watch(report)) => watch::run(report, &cli.look, &cli.limits),
        Some(Command::Seal(run)) => seal::run(run, &cli.look, &cli.limits),
        Some(Command::Verify(verify)) => verify::run(verify, &cli.look, &cli.limits),
        Some(Command::Check(check)) => check::run(check, &cli.look),
        Some(Command::Definitions) => shell::definitions(),
        Some(Command::Completions { shell }) => shell::completions(*shell),
        Some(Command::Manual) => shell::manual(),
        Some(Command::Solve(solve)) => solve::run(solve, &cli.look),
        None if cli.interactive || std::io::stdin().is_terminal() => interactive::run(&cli.look, &cli.limits),
        None => piped::run(&cli.look, &cli.limits),
    };
    if done { ExitCode::SUCCESS } else { ExitCode::FAILURE }
}

/// Ctrl-C stops the calculation, not the program.
pub(crate) fn stop_on_interrupt(stop: &Stop) {
    // Without the handler Ctrl-C ends the program, which is the usual thing.
    let _ = signal_hook::flag::register(signal_hook::consts::SIGINT, stop.flag());
}

/// A second Ctrl-C during one calculation ends the program, in case a native loop does not listen. Not at the prompt,
/// where a key pressed twice must not end the session.
pub(crate) fn end_on_second_interrupt(stop: &Stop) {
    let _ = signal_hook::flag::register_conditional_shutdown(signal_hook::consts::SIGINT, 1, stop.flag());
}
