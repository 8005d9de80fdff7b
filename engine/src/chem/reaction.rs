//! A reaction: an equation and, where one is known, its equilibrium constant.
//!
//! K belongs to the reaction as written, with products positive. Written the other way round log K changes sign, taken n
//! times it is multiplied by n, and added reactions add their log K.

use std::fmt;

use super::conditions::{Conditions, Medium, Mismatch, Terms};
use super::equation::{Equation, EquationError};
use super::history::{History, Influence};
use super::log_k::{LogK, LogKError};
use super::pressure::Volume;
use super::rational::{self, Rational};
pub use super::stated_conditions::salinity;
use super::statement::Statement;
pub use super::statement::{multiple, temperature, terms};
use crate::named::{KeyFault, Named};
use crate::physics::constants::{GAS_CONSTANT, LN_10};
use crate::quantity::{Part, Quantity};
use crate::units::{Kind, Temperature, Unit};

/// Gas constant in kJ/(mol K).
const R_KJ: f64 = GAS_CONSTANT / 1000.0;

/// An equation with its constant; a value, never changed in place.
#[derive(Clone, PartialEq)]
pub struct Reaction {
    equation: Equation,
    constant: Option<Constant>,
}

/// An equilibrium constant: its value, the temperature it is quoted at, its conditions and its history.
#[derive(Debug, Clone, PartialEq)]
pub struct Constant {
    /// log10 K.
    pub log_k: LogK,
    /// The reaction's own temperature, at which it is quoted.
    pub temperature: Temperature,
    /// The conditions in which it holds.
    pub conditions: Conditions,
    /// Volume of reaction, from which it is taken to another pressure; `None` where it was not given.
    pub volume: Option<Volume>,
    /// Where it came from.
    pub history: History,
}

impl Constant {
    /// log10 K as a function of temperature at the salinity it is quoted for.
    #[must_use]
    pub fn at_own_salinity(&self) -> LogK {
        match self.conditions.medium.salinity() {
            Some(salinity) => self.log_k.at_salinity(salinity),
            None => self.log_k.clone(),
        }
    }
}

/// Why a reaction cannot be made, or cannot answer.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ReactionError {
    /// The equation is at fault.
    #[error(transparent)]
    Equation(#[from] EquationError),
    /// An option is at fault.
    #[error(transparent)]
    Option(#[from] KeyFault),
    /// There is an equation and no constant.
    #[error("`{0}` has no constant: give it one, as in `reaction(\"{0}\", #{{ log_k: -6.35 }})`")]
    NoConstant(String),
    /// The constant says nothing at the temperature asked for.
    #[error(
        "log K of `{equation}` is {why}; give it an `enthalpy` or `log_k_terms`, or use `.at(\"25 degC\")`"
    )]
    Temperature {
        /// The reaction.
        equation: String,
        /// What is known.
        why: LogKError,
    },
    /// A term known at one temperature meets one that is a function.
    #[error(
        "log K of `{fixed}` is known at {known:.2} degC only, that of `{other}` is not: give `{fixed}` an `enthalpy`, \
         or add `.at(\"{known:.0} degC\")` to the other"
    )]
    NoCommonTemperature {
        /// The reaction known at one temperature.
        fixed: String,
        /// The reaction it was added to.
        other: String,
        /// That temperature in degC.
        known: f64,
    },
    /// The constants hold in different conditions.
    #[error("`{left}` holds for {}, `{right}` for {}: convert one with `{}`", mismatch.left, mismatch.right, mismatch.conversion)]
    Conditions {
        /// The left reaction.
        left: String,
        /// The right reaction.
        right: String,
        /// In what they differ, and the conversion to call.
        mismatch: Box<Mismatch>,
    },
    /// The constant holds in conditions that a ledger does not take.
    #[error(
        "`{reaction}` holds for {}, and a ledger takes {}: convert it with `{}`",
        mismatch.right, mismatch.left, mismatch.conversion
    )]
    NotForLedger {
        /// The reaction.
        reaction: String,
        /// In what it differs from a ledger's constants, and the conversion to call.
        mismatch: Box<Mismatch>,
    },
    /// A conversion cannot be made, in words.
    #[error("{0}")]
    Conversion(String),
    /// One has a constant, the other none.
    #[error("`{0}` has no constant, so the sum has none either: give it one, or add the equations alone")]
    OneWithoutConstant(String),
}

impl Reaction {
    /// Stoichiometry alone.
    ///
    /// # Errors
    ///
    /// Returns what is wrong with the equation.
    pub fn stoichiometry(equation: &str) -> Result<Self, ReactionError> {
        Ok(Self { equation: Equation::parse(equation)?, constant: None })
    }

    /// A reaction with its constant from named options: one of `log_k`, `ln_k`, `k`, `pk`, `gibbs` (kJ/mol) or
    /// `log_k_terms`; `enthalpy` (kJ/mol), `heat_capacity` (J/(mol K)), `volume` (cm3/mol), `temperature`, `pressure`,
    /// `value_at`, `sigma` with `sigma_of`, `range`, `source`, `provenance`, `note`; and the conditions `ionic_strength`,
    /// `medium` with `salinity`, `ph_scale`, `basis` and `gas_standard`.
    ///
    /// `name` labels it in histories. `identity` is a text that is the same whenever the same published constant is
    /// read again, so that its uncertainty is counted once; values typed by a user have none.
    ///
    /// # Errors
    ///
    /// Returns what is wrong with the equation, or with an option, naming its key.
    pub fn read(
        equation: &str,
        name: Option<&str>,
        options: Named,
        identity: Option<&str>,
    ) -> Result<Self, ReactionError> {
        let equation = Equation::parse(equation)?;
        let constant = Statement::read(options, &equation)?.constant(&equation, name, identity)?;
        Ok(Self { equation, constant })
    }

    /// A reaction of an equation and a constant that belong together.
    #[must_use]
    pub fn of(equation: Equation, constant: Constant) -> Self {
        Self { equation, constant: Some(constant) }
    }

    /// The equation.
    #[must_use]
    pub fn equation(&self) -> &Equation {
        &self.equation
    }

    /// The constant.
    ///
    /// # Errors
    ///
    /// [`ReactionError::NoConstant`] if the reaction is stoichiometry alone.
    pub fn constant(&self) -> Result<&Constant, ReactionError> {
        self.constant.as_ref().ok_or_else(|| ReactionError::NoConstant(self.equation.to_string()))
    }

    /// log10 K at the reaction's own temperature.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn log_k(&self) -> Result<Quantity, ReactionError> {
        self.log_k_at(self.constant()?.temperature)
    }

    /// log10 K at a temperature; whether that lies in the constant's range is for the caller to ask
    /// ([`LogK::outside`]).
    ///
    /// # Errors
    ///
    /// [`ReactionError::NoConstant`], or [`ReactionError::Temperature`] where nothing is known.
    pub fn log_k_at(&self, temperature: Temperature) -> Result<Quantity, ReactionError> {
        let constant = self.constant()?;
        let value = constant.at_own_salinity().at(temperature);
        let value =
            value.map_err(|why| ReactionError::Temperature { equation: self.equation.to_string(), why })?;
        Ok(Quantity::from_parts(value, Unit::one(), constant.history.parts_at(temperature)))
    }

    /// Standard Gibbs energy of reaction, kJ/mol: -RT ln K at the reaction's own temperature.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn gibbs(&self) -> Result<Quantity, ReactionError> {
        let constant = self.constant()?;
        let factor = -R_KJ * constant.temperature.kelvin() * LN_10;
        let value = constant.at_own_salinity().nearest_to(constant.temperature).0 * factor;
        let parts = constant.history.parts_at(constant.temperature);
        let parts = parts.iter().map(|part| part.scaled(factor)).collect();
        Ok(Quantity::from_parts(value, Kind::Energy.default_unit(), parts))
    }

    /// Enthalpy of reaction, kJ/mol, at the reaction's own temperature; `None` where it is not known.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn enthalpy(&self) -> Result<Option<f64>, ReactionError> {
        let constant = self.constant()?;
        Ok(constant.at_own_salinity().enthalpy(constant.temperature))
    }

    /// Enthalpy of reaction as [`Reaction::enthalpy`], with the uncertainty that was stated for it.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn enthalpy_quantity(&self) -> Result<Option<Quantity>, ReactionError> {
        let constant = self.constant()?;
        let part = |influence: &Influence| {
            let sensitivity = influence.on_log_k.enthalpy(constant.temperature)?;
            Some(Part { input: influence.input.clone(), sensitivity })
        };
        let parts = constant.history.influences().iter().filter_map(part).collect();
        let unit = Kind::Energy.default_unit();
        Ok(self.enthalpy()?.map(|value| Quantity::from_parts(value, unit, parts)))
    }

    /// Entropy of reaction, J/(mol K): (ΔH - ΔG)/T; `None` where the enthalpy is not known.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn entropy(&self) -> Result<Option<f64>, ReactionError> {
        let temperature = self.constant()?.temperature.kelvin();
        let gibbs = self.gibbs()?.value();
        Ok(self.enthalpy()?.map(|enthalpy| 1000.0 * (enthalpy - gibbs) / temperature))
    }

    /// The reaction `multiple` times over: Kⁿ. A negative multiple writes it the other way round.
    ///
    /// # Errors
    ///
    /// Returns that nothing is left if `multiple` is zero.
    pub fn times(&self, multiple: Rational) -> Result<Self, ReactionError> {
        let equation = self.equation.times(multiple)?;
        let constant = self.constant.as_ref().map(|constant| Constant {
            log_k: constant.log_k.times(multiple),
            history: constant.history.times(multiple),
            volume: constant.volume.as_ref().map(|volume| volume.times(rational::to_f64(multiple))),
            ..constant.clone()
        });
        Ok(Self { equation, constant })
    }

    /// The sum of two reactions: K₁ K₂.
    ///
    /// # Errors
    ///
    /// Returns why the constants cannot be multiplied: one is missing, they share no temperature, or they count gases
    /// from different pressures.
    pub fn plus(&self, other: &Self) -> Result<Self, ReactionError> {
        let equation = self.equation.plus(&other.equation)?;
        let constant = match (&self.constant, &other.constant) {
            (Some(left), Some(right)) => Some(self.product(left, other, right)?),
            (None, None) => None,
            (None, Some(_)) => return Err(ReactionError::OneWithoutConstant(self.equation.to_string())),
            (Some(_), None) => return Err(ReactionError::OneWithoutConstant(other.equation.to_string())),
        };
        Ok(Self { equation, constant })
    }

    fn product(&self, left: &Constant, other: &Self, right: &Constant) -> Result<Constant, ReactionError> {
        // A constant known at one salinity meets a function of it at that salinity.
        let (left_log_k, right_log_k) =
            match (left.log_k.depends_on_salinity(), right.log_k.depends_on_salinity()) {
                (true, false) if right.conditions.medium.salinity().is_some() => {
                    (left.at_own_salinity(), right.log_k.clone())
                }
                (false, true) if left.conditions.medium.salinity().is_some() => {
                    (left.log_k.clone(), right.at_own_salinity())
                }
                _ => (left.log_k.clone(), right.log_k.clone()),
            };
        let log_k = left_log_k.plus(&right_log_k).map_err(|_| {
            let (fixed, at, other) = match (left.log_k.only_at(), right.log_k.only_at()) {
                (Some(at), _) => (&self.equation, at, &other.equation),
                (None, Some(at)) => (&other.equation, at, &self.equation),
                (None, None) => unreachable!("functions of temperature always add"),
            };
            ReactionError::NoCommonTemperature {
                fixed: fixed.to_string(),
                other: other.to_string(),
                known: at.celsius(),
            }
        })?;
        let history = left.history.plus(&right.history);
        let conditions = self.common_conditions(left, other, right)?;
        let volume = match (&left.volume, &right.volume) {
            (Some(a), Some(b)) => Some(a.plus(b)),
            _ => None,
        };
        // A product of functions is quoted at the left one's temperature.
        let temperature = log_k.only_at().unwrap_or(left.temperature);
        Ok(Constant { log_k, temperature, conditions, volume, history })
    }

    /// A condition that does not concern one of them, such as the standard of gases, is the other's.
    fn common_conditions(
        &self,
        left: &Constant,
        other: &Self,
        right: &Constant,
    ) -> Result<Conditions, ReactionError> {
        let (own, others) =
            (Terms::of(&self.equation, &left.conditions), Terms::of(&other.equation, &right.conditions));
        left.conditions.common(own, &right.conditions, others).map_err(|mismatch| ReactionError::Conditions {
            left: self.equation.to_string(),
            right: other.equation.to_string(),
            mismatch: Box::new(mismatch),
        })
    }

    /// Which of its conditions concern the reaction.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`].
    pub fn terms(&self) -> Result<Terms, ReactionError> {
        Ok(Terms::of(&self.equation, &self.constant()?.conditions))
    }

    /// Refuses a constant that holds in other conditions than a ledger's: molal activities at zero ionic strength, gases
    /// counted by pressure, 1 bar.
    ///
    /// # Errors
    ///
    /// [`ReactionError::NotForLedger`] naming the conversion to call, or as [`Reaction::constant`].
    pub fn check_for_ledger(&self) -> Result<(), ReactionError> {
        match self.constant()?.conditions.unfit_for_ledger(self.terms()?) {
            None => Ok(()),
            Some(mismatch) => Err(ReactionError::NotForLedger {
                reaction: self.equation.to_string(),
                mismatch: Box::new(mismatch),
            }),
        }
    }

    /// Refuses a constant that holds in other conditions than a ledger of seawater's: concentrations in mol/kg(solution)
    /// of seawater, 1 bar.
    ///
    /// # Errors
    ///
    /// As [`Reaction::check_for_ledger`].
    pub fn check_for_sea_ledger(&self) -> Result<(), ReactionError> {
        match self.constant()?.conditions.unfit_for_sea_ledger(self.terms()?) {
            None => Ok(()),
            Some(mismatch) => Err(ReactionError::NotForLedger {
                reaction: self.equation.to_string(),
                mismatch: Box::new(mismatch),
            }),
        }
    }

    /// The same with its constant known at `temperature` alone, so that it adds to others known there.
    ///
    /// # Errors
    ///
    /// As [`Reaction::log_k_at`].
    pub fn at(&self, temperature: Temperature) -> Result<Self, ReactionError> {
        let constant = self.constant()?;
        let log_k = constant.at_own_salinity().frozen_at(temperature);
        let log_k =
            log_k.map_err(|why| ReactionError::Temperature { equation: self.equation.to_string(), why })?;
        let history = constant.history.frozen_at(temperature);
        let constant = Constant { log_k, temperature, history, ..constant.clone() };
        Ok(Self { equation: self.equation.clone(), constant: Some(constant) })
    }

    /// The same in seawater of one salinity: its constant becomes a function of temperature alone.
    ///
    /// # Errors
    ///
    /// [`ReactionError::Conversion`] where it is no function of salinity, or as [`Reaction::constant`].
    pub fn at_salinity(&self, salinity: f64) -> Result<Self, ReactionError> {
        let constant = self.constant()?;
        match constant.conditions.medium.salinity() {
            Some(own) if own == salinity || constant.log_k.depends_on_salinity() => {
                let log_k = constant.log_k.at_salinity(salinity);
                let conditions =
                    Conditions { medium: Medium::Seawater { salinity }, ..constant.conditions.clone() };
                Ok(Self::of(self.equation.clone(), Constant { log_k, conditions, ..constant.clone() }))
            }
            Some(own) => Err(ReactionError::Conversion(format!(
                "log K of `{self}` is known for salinity {own} only, not for {salinity}"
            ))),
            None => Err(ReactionError::Conversion(format!(
                "log K of `{self}` holds for {}: it is no function of salinity",
                constant.conditions.medium
            ))),
        }
    }

    /// The same with an enthalpy of reaction assumed; its constant, known at one temperature, becomes a function.
    ///
    /// # Errors
    ///
    /// As [`Reaction::constant`], or that `enthalpy` is no energy per mole.
    pub fn assume_enthalpy(&self, enthalpy: &Quantity) -> Result<Self, ReactionError> {
        let constant = self.constant()?;
        let enthalpy = enthalpy.to(&Kind::Energy.default_unit());
        let enthalpy = enthalpy.map_err(|error| KeyFault::new("enthalpy", error.to_string()))?;
        let (value, at) =
            (constant.at_own_salinity().nearest_to(constant.temperature).0, constant.temperature);
        let mut log_k = LogK::van_t_hoff(value, at, enthalpy.value(), 0.0);
        if let Some(range) = constant.log_k.range() {
            log_k = log_k.within(range);
        }
        let history = constant
            .history
            .frozen_at(at)
            .influenced(Influence::through(enthalpy.parts(), &LogK::van_t_hoff(0.0, at, 1.0, 0.0)))
            .converted(format!("enthalpy of reaction assumed: {} at {} degC", enthalpy, at.celsius()));
        Ok(Self::of(self.equation.clone(), Constant { log_k, history, ..constant.clone() }))
    }
}

impl fmt::Display for Reaction {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        fmt::Display::fmt(&self.equation, f)
    }
}

impl fmt::Debug for Reaction {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{:?} {:?}", self.equation, self.constant)
    }
}
