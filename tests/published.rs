//! Every check of `published/` against the engine, one test a file: a failure names publication, row and column.
//!
//! Nothing is left out: an unknown kind, key or column fails, and so does a file, a check or a row that the table in
//! the README does not count.

mod answer;
mod check;

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

use check::{Case, Check, Expected, File};

macro_rules! files {
    ($($test:ident = $name:literal),* $(,)?) => {
        $(#[test]
        fn $test() {
            run($name);
        })*

        const FILES: &[&str] = &[$($name),*];
    };
}

files! {
    bennett1972 = "bennett1972",
    buck2002 = "buck2002",
    carbonate_equilibria = "carbonate-equilibria",
    combined_constants = "combined-constants",
    cox1989 = "cox1989",
    davies1962 = "davies1962",
    electron = "electron",
    felmy1990 = "felmy1990",
    formation_cycles = "formation-cycles",
    four_waters = "four-waters",
    freeze1979 = "freeze1979",
    grenthe1992 = "grenthe1992",
    hamer1972 = "hamer1972",
    harned1941 = "harned1941",
    harned1943 = "harned1943",
    harned1958 = "harned1958",
    helgeson1981 = "helgeson1981",
    hulett1902 = "hulett1902",
    iapws1997 = "iapws1997",
    iapws2007 = "iapws2007",
    kell1975 = "kell1975",
    kielland1937 = "kielland1937",
    malmberg1956 = "malmberg1956",
    manov1943 = "manov1943",
    marshall1981 = "marshall1981",
    nordstrom2022 = "nordstrom2022",
    plummer1982 = "plummer1982",
    redox = "redox",
    robinson1959 = "robinson1959",
    seawater_constants = "seawater-constants",
    seawater_pressure = "seawater-pressure",
    seawater_states = "seawater-states",
    solubility = "solubility",
    standard_potentials = "standard-potentials",
}

/// The folder of the files.
fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("published")
}

fn run(name: &str) {
    let file = File::read(name).unwrap_or_else(|fault| panic!("{fault}"));
    assert_eq!(counted(&file), promised(name), "{name}: checks, rows and differences, against the README");
    let results: Vec<Outcome> = file.checks.iter().flat_map(|check| compare(&file, check)).collect();
    let worst = results.iter().filter_map(|outcome| outcome.share).fold(0.0, f64::max);
    let faults: Vec<&str> = results.iter().filter_map(|outcome| outcome.fault.as_deref()).collect();
    println!("{name}: {} values, the worst at {:.0} % of its tolerance", results.len(), 100.0 * worst);
    assert!(faults.is_empty(), "{} of {} values\n{}", faults.len(), results.len(), faults.join("\n"));
}

/// What became of one expected value, or of a row that gave none.
#[derive(Default)]
struct Outcome {
    /// Distance from the expected value as a share of the tolerance.
    share: Option<f64>,
    fault: Option<String>,
}

fn compare(file: &File, check: &Check) -> Vec<Outcome> {
    let failed =
        |fault: String| Outcome { fault: Some(format!("{}: {fault}", check.id)), ..Outcome::default() };
    let cases = match check.cases() {
        Ok(cases) => cases,
        Err(fault) => return vec![failed(fault)],
    };
    let mut outcomes = Vec::new();
    let mut disagreement = false;
    for case in &cases {
        match answer::answers(file, check, case) {
            Err(fault) => outcomes.push(failed(format!("row {} {:?}: {fault}", case.row, case.given))),
            Ok(answers) => {
                for (expected, got) in case.expected.iter().zip(answers) {
                    disagreement |= expected.agreement.is_some_and(|limit| distance(expected, got) > limit);
                    outcomes.push(judge(check, case, expected, got));
                }
            }
        }
    }
    if check.difference.is_some() && !disagreement {
        outcomes.push(failed("marked as a difference, and every row agrees: the mark is stale".into()));
    }
    outcomes
}

fn distance(expected: &Expected, got: f64) -> f64 {
    (got - expected.value).abs()
}

fn judge(check: &Check, case: &Case, expected: &Expected, got: f64) -> Outcome {
    let share = distance(expected, got) / expected.tolerance;
    // A hair of rounding, for values that lie on the limit.
    let met = share <= 1.0 + 1e-9;
    let fault = || {
        let Expected { column, value, tolerance, .. } = expected;
        let off = got - value;
        format!(
            "{}, row {} {:?}: {column} is {got}, not {value} +/- {tolerance} (off by {off:.3e})",
            check.id, case.row, case.given
        )
    };
    Outcome { share: Some(share), fault: (!met).then(fault) }
}

/// Checks, rows, kinds, provenances and differences of a file.
type Count = (usize, usize, BTreeSet<String>, BTreeSet<String>, usize);

fn counted(file: &File) -> Count {
    let kinds = file.checks.iter().map(|check| snake_case(&format!("{:?}", check.kind)));
    let provenances = file.checks.iter().map(|check| check.provenance.clone());
    let rows = file.checks.iter().map(|check| check.rows.len()).sum();
    let differences = file.checks.iter().filter(|check| check.difference.is_some()).count();
    (file.checks.len(), rows, kinds.collect(), provenances.collect(), differences)
}

/// What the table of the README says of a file.
fn promised(name: &str) -> Count {
    let table = readme_table();
    let row = table.iter().find(|row| row[0] == format!("`{name}.toml`"));
    let row = row.unwrap_or_else(|| panic!("the README does not list {name}.toml"));
    let number = |text: &str| if text.is_empty() { 0 } else { text.parse().expect("a number") };
    let words = |text: &str| text.split(", ").map(str::to_string).collect();
    (number(&row[1]), number(&row[2]), words(&row[3]), words(&row[4]), number(&row[5]))
}

/// Cells of the table that lists the files.
fn readme_table() -> Vec<Vec<String>> {
    let readme = std::fs::read_to_string(folder().join("README.md")).expect("the README of the checks");
    let rows = readme.lines().filter(|line| line.starts_with("| `") && line.contains(".toml` |"));
    rows.map(|row| row.trim_matches('|').split('|').map(|cell| cell.trim().to_string()).collect()).collect()
}

fn snake_case(variant: &str) -> String {
    let mut text = String::new();
    for letter in variant.chars() {
        if letter.is_uppercase() && !text.is_empty() {
            text.push('_');
        }
        text.extend(letter.to_lowercase());
    }
    text
}

#[test]
fn every_file_is_run_and_listed() {
    let mut there: Vec<String> = std::fs::read_dir(folder())
        .expect("the folder of the checks")
        .filter_map(|entry| entry.expect("a readable entry").file_name().into_string().ok())
        .filter_map(|name| name.strip_suffix(".toml").map(str::to_string))
        .collect();
    there.sort();
    assert_eq!(there, FILES);
    let listed: Vec<String> = readme_table().into_iter().map(|row| row[0].clone()).collect();
    assert_eq!(listed, FILES.iter().map(|name| format!("`{name}.toml`")).collect::<Vec<_>>());
}

#[test]
fn checks_have_names_of_their_own_and_say_where_they_come_from() {
    let mut ids = BTreeSet::new();
    for name in FILES {
        for check in File::read(name).unwrap().checks {
            assert!(ids.insert(check.id.clone()), "two checks are called `{}`", check.id);
            for (key, text) in [
                ("quantity", &check.quantity),
                ("citation", &check.citation),
                ("conditions", &check.conditions),
            ] {
                assert!(!text.trim().is_empty(), "`{}` has no {key}", check.id);
            }
            assert!(
                ["read", "computed", "memory"].contains(&check.provenance.as_str()),
                "`{}`: {}",
                check.id,
                check.provenance
            );
            assert_eq!(check.difference.is_some(), check.id.ends_with("-difference"), "`{}`", check.id);
            assert_eq!(check.difference.is_some(), check.agreement.is_some(), "`{}`", check.id);
            for text in [&check.note, &check.uncertainty].into_iter().flatten() {
                assert!(!text.trim().is_empty(), "`{}` has an empty note or uncertainty", check.id);
            }
        }
    }
}
