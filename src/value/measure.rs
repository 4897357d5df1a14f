use std::fmt;
use std::sync::Arc;

use super::unit::Unit;
use crate::base::Fault;

/// What a number measures: its unit, how a temperature is meant, and what kind of forcing it is.
#[derive(Clone, Debug, PartialEq)]
pub struct Measure {
    /// The unit.
    pub unit: Unit,
    /// Whether a temperature is known to be a difference.
    pub reading: Reading,
    /// The kind of forcing, and what it is a change from; none for what is no forcing.
    pub forcing: Option<Forcing>,
}

/// How a temperature is meant.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Reading {
    /// A difference or an anomaly, or no temperature at all.
    Difference,
    /// A loaded temperature of which nobody has said whether it is absolute: it can be subtracted, and a
    /// conversion asks.
    Undeclared,
}

/// A radiative forcing's kind and reference.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Forcing {
    /// The kind.
    pub kind: ForcingKind,
    /// What it is a change from, in words: `278 ppm`.
    pub reference: Option<Arc<str>>,
}

/// Which adjustments a forcing includes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ForcingKind {
    /// With the rapid adjustments of the whole atmosphere.
    Effective,
    /// With the stratosphere's temperature adjusted alone.
    StratosphereAdjusted,
    /// Loaded or made by hand: nobody has said.
    Undeclared,
}

impl fmt::Display for ForcingKind {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(match self {
            ForcingKind::Effective => "effective",
            ForcingKind::StratosphereAdjusted => "stratosphere-adjusted",
            ForcingKind::Undeclared => "undeclared",
        })
    }
}

impl Measure {
    /// A measure in `unit`, no forcing, a difference if it is a temperature.
    pub fn of(unit: Unit) -> Self {
        Self { unit, reading: Reading::Difference, forcing: None }
    }

    /// A plain number.
    pub fn number() -> Self {
        Self::of(Unit::number())
    }

    /// The measure of `self + other` or `self - other`, in the unit of `self`, and the factor that brings
    /// `other` to it.
    ///
    /// # Errors
    /// `unit-mismatch`, `forcing-kinds`, `absolute-or-difference`.
    pub fn sum(&self, other: &Self, subtract: bool) -> Result<(Self, f64), Fault> {
        // Asked in this order, so that a mismatch names the left side first.
        self.unit.factor_to(&other.unit)?;
        let factor = other.unit.factor_to(&self.unit)?;
        let reading = match (self.reading, other.reading, subtract) {
            (Reading::Undeclared, Reading::Undeclared, true) => Reading::Difference,
            (Reading::Undeclared, Reading::Undeclared, false) => {
                return Err(Fault::new(
                    "absolute-or-difference",
                    "adding two temperatures of which neither is known to be a difference",
                )
                .help("take anomalies first: `x |> anomaly(relative_to: 1961..1990 CE)`"));
            }
            (Reading::Undeclared, Reading::Difference, _) | (Reading::Difference, Reading::Undeclared, _) => {
                Reading::Undeclared
            }
            (Reading::Difference, Reading::Difference, _) => Reading::Difference,
        };
        let forcing = match (&self.forcing, &other.forcing) {
            // The difference of two forcings is no change from what either began at.
            (Some(mine), Some(theirs)) if subtract => Some(Forcing { reference: None, ..mine.with(theirs)? }),
            (Some(mine), Some(theirs)) => Some(mine.with(theirs)?),
            (mine, theirs) => mine.clone().or_else(|| theirs.clone()),
        };
        Ok((Self { unit: self.unit.clone(), reading, forcing }, factor))
    }

    /// The measure of `self * other` (`exponent` 1) or `self / other` (−1).
    #[must_use]
    pub fn product(&self, other: &Self, exponent: i8) -> Self {
        let unit = self.unit.times(&other.unit, exponent);
        // A forcing times a plain number is a forcing still.
        let forcing = if other.unit.is_number() {
            self.forcing.clone()
        } else if self.unit.is_number() && exponent == 1 {
            other.forcing.clone()
        } else {
            None
        };
        Self { unit, reading: Reading::Difference, forcing }
    }

    /// The same thing in another unit, and the factor to it.
    ///
    /// # Errors
    /// `unit-mismatch`; `absolute-or-difference` where an undeclared temperature would change its scale.
    pub fn convert(&self, unit: &Unit) -> Result<(Self, f64), Fault> {
        let factor = self.unit.factor_to(unit)?;
        if self.reading == Reading::Undeclared && self.unit != *unit {
            return Err(Fault::new(
                "absolute-or-difference",
                format!("is this temperature in {} absolute, or a difference? Only a difference converts by a factor", self.unit),
            )
            .help("take its anomaly first: `x |> anomaly(relative_to: 1961..1990 CE)`"));
        }
        Ok((Self { unit: unit.clone(), reading: self.reading, forcing: self.forcing.clone() }, factor))
    }
}

impl fmt::Display for Forcing {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        match &self.reference {
            Some(reference) => write!(formatter, "{} change from {reference}", self.kind),
            None => write!(formatter, "{}", self.kind),
        }
    }
}

impl Forcing {
    /// The forcing of a sum: kinds must agree, an undeclared one goes with any.
    fn with(&self, other: &Self) -> Result<Self, Fault> {
        let kind = match (self.kind, other.kind) {
            (mine, theirs) if mine == theirs => mine,
            (ForcingKind::Undeclared, declared) | (declared, ForcingKind::Undeclared) => declared,
            (mine, theirs) => {
                return Err(Fault::new(
                    "forcing-kinds",
                    format!(
                        "{} and {} forcing are two kinds of forcing and do not add",
                        article(mine),
                        article(theirs)
                    ),
                )
                .help(
                    "compute both by formulas of one kind; `explain` of each formula says which it gives",
                ));
            }
        };
        let reference = if self.reference == other.reference { self.reference.clone() } else { None };
        Ok(Self { kind, reference })
    }
}

fn article(kind: ForcingKind) -> String {
    match kind {
        ForcingKind::Effective | ForcingKind::Undeclared => format!("an {kind}"),
        ForcingKind::StratosphereAdjusted => format!("a {kind}"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn measure(unit: &str) -> Measure {
        Measure::of(Unit::parse(unit).unwrap())
    }

    fn forcing(kind: ForcingKind) -> Measure {
        Measure { forcing: Some(Forcing { kind, reference: None }), ..measure("W/m2") }
    }

    #[test]
    fn two_kinds_of_forcing_do_not_add_and_an_undeclared_one_goes_with_both() {
        let (effective, adjusted) =
            (forcing(ForcingKind::Effective), forcing(ForcingKind::StratosphereAdjusted));
        assert_eq!(effective.sum(&adjusted, false).unwrap_err().code, "forcing-kinds");
        let (sum, _) = forcing(ForcingKind::Undeclared).sum(&effective, false).unwrap();
        assert_eq!(sum, effective);
    }

    #[test]
    fn the_difference_of_two_forcings_has_no_reference() {
        let since = |reference: &str| Measure {
            forcing: Some(Forcing { kind: ForcingKind::Effective, reference: Some(Arc::from(reference)) }),
            ..measure("W/m2")
        };
        let one = since("278 ppm");
        assert_eq!(one.sum(&one, false).unwrap().0, one);
        assert_eq!(one.sum(&one, true).unwrap().0, forcing(ForcingKind::Effective));
        assert_eq!(one.sum(&since("280 ppm"), true).unwrap().0, forcing(ForcingKind::Effective));
        // What is no forcing leaves the reference alone.
        assert_eq!(one.sum(&measure("W/m2"), true).unwrap().0, one);
    }

    #[test]
    fn the_difference_of_two_undeclared_temperatures_is_a_difference() {
        let loaded = Measure { reading: Reading::Undeclared, ..measure("degC") };
        assert_eq!(loaded.sum(&loaded, true).unwrap().0.reading, Reading::Difference);
        assert_eq!(loaded.sum(&loaded, false).unwrap_err().code, "absolute-or-difference");
        assert_eq!(loaded.convert(&Unit::parse("K").unwrap()).unwrap_err().code, "absolute-or-difference");
    }
}
