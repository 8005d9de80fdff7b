//! Random tableaux and the time of one Newton iteration on them, which the benchmarks take for their unit.

#[allow(dead_code, missing_docs, reason = "shared with the checks")]
#[path = "../../../tests/random_systems.rs"]
mod random_systems;

use std::hint::black_box;
use std::time::Instant;

use lysocline_engine::activity::Model;
use lysocline_engine::solve::{Converged, Problem, Row, Settings, Total, Warm, solve};

use random_systems::LN_10;
pub use random_systems::Random;

/// Components of a tableau.
pub const COMPONENTS: usize = 10;
/// Species of a tableau.
pub const SPECIES: usize = 60;
/// How many tableaux a benchmark takes.
pub const N_TABLEAUX: u64 = 400;

/// Solves a tableau.
pub fn run(problem: &Problem, settings: &Settings, warm: Option<&Warm>) -> Converged {
    solve(black_box(problem), &Model::IDEAL, settings, warm).expect("random tableaux have a solution")
}

/// Seconds of one call, the least of three.
pub fn time<T>(mut work: impl FnMut() -> T) -> f64 {
    let once = |work: &mut dyn FnMut() -> T| {
        let start = Instant::now();
        black_box(work());
        start.elapsed().as_secs_f64()
    };
    (0..3).map(|_| once(&mut work)).fold(f64::INFINITY, f64::min)
}

/// Seconds of one Newton iteration: the difference between warm solves that need several and those that need none.
pub fn iteration_time(problem: &Problem, settings: &Settings) -> f64 {
    let here = run(problem, settings, None);
    let mut moved = problem.clone();
    moved.totals.iter_mut().for_each(|total| *total = *total * 1.05);
    let away = run(&moved, settings, Some(&here.warm));
    let (with, iterations) =
        (time(|| run(&moved, settings, Some(&here.warm))), away.effort.iterations as f64);
    let again = run(&moved, settings, Some(&away.warm));
    let without = time(|| run(&moved, settings, Some(&away.warm)));
    (with - without) / (iterations - again.effort.iterations as f64)
}

/// A quantile of some times.
pub fn quantile(values: &mut [f64], share: f64) -> f64 {
    values.sort_by(f64::total_cmp);
    values[((values.len() - 1) as f64 * share).round() as usize]
}

/// Ten components of which the first is the proton; complexes of up to three components, log10 K within ±20.
pub fn random_tableau(seed: u64) -> Problem {
    let mut random = Random(seed * 7919 + 1);
    let component = |random: &mut Random, from: i64| random.integer(from, COMPONENTS as i64 - 1) as usize;
    let mut species: Vec<Row> = (0..COMPONENTS).map(|j| Row::new(&[(j, 1)], 0.0)).collect();
    species.push(Row::new(&[(0, -1)], -14.0 * LN_10));
    while species.len() < SPECIES {
        let mut stoichiometry = vec![(component(&mut random, 1), random.integer(1, 4))];
        for _ in 0..random.integer(0, 2) {
            let j = component(&mut random, 0);
            let nu = if j == 0 { random.integer(-4, 4) } else { random.integer(1, 4) };
            if nu != 0 && stoichiometry.iter().all(|(k, _)| *k != j) {
                stoichiometry.push((j, nu));
            }
        }
        species.push(Row::new(&stoichiometry, random.uniform(-20.0, 20.0) * LN_10));
    }
    let mut total = |j| {
        let size = 10_f64.powf(random.uniform(-14.0, 0.0));
        Total::from(if j == 0 && random.uniform(0.0, 1.0) < 0.5 { -size } else { size })
    };
    let totals = (0..COMPONENTS).map(&mut total).collect();
    Problem { n_components: COMPONENTS, species, totals, ..Problem::default() }
}
