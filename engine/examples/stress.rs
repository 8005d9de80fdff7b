//! Random equilibrium problems by the hundred thousand: prints what fails and how many iterations the rest takes.
//!
//! ```text
//! cargo run --release -p lysocline-engine --example stress -- --count 100000
//! ```
//!
//! The problems are spread evenly over families of rising difficulty; problem k of a family is the same in every run, and
//! `--family NAME --seed K` solves that one alone. Every answer is checked again from outside, by `tests/kkt.rs`. Exit code
//! 1 if any problem fails.

#[allow(dead_code, missing_docs, reason = "shared with the checks")]
#[path = "../../tests/kkt.rs"]
mod kkt;
#[allow(dead_code, missing_docs, reason = "shared with the checks")]
#[path = "../../tests/random_systems.rs"]
mod random_systems;

use std::process::ExitCode;
use std::time::Instant;

use lysocline_engine::activity::{Davies, Model};
use lysocline_engine::solve::{Problem, Settings, SolveError, solve};
use random_systems::{HARD, LN_10, Random};
use rayon::prelude::*;

/// Problems of one kind.
struct Family {
    name: &'static str,
    fixed_component: bool,
    mixtures: usize,
    /// Up to this many.
    minerals: i64,
    davies: bool,
}

const FAMILIES: [Family; 9] = [
    family("tableaux", false, 0, 0, false),
    family("fixed", true, 0, 0, false),
    family("minerals", false, 0, 8, false),
    family("minerals-fixed", true, 0, 8, false),
    family("gas-minerals", false, 1, 3, false),
    family("mixtures-minerals", false, 2, 3, false),
    family("mixtures-fixed", true, 2, 3, false),
    family("davies-minerals", false, 0, 5, true),
    family("davies-mixture", false, 1, 2, true),
];

const fn family(
    name: &'static str,
    fixed_component: bool,
    mixtures: usize,
    minerals: i64,
    davies: bool,
) -> Family {
    Family { name, fixed_component, mixtures, minerals, davies }
}

impl Family {
    /// Problem number `seed`; `None` where there is none to be made.
    fn problem(&self, seed: u64) -> Option<Problem> {
        let random = &mut Random(seed * 7919 + 1);
        let mut problem = random_systems::tableau(random, HARD);
        if self.fixed_component {
            random_systems::hold_component(&mut problem, 0, -random.uniform(0.0, 14.0) * LN_10);
        }
        if self.mixtures > 0 || self.minerals > 0 {
            let ln_a = solve(&problem, &Model::IDEAL, &Settings::default(), None).ok()?.ln_a;
            random_systems::add_mixtures(random, &mut problem, &ln_a, self.mixtures);
            let minerals = random.integer(0, self.minerals) as usize;
            random_systems::add_minerals(random, &mut problem, &ln_a, minerals);
        }
        if self.davies {
            random_systems::add_charges(random, &mut problem);
        }
        Some(problem)
    }

    /// Iterations of one problem; `None` where it has no solution, and that is proven.
    fn iterations(&self, seed: u64) -> Result<Option<usize>, String> {
        let Some(problem) = self.problem(seed) else { return Err("the problem without phases fails".into()) };
        let model = if self.davies { Model::davies(Davies::new(0.509)) } else { Model::IDEAL };
        match solve(&problem, &model, &Settings::default(), None) {
            Ok(converged) => {
                kkt::check(&problem, &converged)?;
                Ok(Some(converged.effort.iterations))
            }
            Err(SolveError::Unbounded { .. } | SolveError::UnboundedMixture { .. })
                if self.fixed_component =>
            {
                Ok(None)
            }
            Err(error) => Err(error.to_string()),
        }
    }

    /// Solves `count` problems; returns whether all went well.
    fn run(&self, count: u64) -> bool {
        let start = Instant::now();
        let outcomes: Vec<_> = (0..count).into_par_iter().map(|seed| (seed, self.iterations(seed))).collect();
        let failures: Vec<_> = outcomes.iter().filter(|(_, outcome)| outcome.is_err()).collect();
        let mut iterations: Vec<usize> =
            outcomes.iter().filter_map(|(_, outcome)| outcome.as_ref().ok().copied().flatten()).collect();
        iterations.sort_unstable();
        let quantile = |share: f64| {
            let last = iterations.len().saturating_sub(1);
            iterations.get((last as f64 * share).round() as usize).copied().unwrap_or(0)
        };
        println!(
            "{:18} {count:8} problems {:6} without end {:4} failed; iterations median {:3}, 99 % {:4}, most {:5}; {:.1} s",
            self.name,
            count as usize - failures.len() - iterations.len(),
            failures.len(),
            quantile(0.5),
            quantile(0.99),
            quantile(1.0),
            start.elapsed().as_secs_f64()
        );
        for (seed, outcome) in failures.iter().take(10) {
            if let Err(message) = outcome {
                println!("    --family {} --seed {seed}: {message}", self.name);
            }
        }
        failures.is_empty()
    }
}

fn main() -> ExitCode {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let option = |name: &str| {
        let at = arguments.iter().position(|argument| argument == name)?;
        arguments.get(at + 1).map(String::as_str)
    };
    let number = |name: &str| option(name).map(|text| text.parse::<u64>());
    let wanted = option("--family");
    let families: Vec<&Family> =
        FAMILIES.iter().filter(|family| wanted.is_none_or(|name| name == family.name)).collect();
    let (count, seed) = match (number("--count").transpose(), number("--seed").transpose()) {
        (Ok(count), Ok(seed)) if !families.is_empty() => (count.unwrap_or(100_000), seed),
        _ => {
            let names: Vec<&str> = FAMILIES.iter().map(|family| family.name).collect();
            eprintln!("usage: stress [--count N] [--family NAME [--seed K]]; families: {}", names.join(", "));
            return ExitCode::from(2);
        }
    };
    if let Some(seed) = seed {
        for family in families {
            println!("{}, {seed}: {:?}", family.name, family.iterations(seed));
        }
        return ExitCode::SUCCESS;
    }
    let each = count.div_ceil(families.len() as u64);
    // Every family runs, also after one that failed.
    let failed = families.iter().filter(|family| !family.run(each)).count();
    if failed == 0 { ExitCode::SUCCESS } else { ExitCode::FAILURE }
}
