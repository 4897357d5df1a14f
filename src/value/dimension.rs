use std::fmt;

/// The names of the base dimensions, in the order of the exponents of [`Dimension`].
const BASES: [&str; 8] =
    ["length", "mass", "time", "temperature", "amount", "angle", "sunspots (v1)", "sunspots (v2)"];

/// Exponents of the base dimensions.
///
/// Angles are a dimension of their own, so that degrees never add to plain numbers. The sunspot numbers before
/// and after the revision of 2015 are two dimensions: no constant converts one into the other.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash)]
pub struct Dimension([i8; 8]);

impl Dimension {
    /// A plain number.
    pub const NUMBER: Self = Self([0; 8]);
    /// Length.
    pub const LENGTH: Self = Self([1, 0, 0, 0, 0, 0, 0, 0]);
    /// Mass.
    pub const MASS: Self = Self([0, 1, 0, 0, 0, 0, 0, 0]);
    /// Time.
    pub const TIME: Self = Self([0, 0, 1, 0, 0, 0, 0, 0]);
    /// A difference of temperature.
    pub const TEMPERATURE: Self = Self([0, 0, 0, 1, 0, 0, 0, 0]);
    /// Amount of substance.
    pub const AMOUNT: Self = Self([0, 0, 0, 0, 1, 0, 0, 0]);
    /// Plane angle.
    pub const ANGLE: Self = Self([0, 0, 0, 0, 0, 1, 0, 0]);
    /// Sunspot number on the original scale.
    pub const SPOTS_V1: Self = Self([0, 0, 0, 0, 0, 0, 1, 0]);
    /// Sunspot number on the scale in use since 2015.
    pub const SPOTS_V2: Self = Self([0, 0, 0, 0, 0, 0, 0, 1]);

    /// Length, mass and time to the given powers.
    pub const fn mechanical(length: i8, mass: i8, time: i8) -> Self {
        Self([length, mass, time, 0, 0, 0, 0, 0])
    }

    /// This dimension times `other` to the power `exponent`.
    #[must_use]
    pub fn times(self, other: Self, exponent: i8) -> Self {
        let mut exponents = self.0;
        for (mine, theirs) in exponents.iter_mut().zip(other.0) {
            *mine = mine.saturating_add(theirs.saturating_mul(exponent));
        }
        Self(exponents)
    }
}

impl fmt::Display for Dimension {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        if *self == Self::NUMBER {
            return formatter.write_str("a plain number");
        }
        let mut first = true;
        for (name, exponent) in BASES.iter().zip(self.0) {
            if exponent == 0 {
                continue;
            }
            if !first {
                formatter.write_str(" · ")?;
            }
            first = false;
            formatter.write_str(name)?;
            if exponent != 1 {
                write!(formatter, "^{exponent}")?;
            }
        }
        Ok(())
    }
}
