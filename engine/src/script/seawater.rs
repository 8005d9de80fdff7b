//! The sea in scripts: samples, what is asked of their states, estuaries, profiles, and helpers of the trade.

use rhai::plugin::*;
use rhai::{Array, Dynamic, FLOAT, Map};

use super::named::{named, number};
use super::reaction::temperature;
use super::sample::sample_of;
use super::{ScriptResult, Vocabulary, fail};
use crate::chem::{Reaction, reaction as chemistry};
use crate::equilibrium::State;
use crate::named::Named;
use crate::physics::{gas_exchange, seawater as physics};
use crate::present::Table;
use crate::process::Run;
use crate::quantity::Quantity;
use crate::seawater::{buffers, estuary, profile};
use crate::units::{Kind, Pressure, Temperature, Unit};
use crate::water::Sample;

use super::Fail;

/// Registers the functions.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(seawater_functions))
        .pure(&["seawater", "at_salinity", "alkalinity_parts", "choices", "estuary", "saturation_horizon"])
        .pure(&["calcifier_table"])
        .pure(&["seawater_density", "pressure_at_depth", "depth_at_pressure", "practical_salinity"])
        .pure(&["absolute_salinity", "air_fugacity", "tris_pH", "aminopyridine_pH", "cresol_purple_pH"]);
}

/// What calcifiers answer to. The ratio of substrate to inhibitor is that of Jury, Whitehead and Szmant (2010) Global Change
/// Biology 16, 1632-1644, and Bach (2015) Biogeosciences 12, 4939-4951 (both recalled).
const CALCIFIERS: [&str; 8] = [
    "temperature",
    "pH(total)",
    "DIC [umol/kg]",
    "m(HCO3^-) [umol/kg]",
    "m(CO3^2-) [umol/kg]",
    "Omega(aragonite)",
    "Omega(calcite)",
    "substrate_inhibitor_ratio [mol/umol]",
];

/// A latitude that stands for all where none is given.
const COMMON_LATITUDE: f64 = 45.0;

/// A water of a place: temperature, salinity and pressure from the options, defaults 25 degC, 35 and the surface.
struct Place {
    temperature: Temperature,
    salinity: f64,
    pressure: Pressure,
}

impl Place {
    fn read(options: &mut Named) -> Result<Self, Fail> {
        let at = options.take("temperature").map(|given| chemistry::temperature("temperature", given));
        let salinity = options.take("salinity").map(|given| chemistry::salinity("salinity", given));
        let pressure = options.quantity("pressure", Kind::Pressure)?;
        let pressure = pressure.map(|given| Pressure::try_from(&given)).transpose();
        Ok(Self {
            temperature: at.transpose()?.unwrap_or(Temperature::REFERENCE),
            salinity: salinity.transpose()?.unwrap_or(35.0),
            pressure: pressure.map_err(|error| fail(error.to_string()))?.unwrap_or(Pressure::ATMOSPHERE),
        })
    }
}

fn quantity(value: f64, unit: &str) -> Quantity {
    Quantity::exact(value, Unit::known(unit))
}

fn real(what: &str, given: &Dynamic) -> Result<f64, Fail> {
    super::reaction::plain(what, given)
}

/// A number in metres or dbar, or a text with its unit.
fn in_unit(what: &str, given: &Dynamic, kind: Kind, unit: &str) -> Result<f64, Fail> {
    if let Some(number) = number(given) {
        return Ok(number);
    }
    let read = super::reaction::quantity(what, given, kind)?;
    read.to(&Unit::known(unit)).map(|read| read.value()).map_err(|error| fail(error.to_string()))
}

fn states_of(given: &Dynamic) -> Result<Vec<State>, Fail> {
    if let Some(run) = given.read_lock::<Run>() {
        return Ok(run.outcomes().iter().filter_map(|outcome| outcome.as_ref().ok().cloned()).collect());
    }
    let items = given.read_lock::<Array>().ok_or_else(|| fail("a profile is a run, or a list of states"))?;
    let state = |item: &Dynamic| item.read_lock::<State>().map(|state| state.clone());
    items
        .iter()
        .map(|item| state(item).ok_or_else(|| fail("a profile is a run, or a list of states")))
        .collect()
}

fn horizon(given: &Dynamic, mineral: &str, latitude: f64) -> ScriptResult<Dynamic> {
    let states = states_of(given).map_err(|error| error.argument(0))?;
    let depth = profile::saturation_horizon(&states, mineral, latitude).map_err(Fail::from)?;
    Ok(depth.map_or(Dynamic::UNIT, |depth| Dynamic::from(quantity(depth, "m"))))
}

/// The sea.
#[export_module]
mod seawater_functions {
    use super::*;

    /// A seawater from its analysis, computed with the ledger `seawater`. Keys: `salinity` (practical, or g/kg absolute),
    /// `temperature` (degC), `pressure` (dbar counts from the surface) or `depth` (m) with `latitude`, two of `DIC`,
    /// `alkalinity`, `pH` and one of `fCO2`, `pCO2`, `xCO2`; `ph_scale` (`"total"` unless said otherwise),
    /// `pH_temperature` and `fCO2_temperature` where measured in a laboratory at the surface, `air_pressure`, `phosphate`, `silicate`, `ammonium`, `sulfide`, and amounts that replace those
    /// going with salinity. `mol/kg` is per kilogram of solution.
    ///
    /// ```rhai
    /// let sea = seawater(#{ salinity: 35, temperature: 25, DIC: "2000 umol/kg", alkalinity: "2300 umol/kg" });
    /// fmt(sea.equilibrate().get("pH(total)").value, ".4f")   // "8.0401"
    /// ```
    #[rhai_fn(name = "seawater", return_raw)]
    pub fn seawater(keys: Map) -> ScriptResult<Sample> {
        sample_of(&keys, Sample::read_seawater)
    }

    /// The same reaction in seawater of one salinity: its constant becomes a function of temperature alone.
    ///
    /// ```rhai
    /// fmt(ledger("seawater").reaction("K1").at_salinity(30).pk.value, ".4f")   // "5.8675"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn at_salinity(reaction: Reaction, salinity: Dynamic) -> ScriptResult<Reaction> {
        let salinity = real("a salinity", &salinity)?;
        Ok(reaction.at_salinity(salinity).map_err(Fail::from)?)
    }

    /// What each species holds of the alkalinity, the largest share first (eq/kg).
    ///
    /// ```rhai
    /// let sea = seawater(#{ salinity: 35, DIC: "2000 umol/kg", alkalinity: "2300 umol/kg" }).equilibrate();
    /// sea.alkalinity_parts().row(0)["species"]   // "HCO3^-"
    /// ```
    #[rhai_fn(name = "alkalinity_parts", get = "alkalinity_parts", pure)]
    pub fn alkalinity_parts(state: &mut State) -> Table {
        state.alkalinity_parts()
    }

    /// Which of the alternative constants a seawater was computed with, and its scale of pH, as a text; `()` outside
    /// seawater.
    #[rhai_fn(name = "choices", get = "choices", pure)]
    pub fn choices(state: &mut State) -> Dynamic {
        state.choices().map_or(Dynamic::UNIT, Dynamic::from)
    }

    /// What calcifying organisms answer to, a row for each water of a run: pH on the total scale, inorganic carbon and its
    /// ions, saturation with aragonite and calcite, and the ratio of substrate to inhibitor [HCO3^-]/[H^+] (mol/umol, H^+ on
    /// the total scale; Jury et al. 2010, Bach 2015).
    ///
    /// ```rhai
    /// let reef = [1900, 2000].map(|dic| seawater(#{ salinity: 35, alkalinity: "2300 umol/kg", DIC: `${dic} umol/kg` }));
    /// calcifier_table(reef.equilibrate()).len   // 2
    /// ```
    #[rhai_fn(name = "calcifier_table", return_raw)]
    pub fn calcifier_table(waters: Run) -> ScriptResult<Table> {
        Ok(waters.table(&CALCIFIERS.map(String::from)).map_err(Fail::from)?)
    }

    /// Mixtures of a river and a sea by the mass fraction of the sea, as samples. Each end is computed with its own ledger;
    /// what both conserve is mixed: alkalinity, inorganic carbon, calcium, phosphate, silicate, ammonium and sulfide, per
    /// kilogram of solution. Other ions of the river are left out, since those of a mixture go with its salinity; each
    /// mixture warns which. The mixtures take K1 and K2 of Millero 2006, from salinity 1 up, and KF of Dickson and Riley 1979.
    ///
    /// ```rhai
    /// let river = sample(#{ pH: 7.8, alkalinity: "1.2 meq/L", Ca: "20 mg/L" }).equilibrate();
    /// let sea = seawater(#{ salinity: 34, DIC: "2050 umol/kg", alkalinity: "2290 umol/kg" }).equilibrate();
    /// fmt(estuary(river, sea, [0.5]).equilibrate().column("alkalinity [umol/kg]").mean, ".0f")   // "1746"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn estuary(river: State, sea: State, fractions: Array) -> ScriptResult<Array> {
        let mut samples = Array::new();
        for fraction in &fractions {
            let fraction = real("a fraction of the sea", fraction).map_err(|error| error.argument(2))?;
            samples.push(Dynamic::from(estuary::mixture(&river, &sea, fraction).map_err(Fail::from)?));
        }
        Ok(samples)
    }

    /// The depth (m) at which a water column stops being supersaturated with a mineral, interpolated between the states
    /// of a run or list; `()` where there is no such depth. Depths follow from pressures at latitude 45.
    ///
    /// ```rhai
    /// let water = |p| seawater(#{ salinity: 35, temperature: 4, pressure: quantity(p, "dbar"), DIC: "2250 umol/kg",
    ///                             alkalinity: "2360 umol/kg" });
    /// let column = [0.0, 1000.0, 2000.0, 3000.0].map(water).equilibrate();
    /// saturation_horizon(column, "aragonite").value > 0   // true
    /// ```
    #[rhai_fn(name = "saturation_horizon", return_raw)]
    pub fn saturation_horizon(profile: Dynamic, mineral: &str) -> ScriptResult<Dynamic> {
        horizon(&profile, mineral, COMMON_LATITUDE)
    }
    /// The same at a latitude in degrees: `#{ latitude: 30 }`.
    #[rhai_fn(name = "saturation_horizon", return_raw)]
    pub fn saturation_horizon_at(profile: Dynamic, mineral: &str, options: Map) -> ScriptResult<Dynamic> {
        let mut options = named(&options)?;
        let latitude = options.number("latitude").map_err(Fail::from)?;
        options.finish().map_err(Fail::from)?;
        horizon(&profile, mineral, latitude.unwrap_or(COMMON_LATITUDE))
    }

    /// Density of seawater, kg/m3, by the equation of state of 1980: `salinity`, `temperature` (degC), `pressure`.
    ///
    /// ```rhai
    /// fmt(seawater_density(#{ salinity: 35, temperature: 5 }).value, ".3f")   // "1027.675"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn seawater_density(options: Map) -> ScriptResult<Quantity> {
        let mut options = named(&options)?;
        let place = Place::read(&mut options)?;
        options.finish().map_err(Fail::from)?;
        let above = place.pressure.bar() - Pressure::ATMOSPHERE.bar();
        Ok(quantity(physics::density(place.temperature.kelvin(), place.salinity, above), "kg/m3"))
    }

    /// Pressure above the surface's, dbar, at a depth (m) and a latitude (degrees).
    ///
    /// ```rhai
    /// fmt(pressure_at_depth(1000, 30).to("dbar").value, ".1f")   // "1009.6"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn pressure_at_depth(depth: Dynamic, latitude: Dynamic) -> ScriptResult<Quantity> {
        let depth = in_unit("depth", &depth, Kind::Length, "m")?;
        let latitude = real("a latitude", &latitude)?;
        Ok(quantity(physics::pressure_at_depth(depth, latitude), "dbar"))
    }

    /// Depth, m, at a pressure above the surface's (dbar) and a latitude (degrees).
    ///
    /// ```rhai
    /// fmt(depth_at_pressure(1000, 30).value, ".1f")   // "990.6"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn depth_at_pressure(pressure: Dynamic, latitude: Dynamic) -> ScriptResult<Quantity> {
        let pressure = in_unit("pressure", &pressure, Kind::Pressure, "dbar")?;
        let latitude = real("a latitude", &latitude)?;
        Ok(quantity(physics::depth_at_pressure(pressure, latitude), "m"))
    }

    /// Practical salinity from a conductivity over that of seawater of salinity 35 at 15 degC and the surface (1.0 by
    /// definition), the temperature of the cell (degC, ITS-90) and the pressure (dbar).
    ///
    /// ```rhai
    /// fmt(practical_salinity(1.0, 14.9964, 0.0), ".3f")   // "35.000"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn practical_salinity(ratio: Dynamic, cell: Dynamic, pressure: Dynamic) -> ScriptResult<FLOAT> {
        let ratio = real("a conductivity ratio", &ratio)?;
        let celsius = temperature(&cell)?.celsius();
        let pressure = in_unit("pressure", &pressure, Kind::Pressure, "dbar")?;
        if ratio <= 0.0 {
            return fail(format!("a conductivity ratio is above zero, not {ratio}")).argument(0).raise();
        }
        Ok(physics::practical_salinity(ratio, celsius * 1.000_24, pressure))
    }

    /// Absolute salinity of the reference composition, g/kg, from practical salinity; regional anomalies, up to 0.03 g/kg in
    /// the open ocean, are not counted.
    ///
    /// ```rhai
    /// fmt(absolute_salinity(35).value, ".5f")   // "35.16504"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn absolute_salinity(practical: Dynamic) -> ScriptResult<Quantity> {
        let practical = real("a salinity", &practical)?;
        Ok(quantity(practical * physics::REFERENCE_SALINITY_PER_SALINITY, "g/kg"))
    }

    /// Fugacity of CO2, bar, over seawater in equilibrium with air of a mole fraction of CO2 (dry): `temperature` (degC),
    /// `salinity`, `air_pressure` (one atmosphere unless said otherwise).
    ///
    /// ```rhai
    /// fmt(air_fugacity(420e-6, #{ temperature: 20, salinity: 35 }).to("uatm").value, ".1f")   // "409.1"
    /// ```
    #[rhai_fn(return_raw)]
    pub fn air_fugacity(fraction: Dynamic, options: Map) -> ScriptResult<Quantity> {
        let fraction = real("a mole fraction", &fraction)?;
        let mut options = named(&options)?;
        let air = options.quantity("air_pressure", Kind::Pressure).map_err(Fail::from)?;
        let air = air.map(|given| Pressure::try_from(&given)).transpose();
        let air = air.map_err(|error| fail(error.to_string()))?.unwrap_or(Pressure::ATMOSPHERE).bar();
        let place = Place::read(&mut options)?;
        options.finish().map_err(Fail::from)?;
        if !(fraction > 0.0 && fraction < 0.1) {
            return fail(format!(
                "a mole fraction of CO2 in air is a small number such as 420e-6, not {fraction}"
            ))
            .argument(0)
            .raise();
        }
        let t = place.temperature.kelvin();
        let dry = air - gas_exchange::vapour_pressure(t, place.salinity);
        Ok(quantity(fraction * dry * gas_exchange::fugacity_factor(t, air), "bar"))
    }

    /// pH (total scale) of equimolal tris buffer, 0.04 mol/kg(water), in synthetic seawater: temperature (degC), salinity.
    ///
    /// ```rhai
    /// fmt(tris_pH(25, 35), ".4f")   // "8.0935"
    /// ```
    #[rhai_fn(name = "tris_pH", return_raw)]
    pub fn tris(at: Dynamic, salinity: Dynamic) -> ScriptResult<FLOAT> {
        Ok(buffers::ph_of_tris(temperature(&at)?, real("a salinity", &salinity)?))
    }
    /// pH (total scale) of equimolal 2-aminopyridine buffer in synthetic seawater: temperature (degC), salinity.
    ///
    /// ```rhai
    /// fmt(aminopyridine_pH(25, 35), ".4f")   // "6.7866"
    /// ```
    #[rhai_fn(name = "aminopyridine_pH", return_raw)]
    pub fn aminopyridine(at: Dynamic, salinity: Dynamic) -> ScriptResult<FLOAT> {
        Ok(buffers::ph_of_aminopyridine(temperature(&at)?, real("a salinity", &salinity)?))
    }
    /// pH (total scale) from the ratio of absorbances of m-cresol purple at 578 and 434 nm: ratio, temperature (degC),
    /// salinity.
    ///
    /// ```rhai
    /// fmt(cresol_purple_pH(1.5, 25, 35), ".3f")   // "7.874"
    /// ```
    #[rhai_fn(name = "cresol_purple_pH", return_raw)]
    pub fn cresol_purple(ratio: Dynamic, at: Dynamic, salinity: Dynamic) -> ScriptResult<FLOAT> {
        let ratio = real("a ratio of absorbances", &ratio)?;
        let ph = buffers::ph_of_absorbances(ratio, temperature(&at)?, real("a salinity", &salinity)?);
        ph.map_or_else(
            || {
                fail(format!("no mixture of the two forms of the dye has the ratio {ratio}"))
                    .argument(0)
                    .raise()
            },
            Ok,
        )
    }
}
