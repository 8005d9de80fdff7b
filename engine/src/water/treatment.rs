//! What is done to a water after its analysis: surroundings, solids, temperature.

use super::concentration::{self, Amount, Per};
use super::neighbour::Neighbour;
use crate::chem::{Equation, Species};
use crate::named::{self, Value};
use crate::quantity::Quantity;
use crate::text::list;
use crate::units::{Kind, Pressure, Temperature};

/// One treatment; minerals and gases go by the name the user gave, resolved when a ledger is at hand.
#[derive(Debug, Clone)]
pub enum Treatment {
    /// Contact with so much of a gas that its fugacity, bar, stays fixed.
    OpenTo {
        /// The gas, `CO2(g)`.
        gas: String,
        /// Fugacity in bar.
        fugacity: f64,
    },
    /// Contact with an unlimited solid, which keeps its saturation index.
    Saturate {
        /// The solid.
        solid: String,
        /// Saturation index kept.
        index: f64,
    },
    /// A solid may form where its saturation index would exceed a threshold.
    Allow {
        /// The solid.
        solid: String,
        /// Saturation index above which it forms.
        above: f64,
    },
    /// So much of a solid is there, and may dissolve or grow.
    WithSolid {
        /// The solid.
        solid: String,
        /// How much.
        amount: Amount,
    },
    /// So much of a reagent dissolves.
    Dose(Dose),
    /// So much of a substance is taken away.
    Remove(Dose),
    /// Water evaporates until the rest holds so many times as much of everything; below 1: pure water is added.
    Concentrate(f64),
    /// A measured volume of a solution is added to a measured volume of the water.
    AddSolution {
        /// Litres added.
        volume: f64,
        /// Litres of the water before.
        sample_volume: Quantity,
        /// What is added.
        solution: Titrant,
    },
    /// So much of some reagents dissolves that some observables meet their targets.
    Adjust(Box<Adjust>),
    /// A gas phase, a solid solution, an exchanger or a surface beside the water.
    Beside(Box<Neighbour>),
    /// pH is kept.
    HoldPh {
        /// The pH kept.
        ph: f64,
        /// A neutral substance that brings it there, `NaOH`; `None`: H⁺ against inert charge.
        reagent: Option<String>,
    },
    /// pe is kept.
    HoldPe {
        /// The pe kept.
        pe: f64,
        /// A neutral substance that brings it there, `O2`; `None`: electrons against inert charge.
        reagent: Option<String>,
    },
    /// Another temperature.
    WarmTo(Temperature),
    /// Another pressure.
    CompressTo(Pressure),
}

/// An amount of a reagent.
#[derive(Debug, Clone)]
pub struct Dose {
    /// A neutral formula, `NaOH`, or the equation of its dissolution.
    pub reagent: String,
    /// How much, in moles of the formula.
    pub amount: Amount,
}

/// How much of some reagents brings a water to some targets.
#[derive(Debug, Clone)]
pub struct Adjust {
    /// Reagents, each with the least and the most of it.
    pub reagents: Vec<(String, Amount, Amount)>,
    /// Observables, each in the unit of its target.
    pub targets: Vec<(String, Quantity)>,
}

/// A solution of known strength: `0.1 mol/L HCl`, or several solutes joined by ` + `.
#[derive(Debug, Clone)]
pub struct Titrant {
    /// Neutral formulas with their concentrations, mol/L.
    pub solutes: Vec<(String, Quantity)>,
}

/// The most of a reagent that [`Adjust`] looks for unless told otherwise, mol/kg(water).
pub const MOST_REAGENT: f64 = 1.0;

/// The neutral substance a reagent is counted in: of an equation, the first on its left side.
///
/// # Errors
///
/// Words for what is no formula, no equation, or has a charge.
pub fn substance(reagent: &str) -> Result<Species, String> {
    let example = "a reagent is a neutral formula, such as `NaOH`, or the equation of its dissolution";
    let species = if is_equation(reagent) {
        let equation = Equation::parse(reagent).map_err(|error| format!("`{reagent}`: {error}"))?;
        let first = equation.terms().iter().find(|(_, coefficient)| *coefficient < 0.into());
        first.map(|(species, _)| species.clone()).ok_or_else(|| format!("`{reagent}` dissolves nothing"))?
    } else {
        Species::parse(reagent).map_err(|error| format!("`{reagent}` is no formula ({error}); {example}"))?
    };
    if species.charge() != 0 {
        let charge = species.charge();
        return Err(format!(
            "`{species}` has charge {charge}; {example}, and brings its counter-ion with it"
        ));
    }
    if species.elements_beside_water().next().is_none() {
        return Err(format!(
            "`{reagent}` is nothing but water; `.concentrate(0.5)` doubles the water, `mix(a, b, 0.3)` adds another"
        ));
    }
    Ok(species)
}

/// Whether a reagent is given by the equation of its dissolution.
#[must_use]
pub fn is_equation(reagent: &str) -> bool {
    ["<=>", "⇌", "="].iter().any(|arrow| reagent.contains(arrow))
}

impl Dose {
    /// Reads an amount of a reagent; `verb` names the treatment in messages.
    ///
    /// # Errors
    ///
    /// Words for a formula that is none, an amount of another kind, or a negative one.
    pub fn read(verb: &str, reagent: &str, amount: Value) -> Result<Self, String> {
        let substance = substance(reagent)?;
        let amount = named::quantity(reagent, amount, Kind::Amount).map_err(|fault| fault.message)?;
        let amount =
            concentration::substance(&substance, &amount).map_err(|why| format!("`{reagent}`: {why}"))?;
        if amount.moles.value() < 0.0 {
            let other = if verb == "dose" { "`.remove` takes away" } else { "`.dose` adds" };
            return Err(format!("`{verb}`: {} of `{reagent}` is negative; {other}", amount.moles));
        }
        Ok(Self { reagent: reagent.trim().into(), amount })
    }
}

impl Adjust {
    /// Reads reagents, their targets, and the least and the most of each reagent.
    ///
    /// # Errors
    ///
    /// Words for a formula that is none, bounds the wrong way round, or as many targets as there are not reagents.
    pub fn new(
        reagents: &[String],
        targets: Vec<(String, Quantity)>,
        between: impl Fn(&str) -> Result<Option<(Value, Value)>, String>,
    ) -> Result<Self, String> {
        if reagents.len() != targets.len() || reagents.is_empty() {
            let names = |names: Vec<&str>| if names.is_empty() { "none".into() } else { list(&names) };
            return Err(format!(
                "`until_is` has {} ({}) and `add` {} ({}); as many reagents are needed as there are targets",
                crate::text::count(targets.len(), "target"),
                names(targets.iter().map(|(name, _)| name.as_str()).collect()),
                crate::text::count(reagents.len(), "reagent"),
                names(reagents.iter().map(String::as_str).collect()),
            ));
        }
        let bounds = |reagent: &String| {
            let (least, most) =
                between(reagent)?.unwrap_or((Value::Number(0.0), Value::Number(MOST_REAGENT)));
            let (least, most) =
                (Dose::read("between", reagent, least)?, Dose::read("between", reagent, most)?);
            let (from, to) = (&least.amount, &most.amount);
            if from.per == to.per && from.moles.value() >= to.moles.value() {
                return Err(format!(
                    "`between` runs from the least to the most of `{reagent}`: {} is not below {}",
                    from.moles, to.moles
                ));
            }
            Ok((reagent.clone(), least.amount, most.amount))
        };
        let repeated = reagents.iter().enumerate().find(|(at, reagent)| reagents[..*at].contains(reagent));
        if let Some((_, reagent)) = repeated {
            return Err(format!("`add` names `{reagent}` twice"));
        }
        Ok(Self { reagents: reagents.iter().map(bounds).collect::<Result<_, _>>()?, targets })
    }
}

impl Titrant {
    /// Reads `0.1 mol/L HCl`, or `0.1 mol/L HCl + 0.6 mol/L NaCl`.
    ///
    /// # Errors
    ///
    /// Words for what is no concentration followed by a neutral formula.
    pub fn parse(text: &str) -> Result<Self, String> {
        let right = "a titrant is a concentration and a neutral formula: `0.1 mol/L HCl`";
        let solute = |part: &str| {
            let part = part.trim();
            let (strength, formula) =
                part.rsplit_once(char::is_whitespace).ok_or_else(|| format!("`{part}`: {right}"))?;
            let species = substance(formula).map_err(|why| format!("{why}; {right}"))?;
            let given = Quantity::parse(strength, Kind::Amount, &format!("concentration of {formula}"))
                .map_err(|error| format!("`{part}`: {error}; {right}"))?;
            let amount =
                concentration::substance(&species, &given).map_err(|why| format!("`{part}`: {why}"))?;
            if amount.per != Per::Litre {
                return Err(format!(
                    "`{part}`: a burette measures litres; give the titrant per litre, in mol/L"
                ));
            }
            if amount.moles.value() <= 0.0 {
                return Err(format!("`{part}`: the concentration has to be above zero"));
            }
            Ok((formula.to_string(), amount.moles))
        };
        Ok(Self { solutes: text.split(" + ").map(solute).collect::<Result<_, String>>()? })
    }

    /// Kilograms of solutes in a litre.
    #[must_use]
    pub fn dissolved(&self) -> f64 {
        let mass = |(formula, moles): &(String, Quantity)| {
            let molar_mass = substance(formula).ok().and_then(|species| species.molar_mass()).unwrap_or(0.0);
            moles.value() * molar_mass / 1000.0
        };
        self.solutes.iter().map(mass).sum()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_titrant_is_a_concentration_and_a_formula() {
        let titrant = Titrant::parse("0.1000 +/- 0.0002 mol/L HCl + 0.6 mol/L NaCl").unwrap();
        assert_eq!(titrant.solutes[0].0, "HCl");
        assert_eq!(titrant.solutes[0].1.sigma(), Some(0.0002));
        assert_eq!(titrant.solutes[1].1.value(), 0.6);
        let message = |text: &str| Titrant::parse(text).unwrap_err();
        assert!(message("0.1 mol/L acid").contains("`0.1 mol/L HCl`"), "{}", message("0.1 mol/L acid"));
        assert!(message("HCl").contains("a titrant is a concentration and a neutral formula"));
        assert!(message("0.1 mol/kg HCl").contains("give the titrant per litre"));
        assert!(message("-0.1 mol/L HCl").contains("above zero"));
    }

    #[test]
    fn a_reagent_is_neutral() {
        assert_eq!(substance("Ca(OH)2").unwrap().charge(), 0);
        assert_eq!(substance("Na2SO3 <=> 2 Na^+ + SO3^2-").unwrap().key(), "Na2SO3(aq)");
        assert!(substance("Ca^2+").unwrap_err().contains("has charge 2"));
        assert!(substance("H2O").unwrap_err().contains("nothing but water"));
        assert!(Dose::read("dose", "NaOH", Value::Number(-1e-3)).unwrap_err().contains("is negative"));
    }
}
