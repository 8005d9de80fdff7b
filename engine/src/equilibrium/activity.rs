//! The activity model of a ledger becomes equations for the solutes of a water, and what had to be assumed becomes words.

use std::collections::BTreeSet;

use crate::activity::{Composition, Davies, DebyeHuckel, IonCoefficients, Model, Pair, Sit, Solutes};
use crate::chem::Species;
use crate::ledger::{ActivityChoice, IonParameters};
use crate::physics::constants::LN_10;
use crate::physics::water;
use crate::quantity::Quantity;
use crate::text::list;
use crate::units::{Pressure, Temperature};

/// Ionic strength to which the extended Debye-Hückel equation is used, mol/kg(water): that of Kielland's table.
const DEBYE_HUCKEL_VALID_TO: f64 = 0.1;
/// The same for Truesdell and Jones: what the stronger of the fitted salts reach.
const TRUESDELL_JONES_VALID_TO: f64 = 3.0;
/// kelvin from 25 °C beyond which it is said that parameters of ions do not change with temperature.
const NEAR_REFERENCE: f64 = 5.0;
/// A counter-ion of this molality makes a missing interaction coefficient worth a word, mol/kg(water).
const COUNTS: f64 = 0.01;

/// The activity model of a choice for solutes in the solver's order, with A and B of water at temperature and pressure.
#[must_use]
pub fn model(
    choice: &ActivityChoice,
    solutes: &[&Species],
    temperature: Temperature,
    pressure: Pressure,
) -> Model {
    let (a_water, b_water) = water::debye_huckel(temperature.kelvin(), pressure.bar());
    let (equation, stated) = match choice {
        ActivityChoice::Ideal => return Model::IDEAL,
        ActivityChoice::Davies { a, b, water } => {
            (Solutes::Davies(Davies::new(a.unwrap_or(a_water)).with_b(*b)), *water)
        }
        ActivityChoice::DebyeHuckel(own) | ActivityChoice::TruesdellJones(own) => {
            let has_b = matches!(choice, ActivityChoice::TruesdellJones(_));
            let valid_to = if has_b { TRUESDELL_JONES_VALID_TO } else { DEBYE_HUCKEL_VALID_TO };
            let equation = DebyeHuckel {
                a_ln: own.a.unwrap_or(a_water) * LN_10,
                b: b_water * 1e-10,
                solutes: solutes.iter().map(|species| coefficients(own, species)).collect(),
                valid_to,
            };
            (Solutes::DebyeHuckel(equation), own.water)
        }
        ActivityChoice::Sit(own) => {
            let position = |species: &Species| solutes.iter().position(|own| *own == species);
            let pairs = own.epsilon.iter().filter_map(|((j, k), epsilon)| {
                Some(Pair { solutes: (position(j)?, position(k)?), epsilon: epsilon.value() * LN_10 })
            });
            let pairs = pairs.filter(|pair| pair.epsilon != 0.0).collect();
            (Solutes::Sit(Sit { a_ln: own.a.unwrap_or(a_water) * LN_10, pairs }), own.water)
        }
    };
    let model = Model::consistent(equation);
    match stated {
        Some(activity) => model.with_ln_water_activity(activity.ln()),
        None => model,
    }
}

fn coefficients(own: &IonParameters, species: &Species) -> IonCoefficients {
    let b = own.b.get(species).map_or(0.0, Quantity::value);
    IonCoefficients { size: own.size(species).0, linear: b * LN_10 }
}

/// The effect of one parameter of the model that is uncertain.
#[derive(Debug, Clone)]
pub struct ParameterEffect {
    /// The parameter.
    pub parameter: Quantity,
    /// Change of every ln γ per unit of it, at given composition. Shape `(n_species,)`.
    pub ln_gamma: Vec<f64>,
    /// Change of ln a_w per unit of it.
    pub ln_water_activity: f64,
}

/// What the uncertain parameters of a choice do to `model` at a composition: central differences of the equations.
#[must_use]
pub fn parameter_effects(
    choice: &ActivityChoice,
    model: &Model,
    solutes: &[&Species],
    at: Composition<'_>,
) -> Vec<ParameterEffect> {
    const STEP: f64 = 1e-4;

    let effects = uncertain(choice, solutes).into_iter().map(|(parameter, quantity)| {
        let moved = |by: f64| {
            let mut model = model.clone();
            parameter.move_by(by, &mut model.solutes);
            (model.ln_gammas(at), model.ln_water_activity(at))
        };
        let ((above, water_above), (below, water_below)) = (moved(STEP), moved(-STEP));
        let per_unit = |above: f64, below: f64| (above - below) / (2.0 * STEP);
        ParameterEffect {
            parameter: quantity.clone(),
            ln_gamma: above.iter().zip(&below).map(|(above, below)| per_unit(*above, *below)).collect(),
            ln_water_activity: per_unit(water_above, water_below),
        }
    });
    effects.collect()
}

/// A parameter by the positions of its solutes.
enum Parameter {
    Size(usize),
    Linear(usize),
    Epsilon(usize, usize),
}

impl Parameter {
    fn move_by(&self, by: f64, solutes: &mut Solutes) {
        match (self, solutes) {
            (Self::Size(i), Solutes::DebyeHuckel(own)) => own.solutes[*i].size += by,
            (Self::Linear(i), Solutes::DebyeHuckel(own)) => own.solutes[*i].linear += by * LN_10,
            // A pair that has none yet gets one: pairs add up.
            (Self::Epsilon(j, k), Solutes::Sit(own)) => {
                own.pairs.push(Pair { solutes: (*j, *k), epsilon: by * LN_10 });
            }
            _ => {}
        }
    }
}

fn uncertain<'a>(choice: &'a ActivityChoice, solutes: &[&Species]) -> Vec<(Parameter, &'a Quantity)> {
    let position = |species: &Species| solutes.iter().position(|own| *own == species);
    let is_uncertain = |quantity: &Quantity| !quantity.parts().is_empty();
    match choice {
        ActivityChoice::Ideal | ActivityChoice::Davies { .. } => vec![],
        ActivityChoice::DebyeHuckel(own) | ActivityChoice::TruesdellJones(own) => {
            let sizes = own.ion_size.iter().filter_map(|(ion, q)| Some((Parameter::Size(position(ion)?), q)));
            let linear = own.b.iter().filter_map(|(ion, q)| Some((Parameter::Linear(position(ion)?), q)));
            sizes.chain(linear).filter(|(_, quantity)| is_uncertain(quantity)).collect()
        }
        ActivityChoice::Sit(own) => {
            let pair = |(j, k): &(Species, Species)| Some(Parameter::Epsilon(position(j)?, position(k)?));
            let pairs = own.epsilon.iter().filter_map(|(species, quantity)| Some((pair(species)?, quantity)));
            pairs.filter(|(_, quantity)| is_uncertain(quantity)).collect()
        }
    }
}

/// What was assumed of the solutes that matter, each with its molality, in words.
#[must_use]
pub fn assumptions(
    choice: &ActivityChoice,
    solutes: &[(&Species, f64)],
    temperature: Temperature,
) -> Vec<String> {
    let ions = || solutes.iter().filter(|(species, _)| species.charge() != 0);
    let mut words = vec![];
    match choice {
        ActivityChoice::Ideal | ActivityChoice::Davies { .. } => return words,
        ActivityChoice::DebyeHuckel(own) => words.extend(sizes_by_charge(own, ions())),
        ActivityChoice::TruesdellJones(own) => {
            words.extend(sizes_by_charge(own, ions()));
            let without: Vec<&str> =
                ions().filter(|(ion, _)| !own.b.contains_key(ion)).map(|(ion, _)| ion.key()).collect();
            if !without.is_empty() {
                words.push(format!(
                    "no `b` of the Truesdell-Jones equation is known, and 0 is taken, for {}",
                    list(&without)
                ));
            }
        }
        ActivityChoice::Sit(own) => {
            let mut without = BTreeSet::new();
            for (j, _) in ions() {
                for (k, molality) in ions().filter(|(k, _)| j.charge() * k.charge() < 0) {
                    let (j, k) = if j <= k { (*j, *k) } else { (*k, *j) };
                    if *molality >= COUNTS && !own.epsilon.contains_key(&(j.clone(), k.clone())) {
                        without.insert(format!("{} {}", j.key(), k.key()));
                    }
                }
            }
            if !without.is_empty() {
                let without: Vec<String> = without.into_iter().collect();
                words.push(format!(
                    "no interaction coefficient is known, and 0 is taken, for {}",
                    list(&without)
                ));
            }
        }
    }
    if (temperature.celsius() - 25.0).abs() > NEAR_REFERENCE {
        words.push(format!(
            "the ion parameters of the activity model \"{}\" are those of 25 degC; only A and B follow the temperature",
            choice.name()
        ));
    }
    words
}

fn sizes_by_charge<'a>(
    own: &IonParameters,
    ions: impl Iterator<Item = &'a (&'a Species, f64)>,
) -> Option<String> {
    let sized = ions.filter(|(ion, _)| !own.size(ion).1);
    let sized: Vec<String> = sized.map(|(ion, _)| format!("{} {}", ion.key(), own.size(ion).0)).collect();
    (!sized.is_empty())
        .then(|| format!("no ion size is known, and one by charge is taken (angstrom), for {}", list(&sized)))
}
