//! A water sample: an analysis, what is done to it, and the ledger it is computed with. A value: every change gives a
//! new one.

use std::collections::BTreeMap;
use std::sync::Arc;

use super::analysis::{self, Analysis, Dissolved, Measured, Ph, Setting};
use super::marine;
use super::redox::{PE_RANGE, Potential};
use super::treatment::Treatment;
use crate::ledger::{Ledger, LedgerError, Sea};
use crate::named::{KeyFault, Value};
use crate::quantity::Quantity;
use crate::units::{Pressure, Temperature, Unit};

/// A water sample; cheap to clone.
#[derive(Clone, Debug)]
pub struct Sample(Arc<Inner>);

#[derive(Clone)]
struct Inner {
    name: Option<String>,
    setting: Setting,
    analysis: Analysis,
    treatments: Vec<Treatment>,
    /// Values of treatments that were stated with an uncertainty, by position of the treatment.
    stated: BTreeMap<usize, Quantity>,
    ledger: Option<Ledger>,
    /// What a survey says of it in words: date, station.
    labels: BTreeMap<String, String>,
    /// The keys it was made of, for [`Sample::but`]; none for what an equilibrium left.
    entries: BTreeMap<String, Value>,
    notes: Vec<String>,
}

/// A treatment with what its value was stated as, where that came with an uncertainty.
pub(crate) type StatedTreatment = (Treatment, Option<Quantity>);

/// Why a sample cannot be made or treated so.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum SampleError {
    /// A key is at fault.
    #[error(transparent)]
    Key(#[from] KeyFault),
    /// A mineral or gas no ledger knows.
    #[error(transparent)]
    Ledger(#[from] LedgerError),
    /// An analysis cannot be edited where there is none.
    #[error(
        "this water has no analysis to edit: it is what an equilibrium left dissolved, or a mixture; treat it instead"
    )]
    NoAnalysis,
    /// A number out of its range.
    #[error("{0}")]
    Treatment(String),
}

impl Sample {
    /// A sample of named keys.
    ///
    /// # Errors
    ///
    /// The first fault with its key.
    pub fn read(entries: BTreeMap<String, Value>) -> Result<Self, SampleError> {
        Self::read_by(entries, analysis::read)
    }

    /// A seawater of named keys: see [`marine::read`].
    ///
    /// # Errors
    ///
    /// The first fault with its key.
    pub fn read_seawater(entries: BTreeMap<String, Value>) -> Result<Self, SampleError> {
        Self::read_by(entries, marine::read)
    }

    fn read_by(
        entries: BTreeMap<String, Value>,
        reader: fn(BTreeMap<String, Value>) -> Result<analysis::Read, KeyFault>,
    ) -> Result<Self, SampleError> {
        let mut read = entries.clone();
        read.remove("ledger");
        let labels = take_labels(&mut read)?;
        let analysis::Read { name, setting, measured, defaults, notes: mut taken } = reader(read)?;
        check_temperature(setting.temperature).map_err(|why| KeyFault::new("temperature", why))?;
        check_pressure(setting.pressure).map_err(|why| KeyFault::new("pressure", why))?;
        let mut notes = match defaults.as_slice() {
            [] => vec![],
            defaults => vec![format!("not given, so taken: {}", defaults.join(", "))],
        };
        notes.append(&mut taken);
        let analysis = Analysis::Measured(Box::new(measured));
        Ok(Self(Arc::new(Inner {
            name,
            setting,
            analysis,
            treatments: vec![],
            stated: BTreeMap::new(),
            ledger: None,
            labels,
            entries,
            notes,
        })))
    }

    /// A water of dissolved totals with no surroundings and no solids.
    #[must_use]
    pub fn dissolved(name: Option<String>, setting: Setting, dissolved: Dissolved, ledger: Ledger) -> Self {
        Self(Arc::new(Inner {
            name,
            setting,
            analysis: Analysis::Dissolved(dissolved),
            treatments: vec![],
            stated: BTreeMap::new(),
            ledger: Some(ledger),
            labels: BTreeMap::new(),
            entries: BTreeMap::new(),
            notes: vec![],
        }))
    }

    /// Waters mixed by the kilograms of water in each; a share of zero counts for nothing.
    ///
    /// The heat of the parts is kept and water's heat capacity taken the same in all, so the temperature is their mean by
    /// mass. Each part comes as its own analysis and treatments leave it, without its solids and surroundings.
    ///
    /// # Errors
    ///
    /// [`SampleError::Treatment`] for shares that are negative or add up to nothing, parts at different pressures, and
    /// parts whose ledgers differ.
    pub fn mixed(parts: &[(Self, f64)]) -> Result<Self, SampleError> {
        let refuse = |message: String| Err(SampleError::Treatment(message));
        if let Some((_, share)) = parts.iter().find(|(_, share)| !(share.is_finite() && *share >= 0.0)) {
            return refuse(format!("`mix` takes kilograms of each water, zero or more, not {share}"));
        }
        let water: f64 = parts.iter().map(|(_, share)| share).sum();
        let Some((first, _)) = parts.first().filter(|_| water > 0.0) else {
            return refuse("`mix` takes at least one water, and more than nothing of it".into());
        };
        let setting = first.setting_after();
        if let Some((other, _)) =
            parts.iter().find(|(part, _)| part.setting_after().pressure != setting.pressure)
        {
            return refuse(format!(
                "`mix`: one water is at {} bar and one at {} bar; bring them to one pressure with `.compress_to`",
                setting.pressure.bar(),
                other.setting_after().pressure.bar()
            ));
        }
        let mut ledgers = parts.iter().filter_map(|(part, _)| part.ledger());
        let ledger = ledgers.next();
        if let (Some(own), Some(other)) =
            (ledger, ledgers.find(|other| other.digest() != ledger.map_or_else(String::new, Ledger::digest)))
        {
            return refuse(format!(
                "`mix`: the waters are computed with different ledgers, `{}` and `{}`; give both one with `.with_ledger(book)`",
                own.name(),
                other.name()
            ));
        }
        let shares: Vec<(Self, f64)> =
            parts.iter().map(|(part, share)| (part.clone(), share / water)).collect();
        let temperature = Temperature::from_kelvin(mean_kelvin(&shares));
        let temperature = temperature.map_err(|error| SampleError::Treatment(error.to_string()))?;
        Ok(Self(Arc::new(Inner {
            name: None,
            setting: Setting { temperature, water, ..setting },
            analysis: Analysis::Mixed(shares),
            treatments: vec![],
            stated: BTreeMap::new(),
            ledger: ledger.cloned(),
            labels: BTreeMap::new(),
            entries: BTreeMap::new(),
            notes: vec![],
        })))
    }

    /// A row of a survey that could not be read: it keeps its place, and its equilibrium fails with the reason.
    #[must_use]
    pub fn spoilt(name: Option<String>, labels: BTreeMap<String, String>, reason: String) -> Self {
        let setting =
            Setting { temperature: Temperature::REFERENCE, pressure: Pressure::ATMOSPHERE, water: 1.0 };
        let dissolved = Self::dissolved(name, setting, Dissolved::default(), Ledger::default());
        let inner = (*dissolved.0).clone();
        Self(Arc::new(Inner { analysis: Analysis::Spoilt(reason), ledger: None, labels, ..inner }))
    }

    /// What it is called.
    #[must_use]
    pub fn name(&self) -> Option<&str> {
        self.0.name.as_deref()
    }

    /// Temperature, pressure and amount of water at the analysis.
    #[must_use]
    pub fn setting(&self) -> Setting {
        self.0.setting
    }

    /// Temperature and pressure after its treatments; the water that evaporates or is added is counted with the totals.
    #[must_use]
    pub fn setting_after(&self) -> Setting {
        let mut setting = self.0.setting;
        for treatment in &self.0.treatments {
            match treatment {
                Treatment::WarmTo(temperature) => setting.temperature = *temperature,
                Treatment::CompressTo(pressure) => setting.pressure = *pressure,
                _ => {}
            }
        }
        setting
    }

    /// What fixes its totals.
    #[must_use]
    pub fn analysis(&self) -> &Analysis {
        &self.0.analysis
    }

    /// The laboratory analysis, unless it is what an equilibrium left.
    #[must_use]
    pub fn measured(&self) -> Option<&Measured> {
        match &self.0.analysis {
            Analysis::Measured(measured) => Some(measured),
            Analysis::Dissolved(_) | Analysis::Mixed(_) | Analysis::Spoilt(_) => None,
        }
    }

    /// The sea it is of: salinity, pressure and scale of pH of a seawater at its analysis.
    #[must_use]
    pub fn sea(&self) -> Option<Sea> {
        match &self.0.analysis {
            Analysis::Measured(measured) => measured.sea.clone(),
            Analysis::Dissolved(_) => self.0.ledger.as_ref().and_then(Ledger::sea),
            Analysis::Mixed(parts) => mixed_sea(parts, self.setting().pressure),
            Analysis::Spoilt(_) => None,
        }
    }

    /// What is done to it, in order.
    #[must_use]
    pub fn treatments(&self) -> &[Treatment] {
        &self.0.treatments
    }

    /// What the value of treatment `k` was stated as, in the unit the treatment holds it in (a temperature in kelvin), where
    /// that came with an uncertainty; a value that is merely chosen is exact.
    #[must_use]
    pub fn stated_value(&self, k: usize) -> Option<&Quantity> {
        self.0.stated.get(&k)
    }

    /// The ledger that travels with it.
    #[must_use]
    pub fn ledger(&self) -> Option<&Ledger> {
        self.0.ledger.as_ref()
    }

    /// What is said of it in words: date, station.
    #[must_use]
    pub fn labels(&self) -> &BTreeMap<String, String> {
        &self.0.labels
    }

    /// The keys it was made of, as given.
    #[must_use]
    pub fn entries(&self) -> &BTreeMap<String, Value> {
        &self.0.entries
    }

    /// Defaults used, detection limits replaced.
    #[must_use]
    pub fn notes(&self) -> &[String] {
        &self.0.notes
    }

    /// The same analysis with some keys changed or added; treatments are kept. A key given as `()` is taken out.
    ///
    /// # Errors
    ///
    /// The first fault with its key, or [`SampleError::NoAnalysis`].
    pub fn but(&self, changes: BTreeMap<String, Option<Value>>) -> Result<Self, SampleError> {
        let Some(measured) = self.measured() else { return Err(SampleError::NoAnalysis) };
        let mut entries = self.0.entries.clone();
        for (key, value) in changes {
            match value {
                Some(value) => entries.insert(key, value),
                None => entries.remove(&key),
            };
        }
        let edited = match measured.sea {
            Some(_) => Self::read_seawater(entries)?,
            None => Self::read(entries)?,
        };
        let Inner { name, setting, analysis, entries, notes, labels, .. } = (*edited.0).clone();
        let labels = if labels.is_empty() { self.0.labels.clone() } else { labels };
        Ok(Self(Arc::new(Inner { name, setting, analysis, entries, notes, labels, ..(*self.0).clone() })))
    }

    /// The same, computed with this ledger unless another is named.
    #[must_use]
    pub fn with_ledger(&self, ledger: &Ledger) -> Self {
        Self(Arc::new(Inner { ledger: Some(ledger.clone()), ..(*self.0).clone() }))
    }

    /// The same with words added to it.
    #[must_use]
    pub fn with_labels(&self, labels: BTreeMap<String, String>, notes: Vec<String>) -> Self {
        let mut inner = (*self.0).clone();
        inner.labels.extend(labels);
        inner.notes.extend(notes);
        Self(Arc::new(inner))
    }

    /// Its treatments, each with what its value was stated as.
    pub(crate) fn stated_treatments(&self) -> impl Iterator<Item = StatedTreatment> {
        let stated = |(k, treatment): (usize, &Treatment)| (treatment.clone(), self.stated_value(k).cloned());
        self.0.treatments.iter().enumerate().map(stated)
    }

    /// The same with other treatments.
    #[must_use]
    pub(crate) fn with_treatments(&self, treatments: Vec<StatedTreatment>) -> Self {
        let stated = treatments.iter().enumerate();
        let stated = stated.filter_map(|(k, (_, stated))| Some((k, stated.clone()?))).collect();
        let treatments = treatments.into_iter().map(|(treatment, _)| treatment).collect();
        Self(Arc::new(Inner { treatments, stated, ..(*self.0).clone() }))
    }

    /// The same with every measured quantity replaced, those of waters mixed into it and of its treatments too.
    pub(crate) fn moved(&self, change: &mut dyn FnMut(&Quantity) -> Quantity) -> Self {
        let mut inner = (*self.0).clone();
        let uncertain = match &mut inner.analysis {
            Analysis::Measured(measured) => {
                for (.., amount) in &mut measured.amounts {
                    amount.moles = change(&amount.moles);
                }
                let evidence = &mut measured.evidence;
                for amount in evidence.alkalinity.iter_mut().chain(&mut evidence.dic) {
                    amount.moles = change(&amount.moles);
                }
                if let Some(Ph::Measured(ph)) = &mut evidence.ph {
                    *ph = change(ph);
                }
                if let Some(fugacity) = &mut evidence.co2 {
                    *fugacity = change(fugacity);
                }
                if let Some(Potential::Measured(electron)) = &mut measured.redox.potential {
                    electron.change(change);
                }
                measured.temperature.as_mut()
            }
            Analysis::Dissolved(dissolved) => {
                for (_, total) in &mut dissolved.totals {
                    *total = change(total);
                }
                dissolved.temperature.as_mut()
            }
            Analysis::Mixed(parts) => {
                for (part, _) in parts.iter_mut() {
                    *part = part.moved(change);
                }
                let mean = Temperature::from_kelvin(mean_kelvin(parts));
                inner.setting.temperature = mean.unwrap_or(inner.setting.temperature);
                None
            }
            Analysis::Spoilt(_) => None,
        };
        if let Some(kelvin) = uncertain {
            *kelvin = change(kelvin);
            inner.setting.temperature = Temperature::try_from(&*kelvin).unwrap_or(inner.setting.temperature);
        }
        for (k, stated) in &mut inner.stated {
            *stated = change(stated);
            set_value(&mut inner.treatments[*k], stated);
        }
        for treatment in &mut inner.treatments {
            match treatment {
                Treatment::WithSolid { amount, .. } => amount.moles = change(&amount.moles),
                Treatment::Dose(dose) | Treatment::Remove(dose) => {
                    dose.amount.moles = change(&dose.amount.moles);
                }
                Treatment::AddSolution { sample_volume, solution, .. } => {
                    *sample_volume = change(sample_volume);
                    solution.solutes.iter_mut().for_each(|(_, moles)| *moles = change(moles));
                }
                Treatment::Beside(neighbour) => neighbour.move_quantities(change),
                Treatment::Adjust(adjust) => {
                    adjust.targets.iter_mut().for_each(|(_, target)| *target = change(target));
                }
                _ => {}
            }
        }
        Self(Arc::new(inner))
    }

    /// The same with one more treatment.
    ///
    /// # Errors
    ///
    /// [`SampleError::Treatment`] for a number out of range.
    pub fn treated(&self, treatment: Treatment) -> Result<Self, SampleError> {
        check(&treatment)?;
        let mut inner = (*self.0).clone();
        inner.treatments.push(treatment);
        Ok(Self(Arc::new(inner)))
    }

    /// The same with one more treatment, whose value has the uncertainty of `stated`: see [`Sample::stated_value`].
    ///
    /// # Errors
    ///
    /// As [`Sample::treated`].
    pub fn treated_to(&self, treatment: Treatment, stated: &Quantity) -> Result<Self, SampleError> {
        let mut treated = self.treated(treatment)?;
        if stated.parts().iter().any(|part| part.input.sigma().is_some()) {
            let inner = Arc::make_mut(&mut treated.0);
            inner.stated.insert(inner.treatments.len() - 1, stated.clone());
        }
        Ok(treated)
    }
}

/// Gives a treatment the value it is now stated as, in the unit the treatment holds it in.
fn set_value(treatment: &mut Treatment, stated: &Quantity) {
    match treatment {
        Treatment::OpenTo { fugacity: value, .. }
        | Treatment::Saturate { index: value, .. }
        | Treatment::Allow { above: value, .. }
        | Treatment::HoldPh { ph: value, .. } => *value = stated.value(),
        Treatment::WarmTo(temperature) => {
            *temperature = Temperature::try_from(stated).unwrap_or(*temperature);
        }
        Treatment::CompressTo(pressure) => *pressure = Pressure::try_from(stated).unwrap_or(*pressure),
        _ => {}
    }
}

/// Mean temperature of waters by their shares.
fn mean_kelvin(shares: &[(Sample, f64)]) -> f64 {
    shares.iter().map(|(part, share)| share * part.setting_after().temperature.kelvin()).sum()
}

/// The sea of mixed seawaters: salinity is conserved. `None` if one of them is no seawater.
fn mixed_sea(parts: &[(Sample, f64)], pressure: Pressure) -> Option<Sea> {
    let seas = parts.iter().map(|(part, share)| Some((part.sea()?, *share)));
    let seas: Vec<(Sea, f64)> = seas.collect::<Option<_>>()?;
    let salinity = seas.iter().map(|(sea, share)| sea.salinity * share).sum();
    let ph_scale = seas.first()?.0.ph_scale;
    let stated = seas.iter().filter_map(|(sea, share)| Some((sea.stated_salinity.as_ref()?, *share)));
    let stated: Vec<(&Quantity, f64)> = stated.collect();
    let unit = || Unit::known("PSU");
    let stated_salinity =
        if stated.is_empty() { None } else { Quantity::from_partials(salinity, unit(), &stated).ok() };
    Some(Sea { salinity, stated_salinity, pressure, ph_scale })
}

impl std::fmt::Debug for Inner {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let stated: Vec<String> = self.stated.values().map(Quantity::to_string).collect();
        write!(f, "Sample {:?} {:?} {stated:?}", self.name, self.treatments)
    }
}

/// A saturation index beyond this, either way, is a slip: it is not that of any solid in any water.
const MOST_INDEX: f64 = 50.0;
/// Brines of calcium chloride freeze at -50 degC; water is a liquid up to its critical point (IAPWS R2-83(1992)).
const LIQUID: (f64, f64) = (-50.0, 373.946);
/// Water freezes into ice VI at about 10 kbar and 25 degC (IAPWS R14-08(2011)).
const MOST_PRESSURE: f64 = 1e4;

fn check_temperature(temperature: Temperature) -> Result<(), String> {
    let celsius = temperature.celsius();
    if (LIQUID.0..=LIQUID.1).contains(&celsius) {
        return Ok(());
    }
    Err(format!(
        "`temperature`: no water is liquid at {celsius} degC: give one from {} degC to {} degC, its critical point",
        LIQUID.0, LIQUID.1
    ))
}

fn check_pressure(pressure: Pressure) -> Result<(), String> {
    let bar = pressure.bar();
    if bar <= MOST_PRESSURE {
        return Ok(());
    }
    Err(format!("`pressure`: no water is liquid at {bar} bar: give one up to {MOST_PRESSURE} bar, absolute"))
}

fn check(treatment: &Treatment) -> Result<(), SampleError> {
    let refuse = |message: String| Err(SampleError::Treatment(message));
    match treatment {
        Treatment::OpenTo { gas, fugacity } if !(fugacity.is_finite() && *fugacity > 0.0) => {
            refuse(format!("the fugacity of `{gas}` must be above zero, not {fugacity} bar"))
        }
        Treatment::Saturate { solid, index: value } | Treatment::Allow { solid, above: value }
            if !value.is_finite() =>
        {
            refuse(format!("the saturation index of `{solid}` must be a finite number"))
        }
        Treatment::Saturate { solid, index: value } | Treatment::Allow { solid, above: value }
            if value.abs() > MOST_INDEX =>
        {
            refuse(format!(
                "a saturation index of {value} for `{solid}` lies outside -{MOST_INDEX} to {MOST_INDEX}: it is \
                 log10 of the saturation ratio, 0 at equilibrium"
            ))
        }
        Treatment::WarmTo(temperature) => check_temperature(*temperature).map_err(SampleError::Treatment),
        Treatment::CompressTo(pressure) => check_pressure(*pressure).map_err(SampleError::Treatment),
        Treatment::Concentrate(factor) if !(factor.is_finite() && *factor > 0.0) => refuse(format!(
            "`concentrate` takes how many times as much a kilogram of water shall hold, above zero, not {factor}; \
             2 evaporates half the water, 0.5 doubles it"
        )),
        Treatment::HoldPh { ph, .. } if !(-2.0..=17.0).contains(ph) => {
            refuse(format!("pH {ph} lies outside -2 to 17"))
        }
        Treatment::HoldPe { pe, .. } if !(PE_RANGE.0..=PE_RANGE.1).contains(pe) => {
            refuse(format!("pe {pe} lies outside {} to {}", PE_RANGE.0, PE_RANGE.1))
        }
        _ => Ok(()),
    }
}

fn take_labels(entries: &mut BTreeMap<String, Value>) -> Result<BTreeMap<String, String>, KeyFault> {
    match entries.remove("labels") {
        None => Ok(BTreeMap::new()),
        Some(Value::Map(map)) => map
            .into_iter()
            .map(|(key, value)| match value {
                Value::Text(text) => Ok((key, text)),
                other => {
                    Err(KeyFault::new("labels", format!("the label `{key}` is a text, not {}", other.kind())))
                }
            })
            .collect(),
        Some(other) => {
            Err(KeyFault::new("labels", format!("`labels` takes a map of texts, not {}", other.kind())))
        }
    }
}
