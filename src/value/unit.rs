use std::fmt;
use std::sync::Arc;

use super::dimension::Dimension;
use super::unit_table::{PREFIXES, UNITS};
use crate::base::Fault;

/// A unit as it was written, with its dimension and its size in SI base units.
#[derive(Clone, Debug)]
pub struct Unit {
    factors: Vec<Factor>,
    dimension: Dimension,
    mantissa: f64,
    power_of_ten: i32,
}

#[derive(Clone, Debug, PartialEq, Eq)]
struct Factor {
    symbol: Arc<str>,
    exponent: i8,
}

/// A unit text that could not be read.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct UnitFault {
    /// The part that is no unit.
    pub word: String,
    /// The unit that it may have meant.
    pub near: Option<String>,
}

impl PartialEq for Unit {
    /// Two units are the same where they are written the same.
    fn eq(&self, other: &Self) -> bool {
        self.factors == other.factors
    }
}

impl Unit {
    /// No unit: a plain number.
    pub fn number() -> Self {
        Self { factors: Vec::new(), dimension: Dimension::NUMBER, mantissa: 1.0, power_of_ten: 0 }
    }

    /// Read a unit as it stands in a program: `W/m2`, `kg/m^2/s`, `W*yr/m2/K`, `1/yr`; no inner spaces.
    ///
    /// # Errors
    /// The first word that is no unit, with the nearest one.
    pub fn parse(text: &str) -> Result<Self, UnitFault> {
        let mut unit = Self::number();
        let mut rest = text;
        let mut sign = 1;
        if let Some(after) = rest.strip_prefix('1') {
            match after.strip_prefix('/') {
                Some(after) => (rest, sign) = (after, -1),
                None if after.is_empty() => return Ok(unit),
                None => return Err(UnitFault { word: text.to_owned(), near: None }),
            }
        }
        loop {
            let end = rest.find(['/', '*']).unwrap_or(rest.len());
            let (word, after) = rest.split_at(end);
            let (symbol, exponent) = split_exponent(word);
            let exponent = exponent.ok_or_else(|| UnitFault { word: word.to_owned(), near: None })?;
            let atom = Self::atom(symbol)?;
            unit = unit.times(&atom, sign * exponent);
            match after.chars().next() {
                None => return Ok(unit),
                Some(separator) => {
                    sign = if separator == '/' { -1 } else { 1 };
                    rest = after.get(1..).unwrap_or("");
                }
            }
        }
    }

    /// Read a unit as it stands in a file's header, more forgiving than [`Unit::parse`]: `W m-2`, `deg C`, `°C`,
    /// `‰`, `%`, `years`, `sunspot number (v1)`.
    ///
    /// # Errors
    /// The first word that is no unit, with the nearest one.
    pub fn parse_header(text: &str) -> Result<Self, UnitFault> {
        let text = text.trim();
        let known = match text.to_lowercase().as_str() {
            "sunspot number (v1)" => Some("spots_v1"),
            "sunspot number (v2)" => Some("spots_v2"),
            "°c" | "deg c" | "degc" | "celsius" | "degrees celsius" => Some("degC"),
            "kelvin" => Some("K"),
            "‰" | "per mil" | "per mille" => Some("permil"),
            "%" => Some("percent"),
            "ppmv" => Some("ppm"),
            "ppbv" => Some("ppb"),
            "pptv" => Some("ppt"),
            "°" | "degree" | "degrees" => Some("deg"),
            "year" | "years" | "a" => Some("yr"),
            "dimensionless" | "-" | "none" => Some("1"),
            _ => None,
        };
        match known {
            Some(known) => Self::parse(known),
            None => Self::parse(&text.replace("**", "^").split_whitespace().collect::<Vec<_>>().join("*")),
        }
    }

    fn atom(symbol: &str) -> Result<Self, UnitFault> {
        let folded: String =
            symbol.chars().map(|letter| if letter == 'µ' || letter == 'μ' { 'u' } else { letter }).collect();
        let folded = if folded == "°C" { "degC".to_owned() } else { folded };
        let exact = UNITS.iter().find(|entry| entry.symbol == folded).map(|entry| (entry, 0));
        let prefixed = || {
            PREFIXES.iter().find_map(|(prefix, power)| {
                let rest = folded.strip_prefix(prefix)?;
                let entry =
                    UNITS.iter().find(|entry| entry.symbol == rest && entry.prefixes.contains(prefix))?;
                Some((entry, *power))
            })
        };
        match exact.or_else(prefixed) {
            Some((entry, power)) => Ok(Self {
                factors: vec![Factor { symbol: folded.into(), exponent: 1 }],
                dimension: entry.dimension,
                mantissa: entry.mantissa,
                power_of_ten: entry.power_of_ten + power,
            }),
            None => Err(UnitFault { word: symbol.to_owned(), near: nearest(&folded) }),
        }
    }

    /// This unit times `other` to the power `exponent`.
    #[must_use]
    pub fn times(&self, other: &Self, exponent: i8) -> Self {
        let mut factors = self.factors.clone();
        for theirs in &other.factors {
            let power = theirs.exponent.saturating_mul(exponent);
            // A degree Celsius is a kelvin as a difference: `W/m2/K * degC` is `W/m2`.
            let same = |mine: &&mut Factor| {
                mine.symbol == theirs.symbol || (is_kelvin(&mine.symbol) && is_kelvin(&theirs.symbol))
            };
            match factors.iter_mut().find(same) {
                Some(mine) => mine.exponent = mine.exponent.saturating_add(power),
                None => factors.push(Factor { symbol: theirs.symbol.clone(), exponent: power }),
            }
        }
        factors.retain(|factor| factor.exponent != 0);
        Self {
            factors,
            dimension: self.dimension.times(other.dimension, exponent),
            mantissa: self.mantissa * other.mantissa.powi(i32::from(exponent)),
            power_of_ten: self.power_of_ten + other.power_of_ten * i32::from(exponent),
        }
    }

    /// The symbols it is made of, prefixes included, in the order they were written.
    pub fn symbols(&self) -> impl Iterator<Item = &str> {
        self.factors.iter().map(|factor| &*factor.symbol)
    }

    /// The dimension.
    pub fn dimension(&self) -> Dimension {
        self.dimension
    }

    /// Whether it measures time, so that a quantity of it is a duration.
    pub fn is_time(&self) -> bool {
        self.dimension == Dimension::TIME
    }

    /// Whether it has no dimension (percent and ppm have none either).
    pub fn is_number(&self) -> bool {
        self.dimension == Dimension::NUMBER
    }

    /// Whether nothing is written: a plain number.
    pub fn is_bare(&self) -> bool {
        self.factors.is_empty()
    }

    /// What a number in this unit is multiplied by to be one in `target`.
    ///
    /// # Errors
    /// `unit-mismatch`, with both dimensions side by side, where the dimensions differ.
    pub fn factor_to(&self, target: &Self) -> Result<f64, Fault> {
        if self == target {
            return Ok(1.0);
        }
        if self.dimension != target.dimension {
            return Err(self.mismatch(target));
        }
        let ratio = self.mantissa / target.mantissa;
        let power = self.power_of_ten - target.power_of_ten;
        // 10^n is exact up to n = 22, and a division by it is rounded once.
        Ok(if power >= 0 { ratio * 10f64.powi(power) } else { ratio / 10f64.powi(-power) })
    }

    /// The unit as it is printed beside an axis: `W m⁻²`, `°C`, `‰`; nothing for a plain number.
    pub fn typeset(&self) -> String {
        let word = |factor: &Factor| {
            let symbol = match &*factor.symbol {
                "degC" => "°C".to_owned(),
                "deg" => "°".to_owned(),
                "percent" => "%".to_owned(),
                "permil" => "‰".to_owned(),
                "spots_v1" => "sunspot number, version 1".to_owned(),
                "spots_v2" => "sunspot number, version 2".to_owned(),
                micro if micro.len() > 1 && micro.starts_with('u') => micro.replacen('u', "µ", 1),
                other => other.to_owned(),
            };
            let exponent = if factor.exponent == 1 { String::new() } else { factor.exponent.to_string() };
            symbol + &superscript(&exponent)
        };
        self.factors.iter().map(word).collect::<Vec<_>>().join(" ")
    }

    fn mismatch(&self, target: &Self) -> Fault {
        let sunspots = [Dimension::SPOTS_V1, Dimension::SPOTS_V2];
        let names = [self.to_string(), target.to_string()];
        let width = names.iter().map(|name| name.chars().count()).max().unwrap_or(0);
        let mut fault =
            Fault::new("unit-mismatch", format!("{} and {} measure different things", names[0], names[1]));
        for (name, dimension) in names.iter().zip([self.dimension, target.dimension]) {
            let padding = " ".repeat(width - name.chars().count());
            fault = fault.detail(format!("{name}{padding}  is  {dimension}"));
        }
        if sunspots.contains(&self.dimension) && sunspots.contains(&target.dimension) {
            fault = fault
                .help("no constant converts the old sunspot scale into the new one: load both on one scale");
        }
        fault
    }
}

/// The digits of a whole number and its sign, raised.
pub(crate) fn superscript(number: &str) -> String {
    let raised = |digit: char| match digit {
        '-' => '⁻',
        '1' => '¹',
        '2' => '²',
        '3' => '³',
        digit => digit.to_digit(10).and_then(|digit| char::from_u32(0x2070 + digit)).unwrap_or(digit),
    };
    number.chars().map(raised).collect()
}

fn is_kelvin(symbol: &str) -> bool {
    symbol == "K" || symbol == "degC"
}

fn split_exponent(word: &str) -> (&str, Option<i8>) {
    // spots_v1 and spots_v2 end in a digit that is no exponent.
    if word.is_empty() || UNITS.iter().any(|entry| entry.symbol == word) {
        return (word, Some(1));
    }
    let (symbol, digits) = match word.split_once('^') {
        Some(parts) => parts,
        None => {
            let letters = word.trim_end_matches(|letter: char| letter.is_ascii_digit());
            let letters = letters.strip_suffix('-').unwrap_or(letters);
            word.split_at(letters.len())
        }
    };
    if digits.is_empty() {
        (symbol, Some(1))
    } else {
        (symbol, digits.parse().ok().filter(|power| *power != 0))
    }
}

fn nearest(word: &str) -> Option<String> {
    let lower = word.to_lowercase();
    let singular = if lower == "celsius" { &lower } else { lower.strip_suffix('s').unwrap_or(&lower) };
    let spoken = match singular {
        "year" | "a" => "yr",
        "celsius" | "c" | "degree" => "degC",
        "kelvin" => "K",
        "watt" => "W",
        "%" => "percent",
        "sunspot" | "spot" => "spots_v2",
        "mon" => "month",
        "d" => "day",
        "h" | "hr" => "hour",
        _ => "",
    };
    if !spoken.is_empty() {
        return Some(spoken.to_owned());
    }
    if lower == "degf" {
        return None;
    }
    let same_letters = UNITS.iter().find(|entry| entry.symbol.eq_ignore_ascii_case(word));
    let close = || UNITS.iter().find(|entry| word.len() > 2 && strsim::osa_distance(entry.symbol, word) == 1);
    same_letters.or_else(close).map(|entry| entry.symbol.to_owned())
}

impl fmt::Display for Unit {
    /// The unit as it is written in a program; a plain number is `1`.
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        let power = |exponent: i8| if exponent == 1 { String::new() } else { exponent.to_string() };
        let above: Vec<String> = self
            .factors
            .iter()
            .filter(|factor| factor.exponent > 0)
            .map(|factor| format!("{}{}", factor.symbol, power(factor.exponent)))
            .collect();
        formatter.write_str(if above.is_empty() { "1" } else { "" })?;
        formatter.write_str(&above.join("*"))?;
        for factor in self.factors.iter().filter(|factor| factor.exponent < 0) {
            write!(formatter, "/{}{}", factor.symbol, power(factor.exponent.saturating_neg()))?;
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn unit(text: &str) -> Unit {
        Unit::parse(text).unwrap()
    }

    #[test]
    fn a_unit_is_written_back_as_it_was_read() {
        for text in ["W/m2", "kg/m2/s", "W*yr/m2/K", "1/yr", "ppm", "GJ/m2", "spots_v1", "Mt", "1"] {
            assert_eq!(unit(text).to_string(), text);
        }
        assert_eq!(unit("kg/m^2/s"), unit("kg/m2/s"));
        assert_eq!(unit("m-2").to_string(), "1/m2");
        assert_eq!(unit("µm"), unit("μm"));
    }

    #[test]
    fn decimal_conversions_are_exact() {
        assert_eq!(unit("ppm").factor_to(&unit("ppb")).unwrap().to_bits(), 1000f64.to_bits());
        assert_eq!(unit("Tg").factor_to(&unit("Mt")).unwrap().to_bits(), 1f64.to_bits());
        assert_eq!(unit("yr").factor_to(&unit("month")).unwrap().to_bits(), 12f64.to_bits());
        assert_eq!(unit("W/m2").factor_to(&unit("mW/m2")).unwrap().to_bits(), 1000f64.to_bits());
    }

    #[test]
    fn joules_per_area_are_watt_years_per_area() {
        // 1 W yr = 31,556,952 J, by the length of the mean Gregorian year.
        let factor = unit("W*yr/m2").factor_to(&unit("GJ/m2")).unwrap();
        assert!((factor - 0.031_556_952).abs() < 1e-17, "{factor}");
    }

    #[test]
    fn a_mismatch_shows_both_dimensions() {
        let fault = unit("W/m2").factor_to(&unit("degC")).unwrap_err();
        assert_eq!(fault.code, "unit-mismatch");
        assert_eq!(fault.details, ["W/m2  is  mass · time^-3", "degC  is  temperature"]);
        assert!(unit("spots_v1").factor_to(&unit("spots_v2")).unwrap_err().help.is_some());
    }

    #[test]
    fn an_unknown_unit_names_the_nearest() {
        assert_eq!(Unit::parse("years").unwrap_err().near.as_deref(), Some("yr"));
        assert_eq!(Unit::parse("W/m2/celsius").unwrap_err().near.as_deref(), Some("degC"));
        assert_eq!(Unit::parse("T").unwrap_err(), UnitFault { word: "T".into(), near: Some("t".into()) });
    }

    #[test]
    fn beside_an_axis_exponents_are_raised() {
        assert_eq!(unit("W/m2").typeset(), "W m⁻²");
        assert_eq!(unit("W*yr/m2/degC").typeset(), "W yr m⁻² °C⁻¹");
        assert_eq!(unit("um").typeset(), "µm");
        assert_eq!(Unit::number().typeset(), "");
    }

    #[test]
    fn headers_are_read_as_they_come() {
        assert_eq!(Unit::parse_header("W m-2").unwrap(), unit("W/m2"));
        assert_eq!(Unit::parse_header("deg C").unwrap(), unit("degC"));
        assert_eq!(Unit::parse_header("sunspot number (v1)").unwrap(), unit("spots_v1"));
    }
}
