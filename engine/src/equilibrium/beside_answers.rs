//! What a state answers about what is beside the water.

use super::beside::{Host, HostKind};
use super::gas_phase::{moles_per_litre_bar, vapour_pressure, vapour_slope};
use super::observable::ObservableError;
use super::state::{Answer, State, amount, no_answer};
use super::surface::Charged;
use super::uncertainty::{Slopes, Variable};
use crate::chem::{Species, rational};
use crate::ledger::Formation;
use crate::physics::constants::FARADAY;
use crate::text::list;

impl State {
    /// What is beside the water by its name.
    #[must_use]
    pub fn beside(&self, name: &str) -> Option<&Host> {
        self.outcome().beside.host(name)
    }

    fn amounts(&self, host: &Host) -> Vec<f64> {
        host.ln_amounts(self.converged()).into_iter().map(f64::exp).collect()
    }

    /// `Σ weight · amount` over the members of a host, per kilogram of water.
    fn sum_beside(&self, host: &Host, weight: impl Fn(usize, &Species) -> f64) -> (f64, Slopes) {
        let terms = host.members.iter().zip(self.amounts(host)).enumerate();
        let terms = terms.map(|(k, (member, n))| (host.variable(k), weight(k, &member.species) * n));
        let slopes: Slopes = terms.filter(|(_, term)| *term != 0.0).collect();
        (slopes.iter().map(|(_, term)| term).sum(), slopes)
    }

    /// Adds what is beside the water to a total.
    pub(super) fn add_beside(&self, total: &mut Answer, count: impl Fn(&Formation) -> f64) {
        let formations = self.system().ledger().formations();
        for host in &self.outcome().beside.hosts {
            let of = |species: &Species| count(formations.formation(species).expect("members are formed"));
            let (value, slopes) = self.sum_beside(host, |_, species| of(species));
            total.value += value;
            total.slopes.extend(slopes);
        }
    }

    /// A gas, mineral or site species by its name, as it is held beside the water.
    fn member_named(&self, name: &str) -> Option<Species> {
        let ledger = self.system().ledger();
        let found = ledger.find_phase(name).or_else(|_| ledger.find_species(name)).ok()?;
        let is_held = self.outcome().beside.hosts.iter().any(|host| host.member(found).is_some());
        is_held.then(|| found.clone())
    }

    /// Moles of a host, or of a member in all hosts and as a pure phase, with the whole water.
    pub(super) fn amount_beside(&self, name: &str) -> Option<Answer> {
        let water = self.water();
        let times_water = |slopes: Slopes| slopes.into_iter().map(|(v, s)| (v, s * water)).collect();
        if let Some(host) = self.beside(name) {
            let (value, slopes) = self.sum_beside(host, |_, _| 1.0);
            return Some(Answer::new(value * water, "mol", times_water(slopes)));
        }
        let species = self.member_named(name)?;
        let (mut value, mut slopes) = self.held_beside(&species);
        if let Some(solid) = self.solid(&species) {
            value += solid.amount;
            slopes.push(solid.slope);
        }
        Some(amount(value * water, "mol", &species, times_water(slopes)))
    }

    /// What is held of a species beside the water, mol/kg(water).
    pub(super) fn held_beside(&self, species: &Species) -> (f64, Slopes) {
        let (mut value, mut slopes) = (0.0, Slopes::new());
        for host in &self.outcome().beside.hosts {
            let (own, by) = self.sum_beside(host, |_, member| f64::from(u8::from(member == species)));
            value += own;
            slopes.extend(by);
        }
        (value, slopes)
    }

    /// The mole fraction of a member in what holds it; `None` of what nothing holds.
    pub(super) fn fraction_beside(&self, name: &str, asked: &str) -> Option<Result<Answer, ObservableError>> {
        let species = self.member_named(name)?;
        Some(self.fraction(&species, asked, |_| 1.0))
    }

    pub(super) fn equivalent_fraction(&self, name: &str, asked: &str) -> Result<Answer, ObservableError> {
        let species = self.member_named(name).filter(Species::is_on_sites);
        let species = species.ok_or_else(|| {
            no_answer(
                asked,
                format!("nothing on an exchanger has this name; there are {}", list(&self.site_species())),
            )
        })?;
        self.fraction(&species, asked, |species| rational::to_f64(species.sites()))
    }

    fn site_species(&self) -> Vec<String> {
        let members = self.outcome().beside.hosts.iter().flat_map(|host| &host.members);
        let on_sites = members.filter(|member| member.species.is_on_sites());
        on_sites.map(|member| member.species.key().to_string()).collect()
    }

    /// `w_i n_i / Σ w n` in the one host that holds a species; of a mixture that is not there, as it would be.
    fn fraction(
        &self,
        species: &Species,
        asked: &str,
        weight: impl Fn(&Species) -> f64,
    ) -> Result<Answer, ObservableError> {
        let mut holders = self.outcome().beside.hosts.iter().filter(|host| host.member(species).is_some());
        let (Some(host), None) = (holders.next(), holders.next()) else {
            return Err(no_answer(asked, "several things beside the water hold it".into()));
        };
        let of = host.member(species).expect("just found");
        if let super::beside::Place::Mixture(p) = host.place
            && self.converged().mixtures[p].amount == 0.0
        {
            let value = self.converged().mixtures[p].ln_x[of].exp();
            return Ok(Answer { is_unstated: true, ..Answer::new(value, "1", vec![]) });
        }
        let (whole, terms) = self.sum_beside(host, |_, species| weight(species));
        let own = host.variable(of);
        let part = terms.iter().find(|(variable, _)| *variable == own).map_or(0.0, |(_, term)| *term);
        let x = part / whole;
        let mut slopes: Slopes =
            terms.iter().map(|(variable, term)| (*variable, -x * term / whole)).collect();
        slopes.push((own, x));
        Ok(Answer::new(x, "1", slopes))
    }

    fn gas(&self, name: &str, asked: &str) -> Result<&Host, ObservableError> {
        let is_gas =
            |host: &&Host| matches!(host.kind, HostKind::GasOfVolume(_) | HostKind::GasOfPressure { .. });
        self.beside(name).filter(is_gas).ok_or_else(|| {
            let hosts = self.outcome().beside.hosts.iter().filter(is_gas);
            let names: Vec<&str> = hosts.map(|host| host.name.as_str()).collect();
            match names.is_empty() {
                true => no_answer(asked, "there is no gas phase; `.headspace` and `.bubble` make one".into()),
                false => no_answer(
                    asked,
                    format!("there is no gas phase of this name; there are {}", list(&names)),
                ),
            }
        })
    }

    /// Volume of a gas phase, L.
    pub(super) fn gas_volume(&self, name: &str, asked: &str) -> Result<Answer, ObservableError> {
        let host = self.gas(name, asked)?;
        let water = self.water();
        match host.kind {
            HostKind::GasOfPressure { dry, .. } => {
                let per_mole = water / (moles_per_litre_bar(self.temperature()) * dry);
                let (value, mut slopes) = self.sum_beside(host, |_, _| per_mole);
                let by_kelvin = 1.0 / self.temperature().kelvin() + vapour_slope(self.temperature()) / dry;
                slopes.push((Variable::Temperature, value * by_kelvin));
                // At a given amount a gas shrinks by d ln P.
                let stated = host.stated.iter().map(|stated| (stated.quantity.clone(), -stated.by * value));
                let partials = stated.collect();
                Ok(Answer { partials, ..Answer::new(value, "L", slopes) })
            }
            HostKind::GasOfVolume(litres) => {
                let partials = host.stated.iter().map(|stated| (stated.quantity.clone(), 1.0)).collect();
                Ok(Answer { partials, ..Answer::new(litres * water, "L", vec![]) })
            }
            _ => unreachable!("a gas phase"),
        }
    }

    /// Pressure of a gas phase with its vapour of water, bar.
    pub(super) fn gas_pressure(&self, name: &str, asked: &str) -> Result<Answer, ObservableError> {
        let host = self.gas(name, asked)?;
        let vapour = vapour_pressure(self.temperature());
        match host.kind {
            HostKind::GasOfPressure { .. } if self.sum_beside(host, |_, _| 1.0).0 == 0.0 => {
                Err(no_answer(asked, "this gas phase has vanished: all of it is dissolved".into()))
            }
            HostKind::GasOfPressure { dry, .. } => {
                let partials = host.stated.iter().map(|stated| (stated.quantity.clone(), 1.0)).collect();
                Ok(Answer { partials, ..Answer::new(dry + vapour, "bar", vec![]) })
            }
            HostKind::GasOfVolume(litres) => {
                let per_mole = 1.0 / (moles_per_litre_bar(self.temperature()) * litres);
                let (value, mut slopes) = self.sum_beside(host, |_, _| per_mole);
                let by_kelvin = value / self.temperature().kelvin() + vapour_slope(self.temperature());
                slopes.push((Variable::Temperature, by_kelvin));
                let stated = host.stated.iter().map(|stated| (stated.quantity.clone(), -stated.by * value));
                let partials = stated.collect();
                Ok(Answer { partials, ..Answer::new(value + vapour, "bar", slopes) })
            }
            _ => unreachable!("a gas phase"),
        }
    }

    fn charged(&self, name: &str, asked: &str) -> Result<(&Host, &Charged), ObservableError> {
        let found = self.beside(name).and_then(|host| match &host.kind {
            HostKind::Surface(charged) => Some((host, charged)),
            _ => None,
        });
        found.ok_or_else(|| {
            no_answer(asked, "there is no surface of this name; `.surface` puts one into a water".into())
        })
    }

    /// Potential of a surface, V.
    pub(super) fn surface_potential(&self, name: &str, asked: &str) -> Result<Answer, ObservableError> {
        let (_, charged) = self.charged(name, asked)?;
        let potential = charged.potential(self.converged());
        let slopes = vec![
            (Variable::LnActivity(charged.charge), charged.volts()),
            (Variable::Temperature, potential / self.temperature().kelvin()),
        ];
        Ok(Answer::new(potential, "V", slopes))
    }

    /// Charge of the groups on a surface by its area, C/m2.
    pub(super) fn surface_charge(&self, name: &str, asked: &str) -> Result<Answer, ObservableError> {
        let (host, charged) = self.charged(name, asked)?;
        let per_equivalent = FARADAY / charged.area;
        let (value, slopes) =
            self.sum_beside(host, |_, species| f64::from(species.charge()) * per_equivalent);
        let area = charged.stated_area.clone();
        let by_area = -value / area.value();
        Ok(Answer { partials: vec![(area, by_area)], ..Answer::new(value, "C/m2", slopes) })
    }
}
