//! The ledger: named reactions, ions that take part in none, and an activity model. A value: every change gives a new
//! one.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::{Arc, OnceLock};

use super::activity_choice::ActivityChoice;
use super::alternative::{self, Alternative};
use super::audit::{self, Audit, Cycle};
use super::combine::{Combined, combine_routes};
use super::composition::{Constituent, Sea};
use super::formation::{Formations, Leftover, in_bar, in_bar_at_sea};
use super::gas_model::GasModel;
use super::reconcile::{self, Reconciliation};
use crate::chem::{Constant, LogK, Reaction, ReactionError, Species};
use crate::nearest::nearest;
use crate::text::list;
use crate::units::Temperature;

/// A set of constants one can calculate with; cheap to clone.
#[derive(Clone)]
pub struct Ledger(Arc<Inner>);

#[derive(Clone, Default)]
struct Inner {
    name: String,
    edition: Option<String>,
    reactions: BTreeMap<String, Reaction>,
    /// Formation of species from the elements: evidence on the constants, by which no water is solved.
    formation_data: BTreeMap<String, Reaction>,
    /// Ions that take part in no reaction.
    solutes: BTreeSet<Species>,
    activity: ActivityChoice,
    gas_model: GasModel,
    /// Whether its constants are those of seawater: concentrations in mol/kg(solution).
    is_marine: bool,
    /// What goes with salinity, by name.
    composition: BTreeMap<String, Constituent>,
    /// The sea that its constants are evaluated in.
    sea: Option<Sea>,
    /// Worked out on first use; a clone made for a change starts without.
    formations: OnceLock<Formations>,
    /// How it was reconciled; a change of its constants forgets it.
    reconciliation: Option<Arc<Reconciliation>>,
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
    /// Coefficients that outgrow 64 bits when reactions are combined.
    #[error(
        "`{0}` cannot be combined with the others: its coefficients are too large, or have too many digits, to be \
         counted exactly"
    )]
    TooLarge(String),
    /// Constants that cannot be weighed.
    #[error(
        "no uncertainty is stated for {}, and what is not stated cannot be weighed; fill it in with \
         `.assume_sigma(0.05)`, or reconcile with `#{{ sigma: 0.05 }}`", list(.0)
    )]
    Unstated(Vec<String>),
    /// An uncertainty that is none.
    #[error("`sigma` is a standard uncertainty of log K and has to be above zero, not {0}")]
    Sigma(f64),
    /// A ledger of seawater, or none, where the other is needed.
    #[error("{0}")]
    Medium(String),
    /// No alternative of this description.
    #[error("no shipped alternative to `{name}` is by `{author}`: {}", known_alternatives(.known))]
    NoAlternative {
        /// The reaction.
        name: String,
        /// Who was asked for.
        author: String,
        /// Authors and years of what there is.
        known: Vec<String>,
    },
    /// A cycle nothing can close.
    #[error(
        "the cycle of {} cannot be closed: it misses by {misclosure:.4} in log K, more than the uncertainties of its \
         constants leave room for; take one out with `.without()`", list(.names)
    )]
    Immovable {
        /// The reactions of the cycle.
        names: Vec<String>,
        /// What is left of the misclosure.
        misclosure: f64,
    },
}

fn help(nearest: Option<&str>) -> String {
    nearest.map(|name| format!("; did you mean `{name}`?")).unwrap_or_default()
}

fn known_alternatives(known: &[String]) -> String {
    if known.is_empty() { "there is none".into() } else { format!("the alternatives are {}", list(known)) }
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

    /// Formation of species from the elements, in order of name. It bears on [`Ledger::derive`], [`Ledger::audit`] and
    /// [`Ledger::reconcile`]; waters are solved without, as it would set every oxidation state in equilibrium.
    pub fn formation_data(&self) -> impl Iterator<Item = (&str, &Reaction)> {
        self.0.formation_data.iter().map(|(name, reaction)| (name.as_str(), reaction))
    }

    /// Ions that are known though they take part in no reaction.
    pub fn solutes(&self) -> impl Iterator<Item = &Species> {
        self.0.solutes.iter()
    }

    /// The activity model.
    #[must_use]
    pub fn activity(&self) -> &ActivityChoice {
        &self.0.activity
    }

    /// One reaction, or formation of a species, by name.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unknown`] with the nearest name.
    pub fn reaction(&self, name: &str) -> Result<&Reaction, LedgerError> {
        let found = self.0.reactions.get(name).or_else(|| self.0.formation_data.get(name));
        let names = self.names().chain(self.0.formation_data.keys().map(String::as_str));
        found.ok_or_else(|| self.unknown("reaction", name, names))
    }

    /// The same with one more reaction.
    ///
    /// # Errors
    ///
    /// [`LedgerError::NameTaken`], or that the reaction has no constant.
    pub fn with_reaction(&self, name: &str, reaction: &Reaction) -> Result<Self, LedgerError> {
        self.check_free(name)?;
        let reaction = self.fitting(reaction)?;
        self.changed(|inner| Ok(inner.reactions.insert(name.into(), reaction)))
    }

    /// The same with the formation of one more species from the elements.
    ///
    /// # Errors
    ///
    /// [`LedgerError::NameTaken`], or that the reaction has no constant.
    pub fn with_formation(&self, name: &str, reaction: &Reaction) -> Result<Self, LedgerError> {
        self.check_free(name)?;
        self.changed(|inner| Ok(inner.formation_data.insert(name.into(), in_bar(reaction)?)))
    }

    /// The same with a reaction of this name exchanged.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unknown`] if there is none, or that the reaction has no constant.
    pub fn replace(&self, name: &str, reaction: &Reaction) -> Result<Self, LedgerError> {
        self.reaction(name)?;
        let reaction = self.fitting(reaction)?;
        self.changed(|inner| {
            let of_its_kind = match inner.formation_data.contains_key(name) {
                true => &mut inner.formation_data,
                false => &mut inner.reactions,
            };
            Ok(of_its_kind.insert(name.into(), reaction))
        })
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
            if inner.formation_data.remove(name).is_none() {
                inner.solutes.extend(ions.cloned());
                inner.reactions.remove(name);
            }
            Ok(())
        })
    }

    /// The reactions of both. Where a name is in both with different reactions, `prefer_other` says which to keep.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Clash`] if names clash and `prefer_other` is `None`.
    pub fn merge(&self, other: &Self, prefer_other: Option<bool>) -> Result<Self, LedgerError> {
        let clash = |(name, reaction): &(&str, &Reaction)| {
            self.reaction(name).is_ok_and(|own| !is_same(own, reaction))
        };
        let both = other.reactions().chain(other.formation_data());
        let clashes: Vec<String> = both.filter(clash).map(|(name, _)| name.to_string()).collect();
        if !clashes.is_empty() && prefer_other.is_none() {
            return Err(LedgerError::Clash(clashes));
        }
        if self.is_marine() != other.is_marine() && other.names().next().is_some() {
            let message = "one ledger holds for seawater and the other for zero ionic strength: their constants do not add";
            return Err(LedgerError::Medium(message.into()));
        }
        self.changed(|inner| {
            let take = |own: &mut BTreeMap<String, Reaction>, others: &BTreeMap<String, Reaction>| {
                for (name, reaction) in others {
                    if prefer_other == Some(true) || !own.contains_key(name) {
                        own.insert(name.clone(), reaction.clone());
                    }
                }
            };
            take(&mut inner.reactions, &other.0.reactions);
            take(&mut inner.formation_data, &other.0.formation_data);
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

    /// The same as an empty ledger of seawater would be: constants are concentrations in mol/kg(solution), as published.
    #[must_use]
    pub fn of_seawater(&self) -> Self {
        Self(Arc::new(Inner { is_marine: true, ..self.copy() }))
    }

    /// Whether its constants are those of seawater.
    #[must_use]
    pub fn is_marine(&self) -> bool {
        self.0.is_marine
    }

    /// The same evaluated in a sea: its constants at that salinity and pressure.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Medium`] for a ledger of other waters.
    pub fn in_sea(&self, sea: Sea) -> Result<Self, LedgerError> {
        if !self.is_marine() {
            return Err(LedgerError::Medium(format!(
                "the constants of the ledger `{}` hold for zero ionic strength, not for seawater: use `ledger(\"seawater\")`",
                self.name()
            )));
        }
        // The constants do not change, only where they are evaluated: what was worked out stays.
        Ok(Self(Arc::new(Inner { sea: Some(sea), ..(*self.0).clone() })))
    }

    /// The sea that its constants are evaluated in.
    #[must_use]
    pub fn sea(&self) -> Option<Sea> {
        self.0.sea.clone()
    }

    /// What goes with salinity, in order of name.
    pub fn composition(&self) -> impl Iterator<Item = &Constituent> {
        self.0.composition.values()
    }

    /// The same with a constituent that goes with salinity, in place of one of its name.
    #[must_use]
    pub fn with_constituent(&self, constituent: Constituent) -> Self {
        let mut inner = self.copy();
        inner.composition.insert(constituent.name.clone(), constituent);
        Self(Arc::new(inner))
    }

    /// The reaction as this ledger keeps it.
    pub(super) fn fitting(&self, reaction: &Reaction) -> Result<Reaction, ReactionError> {
        if self.is_marine() { in_bar_at_sea(reaction) } else { in_bar(reaction) }
    }

    /// How fugacity follows from partial pressure.
    #[must_use]
    pub fn gas_model(&self) -> GasModel {
        self.0.gas_model
    }

    /// The same with another gas model.
    #[must_use]
    pub fn with_gas_model(&self, gas_model: GasModel) -> Self {
        Self(Arc::new(Inner { gas_model, ..self.copy() }))
    }

    /// The same with another activity model.
    #[must_use]
    pub fn with_activity(&self, activity: ActivityChoice) -> Self {
        Self(Arc::new(Inner { activity, ..self.copy() }))
    }

    /// The same with other constants for its reactions, by routes already found: for random draws, which are too many to
    /// find routes anew. Where two routes lead to one constant a draw does not make them agree, and keeps the first.
    pub(crate) fn moved(&self, log_k: impl Fn(&str, &Reaction) -> Option<LogK>) -> Self {
        let mut formations = self.formations().clone();
        formations.leftovers.clear();
        let mut inner = self.copy();
        for (name, reaction) in &mut inner.reactions {
            if let (Some(log_k), Ok(constant)) = (log_k(name, reaction), reaction.constant()) {
                let constant = Constant { log_k, ..constant.clone() };
                *reaction = Reaction::of(reaction.equation().clone(), constant);
            }
        }
        inner.formations = OnceLock::from(formations);
        Self(Arc::new(inner))
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
            None => {
                // `CO2` is the solute: whoever asks for a gas means `CO2(g)`.
                let gas = format!("{name}(g)");
                match named.iter().find(|(own, _)| *own == gas) {
                    Some((own, _)) => Err(self.unknown("mineral or gas", name, [*own].into_iter())),
                    None => Err(self.unknown("mineral or gas", name, named.iter().map(|(name, _)| *name))),
                }
            }
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

    /// The constant of an equation as a sum over the ledger's reactions and formation data.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unreachable`] with the species no combination accounts for, or why the constants do not add.
    pub fn derive(&self, target: &str) -> Result<Reaction, LedgerError> {
        Ok(self.derive_routes(target)?.reaction)
    }

    /// As [`Ledger::derive`], with what is to be said where several routes lead to the equation.
    ///
    /// # Errors
    ///
    /// As [`Ledger::derive`].
    pub fn derive_routes(&self, target: &str) -> Result<Combined, LedgerError> {
        let all = self.reactions().chain(self.formation_data());
        combine_routes(target, &all.map(|(_, reaction)| reaction).collect::<Vec<_>>())
    }

    /// Shipped constants for the same reactions that it does not use, in order of name.
    #[must_use]
    pub fn alternatives(&self) -> Vec<Alternative> {
        alternative::alternatives(self)
    }

    /// The same with a shipped alternative in place of a reaction, named by author and year: `Rimstidt 1980`. Several
    /// reactions by one author go together, `K1 K2`; so does what goes with salinity, `total boron`.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unknown`] or [`LedgerError::NoAlternative`].
    pub fn choose(&self, name: &str, author: &str) -> Result<Self, LedgerError> {
        if self.0.composition.contains_key(name) {
            return Ok(self.with_constituent(alternative::find_constituent(name, author)?));
        }
        let several: Vec<&str> = name.split_whitespace().collect();
        if several.len() > 1 && self.reaction(name).is_err() {
            return several.into_iter().try_fold(self.clone(), |ledger, one| ledger.choose(one, author));
        }
        self.replace(name, &alternative::find(self, name, author)?)
    }

    /// Shipped ratios for what goes with salinity that it does not use, by name with author and year.
    #[must_use]
    pub fn constituent_alternatives(&self) -> Vec<(String, String)> {
        alternative::constituent_alternatives(self)
    }

    /// Author and year of each constant, and of each constituent of seawater, that has a shipped alternative.
    #[must_use]
    pub fn choices(&self) -> Vec<(String, String)> {
        alternative::choices(self)
    }

    /// Every independent cycle among its reactions and formation data, and how far each fails to close.
    ///
    /// # Errors
    ///
    /// [`LedgerError::TooLarge`].
    pub fn audit(&self, temperature: Temperature) -> Result<Audit, LedgerError> {
        audit::audit(self, temperature)
    }

    /// The cycle closed by a reaction that the others imply.
    #[must_use]
    pub fn cycle(&self, leftover: &Leftover, temperature: Temperature) -> Cycle {
        audit::cycle(self, leftover.reaction, &leftover.cycle, temperature)
    }

    /// The ledger whose constants move least so that every cycle closes at a temperature.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Unstated`] if a constant in a cycle states no uncertainty, [`LedgerError::Immovable`] if a cycle
    /// has none to close it with.
    pub fn reconcile(&self, temperature: Temperature) -> Result<Self, LedgerError> {
        Ok(reconcile::reconcile(self, temperature)?.0)
    }

    /// How it was reconciled, if it was and has not been changed since.
    #[must_use]
    pub fn reconciliation(&self) -> Option<&Reconciliation> {
        self.0.reconciliation.as_deref()
    }

    pub(super) fn with_reconciliation(&self, reconciliation: Arc<Reconciliation>) -> Self {
        Self(Arc::new(Inner { reconciliation: Some(reconciliation), ..self.copy() }))
    }

    /// The same with a standard uncertainty of log10 K wherever none was stated; said in the constants' histories.
    ///
    /// # Errors
    ///
    /// [`LedgerError::Sigma`] unless `sigma` is above zero.
    pub fn assume_sigma(&self, sigma: f64) -> Result<Self, LedgerError> {
        if !(sigma.is_finite() && sigma > 0.0) {
            return Err(LedgerError::Sigma(sigma));
        }
        self.changed(|inner| {
            for reaction in inner.reactions.values_mut().chain(inner.formation_data.values_mut()) {
                *reaction = reconcile::assume_sigma(reaction, sigma)?;
            }
            Ok(())
        })
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
        let mut text = format!("{:?} {:?} {:?}", constants.collect::<Vec<_>>(), solutes, self.0.activity);
        // What is as ever leaves the fingerprint as it was.
        if self.gas_model() != GasModel::default() {
            text.push_str(self.gas_model().name());
        }
        for (name, reaction) in self.formation_data() {
            text.push_str(&format!(
                "{name:?} {reaction:?}",
                reaction = reaction.constant().ok().map(|c| &c.log_k)
            ));
        }
        for constituent in self.composition() {
            text.push_str(&format!("{} {:?}", constituent.name, constituent.per_salinity));
        }
        if self.is_marine() {
            let volumes = self.reactions().filter_map(|(_, r)| r.constant().ok()).map(|c| &c.volume);
            text.push_str(&format!("{:?}", volumes.collect::<Vec<_>>()));
        }
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

    fn check_free(&self, name: &str) -> Result<(), LedgerError> {
        match self.reaction(name) {
            Ok(_) => Err(LedgerError::NameTaken(name.into())),
            Err(_) => Ok(()),
        }
    }

    fn changed<T>(
        &self,
        change: impl FnOnce(&mut Inner) -> Result<T, LedgerError>,
    ) -> Result<Self, LedgerError> {
        let mut inner = Inner { reconciliation: None, ..self.copy() };
        change(&mut inner)?;
        Ok(Self(Arc::new(inner)))
    }

    fn copy(&self) -> Inner {
        Inner { formations: OnceLock::new(), ..(*self.0).clone() }
    }
}

impl std::fmt::Debug for Ledger {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "Ledger {} of {} reactions", self.0.name, self.0.reactions.len())
    }
}
/// Whether two reactions have the same constant: equation, function and uncertainty. Words about where it comes from may
/// differ, as they do where a ledger was written to a file and read again.
fn is_same(a: &Reaction, b: &Reaction) -> bool {
    let log_k =
        |reaction: &Reaction| reaction.constant().ok().map(|constant| format!("{:?}", constant.log_k));
    let sigma = |reaction: &Reaction| reaction.log_k().ok().and_then(|log_k| log_k.sigma());
    let same_sigma = match (sigma(a), sigma(b)) {
        (Some(a), Some(b)) => (a - b).abs() <= 1e-9 * a.abs().max(b.abs()),
        (a, b) => a.is_none() == b.is_none(),
    };
    a == b || (a.equation() == b.equation() && log_k(a) == log_k(b) && same_sigma)
}
