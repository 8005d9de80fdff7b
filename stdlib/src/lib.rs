//! Published equilibrium constants and the ledgers made of them, embedded as text.
//!
//! One TOML file a publication in `constants/`, the parameters of activity models in `activity/`, one list of entries a ledger
//! in `ledgers/`; the engine reads them. Script modules that `import "stdlib/<name>"` finds lie in `modules/`.
//! This crate holds data only: it parses nothing and computes nothing. The format and the known contradictions are
//! described in its README.

/// `(file name without extension, TOML text)` of every file in `constants/`, in alphabetical order.
pub const CONSTANTS: &[(&str, &str)] = &[
    ("bates1943", include_str!("../constants/bates1943.toml")),
    ("benson1979", include_str!("../constants/benson1979.toml")),
    ("bruggenwert1982", include_str!("../constants/bruggenwert1982.toml")),
    ("busenberg1984", include_str!("../constants/busenberg1984.toml")),
    ("busenberg1986", include_str!("../constants/busenberg1986.toml")),
    ("cox1989", include_str!("../constants/cox1989.toml")),
    ("dickson-riley1979", include_str!("../constants/dickson-riley1979.toml")),
    ("dickson1990", include_str!("../constants/dickson1990.toml")),
    ("dzombak1990", include_str!("../constants/dzombak1990.toml")),
    ("felmy1990", include_str!("../constants/felmy1990.toml")),
    ("grenthe1992", include_str!("../constants/grenthe1992.toml")),
    ("lee2010", include_str!("../constants/lee2010.toml")),
    ("lueker2000", include_str!("../constants/lueker2000.toml")),
    ("manov1944", include_str!("../constants/manov1944.toml")),
    ("martin-mayor2025", include_str!("../constants/martin-mayor2025.toml")),
    ("mehrbach-refit1987", include_str!("../constants/mehrbach-refit1987.toml")),
    ("millero-seawater1995", include_str!("../constants/millero-seawater1995.toml")),
    ("millero-total2010", include_str!("../constants/millero-total2010.toml")),
    ("millero1988", include_str!("../constants/millero1988.toml")),
    ("millero1995", include_str!("../constants/millero1995.toml")),
    ("millero2006", include_str!("../constants/millero2006.toml")),
    ("millero2008", include_str!("../constants/millero2008.toml")),
    ("millero2010", include_str!("../constants/millero2010.toml")),
    ("morris-riley1966", include_str!("../constants/morris-riley1966.toml")),
    ("mucci1983", include_str!("../constants/mucci1983.toml")),
    ("nordstrom1990", include_str!("../constants/nordstrom1990.toml")),
    ("olofsson1975", include_str!("../constants/olofsson1975.toml")),
    ("perez-fraga1987", include_str!("../constants/perez-fraga1987.toml")),
    ("plummer1982", include_str!("../constants/plummer1982.toml")),
    ("riley-tongudai1967", include_str!("../constants/riley-tongudai1967.toml")),
    ("riley1965", include_str!("../constants/riley1965.toml")),
    ("rimstidt1980", include_str!("../constants/rimstidt1980.toml")),
    ("robie1995", include_str!("../constants/robie1995.toml")),
    ("roy1993", include_str!("../constants/roy1993.toml")),
    ("skoog2004", include_str!("../constants/skoog2004.toml")),
    ("uppstrom1974", include_str!("../constants/uppstrom1974.toml")),
    ("wagman1982", include_str!("../constants/wagman1982.toml")),
    ("waters-total2014", include_str!("../constants/waters-total2014.toml")),
    ("waters2014", include_str!("../constants/waters2014.toml")),
    ("weiss-pressure1974", include_str!("../constants/weiss-pressure1974.toml")),
    ("weiss1974", include_str!("../constants/weiss1974.toml")),
    ("yao-millero1995", include_str!("../constants/yao-millero1995.toml")),
];

/// `(file name without extension, TOML text)` of every file in `activity/`, in alphabetical order.
pub const ACTIVITY: &[(&str, &str)] = &[
    ("grenthe1992", include_str!("../activity/grenthe1992.toml")),
    ("kielland1937", include_str!("../activity/kielland1937.toml")),
    ("truesdell1974", include_str!("../activity/truesdell1974.toml")),
];

/// `(file name without extension, TOML text)` of every file in `ledgers/`, in alphabetical order.
pub const LEDGERS: &[(&str, &str)] = &[
    ("formation", include_str!("../ledgers/formation.toml")),
    ("freshwater", include_str!("../ledgers/freshwater.toml")),
    ("seawater", include_str!("../ledgers/seawater.toml")),
    ("sorption", include_str!("../ledgers/sorption.toml")),
];

/// `(file name without extension, script text)` of every file in `modules/`, in alphabetical order.
pub const MODULES: &[(&str, &str)] = &[
    ("calcifiers", include_str!("../modules/calcifiers.rhai")),
    ("water-works", include_str!("../modules/water-works.rhai")),
];

#[cfg(test)]
mod tests {
    use super::{ACTIVITY, CONSTANTS, LEDGERS, MODULES};
    use std::path::Path;

    /// Names of the files of a kind in a folder of this crate, in alphabetical order.
    fn files(folder: &str, kind: &str) -> Vec<String> {
        let path = Path::new(env!("CARGO_MANIFEST_DIR")).join(folder);
        let mut names: Vec<String> = std::fs::read_dir(&path)
            .expect("the folder is part of the crate")
            .map(|entry| entry.expect("a readable entry").path())
            .filter(|path| path.extension().is_some_and(|extension| extension == kind))
            .map(|path| path.file_stem().expect("a file name").to_string_lossy().into_owned())
            .collect();
        names.sort();
        names
    }

    #[test]
    fn every_file_is_embedded_in_alphabetical_order() {
        let listed =
            |files: &[(&str, &str)]| files.iter().map(|(name, _)| (*name).to_owned()).collect::<Vec<_>>();
        assert_eq!(listed(CONSTANTS), files("constants", "toml"));
        assert_eq!(listed(ACTIVITY), files("activity", "toml"));
        assert_eq!(listed(LEDGERS), files("ledgers", "toml"));
        assert_eq!(listed(MODULES), files("modules", "rhai"));
    }

    #[test]
    fn every_file_of_constants_names_itself_and_is_in_the_bibliography() {
        let bibliography = include_str!("../references.bib");
        for (name, text) in CONSTANTS.iter().chain(ACTIVITY) {
            assert!(text.contains(&format!("key = \"{name}\"")), "`{name}` carries another key");
            assert!(bibliography.contains(&format!("{{{name},")), "`{name}` is not in references.bib");
        }
    }
}
