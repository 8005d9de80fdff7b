//! Units of measurement: text such as `mg/L as NO3^-` becomes a [`Unit`], whose [`Dimension`] decides what it may be
//! added to or converted into.
//!
//! Factors follow the SI brochure (9th edition, 2019); the standard atmosphere is 101325 Pa and the thermochemical
//! calorie 4.184 J, both exact. Water and solution are kept apart: `kg(water)` and `kg(solution)` are dimensions of
//! their own, so a molality never turns into an amount per kilogram of solution unnoticed.
//!
//! ```
//! use lysocline_engine::units::Unit;
//!
//! let mg_per_l = Unit::parse("mg/L")?;
//! assert_eq!(mg_per_l.convert(41.2, &Unit::parse("g/L")?)?, 0.0412);
//! # Ok::<(), lysocline_engine::units::UnitError>(())
//! ```

mod atom;
mod condition;
mod convert;
mod dimension;
mod error;
mod kind;
mod parse;
mod unit;

#[cfg(test)]
mod tests;

pub use condition::{Pressure, Temperature};
pub use dimension::{Base, Dimension, Exponent};
pub use error::UnitError;
pub use kind::{Kind, units_of};
pub use unit::{KgOf, Style, Unit};
