//! Diagrams of the trade, drawn from sweeps: how an element is spread over its species.

use crate::chem::{Element, Species, rational};
use crate::equilibrium::{Asked, EquilibriumError, Observable, State};
use crate::present::plot::{Axis as Ruler, Curve, Fields, Limit, Marks, Panel, Plot, Point, Scale};
use crate::solve::Settings;
use crate::water::Sample;

use super::run::OnProgress;
use super::sweep::{Axis, SweepError, sweep};

/// What to draw.
#[derive(Debug, Clone, PartialEq)]
pub struct Diagram {
    element: String,
    across: Span,
    /// `None`: amounts themselves are drawn upwards.
    up: Option<Span>,
    /// States along each axis.
    pub points: usize,
}

/// An axis that a sweep can set, from where to where.
#[derive(Debug, Clone, PartialEq)]
pub struct Span {
    /// As in a sweep: `pH`, `f(CO2(g)) [bar]`. A gas goes by the logarithm of its fugacity.
    pub title: String,
    /// The lower end; for a fugacity its logarithm.
    pub from: f64,
    /// The upper end.
    pub to: f64,
}

/// Why there is no diagram.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum DiagramError {
    /// An axis at fault, or interrupted.
    #[error(transparent)]
    Sweep(#[from] SweepError),
    /// No state at all; the reason of the first.
    #[error("no equilibrium was found anywhere in the diagram: {0}")]
    Nowhere(String),
    /// No such element, or none of it in the water.
    #[error("there is no `{0}` in this water")]
    NoElement(String),
    /// A state at fault.
    #[error(transparent)]
    Equilibrium(#[from] EquilibriumError),
}

/// Species whose share of the element never reaches this are left out of a Bjerrum plot.
const SMALLEST_SHARE: f64 = 1e-3;
/// Powers of ten that a Bjerrum plot shows below the largest amount.
const DECADES: f64 = 6.0;

impl Span {
    /// The range that is drawn where none is given.
    #[must_use]
    pub fn usual(title: &str) -> Option<Self> {
        let (from, to) = match title {
            "pH" => (2.0, 12.0),
            "pe" => (-10.0, 20.0),
            "temperature" => (0.0, 50.0),
            _ if title.starts_with("f(") && title.ends_with(')') => (-6.0, 0.0),
            _ => return None,
        };
        Some(Self { title: title.to_owned(), from, to })
    }

    fn is_fugacity(&self) -> bool {
        self.title.starts_with("f(")
    }

    fn label(&self) -> String {
        if self.is_fugacity() { format!("log {}", self.title) } else { self.title.clone() }
    }

    fn values(&self, n: usize) -> Vec<f64> {
        (0..n).map(|i| self.from + (self.to - self.from) * i as f64 / (n.max(2) - 1) as f64).collect()
    }

    fn axis(&self, values: &[f64]) -> Result<Axis, SweepError> {
        let values = values.iter().map(|value| if self.is_fugacity() { 10f64.powf(*value) } else { *value });
        Axis::new(&self.title, values.collect())
    }

    fn ruler(&self) -> Ruler {
        Ruler { label: self.label(), scale: Scale::Linear, from: self.from, to: self.to }
    }
}

impl Diagram {
    /// log10 molalities of the species of an element against pH.
    #[must_use]
    pub fn bjerrum(element: &str) -> Self {
        let across = Span { title: "pH".to_owned(), from: 2.0, to: 12.0 };
        Self { element: element.to_owned(), across, up: None, points: 81 }
    }

    /// The species or mineral that holds most of an element.
    #[must_use]
    pub fn predominance(up: Span, across: Span, element: &str) -> Self {
        Self { element: element.to_owned(), across, up: Some(up), points: 41 }
    }

    /// Its axes.
    pub fn axes(&self) -> impl Iterator<Item = &Span> {
        [&self.across].into_iter().chain(&self.up)
    }

    /// The axis of this title.
    pub fn axis_mut(&mut self, title: &str) -> Option<&mut Span> {
        [&mut self.across].into_iter().chain(&mut self.up).find(|span| span.title == title)
    }

    /// How many equilibria it takes.
    #[must_use]
    pub fn n_states(&self) -> usize {
        if self.up.is_some() { self.points * self.points } else { self.points }
    }
}

/// Computes and draws.
///
/// # Errors
///
/// [`DiagramError`] when an axis cannot be set, the element is not there, or no point has an equilibrium.
pub fn draw(
    sample: &Sample,
    diagram: &Diagram,
    settings: &Settings,
    progress: OnProgress,
) -> Result<Plot, DiagramError> {
    let across = diagram.across.values(diagram.points);
    let up = diagram.up.as_ref().map(|span| span.values(diagram.points));
    let mut axes = Vec::new();
    if let (Some(span), Some(values)) = (&diagram.up, &up) {
        axes.push(span.axis(values)?);
    }
    axes.push(diagram.across.axis(&across)?);
    let run = sweep(sample, &axes, None, settings, progress)?;
    let states: Vec<Option<&State>> = run.outcomes().iter().map(|outcome| outcome.as_ref().ok()).collect();
    if let (true, Some(Err(reason))) = (states.iter().all(Option::is_none), run.outcomes().first()) {
        return Err(DiagramError::Nowhere(reason.clone()));
    }
    let holders = holders(&states, &diagram.element);
    if holders.is_empty() {
        return Err(DiagramError::NoElement(diagram.element.clone()));
    }
    Ok(match (&diagram.up, up) {
        (Some(span), Some(up)) => fields(diagram, span, across, up, &holders, &states),
        _ => curves(diagram, &across, &states, &holders),
    })
}

/// A species or mineral that holds the element, with the number of its atoms in it.
struct Holder {
    species: Species,
    atoms: f64,
}

impl Holder {
    /// log10 of the moles of the element it holds per kg of water; not a number where there is none.
    fn log_amount(&self, state: Option<&State>) -> f64 {
        let log = state.and_then(|state| log_amount(state, &self.species)).filter(|log| log.is_finite());
        log.map_or(f64::NAN, |log| log + self.atoms.log10())
    }
}

/// log10 of the amount of a solute or solid, mol per kg of water.
fn log_amount(state: &State, species: &Species) -> Option<f64> {
    if species.is_solid() {
        return state.solid_amount(species.key()).ok().map(f64::log10);
    }
    let solute = state.system().solute(species)?;
    state.converged().ln_c.get(solute).map(|ln_c| ln_c / std::f64::consts::LN_10)
}

/// Everything that holds the element in any of the states, in order of first appearance.
fn holders(states: &[Option<&State>], element: &str) -> Vec<Holder> {
    let Some(element) = Element::from_symbol(element) else { return Vec::new() };
    let Some(state) = states.iter().flatten().next() else { return Vec::new() };
    let solutes = state.system().solutes().map(|formed| &formed.species);
    let solids = state.system().phases().map(|(formed, _)| &formed.species).filter(|s| s.is_solid());
    let holder = |species: &Species| {
        let atoms = rational::to_f64(species.count(element));
        (atoms > 0.0).then(|| Holder { species: species.clone(), atoms })
    };
    solutes.chain(solids).filter_map(holder).collect()
}

fn fields(
    diagram: &Diagram,
    up: &Span,
    x: Vec<f64>,
    y: Vec<f64>,
    holders: &[Holder],
    states: &[Option<&State>],
) -> Plot {
    let names = holders.iter().map(|holder| holder.species.key().to_owned()).collect();
    let budgets: Vec<Option<Budget>> =
        states.iter().map(|state| state.map(|state| Budget::of(state, holders))).collect();
    let rank = |holder: &Holder| {
        let each = states.iter().zip(&budgets).map(|(state, budget)| match (state, budget) {
            (Some(state), Some(budget)) if holder.species.is_solid() => holder.solid_rank(state, budget),
            (state, _) => holder.log_amount(*state),
        });
        each.collect()
    };
    let log_amounts = holders.iter().map(rank).collect();
    let limits =
        states.iter().flatten().next().map_or_else(Vec::new, |state| water_limits(diagram, up, state));
    let marks = Marks::Fields(Fields { names, x, y, log_amounts, limits });
    Plot {
        title: Some(format!("predominance of {}", diagram.element)),
        x: diagram.across.ruler(),
        panels: vec![Panel { y: up.ruler(), marks }],
    }
}

/// How much of the element there is in a state, mol per kg of water.
struct Budget {
    dissolved: f64,
    solid: f64,
}

impl Budget {
    fn of(state: &State, holders: &[Holder]) -> Self {
        let held = |is_solid: bool| -> f64 {
            let own = holders.iter().filter(|holder| holder.species.is_solid() == is_solid);
            own.map(|holder| 10f64.powf(holder.log_amount(Some(state)))).filter(|held| held.is_finite()).sum()
        };
        Self { dissolved: held(false), solid: held(true) }
    }
}

impl Holder {
    /// What a solid is ranked by against solutes: a function that is continuous where the solid appears, so that a field
    /// ends between grid points and not at one. With all of the element T and the dissolved D it is log10 T²/(4 D),
    /// which equals log10 D where the solid holds half; where it is absent its saturation index, per atom of the element,
    /// is added. Not a number for a solid that may not form.
    fn solid_rank(&self, state: &State, budget: &Budget) -> f64 {
        if !state.solids().iter().any(|solid| solid.species == self.species) {
            return f64::NAN;
        }
        let all = budget.dissolved + budget.solid;
        let rank = (all * all / (4.0 * budget.dissolved)).log10();
        let amount = self.log_amount(Some(state));
        if amount.is_finite() {
            return rank + amount - budget.solid.log10();
        }
        let asked =
            Asked { observable: Observable::SaturationIndex(self.species.key().to_owned()), unit: None };
        state.number(&asked).map_or(f64::NAN, |(index, _)| rank + index / self.atoms)
    }
}

/// Where water itself gives way, in a diagram of pe over pH: to oxygen of 1 bar above, to hydrogen of 1 bar below. Its
/// constants are the ledger's, its activity 1.
fn water_limits(diagram: &Diagram, up: &Span, state: &State) -> Vec<Limit> {
    if (up.title.as_str(), diagram.across.title.as_str()) != ("pe", "pH") {
        return vec![];
    }
    let (from, to) = (diagram.across.from, diagram.across.to);
    let limit = |name: &str, equation: &str, electrons: f64| {
        let reaction = state.system().ledger().derive(equation).ok()?;
        let at_zero = reaction.log_k_at(state.temperature()).ok()?.value() / electrons;
        Some(Limit { name: name.to_owned(), ends: [(from, at_zero - from), (to, at_zero - to)] })
    };
    let oxygen = limit("O2(g) 1 bar", "O2(g) + 4 H^+ + 4 e^- <=> 2 H2O", 4.0);
    let hydrogen = limit("H2(g) 1 bar", "2 H^+ + 2 e^- <=> H2(g)", 2.0);
    oxygen.into_iter().chain(hydrogen).collect()
}

fn curves(diagram: &Diagram, across: &[f64], states: &[Option<&State>], holders: &[Holder]) -> Plot {
    let log_amounts: Vec<Vec<f64>> =
        holders.iter().map(|holder| states.iter().map(|s| holder.log_amount(*s)).collect()).collect();
    let largest = |i: usize| log_amounts.iter().map(|amounts| amounts[i]).fold(f64::NAN, f64::max);
    let matters = |amounts: &&(&Holder, &Vec<f64>)| {
        amounts.1.iter().enumerate().any(|(i, amount)| *amount > largest(i) + SMALLEST_SHARE.log10())
    };
    let pairs: Vec<(&Holder, &Vec<f64>)> = holders.iter().zip(&log_amounts).collect();
    let mut drawn: Vec<(String, Vec<f64>)> = pairs
        .iter()
        .filter(matters)
        .map(|(holder, amounts)| {
            let shift = holder.atoms.log10();
            (holder.species.key().to_owned(), amounts.iter().map(|amount| amount - shift).collect())
        })
        .collect();
    for ion in ["H^+", "OH^-"] {
        if let Ok(species) = Species::parse(ion) {
            let own = Holder { species, atoms: 1.0 };
            drawn.push((ion.to_owned(), states.iter().map(|state| own.log_amount(*state)).collect()));
        }
    }
    let top = drawn.iter().flat_map(|(_, values)| values).copied().fold(f64::NAN, f64::max);
    let curve = |(name, values): &(String, Vec<f64>)| Curve {
        name: name.clone(),
        is_formula: true,
        points: across.iter().zip(values).map(|(x, y)| Point { x: *x, y: *y, sigma: None }).collect(),
        is_line: true,
    };
    let y = Ruler {
        label: "log10 molality [mol/kg]".to_owned(),
        scale: Scale::Linear,
        from: top - DECADES,
        to: top + 0.3,
    };
    Plot {
        title: Some(format!("species of {} against pH", diagram.element)),
        x: diagram.across.ruler(),
        panels: vec![Panel { y, marks: Marks::Curves(drawn.iter().map(curve).collect()) }],
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::ledger::{ActivityChoice, Ledger, shipped};
    use crate::named::Value;
    use crate::units::Temperature;
    use crate::water::Treatment;

    fn ideal() -> Ledger {
        shipped::ledger("freshwater", None).expect("shipped").with_activity(ActivityChoice::Ideal)
    }

    fn water(keys: &[(&str, &str)]) -> Sample {
        let entry = |(key, text): &(&str, &str)| ((*key).to_string(), Value::Text((*text).into()));
        Sample::read(keys.iter().map(entry).collect()).expect("right").with_ledger(&ideal())
    }

    fn drawn(water: &Sample, diagram: &Diagram) -> Plot {
        draw(water, diagram, &Settings::default(), &|_| {}).expect("drawn")
    }

    /// Where two curves of a Bjerrum plot cross.
    fn crossing(plot: &Plot, one: &str, other: &str) -> f64 {
        let Marks::Curves(curves) = &plot.panels[0].marks else { panic!("curves") };
        let curve = |name: &str| &curves.iter().find(|curve| curve.name == name).expect("drawn").points;
        let gaps: Vec<(f64, f64)> =
            curve(one).iter().zip(curve(other)).map(|(a, b)| (a.x, a.y - b.y)).collect();
        let step = gaps.windows(2).find(|step| step[0].1 * step[1].1 <= 0.0).expect("they cross");
        let ((x0, y0), (x1, y1)) = (step[0], step[1]);
        x0 + (x1 - x0) * y0 / (y0 - y1)
    }

    /// At infinite dilution neighbours of the carbonate system cross at the two pK.
    #[test]
    fn carbonate_species_cross_at_pk1_and_pk2() {
        let plot = drawn(&water(&[("pH", "8"), ("DIC", "10 umol/kg")]), &Diagram::bjerrum("C"));
        let pk = |equation: &str| {
            -ideal().derive(equation).unwrap().log_k_at(Temperature::REFERENCE).unwrap().value()
        };
        let first = crossing(&plot, "CO2(aq)", "HCO3^-") - pk("CO2(aq) + H2O <=> HCO3^- + H^+");
        let second = crossing(&plot, "HCO3^-", "CO3^2-") - pk("HCO3^- <=> CO3^2- + H^+");
        // What is left is the activity of water, and the interpolation.
        assert!(first.abs() < 1e-5 && second.abs() < 1e-5, "{first:e} {second:e}");
    }

    fn iron() -> (Sample, Diagram) {
        let water = water(&[("pH", "7"), ("Fe", "10 umol/kg")]);
        let allowed = Treatment::Allow { solid: "ferrihydrite".into(), above: 0.0 };
        let span = |title: &str| Span::usual(title).expect("usual");
        let mut diagram = Diagram::predominance(span("pe"), span("pH"), "Fe");
        diagram.points = 21;
        (water.treated(allowed).expect("allowed"), diagram)
    }

    fn fields_of(plot: &Plot) -> &Fields {
        let Marks::Fields(fields) = &plot.panels[0].marks else { panic!("fields") };
        fields
    }

    /// Fe^2+ against ferrihydrite at pH 6: pe = 13.02 + log K - 3 pH - log 5e-6 where each holds half, by hand; the grid of
    /// 1.5 in pe is far coarser than what is asked of the line between them.
    #[test]
    fn a_field_of_a_solid_ends_between_grid_points() {
        let (water, diagram) = iron();
        let plot = drawn(&water, &diagram);
        let fields = fields_of(&plot);
        let across = (6.0 - 2.0) / 10.0;
        let name = |up: f64| fields.largest_at(across, up).map(|field| fields.names[field].as_str());
        let first_solid =
            (0..=3000).map(|k| f64::from(k) / 3000.0).find(|up| name(*up) == Some("Fe(OH)3(ferrihydrite)"));
        let found = -10.0 + 30.0 * first_solid.expect("a field of the solid");
        let log_k = |equation: &str| {
            ideal().derive(equation).unwrap().log_k_at(Temperature::REFERENCE).unwrap().value()
        };
        let expected = log_k("Fe^3+ + e^- <=> Fe^2+")
            + log_k("Fe(OH)3(ferrihydrite) + 3 H^+ <=> Fe^3+ + 3 H2O")
            - 18.0
            - 5e-6_f64.log10();
        assert!((found - expected).abs() < 0.2, "{found} {expected}");
    }

    /// pe + pH = 20.8 under oxygen of 1 bar and 0 under hydrogen (Stumm & Morgan 1996, chapter 8; recalled).
    #[test]
    fn water_ends_at_the_lines_of_the_textbook() {
        let (water, mut diagram) = iron();
        diagram.points = 3;
        let plot = drawn(&water, &diagram);
        let sums: Vec<(&str, f64)> = fields_of(&plot)
            .limits
            .iter()
            .map(|limit| (limit.name.as_str(), limit.ends[1].0 + limit.ends[1].1))
            .collect();
        assert_eq!(sums.iter().map(|(name, _)| *name).collect::<Vec<_>>(), ["O2(g) 1 bar", "H2(g) 1 bar"]);
        assert!((sums[0].1 - 20.77).abs() < 0.05 && sums[1].1.abs() < 0.01, "{sums:?}");
    }
}
