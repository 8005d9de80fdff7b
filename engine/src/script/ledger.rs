//! `Ledger` in scripts: shipped sets of constants and changes to them.

use rhai::plugin::*;
use rhai::{Array, Dynamic, Map};

use super::named::named;
use super::reaction::{temperature, told};
use super::show::Style;
use super::{Fail, Host, ScriptResult, Vocabulary, fail};
use crate::chem::{Element, Reaction, Species, rational};
use crate::equilibrium::acid_base::{ALKALINITY_PH, ZeroLevel};
use crate::ledger::file::{self, FileFault};
use crate::ledger::shipped::{self, ShippedError};
use crate::ledger::{
    ActivityChoice, Alternative, Audit, Cycle, GasModel, Ledger, Reconciliation, save as ledger_text,
};
use crate::nearest::nearest;
use crate::present::{Cell, Column, Table};
use crate::text::count;
use crate::units::Temperature;

/// Registers the type.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(ledger_functions))
        .pure(&["ledger", "with_reaction", "replace", "without", "merge", "with_activity_model", "derive"])
        .pure(&["with_gas_model"])
        .pure(&["audit", "reconcile", "moved", "reconciliation", "assume_sigma", "alternatives", "choose"])
        .pure(&["load_ledger"])
        .pure(&["species_of", "find", "phases", "gases", "sources", "alkalinity_table", "table"])
        .quoted(words)
        .native::<Ledger>("Ledger", show);
}

/// Species and phases of the shipped ledgers, for completion inside quotes.
fn words() -> Vec<String> {
    let mut words: Vec<String> = Vec::new();
    for ledger in shipped::names().iter().filter_map(|name| shipped::as_shipped(name).ok()) {
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
    let formation_data = match ledger.formation_data().count() {
        0 => String::new(),
        number => format!("formation data of {number} species, "),
    };
    let reconciled = ledger.reconciliation().map_or_else(String::new, |r| format!(", {}", reconciled(r)));
    format!(
        "ledger {}{edition}: {}, {}, {}, {formation_data}{} activities, digest {}{reconciled}",
        ledger.name(),
        count(ledger.names().count(), "reaction"),
        count(solutes, "solute"),
        count(solids, "solid"),
        activity_name(ledger.activity()),
        ledger.digest()
    )
}

fn activity_name(choice: &ActivityChoice) -> &'static str {
    match choice {
        ActivityChoice::Ideal => "ideal",
        ActivityChoice::Davies { .. } => "Davies",
        ActivityChoice::DebyeHuckel(_) => "extended Debye-Hueckel",
        ActivityChoice::TruesdellJones(_) => "Truesdell-Jones",
        ActivityChoice::Sit(_) => "specific ion interaction",
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
    let log_k = constants
        .iter()
        .map(|constant| Cell::number(constant.at_own_salinity().nearest_to(Temperature::REFERENCE).0));
    let sigma = rows.iter().map(|(_, reaction)| {
        reaction.log_k().ok().and_then(|log_k| log_k.sigma()).map_or_else(Cell::missing, Cell::number)
    });
    let enthalpy = constants.iter().map(|constant| {
        constant.at_own_salinity().enthalpy(Temperature::REFERENCE).map_or_else(Cell::missing, Cell::number)
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

/// `reconciled at 25 degC: 22 cycles closed, chi-square 8.1 for 22 degrees of freedom (probability 0.997)`.
fn reconciled(reconciliation: &Reconciliation) -> String {
    format!(
        "reconciled at {} degC: {} closed, chi-square {:.1} for {} (probability {:.2})",
        reconciliation.temperature.celsius(),
        count(reconciliation.n_cycles, "cycle"),
        reconciliation.chi_square,
        count(reconciliation.degrees_of_freedom, "degree") + " of freedom",
        reconciliation.probability
    )
}

/// Cycles as a table, worst first.
fn audit_table(audit: &Audit) -> Result<Table, Fail> {
    let cycles: Vec<String> = audit.cycles.iter().map(Cycle::to_string).collect();
    let optional = |value: Option<f64>| value.map_or_else(Cell::missing, Cell::number);
    let verdicts =
        audit.cycles.iter().map(|cycle| if cycle.contradicts() { "contradicts" } else { "agrees" });
    Table::new([
        Column::texts("cycle", cycles.iter().map(String::as_str)),
        Column::numbers("misclosure of log K", audit.cycles.iter().map(|cycle| cycle.misclosure)),
        Column::new("sigma", audit.cycles.iter().map(|cycle| optional(cycle.sigma)).collect::<Vec<_>>()),
        Column::new(
            "in sigmas",
            audit.cycles.iter().map(|cycle| optional(cycle.sigmas())).collect::<Vec<_>>(),
        ),
        Column::texts("verdict", verdicts),
    ])
    .map_err(|error| fail(error.to_string()))
}

/// What a reconciliation moved, the most suspect first.
fn moves_table(reconciliation: &Reconciliation) -> Result<Table, Fail> {
    let moves = &reconciliation.moves;
    Table::new([
        Column::chemistry("name", moves.iter().map(|moved| moved.name.as_str())),
        Column::new(
            "log K before",
            moves.iter().map(|m| Cell::uncertain(m.before, m.sigma_before)).collect::<Vec<_>>(),
        ),
        Column::new(
            "log K after",
            moves.iter().map(|m| Cell::uncertain(m.after, m.sigma_after)).collect::<Vec<_>>(),
        ),
        Column::numbers("moved by", moves.iter().map(|moved| moved.after - moved.before)),
        Column::numbers("moved by sigmas", moves.iter().map(|moved| moved.in_sigmas())),
        Column::numbers("standardised residual", moves.iter().map(|moved| moved.residual)),
    ])
    .map_err(|error| fail(error.to_string()))
}

/// Shipped constants in the place of a ledger's own.
fn alternatives_table(ledger: &Ledger, alternatives: &[Alternative]) -> Result<Table, Fail> {
    let log_k = |reaction: &Reaction| {
        reaction.constant().map_or_else(
            |_| Cell::missing(),
            |c| Cell::number(c.at_own_salinity().nearest_to(Temperature::REFERENCE).0),
        )
    };
    let own = |alternative: &Alternative| {
        ledger.reaction(&alternative.name).map_or_else(|_| Cell::missing(), log_k)
    };
    let sigma = |reaction: &Reaction| {
        reaction.log_k().ok().and_then(|log_k| log_k.sigma()).map_or_else(Cell::missing, Cell::number)
    };
    // What goes with salinity has alternatives too, which are no constants.
    let constituents = ledger.constituent_alternatives();
    let names = alternatives.iter().map(|a| a.name.as_str());
    let authors = alternatives.iter().map(|a| a.author.as_str());
    let equations: Vec<String> = alternatives.iter().map(|a| a.reaction.equation().to_string()).collect();
    let none = || constituents.iter().map(|_| Cell::missing());
    let cells = |cell: &dyn Fn(&Alternative) -> Cell| -> Vec<Cell> {
        alternatives.iter().map(cell).chain(none()).collect()
    };
    Table::new([
        Column::chemistry("name", names.chain(constituents.iter().map(|(name, _)| name.as_str()))),
        Column::texts("by", authors.chain(constituents.iter().map(|(_, author)| author.as_str()))),
        Column::chemistry(
            "reaction",
            equations.iter().map(String::as_str).chain(constituents.iter().map(|_| "")),
        ),
        Column::new("log K", cells(&|a| log_k(&a.reaction))),
        Column::new("sigma", cells(&|a| sigma(&a.reaction))),
        Column::new("log K in use", cells(&own)),
    ])
    .map_err(|error| fail(error.to_string()))
}

fn unreadable(file: &str, faults: &[FileFault]) -> Fail {
    let number = count(faults.len(), "fault");
    faults.iter().fold(fail(format!("`{file}` has {number}, so nothing was loaded")), |fail, fault| {
        fail.help(fault.to_string())
    })
}

/// Authors and year of a citation: what stands before the closing bracket of the year.
fn short_citation(citation: &str) -> String {
    citation.split_once(')').map_or(citation, |(start, _)| start).replace(" (", " ")
}

/// The publications a ledger's constants come from, with how many each gave.
pub(super) fn sources_table(ledger: &Ledger) -> Result<Table, Fail> {
    let mut sources: Vec<(String, f64)> = Vec::new();
    for (_, reaction) in ledger.reactions().chain(ledger.formation_data()) {
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

fn reconciliation_of(ledger: &Ledger) -> Result<&Reconciliation, Fail> {
    ledger.reconciliation().ok_or_else(|| {
        fail("this ledger was not reconciled, or changed since")
            .help("write `let closed = book.reconcile();` first")
    })
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

    /// A shipped ledger: `"freshwater"`, or `"formation"`, standard formation data to audit others with. Results depend on the constants chosen; `.table()` shows them with their sources.
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

    /// A new ledger computed with another activity model: `"ideal"`, `"davies"` (to 0.5 mol/kg), `"debye-hueckel"` (extended, with
    /// ion sizes, to 0.1), `"truesdell-jones"` (to 3 in solutions of the ions it was fitted to), `"sit"` (specific ion
    /// interaction, to 3.5). The water's activity follows from the same model.
    ///
    /// ```rhai
    /// let ideal = ledger("freshwater").with_activity_model("ideal");
    /// sample(#{ pH: 7, Na: 0.001, Cl: 0.001 }).equilibrate(ideal).gamma("Na^+").value   // 1
    /// ```
    #[rhai_fn(name = "with_activity_model", pure, return_raw)]
    pub fn with_activity_model(ledger: &mut Ledger, name: &str) -> ScriptResult<Ledger> {
        with_activity_options(ledger, name, Map::new())
    }
    /// The same with options: the Debye-Hueckel `A` (log10, kg^0.5 mol^-0.5) at every temperature, `water_activity` where that of
    /// the model is not wanted; for `"davies"` its `b` (0.3); for `"debye-hueckel"` a table `ion_size` in angstrom, for
    /// `"truesdell-jones"` also a table `b` in kg/mol; for `"sit"` a table `epsilon` in kg/mol. What a table does not name is as shipped.
    ///
    /// ```rhai
    /// let own = ledger("freshwater").with_activity_model("sit", #{ epsilon: #{ "Ca^2+ SO4^2-": "0.1 +/- 0.05" } });
    /// sample(#{ pH: 7, Na: 1.0, Cl: 1.0 }).equilibrate(own).gamma("Na^+").value > 0.6   // true
    /// ```
    #[rhai_fn(name = "with_activity_model", pure, return_raw)]
    pub fn with_activity_options(ledger: &mut Ledger, name: &str, options: Map) -> ScriptResult<Ledger> {
        let choice = ActivityChoice::read(name, named(&options)?).map_err(|fault| {
            if fault.key == "activity_model" { fail(fault.message).argument(0) } else { Fail::from(fault) }
        })?;
        choice.check(ledger).map_err(Fail::from)?;
        Ok(ledger.with_activity(choice))
    }

    /// A new ledger with another relation of fugacity to partial pressure: `"ideal"`, where they are equal, or `"virial"`,
    /// with second virial coefficients (Tsonopoulos 1974) under the pressure of the water, by the rule of Lewis and Randall:
    /// for CO2, O2, N2, CH4 and H2S, of which `p(CO2(g))` then differs from `f(CO2(g))`.
    ///
    /// ```rhai
    /// let real = ledger("freshwater").with_gas_model("virial");
    /// let spring = sample(#{ pH: 6, DIC: "20 mmol/kg" }).compress_to("20 bar").equilibrate(real);
    /// spring.get("f(CO2(g))") / spring.get("p(CO2(g))") < 0.95   // true
    /// ```
    #[rhai_fn(name = "with_gas_model", pure, return_raw)]
    pub fn with_gas_model(ledger: &mut Ledger, name: &str) -> ScriptResult<Ledger> {
        let model = GasModel::read(name).map_err(|fault| fail(fault.message).argument(0))?;
        Ok(ledger.with_gas_model(model))
    }

    /// A ledger from a file beside the script: `[[constant]]` tables with `name`, `reaction`, a value as for `reaction`,
    /// `source` and `provenance`. All faults of a file are reported at once; nothing is half loaded.
    ///
    /// ```rhai
    /// ledger("freshwater").without("halite").save("mine.toml");
    /// load_ledger("mine.toml").names.len() == ledger("freshwater").names.len() - 1   // true
    /// ```
    #[rhai_fn(return_raw)]
    pub fn load_ledger(context: NativeCallContext, file: &str) -> ScriptResult<Ledger> {
        let text =
            Host::of(&context).files().read_text(file).map_err(|error| Fail::from(error).argument(0))?;
        let stem =
            std::path::Path::new(file).file_stem().map_or(file.into(), std::ffi::OsStr::to_string_lossy);
        Ok(file::load(&stem, &text).map_err(|faults| unreadable(file, &faults).argument(0))?)
    }
    /// Writes the ledger to a file that `load_ledger` reads: every constant with its source and uncertainty.
    ///
    /// ```rhai
    /// let book = ledger().with_reaction("Kw", reaction("H2O <=> H^+ + OH^-", #{ log_k: "-13.995 +/- 0.01" }));
    /// book.save("book.toml");
    /// load_ledger("book.toml").digest == book.digest   // true
    /// ```
    #[rhai_fn(name = "save", pure, return_raw)]
    pub fn save_ledger(context: NativeCallContext, ledger: &mut Ledger, file: &str) -> ScriptResult<()> {
        let text = ledger_text::to_text(ledger);
        let written = Host::of(&context).files().write(file, text.as_bytes());
        written.map_err(|error| Fail::from(error).argument(0))?;
        Ok(())
    }

    /// The constant of an equation as a sum over the ledger's reactions. Where several routes lead to it, the sum of least
    /// variance is taken if uncertainties are stated, else the one with fewest constants; a warning says how far the
    /// routes lie apart.
    ///
    /// ```rhai
    /// let k = ledger("freshwater").derive("CaCO3(calcite) + CO2(g) + H2O <=> Ca^2+ + 2 HCO3^-");
    /// fmt(k.log_k.value, ".2f")   // "-5.98"
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn derive(context: NativeCallContext, ledger: &mut Ledger, equation: &str) -> ScriptResult<Reaction> {
        Ok(told(&context, ledger.derive_routes(equation).map_err(Fail::from)?))
    }

    /// Every independent cycle among the ledger's constants and formation data at 25 degC: how far log K fails to close, in
    /// log10 units and in standard deviations. Above 3, and above 0.1 log units where not all uncertainties are stated, the
    /// constants contradict each other.
    ///
    /// ```rhai
    /// let both = ledger("freshwater").merge(ledger("formation"));
    /// both.audit().where(|row| row["cycle"].starts_with("K2 ")).len   // 1
    /// ```
    #[rhai_fn(name = "audit", pure, return_raw)]
    pub fn audit(ledger: &mut Ledger) -> ScriptResult<Table> {
        Ok(audit_table(&ledger.audit(Temperature::REFERENCE).map_err(Fail::from)?)?)
    }
    /// The same at a temperature (degC, or text with a unit); constants not known there are in no cycle, which is said.
    #[rhai_fn(name = "audit", pure, return_raw)]
    pub fn audit_at(context: NativeCallContext, ledger: &mut Ledger, at: Dynamic) -> ScriptResult<Table> {
        let at = temperature(&at).map_err(|fail| fail.argument(0))?;
        let audit = ledger.audit(at).map_err(Fail::from)?;
        if !audit.unknown.is_empty() {
            let names = crate::text::list(&audit.unknown);
            let at = audit.temperature.celsius();
            Host::of(&context).message(&format!("warning: not known at {at} degC, so in no cycle: {names}"));
        }
        Ok(audit_table(&audit)?)
    }

    /// The ledger whose constants move least, in units of their standard uncertainty, so that every cycle closes at 25 degC
    /// (generalised least squares). `.moved()` tables what moved, `.reconciliation()` gives chi-square.
    ///
    /// ```rhai
    /// let kw = |log_k| reaction("H2O <=> H^+ + OH^-", #{ log_k: log_k });
    /// let book = ledger().with_reaction("a", kw.call("-14.00 +/- 0.01")).with_reaction("b", kw.call("-13.97 +/- 0.02"));
    /// fmt(book.reconcile().reaction("a").log_k.value, ".3f")   // "-13.994"
    /// ```
    #[rhai_fn(name = "reconcile", pure, return_raw)]
    pub fn reconcile(ledger: &mut Ledger) -> ScriptResult<Ledger> {
        Ok(ledger.reconcile(Temperature::REFERENCE).map_err(Fail::from)?)
    }
    /// The same with `#{ temperature: "10 degC" }`, and `#{ sigma: 0.05 }` for constants that state no uncertainty.
    #[rhai_fn(name = "reconcile", pure, return_raw)]
    pub fn reconcile_with(ledger: &mut Ledger, options: Map) -> ScriptResult<Ledger> {
        let mut options = named(&options)?;
        let sigma = options.number("sigma").map_err(Fail::from)?;
        let at = options.take("temperature");
        let at = at.map(|value| crate::chem::reaction::temperature("temperature", value)).transpose();
        let at = at.map_err(Fail::from)?.unwrap_or(Temperature::REFERENCE);
        options.finish().map_err(Fail::from)?;
        let weighed = match sigma {
            Some(sigma) => ledger.assume_sigma(sigma).map_err(|error| Fail::from(error).key("sigma"))?,
            None => ledger.clone(),
        };
        Ok(weighed.reconcile(at).map_err(Fail::from)?)
    }
    /// What a reconciliation moved: log K before and after, the change in standard uncertainties, and the standardised
    /// residual of each constant, the most suspect first; above 3 it disagrees with all others.
    #[rhai_fn(name = "moved", get = "moved", pure, return_raw)]
    pub fn moved(ledger: &mut Ledger) -> ScriptResult<Table> {
        Ok(moves_table(reconciliation_of(ledger)?)?)
    }
    /// How well a reconciled ledger agreed with itself: `chi_square`, `degrees_of_freedom`, the `probability` of a larger
    /// chi-square if all uncertainties are right, and the `temperature` in degC.
    #[rhai_fn(name = "reconciliation", get = "reconciliation", pure, return_raw)]
    pub fn reconciliation(ledger: &mut Ledger) -> ScriptResult<Map> {
        let done = reconciliation_of(ledger)?;
        let degrees_of_freedom = i64::try_from(done.degrees_of_freedom).unwrap_or(i64::MAX);
        Ok(Map::from([
            ("chi_square".into(), done.chi_square.into()),
            ("degrees_of_freedom".into(), degrees_of_freedom.into()),
            ("probability".into(), done.probability.into()),
            ("temperature".into(), done.temperature.celsius().into()),
        ]))
    }
    /// A new ledger in which every constant without a stated uncertainty has this one, in log10 units; its trail says so.
    ///
    /// ```rhai
    /// ledger("freshwater").assume_sigma(0.05).reaction("Kw").log_k.sigma   // 0.05
    /// ```
    #[rhai_fn(name = "assume_sigma", pure, return_raw)]
    pub fn assume_sigma(ledger: &mut Ledger, sigma: f64) -> ScriptResult<Ledger> {
        Ok(ledger.assume_sigma(sigma).map_err(|error| Fail::from(error).argument(0))?)
    }

    /// Shipped constants for the ledger's reactions that it does not use, with log K at 25 degC.
    ///
    /// ```rhai
    /// ledger("freshwater").alternatives().where(|row| row["name"] == "quartz").column("by")[1]   // "Rimstidt 1980"
    /// ```
    #[rhai_fn(name = "alternatives", get = "alternatives", pure, return_raw)]
    pub fn alternatives(ledger: &mut Ledger) -> ScriptResult<Table> {
        Ok(alternatives_table(ledger, &ledger.alternatives())?)
    }
    /// A new ledger with a shipped alternative in place of a reaction, by author and year.
    ///
    /// ```rhai
    /// fmt(ledger("freshwater").choose("quartz", "Rimstidt 1980").reaction("quartz").log_k.value, ".3f")   // "-3.956"
    /// ```
    #[rhai_fn(name = "choose", pure, return_raw)]
    pub fn choose(ledger: &mut Ledger, name: &str, author: &str) -> ScriptResult<Ledger> {
        Ok(ledger.choose(name, author).map_err(Fail::from)?)
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
        Ok(reaction_table(ledger.reactions().chain(ledger.formation_data()))?)
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
