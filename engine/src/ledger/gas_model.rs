//! How fugacity follows from partial pressure.

use crate::named::KeyFault;
use crate::nearest::nearest;
use crate::text::list;

/// The relation of fugacity to partial pressure.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub enum GasModel {
    /// They are equal.
    #[default]
    Ideal,
    /// Second virial coefficients, under the pressure of the water: see [`crate::physics::virial`].
    Virial,
}

const NAMES: [(&str, GasModel); 2] = [("ideal", GasModel::Ideal), ("virial", GasModel::Virial)];

impl GasModel {
    /// The model of a name.
    ///
    /// # Errors
    ///
    /// Names those there are.
    pub fn read(name: &str) -> Result<Self, KeyFault> {
        let names = NAMES.map(|(own, _)| own);
        let found = NAMES.iter().find(|(own, _)| *own == name).map(|(_, model)| *model);
        found.ok_or_else(|| {
            let near =
                nearest(name, names).map(|near| format!(", did you mean `{near}`?")).unwrap_or_default();
            let end = if near.is_empty() { "; there" } else { " There" };
            KeyFault::new("gas_model", format!("no gas model `{name}`{near}{end} are {}", list(&names)))
        })
    }

    /// Its name.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Ideal => "ideal",
            Self::Virial => "virial",
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_read_and_others_refused() {
        assert_eq!(GasModel::read("virial").unwrap(), GasModel::Virial);
        assert_eq!(
            GasModel::read("virail").unwrap_err().message,
            "no gas model `virail`, did you mean `virial`? There are `ideal` and `virial`"
        );
    }
}
