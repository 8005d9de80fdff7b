//! `Ledger` in scripts: shipped sets of constants and changes to them.

use rhai::plugin::*;
use rhai::{Array, Dynamic, Map};

use super::named::named;
use super::show::Style;
use super::{Fail, ScriptResult, Vocabulary, fail};
use crate::chem::{Element, Reaction, Species, rational};
use crate::equilibrium::acid_base::{ALKALINITY_PH, ZeroLevel};
use crate::ledger::shipped::{self, ShippedError};
use crate::ledger::{ActivityChoice, Ledger};
use crate::nearest::nearest;
use crate::present::{Cell, Column, Table};
use crate::text::count;
use crate::units::Temperature;

/// Registers the type.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(ledger_functions))
        .pure(&["ledger", "with_reaction", "replace", "without", "merge", "with_activity_model", "derive"])
        .pure(&["species_of", "find", "phases", "gases", "sources", "alkalinity_table", "table"])
        .quoted(words)
        .native::<Ledger>("Ledger", show);
}

/// Species and phases of the shipped ledgers, for completion inside quotes.
fn words() -> Vec<String> {
    let mut words: Vec<String> = Vec::new();
    for ledger in shipped::names().iter().filter_map(|name| shipped::ledger(name, None).ok()) {
        words.push(ledger.name().to_string());
        words.extend(ledger.species().map(|species| species.key().to_string()));
        words.extend(ledger.names().map(str::to_string));
    }
    words.sort();
    words.dedup();
    words
}

fn show(ledger: &Ledger, _: &Style) -> String {
    let edition = ledger.edition().map(|edition| format!(", edition {edition}")).unwrap_or_default();
    let solids = ledger.species().filter(|species| species.is_solid()).count();
    let solutes = ledger.species().filter(|species| species.is_solute()).count();
    format!(
        "ledger {}{edition}: {}, {}, {}, {} activities, digest {}",
        ledger.name(),
        count(ledger.names().count(), "reaction"),
        count(solutes, "solute"),
        count(solids, "solid"),
        activity_name(ledger.activity()),
        ledger.digest()
    )
}

fn activity_name(choice: ActivityChoice) -> &'static str {
    match choice {
        ActivityChoice::Ideal => "ideal",
        ActivityChoice::Davies { .. } => "Davies",
    }
}

impl From<ShippedError> for Fail {
    fn from(error: ShippedError) -> Self {
        fail(error.to_string()).argument(0)
    }
}

/// Reactions as a table: name, equation, log K at 25 degC, sigma, enthalpy, range, provenance, source.
fn reaction_table<'a>(reactions: impl Iterator<Item = (&'a str, &'a Reaction)>) -> Result<Table, Fail> {
    let rows: Vec<(&str, &Reaction)> = reactions.collect();
    let constants: Vec<_> = rows.iter().filter_map(|(_, reaction)| reaction.constant().ok()).collect();
    let log_k =
        constants.iter().map(|constant| Cell::number(constant.log_k.nearest_to(Temperature::REFERENCE).0));
    let sigma = rows.iter().map(|(_, reaction)| {
        reaction.log_k().ok().and_then(|log_k| log_k.sigma()).map_or_else(Cell::missing, Cell::number)
    });
    let enthalpy = constants.iter().map(|constant| {
        constant.log_k.enthalpy(Temperature::REFERENCE).map_or_else(Cell::missing, Cell::number)
    });
    let range = constants.iter().map(|constant| match (constant.log_k.range(), constant.log_k.only_at()) {
        (Some(range), _) => format!("{:.0} to {:.0}", range.lowest.celsius(), range.highest.celsius()),
        (None, Some(at)) => format!("{:.0} only", at.celsius()),
        (None, None) => String::new(),
    });
    let origin = |text: &dyn Fn(&crate::chem::Origin) -> String| -> Vec<String> {
        constants
            .iter()
            .map(|constant| constant.history.uses().first().map_or_else(String::new, |(o, _)| text(o)))
            .collect()
    };
    let texts = |title: &str, texts: &[String]| Column::texts(title, texts.iter().map(String::as_str));
    let equations: Vec<String> = rows.iter().map(|(_, reaction)| reaction.equation().to_string()).collect();
    Table::new([
        Column::chemistry("name", rows.iter().map(|(name, _)| *name)),
        Column::chemistry("reaction", equations.iter().map(String::as_str)),
        Column::new("log K", log_k.collect::<Vec<_>>()),
        Column::new("sigma", sigma.collect::<Vec<_>>()),
        Column::new("enthalpy [kJ/mol]", enthalpy.collect::<Vec<_>>()),
        texts("range [degC]", &range.collect::<Vec<_>>()),
        texts("provenance", &origin(&|origin| origin.provenance.to_string())),
        texts("source", &origin(&|origin| origin.source.as_deref().map_or_else(String::new, short_citation))),
    ])
    .map_err(|error| fail(error.to_string()))
}

/// Authors and year of a citation: what stands before the closing bracket of the year.
fn short_citation(citation: &str) -> String {
    citation.split_once(')').map_or(citation, |(start, _)| start).replace(" (", " ")
}

/// The publications a ledger's constants come from, with how many each gave.
pub(super) fn sources_table(ledger: &Ledger) -> Result<Table, Fail> {
    let mut sources: Vec<(String, f64)> = Vec::new();
    for (_, reaction) in ledger.reactions() {
        for (origin, _) in reaction.constant()?.history.uses() {
            let source = origin.source.clone().unwrap_or_else(|| "no source given".into());
            match sources.iter_mut().find(|(known, _)| *known == source) {
                Some((_, number)) => *number += 1.0,
                None => sources.push((source, 1.0)),
            }
        }
    }
    Table::new([
        Column::numbers("constants", sources.iter().map(|(_, number)| *number)),
        Column::texts("source", sources.iter().map(|(source, _)| source.as_str())),
    ])
    .map_err(|error| fail(error.to_string()))
}

fn texts<'a>(names: impl Iterator<Item = &'a str>) -> Array {
    names.map(|name| name.to_string().into()).collect()
}

/// Ledgers of constants.
#[export_module]
mod ledger_functions {
    use super::*;

    /// An empty ledger.
    ///
    /// ```rhai
    /// ledger().with_reaction("Kw", reaction("H2O <=> H^+ + OH^-", -14.0)).names()   // ["Kw"]
    /// ```
    #[rhai_fn(name = "ledger")]
    pub fn empty() -> Ledger {
        Ledger::default()
    }

    /// A shipped ledger: `"freshwater"`. Results depend on the constants chosen; `.table()` shows them with their sources.
    ///
    /// ```rhai
    /// ledger("freshwater").reaction("calcite").equation   // "CaCO3(calcite) <=> Ca^2+ + CO3^2-"
    /// ```
    #[rhai_fn(name = "ledger", return_raw)]
    pub fn by_name(name: &str) -> ScriptResult<Ledger> {
        Ok(shipped::ledger(name, None).map_err(Fail::from)?)
    }

    /// A shipped ledger of a dated edition: `#{ edition: "2026-12" }`.
    ///
    /// ```rhai
    /// ledger("freshwater", #{ edition: "2026-12" }).edition   // "2026-12"
    /// ```
    #[rhai_fn(name = "ledger", return_raw)]
    pub fn by_edition(name: &str, options: Map) -> ScriptResult<Ledger> {
        let mut options = named(&options)?;
        let edition = options.text("edition").map_err(Fail::from)?;
        options.finish().map_err(Fail::from)?;
        Ok(shipped::ledger(name, edition.as_deref()).map_err(Fail::from)?)
    }

    /// What the ledger is called.
    #[rhai_fn(name = "name", get = "name", pure)]
    pub fn name(ledger: &mut Ledger) -> String {
        ledger.name().into()
    }
    /// The dated edition of a shipped ledger, or `()`.
    #[rhai_fn(name = "edition", get = "edition", pure)]
    pub fn edition(ledger: &mut Ledger) -> Dynamic {
        ledger.edition().map_or(Dynamic::UNIT, |edition| edition.to_string().into())
    }
    /// A fingerprint of its numbers: the same for the same constants.
    #[rhai_fn(name = "digest", get = "digest", pure)]
    pub fn digest(ledger: &mut Ledger) -> String {
        ledger.digest()
    }
    /// Names of its reactions.
    #[rhai_fn(name = "names", get = "names", pure)]
    pub fn names(ledger: &mut Ledger) -> Array {
        texts(ledger.names())
    }

    /// One reaction by name.
    ///
    /// ```rhai
    /// ledger("freshwater").reaction("K1").log_k.sigma   // 0.02
    /// ```
    #[rhai_fn(name = "reaction", pure, return_raw)]
    pub fn reaction_of(ledger: &mut Ledger, name: &str) -> ScriptResult<Reaction> {
        Ok(ledger.reaction(name).cloned().map_err(|error| Fail::from(error).argument(0))?)
    }

    /// A new ledger with one more reaction; a name that is taken is an error.
    ///
    /// ```rhai
    /// let book = ledger("freshwater").with_reaction("PbCO3(aq)", reaction("Pb^2+ + CO3^2- <=> PbCO3(aq)", 7.0));
    /// book.species_of("Pb").len()   // 2
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn with_reaction(ledger: &mut Ledger, name: &str, reaction: Reaction) -> ScriptResult<Ledger> {
        Ok(ledger.with_reaction(name, &reaction).map_err(Fail::from)?)
    }
    /// A new ledger with the reaction of this name exchanged.
    #[rhai_fn(pure, return_raw)]
    pub fn replace(ledger: &mut Ledger, name: &str, reaction: Reaction) -> ScriptResult<Ledger> {
        Ok(ledger.replace(name, &reaction).map_err(Fail::from)?)
    }
    /// A new ledger without a reaction.
    #[rhai_fn(name = "without", pure, return_raw)]
    pub fn without_reaction(ledger: &mut Ledger, name: &str) -> ScriptResult<Ledger> {
        Ok(ledger.without(name).map_err(|error| Fail::from(error).argument(0))?)
    }
    /// A new ledger with the reactions of both; names in both must agree.
    #[rhai_fn(name = "merge", pure, return_raw)]
    pub fn merge(ledger: &mut Ledger, other: Ledger) -> ScriptResult<Ledger> {
        Ok(ledger.merge(&other, None).map_err(Fail::from)?)
    }
    /// A new ledger with the reactions of both; `#{ prefer: "own" }` or `"other"` says which to keep of two of one name.
    #[rhai_fn(name = "merge", pure, return_raw)]
    pub fn merge_with(ledger: &mut Ledger, other: Ledger, options: Map) -> ScriptResult<Ledger> {
        let mut options = named(&options)?;
        let prefer = options.text("prefer").map_err(Fail::from)?;
        options.finish().map_err(Fail::from)?;
        let prefer = match prefer.as_deref() {
            None => None,
            Some("own") => Some(false),
            Some("other") => Some(true),
            Some(word) => {
                return fail(format!("`prefer` is `own` or `other`, not `{word}`")).key("prefer").raise();
            }
        };
        Ok(ledger.merge(&other, prefer).map_err(Fail::from)?)
    }

    /// A new ledger computed with another activity model: `"ideal"` or `"davies"`.
    ///
    /// ```rhai
    /// let ideal = ledger("freshwater").with_activity_model("ideal");
    /// sample(#{ pH: 7, Na: 0.001, Cl: 0.001 }).equilibrate(ideal).gamma("Na^+").value   // 1
    /// ```
    #[rhai_fn(name = "with_activity_model", pure, return_raw)]
    pub fn with_activity_model(ledger: &mut Ledger, name: &str) -> ScriptResult<Ledger> {
        with_activity_options(ledger, name, Map::new())
    }
    /// The same with options: for `"davies"` the Debye-Hueckel `A` (log10, kg^0.5 mol^-0.5) at every temperature, `b`
    /// (0.3), and `water_activity` where that of the model is not wanted.
    #[rhai_fn(name = "with_activity_model", pure, return_raw)]
    pub fn with_activity_options(ledger: &mut Ledger, name: &str, options: Map) -> ScriptResult<Ledger> {
        let choice = ActivityChoice::read(name, named(&options)?).map_err(|fault| {
            if fault.key == "activity_model" { fail(fault.message).argument(0) } else { Fail::from(fault) }
        })?;
        Ok(ledger.with_activity(choice))
    }

    /// The constant of an equation as a sum over the ledger's reactions.
    ///
    /// ```rhai
    /// let k = ledger("freshwater").derive("CaCO3(calcite) + CO2(g) + H2O <=> Ca^2+ + 2 HCO3^-");
    /// fmt(k.log_k.value, ".2f")   // "-5.98"
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn derive(ledger: &mut Ledger, equation: &str) -> ScriptResult<Reaction> {
        Ok(ledger.derive(equation).map_err(Fail::from)?)
    }

    /// Species that hold an element, as texts.
    #[rhai_fn(pure, return_raw)]
    pub fn species_of(ledger: &mut Ledger, element: &str) -> ScriptResult<Array> {
        let Some(element) = Element::from_symbol(element) else {
            let help = nearest(element, Element::symbols().iter().copied())
                .map(|near| format!("did you mean `{near}`?"));
            return fail(format!("`{element}` is no element")).maybe_help(help).argument(0).raise();
        };
        Ok(texts(ledger.species().filter(|species| species.count(element) != 0.into()).map(Species::key)))
    }

    /// Names of reactions, species and sources that contain a text, as a table of the reactions concerned.
    ///
    /// ```rhai
    /// ledger("freshwater").find("gypsum").len   // 1
    /// ```
    #[rhai_fn(name = "find", pure, return_raw)]
    pub fn find_in_ledger(ledger: &mut Ledger, text: &str) -> ScriptResult<Table> {
        let wanted = text.to_lowercase();
        let concerns = |(name, reaction): &(&str, &Reaction)| {
            let sources = reaction.constant().map(|constant| &constant.history);
            let cited = sources.is_ok_and(|history| {
                history.uses().iter().any(|(origin, _)| {
                    origin.source.as_deref().unwrap_or("").to_lowercase().contains(&wanted)
                })
            });
            name.to_lowercase().contains(&wanted)
                || reaction.to_string().to_lowercase().contains(&wanted)
                || cited
        };
        Ok(reaction_table(ledger.reactions().filter(concerns))?)
    }

    /// Names of its minerals.
    #[rhai_fn(name = "phases", get = "phases", pure)]
    pub fn ledger_phases(ledger: &mut Ledger) -> Array {
        texts(
            ledger
                .phases_by_name()
                .into_iter()
                .filter(|(_, species)| species.is_solid())
                .map(|(name, _)| name),
        )
    }
    /// Names of its gases.
    #[rhai_fn(name = "gases", get = "gases", pure)]
    pub fn ledger_gases(ledger: &mut Ledger) -> Array {
        texts(
            ledger.phases_by_name().into_iter().filter(|(_, species)| species.is_gas()).map(|(name, _)| name),
        )
    }
    /// Its reactions with log K at 25 degC, uncertainty, enthalpy, range, provenance and source.
    #[rhai_fn(name = "table", get = "table", pure, return_raw)]
    pub fn ledger_table(ledger: &mut Ledger) -> ScriptResult<Table> {
        Ok(reaction_table(ledger.reactions())?)
    }
    /// The publications its constants come from, with how many each gave.
    #[rhai_fn(name = "sources", get = "sources", pure, return_raw)]
    pub fn ledger_sources(ledger: &mut Ledger) -> ScriptResult<Table> {
        Ok(sources_table(ledger)?)
    }
    /// Equivalents of alkalinity in a mole of each solute, counted from the species dominant at pH 4.5 (Dickson 1981).
    #[rhai_fn(name = "alkalinity_table", get = "alkalinity_table", pure, return_raw)]
    pub fn alkalinity_table(ledger: &mut Ledger) -> ScriptResult<Table> {
        let level = ZeroLevel::at(ledger, ALKALINITY_PH);
        let solutes: Vec<_> =
            ledger.formations().species.iter().filter(|formed| formed.species.is_solute()).collect();
        let weights = solutes.iter().map(|formed| rational::to_f64(level.weight(formed)));
        let table = Table::new([
            Column::chemistry("species", solutes.iter().map(|formed| formed.species.key())),
            Column::numbers("alkalinity [eq/mol]", weights),
        ]);
        Ok(table.map_err(|error| fail(error.to_string()))?)
    }
}
