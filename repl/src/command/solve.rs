//! `lysocline solve case.json`: solves a tableau and prints the result as JSON.

use std::io::Write;
use std::time::Instant;

use lysocline_engine::script::Diagnostic;
use lysocline_engine::script::diagnostic::Kind;
use lysocline_engine::solve::Settings;
use lysocline_engine::tableau::Tableau;

use crate::cli::{Look, Solve};
use crate::render::diagnostic::Report;

/// Returns whether the case has a solution.
pub fn run(solve: &Solve, look: &Look) -> bool {
    match result(solve) {
        Ok((json, solved)) => {
            // The reader of our output left: nobody is there to be told.
            let _ = writeln!(std::io::stdout(), "{json}");
            solved
        }
        Err(diagnostic) => {
            Report { color: look.messages_colored() }.print(&diagnostic);
            false
        }
    }
}

/// The result as text, and whether it is a solution.
fn result(solve: &Solve) -> Result<(String, bool), Box<Diagnostic>> {
    let name = solve.case.display();
    let text = super::read_text("the case", &solve.case)?;
    let tableau = Tableau::parse(&text).map_err(|faults| {
        let message = format!("cannot use the case `{name}`");
        Box::new(faults.iter().fold(Diagnostic::new(Kind::Failure, message), |diagnostic, fault| {
            diagnostic.help(fault.to_string())
        }))
    })?;
    let failed = |error: &dyn std::fmt::Display| {
        Box::new(Diagnostic::new(Kind::Failure, format!("cannot solve the case `{name}`: {error}")))
    };
    let settings = Settings::default();
    let answer = tableau.solve(&settings).map_err(|error| failed(&error))?;
    let mut json = answer.to_json(&tableau);
    if let Some(repeats) = solve.repeat {
        json["seconds_per_solve"] = median_time(&tableau, &settings, repeats).into();
    }
    Ok((format!("{json:#}"), answer.solution().is_some()))
}

fn median_time(tableau: &Tableau, settings: &Settings, repeats: u32) -> f64 {
    let once = |_| {
        let start = Instant::now();
        std::hint::black_box(tableau.solve(settings)).ok();
        start.elapsed().as_secs_f64()
    };
    let mut times: Vec<f64> = (0..repeats).map(once).collect();
    times.sort_by(f64::total_cmp);
    times[times.len() / 2]
}
