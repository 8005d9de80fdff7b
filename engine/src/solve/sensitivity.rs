//! Derivatives of an answer by everything that it was computed from, by the implicit function theorem.
//!
//! In the basis of the answer (its most concentrated species, and every phase that is held) let `μ_j` be the ln activity
//! product of the components of basis row j, and `t_ij` its coefficient in species i:
//!
//! ```text
//! ln c_i = ln K_i + Σ_j t_ij μ_j + w_i ln a_w - ln γ_i,    ln γ_i = f_i(I) + s_i
//! Σ_i t_ij c_i = T_j + (supply E)_j - n_j         the balance of each basis row
//! μ_h + w_h ln a_w + ln K_h = v_h                 what is held: reservoirs, minerals that are present
//! I = ½ Σ z_i² c_i,    ln a_w = f(c, I),    s_i = g_i(c), the specific part where the model has one
//! ```
//!
//! The held `μ_h` are eliminated by hand, so that what is held depends on nothing else to the last bit, and so are the
//! amounts of what delivers just what it holds, each the rest of its own balance. Left as unknowns x are the free `μ_j`,
//! the other amounts, I, ln a_w and the specific parts, one for every equation. All equations weigh the species
//! linearly, so with `d ln c = κ + Q dx`, κ being the direct effect of a parameter, they read
//!
//! ```text
//! (P c Q + L) dx = -P c κ + d(right side)
//! ```
//!
//! Every balance is taken relative to its largest concentration, which makes the matrix as well-conditioned as that of the
//! solver, traces below the smallest double included. It is factored once; [`Sensitivities::push`] solves for the effect
//! of parameters on everything, [`Sensitivities::pull`] for the effect of everything on one number.

use super::basis::Basis;
use super::dense::Lu;
use super::problem::{Problem, Row};
use super::system::Column;
use super::{Converged, Mixed};
use crate::activity::{Composition, Model, WaterSlopes};

/// A number for each thing that is given: changes of them, or derivatives by them.
#[derive(Debug, Clone, PartialEq)]
pub struct Given {
    /// ln K of each species, at given ln K of reservoirs and minerals. Shape `(n_species,)`.
    pub ln_k: Vec<f64>,
    /// ln K of each other. Shape `(n_others,)`.
    pub others: Vec<f64>,
    /// ln γ of each species at given I. Shape `(n_species,)`.
    pub ln_gamma: Vec<f64>,
    /// ln a_w at given composition.
    pub ln_water_activity: f64,
    /// Total of each component, mol/kg(water). Shape `(n_components,)`.
    pub totals: Vec<f64>,
    /// `ln_value - ln K` of each reservoir. Shape `(n_reservoirs,)`.
    pub reservoirs: Vec<f64>,
    /// `ln_target - ln K` of each mineral; without effect where it is absent. Shape `(n_minerals,)`.
    pub minerals: Vec<f64>,
    /// `ln_target - ln K` of each member of each mixture; without effect where it is absent. Shape `(n_mixtures,)` of
    /// `(n_members,)`.
    pub mixtures: Vec<Vec<f64>>,
}

/// A number for each thing that is found: changes of them, or weights in a sum of them. What is absent changes nothing.
#[derive(Debug, Clone, PartialEq)]
pub struct Found {
    /// ln of the activity of each component. Shape `(n_components,)`.
    pub ln_a: Vec<f64>,
    /// ln of the concentration of each species. Shape `(n_species,)`.
    pub ln_c: Vec<f64>,
    /// ln of the amount of each other. Shape `(n_others,)`.
    pub others: Vec<f64>,
    /// ln γ of each species. Shape `(n_species,)`.
    pub ln_gamma: Vec<f64>,
    /// Ionic strength, mol/kg(water).
    pub ionic_strength: f64,
    /// ln of the activity of water.
    pub ln_water_activity: f64,
    /// Amount that each reservoir has delivered, mol/kg(water). Shape `(n_reservoirs,)`.
    pub reservoir_amount: Vec<f64>,
    /// Amount of each mineral, mol/kg(water). Shape `(n_minerals,)`.
    pub mineral_amount: Vec<f64>,
    /// ln of the amount of each member of each mixture. Shape `(n_mixtures,)` of `(n_members,)`.
    pub mixtures: Vec<Vec<f64>>,
}

impl Given {
    /// Nothing changed.
    #[must_use]
    pub fn zero(problem: &Problem) -> Self {
        Self {
            ln_k: vec![0.0; problem.species.len()],
            others: vec![0.0; problem.others.len()],
            ln_gamma: vec![0.0; problem.species.len()],
            ln_water_activity: 0.0,
            totals: vec![0.0; problem.n_components],
            reservoirs: vec![0.0; problem.reservoirs.len()],
            minerals: vec![0.0; problem.minerals.len()],
            mixtures: by_member(problem),
        }
    }
}

impl Found {
    /// Nothing changed.
    #[must_use]
    pub fn zero(problem: &Problem) -> Self {
        Self {
            ln_a: vec![0.0; problem.n_components],
            ln_c: vec![0.0; problem.species.len()],
            others: vec![0.0; problem.others.len()],
            ln_gamma: vec![0.0; problem.species.len()],
            ionic_strength: 0.0,
            ln_water_activity: 0.0,
            reservoir_amount: vec![0.0; problem.reservoirs.len()],
            mineral_amount: vec![0.0; problem.minerals.len()],
            mixtures: by_member(problem),
        }
    }
}

/// A zero for each member of each mixture.
fn by_member(problem: &Problem) -> Vec<Vec<f64>> {
    problem.mixtures.iter().map(|mixture| vec![0.0; mixture.members.len()]).collect()
}

/// What each reservoir delivers, in components, when it delivers what it holds. Shape `(n_reservoirs, n_components)`.
#[must_use]
pub fn own_supplies(problem: &Problem) -> Vec<Vec<f64>> {
    let supply = |row: &Row| {
        let mut supply = vec![0.0; problem.n_components];
        for (k, nu) in &row.stoichiometry {
            supply[*k] = *nu.numer() as f64 / *nu.denom() as f64;
        }
        supply
    };
    problem.reservoirs.iter().map(|reservoir| supply(&reservoir.row)).collect()
}

/// Where a problem is linearised: an answer, or a point on the way to one.
pub(super) struct Place<'a> {
    pub(super) basis: &'a Basis,
    pub(super) column: &'a [Column],
    /// ln of the amounts of species, others, members of mixtures, and mixtures as a whole.
    pub(super) ln_amounts: &'a [f64],
    pub(super) ionic_strength: f64,
    pub(super) reservoir_amount: &'a [f64],
}

/// The factored linear system of one answer.
#[derive(Debug, Clone)]
pub struct Sensitivities {
    columns: Vec<Balance>,
    /// Everything with an amount: species, others, members of mixtures, mixtures as a whole.
    species: Vec<Weights>,
    ionic_strength: f64,
    n_species: usize,
    n_others: usize,
    /// Members of each mixture.
    n_members: Vec<usize>,
    n_reservoirs: usize,
    n_minerals: usize,
    /// Equations of balances.
    n_balances: usize,
    /// Specific parts that are unknowns.
    n_specific: usize,
    lu: Lu,
}

/// One column of the basis: its balance, and its unknown.
#[derive(Debug, Clone)]
struct Balance {
    held: Held,
    /// Position of its equation, and of its unknown, in the linear system.
    position: Option<usize>,
    /// What a reservoir delivers to each balance.
    supply: Vec<f64>,
    /// Coefficient of the solvent in the basis row.
    water: f64,
    /// ln of the concentration that the balance is relative to.
    shift: f64,
    /// Factor of each component's total in that of the basis row, which is also that of μ in the component's λ.
    of_component: Vec<f64>,
}

/// What holds the basis row of a column.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Held {
    /// Nothing: the unknown is dμ.
    Not,
    /// A reservoir: the unknown is what it delivers.
    Reservoir(usize),
    /// A mineral: the unknown is its amount.
    Mineral(usize),
}

/// One row with an amount that is there.
#[derive(Debug, Clone)]
struct Weights {
    idx: usize,
    /// How it counts in the balances: a mixture as a whole negatively.
    sign: f64,
    ln_c: f64,
    /// Coefficient in each balance.
    t: Vec<f64>,
    /// d ln c / d ln a_w at given free μ.
    water: f64,
    /// d ln γ / dI.
    gamma: f64,
    half_charge_squared: f64,
    /// ∂ ln a_w / ∂ m.
    osmotic: f64,
    /// Position of the specific part of its ln γ.
    specific: Option<usize>,
    /// ∂ s / ∂ m of the specific parts that it has a share in, by their positions.
    acts_on: Vec<(usize, f64)>,
}

impl Sensitivities {
    /// Linearises `problem` about its answer, which `model` belongs to.
    ///
    /// `supplies` says what each reservoir delivers, in components; [`own_supplies`] is what the solver takes it to be. Where
    /// a reservoir stands for a condition met by other means, such as a pH reached with sodium hydroxide, it is the
    /// direction in which the totals were moved to meet it.
    ///
    /// Returns `None` where the answer does not change smoothly, as where two conditions meet by chance.
    #[must_use]
    pub fn new(
        problem: &Problem,
        model: &Model,
        converged: &Converged,
        supplies: &[Vec<f64>],
    ) -> Option<Self> {
        let ln_amounts: Vec<f64> = converged
            .ln_c
            .iter()
            .chain(&converged.ln_others)
            .copied()
            .chain(mixed_ln_amounts(converged))
            .collect();
        let place = Place {
            basis: &converged.warm.basis,
            column: &converged.warm.column,
            ln_amounts: &ln_amounts,
            ionic_strength: converged.ionic_strength,
            reservoir_amount: &converged.reservoir_amount,
        };
        Self::about(problem, model, &place, supplies)
    }

    /// Linearises `problem` about a place where all equations hold but those of γ and of the activity of water.
    pub(super) fn about(
        problem: &Problem,
        model: &Model,
        place: &Place<'_>,
        supplies: &[Vec<f64>],
    ) -> Option<Self> {
        let (there, columns) = balances(problem, place, supplies);
        let by_ionic_strength = if place.ionic_strength > 0.0 { place.ionic_strength } else { 1.0 };
        let water = water_slopes(problem, model, place);
        let n_balances = columns.iter().filter(|column| column.position.is_some()).count();
        let mut species = weights(problem, model, place, &there, &water);
        let n_specific = couple(&mut species, model, n_balances + 2);
        let mut linear = Self {
            species,
            n_balances,
            n_specific,
            columns,
            ionic_strength: by_ionic_strength,
            n_species: problem.species.len(),
            n_others: problem.others.len(),
            n_members: problem.mixtures.iter().map(|mixture| mixture.members.len()).collect(),
            n_reservoirs: problem.reservoirs.len(),
            n_minerals: problem.minerals.len(),
            lu: Lu::default(),
        };
        linear.scale_balances(place.reservoir_amount);
        let matrix = linear.matrix(water.by_ionic_strength);
        let n = linear.n();
        let mut lu = Lu::default();
        (matrix.iter().all(|entry| entry.is_finite()) && lu.factor(&matrix, n))
            .then_some(Self { lu, ..linear })
    }

    /// The change of everything found with a small change of what is given.
    #[must_use]
    pub fn push(&self, given: &Given) -> Found {
        let held: Vec<f64> = self.columns.iter().map(|column| column.value(given)).collect();
        let own = self.own(given);
        let direct: Vec<f64> =
            self.species.iter().map(|species| own[species.idx] + species.held(&held)).collect();
        let mut right = vec![0.0; self.n()];
        for column in &self.columns {
            if let Some(row) = column.position {
                right[row] = column.total(&given.totals) * (-column.shift).exp();
            }
        }
        right[self.solvent()] = given.ln_water_activity;
        for (species, direct) in self.species.iter().zip(&direct) {
            self.for_each_weight(species, |row, weight| right[row] -= weight * direct);
        }
        let mut x = vec![0.0; self.n()];
        self.lu.solve(&right, &mut x);
        self.read(given, &held, &direct, &x)
    }

    fn read(&self, given: &Given, held: &[f64], direct: &[f64], x: &[f64]) -> Found {
        let (ionic_strength, ln_water_activity) =
            (x[self.n_balances] * self.ionic_strength, x[self.solvent()]);
        let mut ln_c = vec![0.0; self.n_rows()];
        for (species, direct) in self.species.iter().zip(direct) {
            ln_c[species.idx] = *direct;
            self.for_each_slope(species, |column, slope| ln_c[species.idx] += slope * x[column]);
        }
        let mut found = Found {
            ln_a: vec![0.0; given.totals.len()],
            ln_c: ln_c[..self.n_species].to_vec(),
            others: ln_c[self.n_species..self.first_member()].to_vec(),
            ln_gamma: given.ln_gamma.clone(),
            ionic_strength,
            ln_water_activity,
            reservoir_amount: vec![0.0; self.n_reservoirs],
            mineral_amount: vec![0.0; self.n_minerals],
            mixtures: self.by_member(&ln_c),
        };
        for species in self.species.iter().filter(|species| species.idx < self.n_species) {
            let specific = species.specific.map_or(0.0, |own| x[own]);
            found.ln_gamma[species.idx] += species.gamma * ionic_strength + specific;
        }
        for (j, column) in self.columns.iter().enumerate() {
            let product = match (column.held, column.position) {
                (Held::Not, Some(own)) => x[own],
                _ => held[j] - column.water * ln_water_activity,
            };
            for (ln_a, factor) in found.ln_a.iter_mut().zip(&column.of_component) {
                *ln_a += factor * product;
            }
        }
        self.read_amounts(given, x, &ln_c, &mut found);
        found
    }

    fn read_amounts(&self, given: &Given, x: &[f64], ln_c: &[f64], found: &mut Found) {
        for (j, column) in self.columns.iter().enumerate() {
            let amount = match column.position {
                Some(own) => x[own] * column.shift.exp(),
                None => {
                    let dissolved: f64 =
                        self.species.iter().map(|species| species.moles(j) * ln_c[species.idx]).sum();
                    let delivered =
                        self.coupled().map(|(own, other)| other.supply[j] * x[own] * other.shift.exp());
                    column.total(&given.totals) + delivered.sum::<f64>() - dissolved
                }
            };
            match column.held {
                Held::Not => {}
                Held::Reservoir(f) if column.position.is_some() => found.reservoir_amount[f] = amount,
                Held::Reservoir(f) => found.reservoir_amount[f] = -amount,
                Held::Mineral(p) => found.mineral_amount[p] = amount,
            }
        }
    }

    /// Reservoirs whose amounts are unknowns, with their positions.
    fn coupled(&self) -> impl Iterator<Item = (usize, &Balance)> {
        let reservoirs = self.columns.iter().filter(|column| matches!(column.held, Held::Reservoir(_)));
        reservoirs.filter_map(|column| Some((column.position?, column)))
    }

    /// The derivatives of `Σ weight · found` by everything that is given.
    #[must_use]
    pub fn pull(&self, weight: &Found) -> Given {
        let n = self.n();
        let mut by_x = vec![0.0; n];
        let mut by_held = vec![0.0; self.columns.len()];
        let mut by_ln_c = weight.ln_c.clone();
        by_ln_c.extend(weight.others.iter().chain(weight.mixtures.iter().flatten()));
        by_ln_c.resize(self.n_rows(), 0.0);
        let mut by_total = vec![0.0; self.columns.len()];
        by_x[self.n_balances] = weight.ionic_strength * self.ionic_strength;
        by_x[self.solvent()] = weight.ln_water_activity;
        for (j, column) in self.columns.iter().enumerate() {
            let product: f64 = column.of_component.iter().zip(&weight.ln_a).map(|(f, w)| f * w).sum();
            let amount = match (column.held, column.position) {
                (Held::Not, own) => {
                    by_x[own.expect("free balances are solved")] += product;
                    continue;
                }
                (Held::Reservoir(f), Some(own)) => {
                    by_x[own] += weight.reservoir_amount[f] * column.shift.exp();
                    0.0
                }
                (Held::Reservoir(f), None) => -weight.reservoir_amount[f],
                (Held::Mineral(p), _) => weight.mineral_amount[p],
            };
            by_x[self.solvent()] -= column.water * product;
            by_held[j] += product;
            if amount != 0.0 {
                by_total[j] = amount;
                self.coupled()
                    .for_each(|(own, other)| by_x[own] += amount * other.supply[j] * other.shift.exp());
                self.species.iter().for_each(|species| by_ln_c[species.idx] -= amount * species.moles(j));
            }
        }
        for species in &self.species {
            if species.idx < self.n_species {
                let by_ln_gamma = weight.ln_gamma[species.idx];
                by_x[self.n_balances] += by_ln_gamma * species.gamma * self.ionic_strength;
                if let Some(own) = species.specific {
                    by_x[own] += by_ln_gamma;
                }
            }
            let own = by_ln_c[species.idx];
            self.for_each_slope(species, |column, slope| by_x[column] += slope * own);
        }
        let mut by_right = vec![0.0; n];
        self.lu.solve_transposed(&by_x, &mut by_right);
        for (by_total, column) in by_total.iter_mut().zip(&self.columns) {
            if let Some(row) = column.position {
                *by_total = by_right[row] * (-column.shift).exp();
            }
        }
        let mut given = self.derivatives(&by_ln_c, by_held, &by_right, &by_total);
        for (own, weight) in given.ln_gamma.iter_mut().zip(&weight.ln_gamma) {
            *own += weight;
        }
        given
    }

    fn derivatives(
        &self,
        by_ln_c: &[f64],
        mut by_held: Vec<f64>,
        by_right: &[f64],
        by_total: &[f64],
    ) -> Given {
        let n_components = self.columns.first().map_or(0, |column| column.of_component.len());
        let mut given = Given {
            ln_k: vec![0.0; self.n_species],
            others: vec![],
            ln_gamma: vec![0.0; self.n_species],
            ln_water_activity: by_right[self.solvent()],
            totals: vec![0.0; n_components],
            reservoirs: vec![0.0; self.n_reservoirs],
            minerals: vec![0.0; self.n_minerals],
            mixtures: vec![],
        };
        let mut own = vec![0.0; self.n_rows()];
        for species in &self.species {
            let mut direct = by_ln_c[species.idx];
            self.for_each_weight(species, |row, weight| direct -= weight * by_right[row]);
            own[species.idx] = direct;
            for (by_held, t) in by_held.iter_mut().zip(&species.t) {
                *by_held += t * direct;
            }
        }
        given.ln_k.copy_from_slice(&own[..self.n_species]);
        given.others = own[self.n_species..self.first_member()].to_vec();
        given.ln_gamma = given.ln_k.iter().map(|direct| -direct).collect();
        given.mixtures = self.by_member(&own.iter().map(|direct| -direct).collect::<Vec<_>>());
        for ((column, by_total), by_held) in self.columns.iter().zip(by_total).zip(by_held) {
            for (total, factor) in given.totals.iter_mut().zip(&column.of_component) {
                *total += factor * by_total;
            }
            match column.held {
                Held::Not => {}
                Held::Reservoir(f) => given.reservoirs[f] = by_held,
                Held::Mineral(p) => given.minerals[p] = by_held,
            }
        }
        given
    }

    fn first_member(&self) -> usize {
        self.n_species + self.n_others
    }

    /// Species, others, members of mixtures, mixtures as a whole.
    fn n_rows(&self) -> usize {
        self.first_member() + self.n_members.iter().sum::<usize>() + self.n_members.len()
    }

    /// Change of the constant of each row.
    fn own(&self, given: &Given) -> Vec<f64> {
        let species = given.ln_k.iter().zip(&given.ln_gamma).map(|(ln_k, ln_gamma)| ln_k - ln_gamma);
        let mut own: Vec<f64> = species
            .chain(given.others.iter().copied())
            .chain(given.mixtures.iter().flatten().map(|target| -target))
            .collect();
        own.resize(self.n_rows(), 0.0);
        own
    }

    /// The part of a number for each row that belongs to the members of mixtures.
    fn by_member(&self, by_row: &[f64]) -> Vec<Vec<f64>> {
        let mut rest = &by_row[self.first_member()..];
        let mut take = |n: &usize| {
            let (members, others) = rest.split_at(*n);
            rest = others;
            members.to_vec()
        };
        self.n_members.iter().map(&mut take).collect()
    }

    /// Unknowns: one a balance that is solved, then ln I, ln a_w, and the specific parts.
    fn n(&self) -> usize {
        self.n_balances + 2 + self.n_specific
    }

    /// Position of ln a_w; ln I stands before it.
    fn solvent(&self) -> usize {
        self.n_balances + 1
    }

    /// Takes each balance relative to its largest concentration or delivery.
    fn scale_balances(&mut self, delivered: &[f64]) {
        for (j, column) in self.columns.iter_mut().enumerate() {
            let terms = self.species.iter().filter(|species| species.t[j] != 0.0).map(|species| species.ln_c);
            let amount = match column.held {
                Held::Reservoir(f) => delivered[f].abs().ln(),
                Held::Not | Held::Mineral(_) => f64::NEG_INFINITY,
            };
            let largest = terms.fold(amount, f64::max);
            column.shift = if largest.is_finite() { largest } else { 0.0 };
        }
    }

    /// The matrix `P c Q + L` by rows.
    fn matrix(&self, electrostatic: f64) -> Vec<f64> {
        let n = self.n();
        let mut matrix = vec![0.0; n * n];
        for species in &self.species {
            self.for_each_weight(species, |row, weight| {
                self.for_each_slope(species, |column, slope| matrix[row * n + column] += weight * slope);
            });
        }
        for (column, held) in self.coupled() {
            for (balance, supply) in self.columns.iter().zip(&held.supply) {
                if let (Some(row), true) = (balance.position, *supply != 0.0) {
                    matrix[row * n + column] -= supply * (held.shift - balance.shift).exp();
                }
            }
        }
        let (strength, solvent) = (self.n_balances, self.solvent());
        matrix[strength * n + strength] -= 1.0;
        for own in solvent..n {
            matrix[own * n + own] += 1.0;
        }
        matrix[solvent * n + strength] -= electrostatic * self.ionic_strength;
        matrix
    }

    /// The entries of Q for one species.
    fn for_each_slope(&self, species: &Weights, mut take: impl FnMut(usize, f64)) {
        for (j, column) in self.columns.iter().enumerate() {
            if let (Held::Not, Some(own), true) = (column.held, column.position, species.t[j] != 0.0) {
                take(own, species.t[j]);
            }
        }
        take(self.n_balances, -species.gamma * self.ionic_strength);
        take(self.solvent(), species.water);
        if let Some(own) = species.specific {
            take(own, -1.0);
        }
    }

    /// The entries of P c for one species.
    fn for_each_weight(&self, species: &Weights, mut take: impl FnMut(usize, f64)) {
        for (j, column) in self.columns.iter().enumerate() {
            if let (Some(row), true) = (column.position, species.t[j] != 0.0) {
                take(row, species.sign * species.t[j] * (species.ln_c - column.shift).exp());
            }
        }
        let c = species.ln_c.exp();
        take(self.n_balances, species.half_charge_squared * c / self.ionic_strength);
        take(self.solvent(), -species.osmotic * c);
        for (specific, slope) in &species.acts_on {
            take(*specific, -slope * c);
        }
    }
}

impl Balance {
    /// Change of what the basis row is held at, at given ln a_w.
    fn value(&self, given: &Given) -> f64 {
        match self.held {
            Held::Not => 0.0,
            Held::Reservoir(f) => given.reservoirs[f],
            Held::Mineral(p) => given.minerals[p],
        }
    }

    /// Change of the total of the basis row.
    fn total(&self, totals: &[f64]) -> f64 {
        self.of_component.iter().zip(totals).map(|(factor, total)| factor * total).sum()
    }
}

impl Weights {
    /// What it adds to a balance, per mole of the basis row.
    fn moles(&self, column: usize) -> f64 {
        if self.t[column] == 0.0 { 0.0 } else { self.sign * self.t[column] * self.ln_c.exp() }
    }

    /// Change of ln c with what is held.
    fn held(&self, held: &[f64]) -> f64 {
        self.t.iter().zip(held).map(|(t, held)| t * held).sum()
    }
}

/// The columns that are not absent, by index and as balances still to be scaled.
fn balances(problem: &Problem, place: &Place<'_>, supplies: &[Vec<f64>]) -> (Vec<usize>, Vec<Balance>) {
    let Place { basis, column, .. } = *place;
    let (first_reservoir, first_mineral) = (problem.reservoir_row(0), problem.mineral_row(0));
    // The column of a mixture that is absent is held by nothing but its absence.
    let is_there = |j: &usize| match column[*j] {
        Column::Free => true,
        Column::Held => !basis.is_unit(basis.row_of(*j)),
        Column::Absent => false,
    };
    let there: Vec<usize> = (0..basis.n).filter(is_there).collect();
    let delivers_what_it_holds = own_supplies(problem) == supplies;
    let waters: Vec<f64> = problem.rows().map(|(row, _)| row.water).collect();
    let of_component =
        |j: usize| -> Vec<f64> { (0..problem.n_components).map(|k| basis.total_factor(k, j)).collect() };
    let mut n_solved = 0;
    let mut balances = Vec::with_capacity(there.len());
    for &j in &there {
        let row = basis.row_of(j);
        let held = match column[j] {
            Column::Held if row < first_mineral => Held::Reservoir(row - first_reservoir),
            Column::Held => Held::Mineral(row - first_mineral),
            Column::Free | Column::Absent => Held::Not,
        };
        let (solved, supply) = match held {
            Held::Not => (true, vec![]),
            Held::Mineral(_) => (false, vec![]),
            Held::Reservoir(f) => {
                let to = |j: &usize| of_component(*j).iter().zip(&supplies[f]).map(|(f, s)| f * s).sum();
                (!delivers_what_it_holds, there.iter().map(to).collect())
            }
        };
        let position = solved.then_some(n_solved);
        n_solved += usize::from(solved);
        let water = waters.get(row).copied().unwrap_or(0.0);
        balances.push(Balance { held, position, supply, water, shift: 0.0, of_component: of_component(j) });
    }
    (there, balances)
}

fn water_slopes(problem: &Problem, model: &Model, place: &Place<'_>) -> WaterSlopes {
    let charges: Vec<f64> = problem.species.iter().map(|row| row.charge).collect();
    let molalities: Vec<f64> = place.ln_amounts[..charges.len()].iter().map(|ln_c| ln_c.exp()).collect();
    let (charges, molalities, ionic_strength) = (&charges, &molalities, place.ionic_strength);
    model.d_ln_water_activity(Composition { charges, molalities, ionic_strength })
}

/// ln of the amounts of the members of mixtures, then of the mixtures as a whole.
fn mixed_ln_amounts(converged: &Converged) -> impl Iterator<Item = f64> {
    let members = |mixture: &Mixed| -> Vec<f64> {
        mixture.ln_x.iter().map(|ln_x| ln_x + mixture.amount.ln()).collect()
    };
    let wholes = converged.mixtures.iter().map(|mixture| mixture.amount.ln());
    converged.mixtures.iter().flat_map(members).chain(wholes)
}

/// The species that are there, and what mixtures that are present consist of.
fn weights(
    problem: &Problem,
    model: &Model,
    place: &Place<'_>,
    columns: &[usize],
    water: &WaterSlopes,
) -> Vec<Weights> {
    let Place { basis, column, ln_amounts, ionic_strength, .. } = *place;
    let waters: Vec<f64> = problem.rows().map(|(row, _)| row.water).collect();
    let rows: Vec<&Row> = problem.rows().map(|(row, _)| row).collect();
    let there = (0..problem.n_amounts()).filter(|i| ln_amounts[*i] != f64::NEG_INFINITY);
    let weights = |idx: usize| {
        let row = rows[idx];
        let is_solute = idx < problem.species.len();
        let t: Vec<f64> = columns.iter().map(|j| basis.coefficient(idx, *j)).collect();
        let held = columns.iter().zip(&t).filter(|(j, _)| column[**j] == Column::Held);
        let held: f64 = held.map(|(j, t)| t * waters[basis.row_of(*j)]).sum();
        Weights {
            idx,
            sign: if idx < problem.whole_row(0) { 1.0 } else { -1.0 },
            ln_c: ln_amounts[idx],
            t,
            water: row.water - held,
            gamma: if is_solute && ionic_strength > 0.0 {
                model.d_ln_gamma(idx, row.charge, ionic_strength)
            } else {
                0.0
            },
            half_charge_squared: if is_solute { 0.5 * row.charge * row.charge } else { 0.0 },
            osmotic: if is_solute { water.by_molality[idx] } else { 0.0 },
            specific: None,
            acts_on: vec![],
        }
    };
    there.map(weights).collect()
}

/// Gives each specific part that is not zero a position from `first` on, and tells which species have a share in it.
///
/// Returns their number.
fn couple(species: &mut [Weights], model: &Model, first: usize) -> usize {
    let n_species = species.iter().map(|species| species.idx + 1).max().unwrap_or(0);
    let mut place_of = vec![None; n_species];
    for (place, species) in species.iter().enumerate() {
        place_of[species.idx] = Some(place);
    }
    let mut n = 0;
    model.for_each_specific_slope(|i, k, slope| {
        let place_of = |idx: usize| place_of.get(idx).copied().flatten();
        let (Some(i), Some(k)) = (place_of(i), place_of(k)) else { return };
        let own = *species[i].specific.get_or_insert_with(|| {
            n += 1;
            first + n - 1
        });
        species[k].acts_on.push((own, slope));
    });
    n
}
