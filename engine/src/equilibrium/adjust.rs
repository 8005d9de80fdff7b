//! How much of some reagents brings a water to some targets.
//!
//! One reagent and one target are one equation in one unknown, searched for changes of sign over the whole range of the
//! reagent, so that all its roots are counted. Several are Newton's method with the exact sensitivities of the targets
//! from several starts. The amounts d found for targets g(d, p) = t depend on everything p that the water does, and
//! carry it on:
//!
//! ```text
//! ∂d/∂p = -G⁻¹ ∂(g - t)/∂p,    G_ij = ∂g_i/∂d_j
//! ```

use super::analysis::Analysed;
use super::dosing::short;
use super::error::EquilibriumError;
use super::observable::Asked;
use super::state::State;
use super::treatment::treat;
use crate::quantity::{Input, Quantity};
use crate::solve::Settings;
use crate::solve::dense::Lu;
use crate::solve::scalar::{self, Tolerance};
use crate::text::list;
use crate::units::{Style, Unit};
use crate::water::concentration::{Amount, Per, Solution};
use crate::water::sample::StatedTreatment;
use crate::water::{Adjust, Dose, Sample, Treatment};

/// Amounts are searched in ln(1 + d / this), mol/kg(water): even below it, by decades above.
const SMALL: f64 = 1e-6;
const INTERVALS: usize = 48;
/// A change of sign is a root only where the miss is this small a part of what it spans; else it is a jump.
const JUMP: f64 = 1e-8;
/// Starts of Newton's method along each reagent.
const STARTS: [f64; 3] = [0.25, 0.5, 0.85];
const MOST_STEPS: usize = 60;
/// Two answers closer than this part of each other are one.
const SAME: f64 = 1e-6;

/// The sample with every [`Treatment::Adjust`] replaced by the doses that meet it, and what is to be said of them.
///
/// # Errors
///
/// Returns a target that cannot be read or that no amount reaches, with the nearest value.
pub fn resolve(
    sample: &Sample,
    analysed: &Analysed,
    settings: &Settings,
) -> Result<(Sample, Vec<String>), EquilibriumError> {
    let (mut done, mut notes) = (Vec::new(), Vec::new());
    for (treatment, stated) in sample.stated_treatments() {
        match treatment {
            Treatment::Adjust(adjust) => {
                let search = Search::new(sample, &done, analysed, settings, &adjust)?;
                let (amounts, note) = search.amounts()?;
                notes.push(note);
                let doses = search.doses(&amounts)?;
                done.extend(doses.into_iter().map(|dose| (Treatment::Dose(dose), None)));
            }
            other => done.push((other, stated)),
        }
    }
    Ok((sample.with_treatments(done), notes))
}

/// Whether there is anything to resolve.
#[must_use]
pub fn is_needed(sample: &Sample) -> bool {
    sample.treatments().iter().any(|treatment| matches!(treatment, Treatment::Adjust(_)))
}

struct Search<'a> {
    sample: &'a Sample,
    before: &'a [StatedTreatment],
    analysed: &'a Analysed,
    settings: &'a Settings,
    reagents: Vec<&'a str>,
    /// The least and the most of each reagent, mol/kg(water).
    bounds: Vec<(f64, f64)>,
    names: Vec<&'a str>,
    asked: Vec<Asked>,
    targets: Vec<&'a Quantity>,
}

impl<'a> Search<'a> {
    fn new(
        sample: &'a Sample,
        before: &'a [StatedTreatment],
        analysed: &'a Analysed,
        settings: &'a Settings,
        adjust: &'a Adjust,
    ) -> Result<Self, EquilibriumError> {
        let asked = |(name, target): &(String, Quantity)| {
            let mut asked =
                Asked::parse(name).map_err(|error| EquilibriumError::Unreachable(error.to_string()))?;
            if *target.unit() != Unit::one() {
                asked.unit = Some(target.unit().clone());
            }
            Ok::<Asked, EquilibriumError>(asked)
        };
        let litre = Solution::pure(1.0);
        let water = |amount: &Amount| {
            amount.moles.value() * if amount.per == Per::Litre { 1.0 } else { amount.per.to_basis(&litre) }
        };
        Ok(Self {
            sample,
            before,
            analysed,
            settings,
            reagents: adjust.reagents.iter().map(|(name, ..)| name.as_str()).collect(),
            bounds: adjust.reagents.iter().map(|(_, least, most)| (water(least), water(most))).collect(),
            names: adjust.targets.iter().map(|(name, _)| name.as_str()).collect(),
            asked: adjust.targets.iter().map(asked).collect::<Result<_, _>>()?,
            targets: adjust.targets.iter().map(|(_, target)| target).collect(),
        })
    }

    /// The amounts, mol/kg(water), with how many answers there are in words.
    fn amounts(&self) -> Result<(Vec<f64>, String), EquilibriumError> {
        let answers = if self.reagents.len() == 1 { self.every_root()? } else { self.every_answer()? };
        let first = answers[0].clone();
        let reagents = list(&self.reagents);
        let note = match answers.len() {
            1 => format!("`adjust`: one amount of {reagents} reaches {}", self.wanted()),
            n => format!(
                "`adjust`: {n} amounts of {reagents} reach {}: {} mol/kg(water); the first is taken, `between` chooses",
                self.wanted(),
                list(&answers.iter().map(|answer| words(answer)).collect::<Vec<_>>())
            ),
        };
        Ok((first, note))
    }

    fn wanted(&self) -> String {
        let target = |(name, target): (&&str, &&Quantity)| format!("{name} {}", shown(target));
        list(&self.names.iter().zip(&self.targets).map(target).collect::<Vec<_>>())
    }

    /// The water with so much of each reagent.
    fn state(&self, amounts: Vec<Quantity>) -> Result<State, EquilibriumError> {
        let doses = self.reagents.iter().zip(amounts).map(|(reagent, moles)| {
            let amount = Amount { moles, per: Per::Water };
            (Treatment::Dose(Dose { reagent: (*reagent).into(), amount }), None)
        });
        let trial = self.sample.with_treatments(self.before.iter().cloned().chain(doses).collect());
        let outcome = treat(&trial, self.analysed, self.settings)?;
        let outcomes = self.analysed.outcome.iter().cloned().chain([outcome]).collect();
        Ok(State::new(trial, self.analysed.clone(), outcomes))
    }

    /// By how much each target is missed; NaN where there is no equilibrium or no answer.
    fn misses(&self, amounts: &[f64], why: &mut Option<String>) -> Result<Vec<f64>, EquilibriumError> {
        let state = match self.state(amounts.iter().map(|d| Quantity::exact(*d, molality())).collect()) {
            Err(EquilibriumError::Stopped) => return Err(EquilibriumError::Stopped),
            Err(error) => {
                *why = Some(error.to_string());
                return Ok(vec![f64::NAN; amounts.len()]);
            }
            Ok(state) => state,
        };
        let miss = |(asked, target): (&Asked, &&Quantity)| match state.number(asked) {
            Ok((value, _)) => value - target.value(),
            Err(error) => {
                *why = Some(error.to_string());
                f64::NAN
            }
        };
        Ok(self.asked.iter().zip(&self.targets).map(miss).collect())
    }

    fn every_root(&self) -> Result<Vec<Vec<f64>>, EquilibriumError> {
        let mut why = None;
        let mut misses = |u: f64| Ok::<f64, EquilibriumError>(self.misses(&[amount(u)], &mut why)?[0]);
        let (least, most) = self.bounds[0];
        let range = (coordinate(least), coordinate(most));
        let found = scalar::all_roots(&mut misses, range, INTERVALS, Tolerance { x: 1e-15, f: 0.0 })?;
        let finite: Vec<_> = found.samples.iter().filter(|sample| sample.f.is_finite()).collect();
        let span = finite.iter().map(|sample| sample.f.abs()).fold(0.0, f64::max);
        let roots: Vec<Vec<f64>> = found
            .roots
            .iter()
            .filter(|root| root.f.abs() <= JUMP * span)
            .map(|root| vec![amount(root.x)])
            .collect();
        if !roots.is_empty() {
            return Ok(roots);
        }
        let nearest = finite.into_iter().min_by(|a, b| a.f.abs().total_cmp(&b.f.abs()));
        Err(self.unreachable(nearest.map(|nearest| (vec![amount(nearest.x)], vec![nearest.f])), why))
    }

    fn unreachable(&self, nearest: Option<(Vec<f64>, Vec<f64>)>, why: Option<String>) -> EquilibriumError {
        let range = |((reagent, bounds), _): ((&&str, &(f64, f64)), usize)| {
            format!("{} to {} mol/kg(water) of `{reagent}`", short(bounds.0), short(bounds.1))
        };
        let ranges: Vec<String> = self.reagents.iter().zip(&self.bounds).zip(0..).map(range).collect();
        let told = match nearest {
            None => why.unwrap_or_else(|| "there is no equilibrium".into()),
            Some((amounts, misses)) => {
                let value = |((name, target), miss): ((&&str, &&Quantity), &f64)| {
                    format!("{name} {}", short(target.value() + miss))
                };
                let values: Vec<String> =
                    self.names.iter().zip(&self.targets).zip(&misses).map(value).collect();
                format!("the nearest is {}, with {} mol/kg(water)", list(&values), words(&amounts))
            }
        };
        EquilibriumError::Unreachable(format!(
            "`adjust`: nothing from {} brings the water to {}; {told}",
            ranges.join(" and "),
            self.wanted()
        ))
    }

    /// Newton's method from every start.
    fn every_answer(&self) -> Result<Vec<Vec<f64>>, EquilibriumError> {
        let n = self.reagents.len();
        let (mut answers, mut nearest, mut why) =
            (Vec::<Vec<f64>>::new(), None::<(f64, Vec<f64>, Vec<f64>)>, None);
        for start in 0..STARTS.len().pow(n as u32) {
            let share = |j: usize| STARTS[start / STARTS.len().pow(j as u32) % STARTS.len()];
            let between = |j: usize| {
                let (least, most) = self.bounds[j];
                coordinate(least) + share(j) * (coordinate(most) - coordinate(least))
            };
            let (u, misses, met) = self.newton((0..n).map(between).collect(), &mut why)?;
            let amounts: Vec<f64> = u.iter().map(|u| amount(*u)).collect();
            let size = self.size(&misses);
            let is_new = |known: &Vec<f64>| {
                known.iter().zip(&amounts).any(|(a, b)| (a - b).abs() > SAME * (a.abs() + b.abs()) + 1e-12)
            };
            if met && answers.iter().all(is_new) {
                answers.push(amounts.clone());
            }
            if size.is_finite() && nearest.as_ref().is_none_or(|(least, ..)| size < *least) {
                nearest = Some((size, amounts, misses));
            }
        }
        if answers.is_empty() {
            return Err(self.unreachable(nearest.map(|(_, amounts, misses)| (amounts, misses)), why));
        }
        answers.sort_by(|a, b| a.iter().sum::<f64>().total_cmp(&b.iter().sum()));
        Ok(answers)
    }

    /// Misses on one scale: each as a part of its target, indices and pH as they are.
    fn size(&self, misses: &[f64]) -> f64 {
        let part = |(miss, target): (&f64, &&Quantity)| {
            let scale = if *target.unit() == Unit::one() { 1.0 } else { target.value().abs().max(1e-12) };
            (miss / scale).powi(2)
        };
        misses.iter().zip(&self.targets).map(part).sum::<f64>().sqrt()
    }

    fn newton(
        &self,
        mut u: Vec<f64>,
        why: &mut Option<String>,
    ) -> Result<(Vec<f64>, Vec<f64>, bool), EquilibriumError> {
        let at = |u: &[f64]| u.iter().map(|u| amount(*u)).collect::<Vec<_>>();
        let mut misses = self.misses(&at(&u), why)?;
        for _ in 0..MOST_STEPS {
            let size = self.size(&misses);
            if !size.is_finite() || size < 1e-13 {
                break;
            }
            let Some(gradient) = self.gradient(&at(&u))? else { break };
            let by_u =
                |row: &Vec<f64>| row.iter().zip(&u).map(|(slope, u)| slope * SMALL * u.exp()).collect();
            let jacobian: Vec<Vec<f64>> = gradient.iter().map(by_u).collect();
            let wanted: Vec<f64> = misses.iter().map(|miss| -miss).collect();
            let Some(step) = solve(&jacobian, &wanted) else { break };
            let mut share = 1.0;
            let better = loop {
                let next: Vec<f64> = u
                    .iter()
                    .zip(&step)
                    .zip(&self.bounds)
                    .map(|((u, step), bounds)| {
                        (u + share * step.clamp(-3.0, 3.0)).clamp(coordinate(bounds.0), coordinate(bounds.1))
                    })
                    .collect();
                let there = self.misses(&at(&next), why)?;
                if self.size(&there) < size {
                    break Some((next, there));
                }
                share *= 0.5;
                if share < 1e-4 {
                    break None;
                }
            };
            let Some((next, there)) = better else { break };
            (u, misses) = (next, there);
        }
        let met = self.size(&misses) < 1e-9;
        Ok((u, misses, met))
    }

    /// ∂g_i/∂d_j; none where a target does not change smoothly.
    fn gradient(&self, amounts: &[f64]) -> Result<Option<Vec<Vec<f64>>>, EquilibriumError> {
        let label = |j: usize| format!("amount of {}", self.reagents[j]);
        let inputs: Vec<Input> = (0..amounts.len())
            .map(|j| Input::written(&label(j), Some(1.0)).expect("a plain sigma"))
            .collect();
        let tagged = amounts.iter().zip(&inputs);
        let tagged = tagged.map(|(d, input)| Quantity::of_input(*d, molality(), input.clone())).collect();
        let state = self.state(tagged)?;
        let mut gradient = Vec::new();
        for asked in &self.asked {
            let Ok(answer) = state.answer(asked) else { return Ok(None) };
            let slope = |input: &Input| {
                let part = answer.parts().iter().find(|part| part.input == *input);
                part.map_or(0.0, |part| part.sensitivity)
            };
            gradient.push(inputs.iter().map(slope).collect());
        }
        Ok(Some(gradient))
    }

    /// The doses, with the uncertainty they take over from the water and from their targets.
    fn doses(&self, amounts: &[f64]) -> Result<Vec<Dose>, EquilibriumError> {
        let state = self.state(amounts.iter().map(|d| Quantity::exact(*d, molality())).collect())?;
        let answers: Result<Vec<Quantity>, _> = self.asked.iter().map(|asked| state.answer(asked)).collect();
        let answers = answers.map_err(|error| EquilibriumError::Unreachable(error.to_string()))?;
        let gradient = self.gradient(amounts)?;
        let unit_vector =
            |j: usize| (0..amounts.len()).map(|i| f64::from(u8::from(i == j))).collect::<Vec<_>>();
        let inverse: Option<Vec<Vec<f64>>> = gradient
            .and_then(|gradient| (0..amounts.len()).map(|j| solve(&gradient, &unit_vector(j))).collect());
        let dose = |(j, d): (usize, &f64)| {
            // Column i of the inverse is the change of all amounts per unit of target i.
            let moles = match &inverse {
                Some(inverse) => {
                    let partials: Vec<(&Quantity, f64)> = (0..amounts.len())
                        .flat_map(|i| [(&answers[i], -inverse[i][j]), (self.targets[i], inverse[i][j])])
                        .collect();
                    Quantity::from_partials(*d, molality(), &partials)
                }
                None => Quantity::measured(*d, molality(), None, &format!("amount of {}", self.reagents[j])),
            };
            let moles = moles.map_err(|error| EquilibriumError::Unreachable(error.to_string()))?;
            Ok(Dose { reagent: self.reagents[j].into(), amount: Amount { moles, per: Per::Water } })
        };
        amounts.iter().enumerate().map(dose).collect()
    }
}

fn molality() -> Unit {
    Unit::parse("mol/kg(water)").expect("a known unit")
}

fn coordinate(amount: f64) -> f64 {
    (amount / SMALL).ln_1p()
}

fn amount(coordinate: f64) -> f64 {
    SMALL * coordinate.exp_m1()
}

fn shown(target: &Quantity) -> String {
    let unit =
        if *target.unit() == Unit::one() { String::new() } else { target.unit().display(Style::Ascii) };
    format!("{} {unit}", short(target.value())).trim_end().into()
}

fn words(amounts: &[f64]) -> String {
    amounts.iter().map(|d| short(*d)).collect::<Vec<_>>().join(" with ")
}

/// The solution of `a x = b`; none for a singular matrix.
fn solve(a: &[Vec<f64>], b: &[f64]) -> Option<Vec<f64>> {
    let (mut lu, mut x) = (Lu::default(), vec![0.0; b.len()]);
    if !lu.factor(&a.concat(), b.len()) {
        return None;
    }
    lu.solve(b, &mut x);
    x.iter().all(|x| x.is_finite()).then_some(x)
}
