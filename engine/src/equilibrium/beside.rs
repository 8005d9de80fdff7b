//! What is beside a water and holds amounts of its own, in indices: gas phases, solid solutions, exchangers, surfaces.
//!
//! Each is a [`Host`] of members that are formed from the components of the water, and is one of two things to the solver:
//!
//! ```text
//! rows with amounts        ln n = shift + ln K + ν·λ             a gas of given volume, equivalent fractions, a surface
//! an ideal mixture         Σ_k exp(ln K_k + ν_k·λ) = target      a gas at given pressure, a solid solution, mole fractions
//! ```
//!
//! What is in a host at the start goes to the totals. How each is made is told in `gas_phase`, `exchanger` and `surface`.

use std::collections::BTreeSet;
use std::ops::Range;

use super::assemble::System;
use super::error::EquilibriumError;
use super::exchanger;
use super::gas_phase;
use super::surface::{self, Charged};
use super::treatment::find;
use super::uncertainty::Variable;
use crate::chem::{Rational, Species, rational};
use crate::ledger::{Formation, Ledger};
use crate::quantity::Quantity;
use crate::solve::sensitivity::Given;
use crate::solve::{Converged, Mixture, Problem, Row, Settings, Total};
use crate::units::Temperature;
use crate::water::neighbour::Convention;
use crate::water::{Neighbour, Sample, Treatment};

/// Everything beside a water, in the order in which the solver has it.
#[derive(Debug, Clone, Default)]
pub struct Beside {
    /// Each of them.
    pub hosts: Vec<Host>,
}

/// One thing beside a water.
#[derive(Debug, Clone)]
pub struct Host {
    /// What it is called.
    pub name: String,
    /// What it is.
    pub kind: HostKind,
    /// What it can hold.
    pub members: Vec<Member>,
    /// Where the solver has its members.
    pub place: Place,
    /// What its size was stated as, with what that acts on.
    pub stated: Vec<Stated>,
}

/// What something beside a water is.
#[derive(Debug, Clone)]
pub enum HostKind {
    /// A gas of given volume, L per kilogram of water.
    GasOfVolume(f64),
    /// A gas of given pressure.
    GasOfPressure {
        /// Its pressure less that of the vapour of water in it, bar.
        dry: f64,
        /// Change of the latter with temperature, bar/K.
        vapour_slope: f64,
    },
    /// An ideal solid solution.
    SolidSolution,
    /// An ion exchanger.
    Exchanger(Convention),
    /// A charged surface.
    Surface(Charged),
}

/// Something that a host can hold.
#[derive(Debug, Clone)]
pub struct Member {
    /// The gas, mineral or site species.
    pub species: Species,
    /// Its formation; of rows with amounts, with the shift of the host in ln K.
    pub row: Row,
}

/// Where the solver has the members of a host.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Place {
    /// Among the rows with amounts, from this one on.
    Rows(usize),
    /// As the members of a mixture.
    Mixture(usize),
}

/// A stated size of a host.
#[derive(Debug, Clone)]
pub struct Stated {
    /// The size.
    pub quantity: Quantity,
    /// What it acts on.
    pub acts_on: ActsOn,
    /// Derivative of ln K of the rows, or of ln of the target, by it.
    pub by: f64,
}

/// What a stated size acts on.
#[derive(Debug, Clone)]
pub enum ActsOn {
    /// These rows with amounts, counted from the first of the host.
    Rows(Range<usize>),
    /// The target of the mixture.
    Target,
}

/// Moles per kilogram of water that are there at the start, with what a mole of them adds to every total.
pub(super) type Load = (Quantity, Vec<f64>);

impl Beside {
    /// Reads what is beside a sample, and what is in it at the start; `water` is in kilograms.
    ///
    /// # Errors
    ///
    /// What the ledger does not know, or a name given twice.
    pub(super) fn read(
        sample: &Sample,
        system: &System,
        water: f64,
        settings: &Settings,
    ) -> Result<(Self, Vec<Load>), EquilibriumError> {
        let mut beside = Self::default();
        let mut loads = Vec::new();
        for treatment in sample.treatments() {
            let Treatment::Beside(neighbour) = treatment else { continue };
            let name = neighbour.name();
            if beside.host(name).is_some() {
                let why = format!("there is a `{name}` beside the water already");
                return Err(EquilibriumError::Analyte { key: name.into(), why });
            }
            let mut host = match &**neighbour {
                Neighbour::Gas(gas) => {
                    let (host, loaded) = gas_phase::read(gas, sample, system, water)?;
                    loads.extend(loaded);
                    host
                }
                Neighbour::SolidSolution { name, members } => solid_solution(name, members, system)?,
                Neighbour::Exchanger(exchanger) => {
                    let (host, loaded) = exchanger::read(exchanger, sample, system, settings)?;
                    loads.extend(loaded);
                    host
                }
                Neighbour::Surface(given) => {
                    let charge = system.n_components() + beside.n_charges();
                    let (host, loaded) = surface::read(given, system, water, charge)?;
                    loads.extend(loaded);
                    host
                }
            };
            host.place = match host.place {
                Place::Rows(_) => Place::Rows(beside.n_rows()),
                Place::Mixture(_) => Place::Mixture(beside.mixtures().count()),
            };
            // A solution of minerals whose elements are not there cannot form.
            if !host.members.is_empty() {
                beside.hosts.push(host);
            }
        }
        Ok((beside, loads))
    }

    /// Something by its name.
    #[must_use]
    pub fn host(&self, name: &str) -> Option<&Host> {
        self.hosts.iter().find(|host| host.name == name)
    }

    /// Whether there is nothing.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.hosts.is_empty()
    }

    /// The problem of a water with all that is beside it.
    #[must_use]
    pub fn extend(&self, mut problem: Problem) -> Problem {
        let of_water = problem.n_components;
        problem.n_components += self.n_charges();
        problem.totals.truncate(of_water);
        problem.totals.resize(problem.n_components, Total::from(0.0));
        problem.others = self.hosts.iter().flat_map(Host::rows).collect();
        problem.mixtures = self.mixtures().filter_map(Host::mixture).collect();
        problem
    }

    /// Takes from an answer what surfaces depend on beside the composition; whether that was still another.
    pub(super) fn update(&mut self, converged: &Converged) -> bool {
        let charged = self.hosts.iter_mut().filter_map(|host| match &mut host.kind {
            HostKind::Surface(charged) => Some(charged),
            _ => None,
        });
        charged.map(|charged| charged.update(converged)).fold(false, |any, own| any | own)
    }

    fn n_rows(&self) -> usize {
        self.hosts.iter().map(|host| host.rows().len()).sum()
    }

    fn n_charges(&self) -> usize {
        self.hosts.iter().filter(|host| matches!(host.kind, HostKind::Surface(_))).count()
    }

    fn mixtures(&self) -> impl Iterator<Item = &Host> {
        self.hosts.iter().filter(|host| matches!(host.place, Place::Mixture(_)))
    }
}

impl Host {
    /// The rows with amounts that it is; none of a mixture.
    fn rows(&self) -> Vec<Row> {
        let Place::Rows(_) = self.place else { return vec![] };
        let mut rows: Vec<Row> = self.members.iter().map(|member| member.row.clone()).collect();
        if let HostKind::Surface(charged) = &self.kind {
            rows.extend(charged.rows());
        }
        rows
    }

    fn mixture(&self) -> Option<Mixture> {
        let Place::Mixture(_) = self.place else { return None };
        let ln_target = match self.kind {
            HostKind::GasOfPressure { dry, .. } => dry.ln(),
            _ => 0.0,
        };
        let members = self.members.iter().map(|member| member.row.clone()).collect();
        Some(Mixture { members, ln_target })
    }

    /// Position of a species among its members.
    #[must_use]
    pub fn member(&self, species: &Species) -> Option<usize> {
        self.members.iter().position(|member| member.species == *species)
    }

    /// ln of the amount of each member, mol/kg(water).
    #[must_use]
    pub fn ln_amounts(&self, converged: &Converged) -> Vec<f64> {
        match self.place {
            Place::Rows(first) => converged.ln_others[first..first + self.members.len()].to_vec(),
            Place::Mixture(p) => {
                let mixed = &converged.mixtures[p];
                mixed.ln_x.iter().map(|ln_x| ln_x + mixed.amount.ln()).collect()
            }
        }
    }

    /// What the ln of the amount of a member is to the derivatives.
    #[must_use]
    pub fn variable(&self, member: usize) -> Variable {
        match self.place {
            Place::Rows(first) => Variable::LnOther(first + member),
            Place::Mixture(p) => Variable::LnMember(p, member),
        }
    }

    /// The members with the derivative of a number by ln K of each, and the stated sizes with that by them.
    pub(super) fn slopes<'a>(
        &'a self,
        by: &'a Given,
    ) -> (impl Iterator<Item = (&'a Species, f64)>, Vec<(Quantity, f64)>) {
        let by_rows: Vec<f64> = match self.place {
            Place::Rows(first) => by.others[first..first + self.rows().len()].to_vec(),
            // A target acts as ln K does, the other way round.
            Place::Mixture(p) => by.mixtures[p].iter().map(|slope| -slope).collect(),
        };
        let stated = self.stated.iter().map(|stated| {
            let slope: f64 = match &stated.acts_on {
                ActsOn::Rows(range) => by_rows[range.clone()].iter().sum(),
                ActsOn::Target => -by_rows.iter().sum::<f64>(),
            };
            (stated.quantity.clone(), slope * stated.by)
        });
        let stated = stated.collect();
        (self.members.iter().map(|member| &member.species).zip(by_rows), stated)
    }

    /// Adds the change per kelvin of what the solver is given; `of` tells that of ln K of a species.
    pub(super) fn add_temperature(&self, given: &mut Given, at: Temperature, of: &dyn Fn(&Species) -> f64) {
        let shift = match self.kind {
            HostKind::GasOfVolume(_) => -1.0 / at.kelvin(),
            HostKind::GasOfPressure { dry, vapour_slope } => -vapour_slope / dry,
            _ => 0.0,
        };
        let by_member = self.members.iter().map(|member| of(&member.species));
        match self.place {
            Place::Rows(first) => {
                given.others[first..].iter_mut().zip(by_member).for_each(|(own, by)| *own += by + shift);
            }
            Place::Mixture(p) => {
                given.mixtures[p].iter_mut().zip(by_member).for_each(|(own, by)| *own += shift - by);
            }
        }
    }
}

fn solid_solution(name: &str, members: &[String], system: &System) -> Result<Host, EquilibriumError> {
    let member = |member: &String| {
        let species = find(system.ledger(), member, Species::is_solid, "solid")?.clone();
        Ok(system.formed_row(&species).map(|row| Member { species: species.clone(), row: row.clone() }))
    };
    let members: Vec<Option<Member>> = members.iter().map(member).collect::<Result<_, EquilibriumError>>()?;
    Ok(Host {
        name: name.into(),
        kind: HostKind::SolidSolution,
        members: members.into_iter().flatten().collect(),
        place: Place::Mixture(0),
        stated: vec![],
    })
}

/// Components that something beside a water brings with it.
pub(super) fn components(
    neighbour: &Neighbour,
    ledger: &Ledger,
) -> Result<BTreeSet<usize>, EquilibriumError> {
    let of = |formed: &Formation| -> Vec<usize> { formed.stoichiometry.iter().map(|(j, _)| *j).collect() };
    let formation = |species: &Species| ledger.formations().formation(species).expect("just found");
    let mut present = BTreeSet::new();
    match neighbour {
        Neighbour::Gas(gas) => {
            for (gas, _) in &gas.pressures {
                present.extend(of(formation(find(ledger, gas, Species::is_gas, "gas")?)));
            }
        }
        // A solid solution brings nothing with it: it needs what is there already.
        Neighbour::SolidSolution { members, .. } => {
            for member in members {
                find(ledger, member, Species::is_solid, "solid")?;
            }
        }
        Neighbour::Exchanger(given) => {
            let species = on_sites(ledger, &given.name);
            present.extend(species.iter().flat_map(|formed| site_components(ledger, formed)));
            if let Some(form) = &given.form {
                present.extend(of(exchanger::holder(form, &given.name, ledger)?));
            }
        }
        Neighbour::Surface(given) => {
            for (site, _) in &given.sites {
                present.extend(of(surface::reference(site, ledger)?));
            }
        }
    }
    Ok(present)
}

/// The species on the sites of a solid, by its name.
pub(super) fn on_sites<'a>(ledger: &'a Ledger, solid: &str) -> Vec<&'a Formation> {
    let is_there = |species: &Species| species.is_on_sites() && species.mineral_name() == Some(solid);
    ledger.formations().species.iter().filter(|formed| is_there(&formed.species)).collect()
}

/// The components among those of a species that are on sites themselves.
pub(super) fn site_components(ledger: &Ledger, formed: &Formation) -> Vec<usize> {
    let components = &ledger.formations().components;
    let own = formed.stoichiometry.iter().map(|(j, _)| *j);
    own.filter(|j| components[*j].is_on_sites()).collect()
}

/// What a mole of a species adds to every total of the system.
pub(super) fn change(system: &System, stoichiometry: &[(usize, Rational)]) -> Vec<f64> {
    let mut change = vec![0.0; system.n_components()];
    for (j, nu) in stoichiometry {
        if let Some(k) = system.components().iter().position(|own| own == j) {
            change[k] += rational::to_f64(*nu);
        }
    }
    change
}
