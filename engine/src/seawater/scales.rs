//! Scales of pH in seawater: what each counts as hydrogen ion.
//!
//! ```text
//! [H^+]_total    = [H^+] (1 + T_S/K_S)                      10^-pH(total)
//! [H^+]_seawater = [H^+] (1 + T_S/K_S + T_F/K_F)            10^-pH(seawater)
//! 10^-pH(nbs)    = f_H [H^+]_seawater
//! ```
//!
//! T_S, T_F are total sulfate and fluoride, K_S, K_F the constants of HSO4^- and HF on the free scale. f_H takes in the
//! activity coefficient and the liquid junction of an electrode calibrated in dilute buffers: it is known to about 0.01 in
//! pH at best and belongs to the electrode, so pH(nbs) is indicative only.

use super::constants::Place;
use crate::chem::{Equation, PhScale, Reaction};
use crate::ledger::Ledger;
use crate::physics::constants::LN_10;

/// What the scales count at one place, relative to the free hydrogen ion.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Scales {
    /// HSO4^- per free hydrogen ion: T_S/K_S.
    pub sulfate: f64,
    /// HF per free hydrogen ion: T_F/K_F.
    pub fluoride: f64,
    /// f_H of the NBS scale, kg(solution)/mol.
    pub nbs: f64,
    /// ∂ ln of the fluoride by ln of the sulfate: a K_F published on another scale is brought to the free one by K_S.
    fluoride_by_sulfate: f64,
}

/// Derivatives of a log10 by log10 of T_S/K_S and T_F/K_F, each constant as it was published.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct ByScales {
    /// By T_S/K_S.
    pub sulfate: f64,
    /// By T_F/K_F.
    pub fluoride: f64,
}

impl ByScales {
    /// `self + factor other`.
    #[must_use]
    pub fn plus(self, factor: f64, other: Self) -> Self {
        Self {
            sulfate: self.sulfate + factor * other.sulfate,
            fluoride: self.fluoride + factor * other.fluoride,
        }
    }
}

impl Scales {
    /// The scales at a place, by the ledger's constants of HSO4^- and HF; one it lacks counts nothing.
    #[must_use]
    pub fn at(ledger: &Ledger, place: &Place) -> Self {
        let surface = Self::at_surface(ledger, place);
        if place.hydrostatic_bar == 0.0 {
            return surface;
        }
        let factor = |reaction: Option<&Reaction>| {
            reaction.map_or(0.0, |reaction| place.ln_pressure_factor(reaction)).exp()
        };
        Self {
            sulfate: surface.sulfate / factor(bisulfate(ledger)),
            fluoride: surface.fluoride / factor(hydrogen_fluoride(ledger)),
            ..surface
        }
    }

    /// The same at the pressure of the surface.
    #[must_use]
    pub fn at_surface(ledger: &Ledger, place: &Place) -> Self {
        let mut scales =
            Self { sulfate: 0.0, fluoride: 0.0, nbs: nbs_factor(place), fluoride_by_sulfate: 0.0 };
        let total = |name: &str| {
            let found = ledger.composition().find(|constituent| constituent.name == name);
            found.map_or(0.0, |constituent| constituent.per_salinity * place.salinity)
        };
        let free = |reaction: &Reaction, scales: &Self| {
            let scale = reaction.constant().map_or(PhScale::Free, |constant| constant.conditions.ph_scale);
            (place.published(reaction) * LN_10).exp() / scales.over_free(scale)
        };
        if let Some(reaction) = bisulfate(ledger) {
            scales.sulfate = total("total sulfate") / free(reaction, &scales);
        }
        if let Some(reaction) = hydrogen_fluoride(ledger) {
            scales.fluoride = total("total fluoride") / free(reaction, &scales);
            let published = reaction.constant().map_or(PhScale::Free, |own| own.conditions.ph_scale);
            scales.fluoride_by_sulfate = Self { fluoride: 0.0, ..scales }.by(published).sulfate;
        }
        scales
    }

    /// The concentration of hydrogen ion on a scale over that of the free ion.
    #[must_use]
    pub fn over_free(&self, scale: PhScale) -> f64 {
        match scale {
            PhScale::Free | PhScale::Activity => 1.0,
            PhScale::Total => 1.0 + self.sulfate,
            PhScale::Seawater => 1.0 + self.sulfate + self.fluoride,
            PhScale::Nbs => self.nbs * self.over_free(PhScale::Seawater),
        }
    }

    /// Derivatives of log10 of [`Scales::over_free`].
    #[must_use]
    pub fn by(&self, scale: PhScale) -> ByScales {
        let over = self.over_free(match scale {
            PhScale::Nbs => PhScale::Seawater,
            other => other,
        });
        match scale {
            PhScale::Free | PhScale::Activity => ByScales::default(),
            PhScale::Total => ByScales { sulfate: self.sulfate / over, fluoride: 0.0 },
            PhScale::Seawater | PhScale::Nbs => ByScales {
                sulfate: (self.sulfate + self.fluoride * self.fluoride_by_sulfate) / over,
                fluoride: self.fluoride / over,
            },
        }
    }

    /// What is added to a pH on the free scale to have it on another.
    #[must_use]
    pub fn shift_from_free(&self, scale: PhScale) -> f64 {
        -self.over_free(scale).log10()
    }
}

/// f_H of Takahashi et al. (1982) in GEOSECS Pacific Expedition 3, 77-83, a fit to Culberson and Pytkowicz (1973)
/// (recalled); salinity 20 to 40, 0 to 30 degC.
fn nbs_factor(place: &Place) -> f64 {
    let (t, s) = (place.temperature.kelvin(), place.salinity);
    1.2948 - 0.002_036 * t + (0.000_460_7 - 0.000_001_475 * t) * s * s
}

/// Whether a constant is one that the scales are made of, which holds on the free scale under pressure too.
#[must_use]
pub fn makes_scales(reaction: &Reaction) -> bool {
    is_dissociation(reaction, "HSO4^- <=> H^+ + SO4^2-") || is_dissociation(reaction, "HF(aq) <=> H^+ + F^-")
}

/// Positions of the reactions of HSO4^- and HF among a ledger's.
#[must_use]
pub fn makers(ledger: &Ledger) -> [Option<usize>; 2] {
    ["HSO4^- <=> H^+ + SO4^2-", "HF(aq) <=> H^+ + F^-"]
        .map(|equation| ledger.reactions().position(|(_, reaction)| is_dissociation(reaction, equation)))
}

fn bisulfate(ledger: &Ledger) -> Option<&Reaction> {
    dissociation(ledger, "HSO4^- <=> H^+ + SO4^2-")
}

fn hydrogen_fluoride(ledger: &Ledger) -> Option<&Reaction> {
    dissociation(ledger, "HF(aq) <=> H^+ + F^-")
}

fn dissociation<'a>(ledger: &'a Ledger, equation: &str) -> Option<&'a Reaction> {
    ledger.reactions().map(|(_, reaction)| reaction).find(|reaction| is_dissociation(reaction, equation))
}

fn is_dissociation(reaction: &Reaction, equation: &str) -> bool {
    Equation::parse(equation).is_ok_and(|equation| *reaction.equation() == equation)
}
