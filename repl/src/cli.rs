//! The command line.

use std::ffi::OsString;
use std::io::IsTerminal;
use std::path::PathBuf;
use std::time::Duration;

use clap::{Args, Parser, Subcommand, ValueEnum};
use lysocline_engine::script::Style;

/// A scripting prompt for aqueous equilibrium chemistry.
///
/// Without a command it starts the prompt, or runs what is piped in.
#[derive(Debug, Parser)]
#[command(name = "lysocline", version)]
pub struct Cli {
    #[command(subcommand)]
    pub command: Option<Command>,

    /// Keep the prompt though the input is no terminal: for editors that drive it
    #[arg(long)]
    pub interactive: bool,

    #[command(flatten)]
    pub look: Look,

    #[command(flatten)]
    pub limits: Limits,
}

#[derive(Debug, Subcommand)]
pub enum Command {
    /// Run a script file
    Run(Run),
    /// Run a script and write a report: prose, code, results, sources, cautions
    Report(Report),
    /// Write the report again whenever the script or a file beside it is saved
    Watch(Report),
    /// Run a script and write what it gave, and how, at the end of its file
    Seal(Run),
    /// Tell whether a sealed script still gives the same, and what moved it
    Verify(Verify),
    /// Find unknown names and keys in scripts without running them
    Check(Check),
    /// Print declarations of all script functions, for editors
    Definitions,
    /// Print completions for a shell
    Completions {
        /// The shell
        shell: clap_complete::Shell,
    },
    /// Print the manual page
    Manual,
    /// Solve a tableau of components, species and totals (JSON) and print the result as JSON
    Solve(Solve),
}

/// Run a script file.
#[derive(Debug, Args)]
pub struct Run {
    /// The script
    pub file: PathBuf,

    /// Words for the script: `file=survey.csv` is read as `args["file"]`; `--` before them keeps options from being read by the
    /// program
    #[arg(trailing_var_arg = true, allow_hyphen_values = true)]
    pub arguments: Vec<OsString>,

    /// Write files below this folder
    #[arg(long, value_name = "DIR", default_value = "out")]
    pub write: PathBuf,

    /// Run a sealed file with the constants it was sealed with
    #[arg(long)]
    pub sealed: bool,
}

/// Run a script and write a report.
#[derive(Debug, Args)]
pub struct Report {
    /// The script
    pub file: PathBuf,

    /// The report, ending in `.html` or `.md`; without it the script's name ending in `.html`, in this folder
    #[arg(short, long, value_name = "FILE")]
    pub output: Option<PathBuf>,

    /// Words for the script: `file=survey.csv` is read as `args["file"]`
    #[arg(trailing_var_arg = true, allow_hyphen_values = true)]
    pub arguments: Vec<OsString>,

    /// Write files below this folder
    #[arg(long, value_name = "DIR", default_value = "out")]
    pub write: PathBuf,
}

/// Compare a sealed script with what it gives now.
#[derive(Debug, Args)]
pub struct Verify {
    /// The sealed script
    pub file: PathBuf,
}

/// Find faults without running.
#[derive(Debug, Args)]
pub struct Check {
    /// The scripts
    #[arg(required = true)]
    pub files: Vec<PathBuf>,
}

/// Solve a tableau.
#[derive(Debug, Args)]
pub struct Solve {
    /// The case: `components`, `totals`, `species`, `fixed`, `phases`, `activity` as for `tableau` in a script
    pub case: PathBuf,

    /// Solve it this many times and add the median `seconds_per_solve`
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(1..))]
    pub repeat: Option<u32>,
}

/// How output looks.
#[derive(Debug, Args)]
pub struct Look {
    /// Plain ASCII: `Ca^2+` for `Ca²⁺`, `+/-` for `±`
    #[arg(long, global = true)]
    pub plain: bool,

    /// Colours: auto (on a terminal, unless NO_COLOR is set), always or never
    #[arg(long, global = true, value_enum, default_value_t = When::Auto, value_name = "WHEN", hide_possible_values = true)]
    pub color: When,
}

/// What a script may do.
#[derive(Debug, Args)]
pub struct Limits {
    /// Replace files that this script did not write
    #[arg(long, global = true)]
    pub overwrite: bool,

    /// Stop a script, or one entry at the prompt, after this long
    #[arg(long, global = true, value_name = "SECONDS", value_parser = seconds)]
    pub time_limit: Option<Duration>,

    /// Stop a calculation that holds more memory than this
    #[arg(long, global = true, value_name = "MB", default_value_t = 4096, value_parser = megabytes)]
    pub memory_limit: usize,
}

/// When to use colours.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub enum When {
    Auto,
    Always,
    Never,
}

/// The command line, or the end of the program with exit code 2.
pub fn parse() -> Cli {
    Cli::parse()
}

impl Look {
    /// For results, on standard output.
    pub fn style(&self) -> Style {
        let stdout = std::io::stdout();
        Style {
            ascii: self.plain,
            color: self.colored(stdout.is_terminal()),
            width: width(),
            ..Style::default()
        }
    }

    /// Whether messages on standard error are coloured.
    pub fn messages_colored(&self) -> bool {
        self.colored(std::io::stderr().is_terminal())
    }

    fn colored(&self, is_terminal: bool) -> bool {
        let wanted = || is_terminal && std::env::var_os("NO_COLOR").is_none_or(|value| value.is_empty());
        match self.color {
            When::Always => true,
            When::Never => false,
            When::Auto => wanted() && std::env::var_os("TERM").is_none_or(|term| term != "dumb"),
        }
    }
}

/// Characters in a line of the terminal; a fixed number where the output is no terminal, so that files do not depend
/// on the window.
fn width() -> usize {
    terminal_size::terminal_size_of(std::io::stdout())
        .map_or(Style::default().width, |(columns, _)| usize::from(columns.0.max(40)))
}

fn megabytes(text: &str) -> Result<usize, String> {
    let number = text.parse().ok().filter(|megabytes| *megabytes >= 64);
    number.ok_or_else(|| "a number of megabytes is needed, 64 or more".to_owned())
}

fn seconds(text: &str) -> Result<Duration, String> {
    let seconds: f64 =
        text.parse().map_err(|_| "a number of seconds is needed, such as `60` or `0.5`".to_owned())?;
    let positive = if seconds > 0.0 { Duration::try_from_secs_f64(seconds).ok() } else { None };
    positive.ok_or_else(|| "a number of seconds above zero is needed".to_owned())
}
