//! Published tableaux, as files that `lysocline solve` and `load_tableau` read.

use lysocline_engine::solve::{Problem, Row, Settings};
use lysocline_engine::tableau::{Solution, Tableau};

use crate::two_routes::bisect;

/// The "easy" chemistry of the reactive transport benchmark MoMaS (Carrayrou, Kern & Knabner 2010, Comput. Geosci. 14,
/// 483-502; tableau and waters recalled).
const INITIAL_A: &str = include_str!("tableaux/momas-easy-initial-a.json");
const INITIAL_B: &str = include_str!("tableaux/momas-easy-initial-b.json");
const INJECTED: &str = include_str!("tableaux/momas-easy-injected.json");
const INJECTED_ON_A: &str = include_str!("tableaux/momas-easy-injected-on-a.json");
const LEACHING: &str = include_str!("tableaux/momas-easy-leaching.json");

fn solved(json: &str) -> (Tableau, Solution) {
    let tableau = Tableau::parse(json).unwrap();
    let answer = tableau.solve(&Settings::default()).unwrap();
    let solution = answer.solution().cloned().unwrap();
    (tableau, solution)
}

/// The values of the initial water A, computed by another program for this tableau, five digits.
#[test]
fn momas_initial_water_a() {
    let (tableau, solution) = solved(INITIAL_A);
    for (name, expected) in
        [("X2", 0.25972), ("X4", 0.34954), ("S", 0.39074), ("C3", 1.34583), ("CS2", 0.30463)]
    {
        let i = tableau.species().iter().position(|species| species == name).unwrap();
        assert!((10_f64.powf(solution.log_c[i]) - expected).abs() < 5e-6, "{name}");
    }
    assert_eq!(solution.zeros, ["X1", "X3", "C2", "C4", "C5", "CS1"]);
}

/// Without the components that are exactly zero, and what contains them.
fn without(problem: &Problem, zero: &[usize]) -> (Problem, Vec<usize>) {
    let kept: Vec<usize> = (0..problem.n_components).filter(|j| !zero.contains(j)).collect();
    let is_kept = |row: &Row| row.stoichiometry.iter().all(|(j, _)| kept.contains(j));
    let renumbered = |row: &Row| {
        let new = |j: &usize| kept.iter().position(|k| k == j).unwrap();
        Row { stoichiometry: row.stoichiometry.iter().map(|(j, nu)| (new(j), *nu)).collect(), ..row.clone() }
    };
    let species: Vec<usize> = (0..problem.species.len()).filter(|i| is_kept(&problem.species[*i])).collect();
    let reduced = Problem {
        n_components: kept.len(),
        species: species.iter().map(|i| renumbered(&problem.species[*i])).collect(),
        totals: kept.iter().map(|j| problem.totals[*j]).collect(),
        ..Problem::default()
    };
    (reduced, species)
}

/// All waters whose totals leave at most three components, by nested bisection; the totals that are zero force X1, X3 (or
/// X4, S) to zero, since all their coefficients are positive.
#[test]
fn momas_waters_agree_with_nested_bisection() {
    for (name, json, zero) in [
        ("initial A", INITIAL_A, vec![0, 2]),
        ("initial B", INITIAL_B, vec![0, 2]),
        ("injected", INJECTED, vec![3, 4]),
        ("leaching", LEACHING, vec![0, 2, 4]),
    ] {
        let (tableau, solution) = solved(json);
        let (reduced, species) = without(tableau.problem(), &zero);
        for (i, slow) in species.iter().zip(bisect(&reduced)) {
            let fast = solution.converged.ln_c[*i];
            assert!((fast - slow).abs() < 1e-9, "{name}, {}: {fast} {slow}", tableau.species()[*i]);
        }
        let zeros = tableau.species().len() - species.len();
        assert_eq!(solution.zeros.len(), zeros, "{name}: {:?}", solution.zeros);
    }
}

/// The injected water on the sites of A: four components, checked by its own balances and mass action.
#[test]
fn momas_injected_water_on_sites() {
    let (tableau, solution) = solved(INJECTED_ON_A);
    assert_eq!(solution.zeros, ["X4", "C3", "C4", "C5", "CS2"]);
    crate::kkt::check(tableau.problem(), &solution.converged).unwrap();
    assert!(solution.converged.certificate.ln_c_error.is_some_and(|bound| bound < 1e-10));
}
