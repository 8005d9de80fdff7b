//! Constants of seawater where they are needed: at a temperature, salinity and pressure, on the free scale of pH.
//!
//! The volumes of reaction hold on the seawater scale (Millero 1979, 1983, 1995), those of HSO4^- and HF on the free one.
//! So a constant of n hydrogen ions goes
//!
//! ```text
//! published scale -> seawater scale at the surface -> times K(p)/K(0) -> free scale at p
//! log K_free(p) = log K + n log (r_sws(0)/r(0)) + log K(p)/K(0) - n log r_sws(p)        r: see [`Scales::over_free`]
//! ```
//!
//! Applying the factor on the total scale instead would move pK1 by 0.001 at 5000 dbar.

use super::scales::{ByScales, Scales, makes_scales};
use crate::chem::{PhScale, Reaction, Species, rational};
use crate::ledger::{Ledger, Sea};
use crate::physics::constants::LN_10;
use crate::text::list;
use crate::units::Temperature;

/// Where a constant is needed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Place {
    /// Temperature.
    pub temperature: Temperature,
    /// Practical salinity.
    pub salinity: f64,
    /// Pressure above that of the surface, bar.
    pub hydrostatic_bar: f64,
}

/// log10 K of every reaction of a ledger in its sea, on the free scale, in order of name.
#[must_use]
pub fn log_k_free(ledger: &Ledger, sea: &Sea, temperature: Temperature) -> Vec<f64> {
    let place = Place::of(sea, temperature);
    let scales = (Scales::at_surface(ledger, &place), Scales::at(ledger, &place));
    ledger.reactions().map(|(_, reaction)| place.on_free_scale(reaction, &scales.0, &scales.1)).collect()
}

/// How each of these answers to what the scales are made of: a constant published on another scale than the free one is
/// brought there by those of HSO4^- and HF.
#[must_use]
pub fn by_scales(ledger: &Ledger, sea: &Sea, temperature: Temperature) -> Vec<ByScales> {
    let place = Place::of(sea, temperature);
    let (surface, deep) = (Scales::at_surface(ledger, &place), Scales::at(ledger, &place));
    let by = |reaction: &Reaction| {
        let Ok(constant) = reaction.constant() else { return ByScales::default() };
        let n = rational::to_f64(reaction.equation().coefficient(&Species::proton()));
        let own = ByScales::default().plus(-n, surface.by(constant.conditions.ph_scale));
        if makes_scales(reaction) {
            return own;
        }
        own.plus(n, surface.by(PhScale::Seawater)).plus(-n, deep.by(PhScale::Seawater))
    };
    ledger.reactions().map(|(_, reaction)| by(reaction)).collect()
}

impl Place {
    /// A temperature in a sea.
    #[must_use]
    pub fn of(sea: &Sea, temperature: Temperature) -> Self {
        Self { temperature, salinity: sea.salinity, hydrostatic_bar: sea.hydrostatic_bar() }
    }

    /// log10 K as published, at the pressure of the surface.
    #[must_use]
    pub fn published(&self, reaction: &Reaction) -> f64 {
        let log_k = reaction.constant().map(|constant| constant.log_k.at_salinity(self.salinity));
        log_k.map_or(0.0, |log_k| log_k.nearest_to(self.temperature).0)
    }

    /// ln K(p)/K(0); 0 where no volume of reaction is known.
    #[must_use]
    pub fn ln_pressure_factor(&self, reaction: &Reaction) -> f64 {
        let volume = reaction.constant().ok().and_then(|constant| constant.volume.as_ref());
        volume.map_or(0.0, |volume| volume.ln_factor(self.hydrostatic_bar, self.temperature))
    }

    fn on_free_scale(&self, reaction: &Reaction, surface: &Scales, deep: &Scales) -> f64 {
        let Ok(constant) = reaction.constant() else { return 0.0 };
        let n = rational::to_f64(reaction.equation().coefficient(&Species::proton()));
        let published = self.published(reaction);
        let pressure = self.ln_pressure_factor(reaction) / LN_10;
        let own = surface.over_free(constant.conditions.ph_scale);
        // Written as one ratio, which is 1 to the last bit for a constant on the seawater scale at the surface.
        let scale = if makes_scales(reaction) {
            1.0 / own
        } else {
            surface.over_free(PhScale::Seawater) / own / deep.over_free(PhScale::Seawater)
        };
        published + pressure + n * scale.log10()
    }
}

/// The constants used outside the salinity and temperature they were measured in, each with what covers it instead; K1 and
/// K2 of one publication together. `matters` says which reactions, by their order, count.
#[must_use]
pub fn outside_ranges(
    ledger: &Ledger,
    sea: &Sea,
    temperature: Temperature,
    matters: impl Fn(usize) -> bool,
) -> Vec<String> {
    let covers = |reaction: &Reaction| {
        reaction.constant().is_ok_and(|constant| {
            let salinities = constant.log_k.salinities();
            salinities.is_none_or(|range| range.distance(sea.salinity) == 0.0)
                && constant.log_k.outside(temperature) == 0.0
        })
    };
    let outside = ledger.reactions().enumerate().filter(|(k, (_, r))| matters(*k) && !covers(r));
    let outside: Vec<(&str, &Reaction)> = outside.map(|(_, named)| named).collect();
    if outside.is_empty() {
        return vec![];
    }
    let alternatives = ledger.alternatives();
    let covering = |name: &str| -> Vec<&str> {
        let covering = alternatives.iter().filter(|other| other.name == name && covers(&other.reaction));
        covering.map(|other| other.author.as_str()).collect()
    };
    let words = |name: &str, range: &str, authors: &[&str]| {
        let (hold, was, it) =
            if name.contains(' ') { ("hold", "were", "them") } else { ("holds", "was", "it") };
        let advice = match authors {
            [] => String::new(),
            [first, ..] => {
                let cover = if authors.len() == 1 { "covers" } else { "cover" };
                format!("; {} {cover} {it}: `.choose(\"{name}\", \"{first}\")`", list(authors))
            }
        };
        format!("`{name}` {hold} for {range}, and {was} used {}{advice}", at(sea, temperature))
    };
    let range_of =
        |wanted: &str| outside.iter().find(|(name, _)| *name == wanted).map(|(_, reaction)| range(reaction));
    let mut warnings = Vec::new();
    let pair = (range_of("K1"), range_of("K2"));
    let together = matches!(&pair, (Some(one), Some(two)) if one == two);
    if let (Some(range), true) = (pair.0, together) {
        let both: Vec<&str> =
            covering("K1").into_iter().filter(|author| covering("K2").contains(author)).collect();
        warnings.push(words("K1 K2", &range, &both));
    }
    let others = outside.iter().filter(|(name, _)| !(together && ["K1", "K2"].contains(name)));
    warnings.extend(others.map(|(name, reaction)| words(name, &range(reaction), &covering(name))));
    warnings
}

/// K1 and K2 of different publications: each was fitted with the other to the same measurements.
#[must_use]
pub fn unmatched_pair(ledger: &Ledger) -> Option<String> {
    let choices = ledger.choices();
    let author = |wanted: &str| choices.iter().find(|(name, _)| name == wanted).map(|(_, author)| author);
    let (one, two) = (author("K1")?, author("K2")?);
    (one != two).then(|| {
        format!(
            "`K1` is {one} and `K2` is {two}: constants of one publication were fitted together, and belong together; \
             `.choose(\"K1 K2\", \"{one}\")` takes both"
        )
    })
}

fn at(sea: &Sea, temperature: Temperature) -> String {
    format!("at salinity {} and {:.4} degC", sea.salinity, temperature.celsius())
        .replace(".0000 degC", " degC")
}

fn range(reaction: &Reaction) -> String {
    let Ok(constant) = reaction.constant() else { return String::new() };
    let salinity = constant.log_k.salinities().map(|s| format!("salinity {} to {}", s.lowest, s.highest));
    let temperature = constant
        .log_k
        .range()
        .map(|range| format!("{:.0} to {:.0} degC", range.lowest.celsius(), range.highest.celsius()));
    [salinity, temperature].into_iter().flatten().collect::<Vec<_>>().join(" and ")
}
