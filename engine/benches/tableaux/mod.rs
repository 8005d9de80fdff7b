//! Random tableaux and the time of one Newton iteration on them, which the benchmarks take for their unit.

use std::hint::black_box;
use std::time::Instant;

use lysocline_engine::activity::Model;
use lysocline_engine::solve::{Converged, Problem, Row, Settings, Total, Warm, solve};

const LN_10: f64 = std::f64::consts::LN_10;
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
    let mut species: Vec<Row> = (0..COMPONENTS).map(|j| Row::new(&[(j, 1)], 0.0)).collect();
    species.push(Row::new(&[(0, -1)], -14.0 * LN_10));
    while species.len() < SPECIES {
        let mut stoichiometry = vec![(random.below(COMPONENTS - 1) + 1, random.below(4) as i64 + 1)];
        for _ in 0..random.below(3) {
            let j = random.below(COMPONENTS);
            let nu = if j == 0 { random.below(9) as i64 - 4 } else { random.below(4) as i64 + 1 };
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

/// SplitMix64 (Steele, Lea & Flood 2014).
pub struct Random(pub u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    fn below(&mut self, end: usize) -> usize {
        (self.next() % end as u64) as usize
    }

    /// Uniform between two numbers.
    pub fn uniform(&mut self, from: f64, to: f64) -> f64 {
        from + (self.next() >> 11) as f64 / (1_u64 << 53) as f64 * (to - from)
    }
}
