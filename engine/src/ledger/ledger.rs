//! The ledger: named reactions, ions that take part in none, and an activity model. A value: every change gives a new
//! one.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::{Arc, OnceLock};

use super::elimination::{Combination, Echelon, Sparse};
use super::formation::{Formations, in_bar};
use crate::chem::{Equation, Reaction, ReactionError, Species};
use crate::named::{KeyFault, Named};
use crate::nearest::nearest;
use crate::text::list;

/// A set of constants one can calculate with; cheap to clone.
#[derive(Clone)]
pub struct Ledger(Arc<Inner>);

#[derive(Clone, Default)]
struct Inner {
    name: String,
    edition: Option<String>,
    reactions: BTreeMap<String, Reaction>,
    /// Ions that take part in no reaction.
    solutes: BTreeSet<Species>,
    activity: ActivityChoice,
    /// Worked out on first use; a clone made for a change starts without.
    formations: OnceLock<Formations>,
}

/// Which activity model a ledger asks for; its coefficients at a temperature are the activity room's business.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum ActivityChoice {
    /// γ = 1.
    Ideal,
    /// Davies (1962).
    Davies {
        /// The Debye-Hückel A (log10 basis, kg½ mol-½) used at every temperature; `None`: from the properties of water.
        a: Option<f64>,
        /// The coefficient of the linear term, 0.3.
        b: f64,
        /// The activity of water used throughout; `None`: from the same model.
        water: Option<f64>,
    },
}

/// Why a ledger cannot be changed or asked.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum LedgerError {
    /// A name that is taken.
    #[error("the ledger has a reaction `{0}` already: use `.replace(\"{0}\", …)`, or another name")]
    NameTaken(String),
    /// A name that is not there.
    #[error("the ledger has no {what} `{name}`{}", help(.nearest.as_deref()))]
    Unknown {
        /// `reaction`, `species`, `mineral or gas`.
        what: &'static str,
        /// The name asked for.
        name: String,
        /// The nearest name there is.
        nearest: Option<String>,
    },
    /// Clashes of a merger.
    #[error("both ledgers have {}: say which to keep with `.merge(other, #{{ prefer: \"other\" }})` (or \"own\")", list(.0))]
    Clash(Vec<String>),
    /// A reaction at fault.
    #[error(transparent)]
    Reaction(#[from] ReactionError),
    /// A target no combination reaches.
    #[error("`{target}` cannot be reached: no combination of the constants accounts for {}", list(.left_over))]
    Unreachable {
        /// The equation asked for.
        target: String,
        /// The species that are left over.
        left_over: Vec<String>,
    },
}

fn help(nearest: Option<&str>) -> String {
    nearest.map(|name| format!("; did you mean `{name}`?")).unwrap_or_default()
}

impl Default for ActivityChoice {
    fn default() -> Self {
        Self::Davies { a: None, b: 0.3, water: None }
    }
}

impl Default for Ledger {
    fn default() -> Self {
        Self::empty("ledger", None)
    }
}

impl Ledger {
    /// A ledger without reactions.
    #[must_use]
    pub fn empty(name: &str, edition: Option<String>) -> Self {
        Self(Arc::new(Inner { name: name.into(), edition, ..Inner::default() }))
    }

    /// What the ledger is called.
    #[must_use]
    pub fn name(&self) -> &str {
        &self.0.name
    }

    /// The dated edition of a shipped ledger.
    #[must_use]
    pub fn edition(&self) -> Option<&str> {
        self.0.edition.as_deref()
    }

    /// Names of its reactions, in alphabetical order.
    pub fn names(&self) -> impl Iterator<Item = &str> {
        self.0.reactions.keys().map(String::as_str)
    }

    /// Its reactions in order of name, gases counted from 1 bar.
    pub fn reactions(&self) -> impl Iterator<Item = (&str, &Reaction)> {
        self.0.reactions.iter().map(|(name, reaction)| (name.as_str(), reaction))
    }

    /// The activity model.
    #[must_use]
    pub fn activity(&self) -> ActivityChoice {
        self.0.activity
    }

    /// One reaction by name.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unknown`] with the nearest name.
    pub fn reaction(&self, name: &str) -> Result<&Reaction, LedgerError> {
        self.0.reactions.get(name).ok_or_else(|| self.unknown("reaction", name, self.names()))
    }

    /// The same with one more reaction.
    ///
    /// # Errors
    ///
    /// [`LedgerError::NameTaken`], or that the reaction has no constant.
    pub fn with_reaction(&self, name: &str, reaction: &Reaction) -> Result<Self, LedgerError> {
        if self.0.reactions.contains_key(name) {
            return Err(LedgerError::NameTaken(name.into()));
        }
        self.changed(|inner| Ok(inner.reactions.insert(name.into(), in_bar(reaction)?)))
    }

    /// The same with a reaction of this name exchanged.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unknown`] if there is none, or that the reaction has no constant.
    pub fn replace(&self, name: &str, reaction: &Reaction) -> Result<Self, LedgerError> {
        self.reaction(name)?;
        self.changed(|inner| Ok(inner.reactions.insert(name.into(), in_bar(reaction)?)))
    }

    /// The same without a reaction. An ion that others are formed from stays known, even where this was the only
    /// reaction it took part in: without halite there is still chloride.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unknown`] if there is none.
    pub fn without(&self, name: &str) -> Result<Self, LedgerError> {
        let terms = self.reaction(name)?.equation().terms();
        let components = &self.formations().components;
        let ions = terms
            .iter()
            .map(|(species, _)| species)
            .filter(|species| species.is_solute() && components.contains(species));
        self.changed(|inner| {
            inner.solutes.extend(ions.cloned());
            Ok(inner.reactions.remove(name))
        })
    }

    /// The reactions of both. Where a name is in both with different reactions, `prefer_other` says which to keep.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Clash`] if names clash and `prefer_other` is `None`.
    pub fn merge(&self, other: &Self, prefer_other: Option<bool>) -> Result<Self, LedgerError> {
        let clash = |(name, reaction): &(&str, &Reaction)| {
            self.0.reactions.get(*name).is_some_and(|own| own != *reaction)
        };
        let clashes: Vec<String> =
            other.reactions().filter(clash).map(|(name, _)| name.to_string()).collect();
        if !clashes.is_empty() && prefer_other.is_none() {
            return Err(LedgerError::Clash(clashes));
        }
        self.changed(|inner| {
            for (name, reaction) in other.reactions() {
                if prefer_other == Some(true) || !inner.reactions.contains_key(name) {
                    inner.reactions.insert(name.into(), reaction.clone());
                }
            }
            inner.solutes.extend(other.0.solutes.iter().cloned());
            Ok(())
        })
    }

    /// The same knowing an ion that takes part in no reaction.
    #[must_use]
    pub fn with_solute(&self, species: Species) -> Self {
        let mut inner = self.copy();
        inner.solutes.insert(species);
        Self(Arc::new(inner))
    }

    /// The same with another activity model.
    #[must_use]
    pub fn with_activity(&self, activity: ActivityChoice) -> Self {
        Self(Arc::new(Inner { activity, ..self.copy() }))
    }

    /// Formation of every species from components the engine picks; worked out once.
    #[must_use]
    pub fn formations(&self) -> &Formations {
        self.0
            .formations
            .get_or_init(|| Formations::of(&self.reactions().collect::<Vec<_>>(), &self.0.solutes))
    }

    /// Every species it knows: solutes, then water, gases and solids.
    pub fn species(&self) -> impl Iterator<Item = &Species> {
        self.formations().species.iter().map(|formed| &formed.species)
    }

    /// A species by its formula, or a mineral by its name alone.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unknown`] with the nearest species or mineral.
    pub fn find_species(&self, name: &str) -> Result<&Species, LedgerError> {
        let parsed = Species::parse(name).ok();
        let found = self.species().find(|species| Some(*species) == parsed.as_ref());
        let found = found.or_else(|| self.find_phase(name).ok());
        found.ok_or_else(|| self.unknown("species", name, self.species().map(Species::key)))
    }

    /// A mineral or gas by the name of its reaction, its formula, or the mineral name alone.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unknown`] with the nearest mineral or gas.
    pub fn find_phase(&self, name: &str) -> Result<&Species, LedgerError> {
        let parsed = Species::parse(name).ok();
        let named = self.phases_by_name();
        let found = named.iter().find(|(own, species)| {
            *own == name || Some(*species) == parsed.as_ref() || species.mineral_name() == Some(name)
        });
        match found {
            Some((_, species)) => Ok(species),
            None => Err(self.unknown("mineral or gas", name, named.iter().map(|(name, _)| *name))),
        }
    }

    /// Minerals and gases with the names they go by: that of the reaction that makes them known, else the formula.
    #[must_use]
    pub fn phases_by_name(&self) -> Vec<(&str, &Species)> {
        let phases = self.species().filter(|species| species.is_gas() || species.is_solid());
        phases.map(|species| (self.phase_name(species), species)).collect()
    }

    /// The name a mineral or gas goes by.
    #[must_use]
    pub fn phase_name<'a>(&'a self, species: &'a Species) -> &'a str {
        let own = |reaction: &Reaction| {
            let mut phases = reaction.equation().terms().iter().filter(|(s, _)| s.is_gas() || s.is_solid());
            phases.next().is_some_and(|(s, _)| s == species) && phases.next().is_none()
        };
        let named = species.mineral_name().unwrap_or(species.key());
        if self.0.reactions.get(named).is_some_and(own) {
            return named;
        }
        self.reactions().find(|(_, reaction)| own(reaction)).map_or(named, |(name, _)| name)
    }

    /// The constant of an equation as a sum over the ledger's reactions.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unreachable`] with the species no combination accounts for, or why the constants do not add.
    pub fn derive(&self, target: &str) -> Result<Reaction, LedgerError> {
        let reactions: Vec<&Reaction> = self.reactions().map(|(_, reaction)| reaction).collect();
        combine(target, &reactions)
    }

    /// A short digest of names, equations and constants: the same for the same numbers, however they were put together.
    #[must_use]
    pub fn digest(&self) -> String {
        // FNV-1a (Fowler, Noll & Vo), 64 bits: a fingerprint for telling ledgers apart, not a signature.
        let constants =
            self.reactions().map(|(name, r)| (name, r.equation(), r.constant().ok().map(|c| &c.log_k)));
        let reacts =
            |ion: &&Species| self.reactions().any(|(_, r)| r.equation().coefficient(ion) != 0.into());
        let solutes: Vec<&Species> = self.0.solutes.iter().filter(|ion| !reacts(ion)).collect();
        let text = format!("{:?} {:?} {:?}", constants.collect::<Vec<_>>(), solutes, self.0.activity);
        let fold = |hash: u64, byte: u8| (hash ^ u64::from(byte)).wrapping_mul(0x0100_0000_01b3);
        format!("{:016x}", text.bytes().fold(0xcbf2_9ce4_8422_2325, fold))
    }

    fn unknown<'a>(
        &self,
        what: &'static str,
        name: &str,
        candidates: impl Iterator<Item = &'a str>,
    ) -> LedgerError {
        LedgerError::Unknown {
            what,
            name: name.into(),
            nearest: nearest(name, candidates).map(str::to_string),
        }
    }

    fn changed<T>(
        &self,
        change: impl FnOnce(&mut Inner) -> Result<T, LedgerError>,
    ) -> Result<Self, LedgerError> {
        let mut inner = self.copy();
        change(&mut inner)?;
        Ok(Self(Arc::new(inner)))
    }

    fn copy(&self) -> Inner {
        Inner { formations: OnceLock::new(), ..(*self.0).clone() }
    }
}

/// The constant of an equation as a sum of reactions, with exact multiples.
///
/// Where several combinations reach it, the one over the reactions that come first is taken.
///
/// # Errors
///
/// [`LedgerError::Unreachable`] with the species no combination accounts for, or why the constants do not add.
pub fn combine(target: &str, reactions: &[&Reaction]) -> Result<Reaction, LedgerError> {
    let target = Equation::parse(target).map_err(ReactionError::from)?;
    let mut species: Vec<&Species> = Vec::new();
    for equation in reactions.iter().map(|reaction| reaction.equation()).chain([&target]) {
        for (formula, _) in equation.terms() {
            if !species.contains(&formula) {
                species.push(formula);
            }
        }
    }
    let row = |equation: &Equation| -> Sparse {
        let column =
            |formula: &Species| species.iter().position(|known| *known == formula).expect("listed above");
        equation.terms().iter().map(|(formula, coefficient)| (column(formula), *coefficient)).collect()
    };
    let mut echelon = Echelon::default();
    for (index, reaction) in reactions.iter().enumerate() {
        echelon.add(index, row(reaction.equation()));
    }
    let mut wanted = Combination { row: row(&target), ..Combination::default() };
    echelon.reduce(&mut wanted);
    if !wanted.row.is_empty() {
        let left_over = wanted.row.keys().map(|column| species[*column].key().to_string()).collect();
        return Err(LedgerError::Unreachable { target: target.to_string(), left_over });
    }
    let mut sum: Option<Reaction> = None;
    for (index, multiple) in wanted.multiples {
        let term = reactions[index].times(-multiple)?;
        sum = Some(match sum {
            None => term,
            Some(sum) => sum.plus(&term)?,
        });
    }
    let sum =
        sum.ok_or_else(|| LedgerError::Unreachable { target: target.to_string(), left_over: vec![] })?;
    // The sum has the target's species; write them in the target's order.
    Ok(Reaction::of(target, sum.constant()?.clone()))
}

impl ActivityChoice {
    /// The models by name.
    pub const NAMES: [&str; 2] = ["ideal", "davies"];

    /// A model by name with its options: `A`, `b` and `water_activity` for `davies`.
    ///
    /// # Errors
    ///
    /// A fault of the name, under the key `activity_model`, or of an option.
    pub fn read(name: &str, mut options: Named) -> Result<Self, KeyFault> {
        let choice = match name {
            "ideal" => Self::Ideal,
            "davies" => {
                let a = positive(&mut options, "A")?;
                let b = options.number("b")?.unwrap_or(0.3);
                let water = positive(&mut options, "water_activity")?;
                Self::Davies { a, b, water }
            }
            other => {
                let message = format!("no activity model `{other}`: there are {}", list(&Self::NAMES));
                return Err(KeyFault::new("activity_model", message));
            }
        };
        options.finish()?;
        Ok(choice)
    }
}

fn positive(options: &mut Named, key: &str) -> Result<Option<f64>, KeyFault> {
    match options.number(key)? {
        Some(number) if number <= 0.0 => {
            Err(KeyFault::new(key, format!("`{key}` must be above zero, not {number}")))
        }
        number => Ok(number),
    }
}

impl std::fmt::Debug for Ledger {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "Ledger {} of {} reactions", self.0.name, self.0.reactions.len())
    }
}
