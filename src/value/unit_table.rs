use super::dimension::Dimension;

/// One unit that a person can write, before any prefix.
#[derive(Clone, Copy, Debug)]
pub struct UnitEntry {
    /// How it is written.
    pub symbol: &'static str,
    /// What it is, for completion and the reference.
    pub meaning: &'static str,
    /// Its dimension.
    pub dimension: Dimension,
    /// Its size in SI base units is `mantissa` × 10^`power_of_ten`.
    pub mantissa: f64,
    /// See `mantissa`; kept apart so that ppm to ppb is exactly 1000.
    pub power_of_ten: i32,
    /// The prefixes it takes.
    pub prefixes: &'static str,
}

const fn unit(
    symbol: &'static str,
    meaning: &'static str,
    dimension: Dimension,
    mantissa: f64,
    power_of_ten: i32,
    prefixes: &'static str,
) -> UnitEntry {
    UnitEntry { symbol, meaning, dimension, mantissa, power_of_ten, prefixes }
}

/// The SI prefixes, each with its power of ten; µ is folded to `u` before they are looked up.
pub(super) const PREFIXES: [(&str, i32); 14] = [
    ("E", 18),
    ("P", 15),
    ("T", 12),
    ("G", 9),
    ("M", 6),
    ("k", 3),
    ("h", 2),
    ("d", -1),
    ("c", -2),
    ("m", -3),
    ("u", -6),
    ("n", -9),
    ("p", -12),
    ("f", -15),
];

/// Every way to write one unit, with what it is and its dimension: without prefix first, then with each that it takes.
pub fn unit_spellings() -> Vec<(String, String, Dimension)> {
    let plain = UNITS.iter().map(|unit| (unit.symbol.to_owned(), unit.meaning.to_owned(), unit.dimension));
    let prefixed = UNITS.iter().flat_map(|unit| {
        PREFIXES.iter().filter(|(prefix, _)| unit.prefixes.contains(prefix)).map(|(prefix, power)| {
            let meaning = format!("10^{power} {}, {}", unit.symbol, unit.meaning);
            (format!("{prefix}{}", unit.symbol), meaning, unit.dimension)
        })
    });
    let mut seen = std::collections::BTreeSet::new();
    plain.chain(prefixed).filter(|(symbol, _, _)| seen.insert(symbol.clone())).collect()
}

const ALL: &str = "EPTGMkhdcmunpf";
const LARGE: &str = "EPTGMk";
const AGES: &str = "GMk";
const NONE: &str = "";

/// Every unit of the language, the one table that parsing, completion and the reference read.
///
/// Sources: SI (BIPM, 9th edition); the year is the mean Gregorian year of 365.2425 days, a month its twelfth.
pub const UNITS: &[UnitEntry] = &[
    unit("m", "metre", Dimension::LENGTH, 1.0, 0, ALL),
    unit("g", "gram", Dimension::MASS, 1.0, -3, ALL),
    unit("t", "tonne", Dimension::MASS, 1.0, 3, LARGE),
    unit("s", "second", Dimension::TIME, 1.0, 0, ALL),
    unit("min", "minute", Dimension::TIME, 60.0, 0, NONE),
    unit("hour", "hour", Dimension::TIME, 3600.0, 0, NONE),
    unit("day", "day of 86,400 s, 1/365.2425 year", Dimension::TIME, 86_400.0, 0, NONE),
    unit("month", "month, one twelfth of a year", Dimension::TIME, 2_629_746.0, 0, NONE),
    unit("yr", "year of 365.2425 days", Dimension::TIME, super::SECONDS_PER_YEAR, 0, AGES),
    unit("K", "kelvin, as a difference", Dimension::TEMPERATURE, 1.0, 0, ALL),
    unit("degC", "degree Celsius, as a difference", Dimension::TEMPERATURE, 1.0, 0, NONE),
    unit("mol", "mole", Dimension::AMOUNT, 1.0, 0, ALL),
    unit("rad", "radian", Dimension::ANGLE, 1.0, 0, ALL),
    unit("deg", "degree of arc", Dimension::ANGLE, std::f64::consts::PI / 180.0, 0, NONE),
    unit("arcsec", "second of arc", Dimension::ANGLE, std::f64::consts::PI / 648_000.0, 0, NONE),
    unit("Hz", "hertz", Dimension::mechanical(0, 0, -1), 1.0, 0, ALL),
    unit("N", "newton", Dimension::mechanical(1, 1, -2), 1.0, 0, ALL),
    unit("Pa", "pascal", Dimension::mechanical(-1, 1, -2), 1.0, 0, ALL),
    unit("J", "joule", Dimension::mechanical(2, 1, -2), 1.0, 0, ALL),
    unit("W", "watt", Dimension::mechanical(2, 1, -3), 1.0, 0, ALL),
    unit("percent", "part in a hundred", Dimension::NUMBER, 1.0, -2, NONE),
    unit("permil", "part in a thousand", Dimension::NUMBER, 1.0, -3, NONE),
    unit("ppm", "part per million, by amount in air", Dimension::NUMBER, 1.0, -6, NONE),
    unit("ppb", "part per billion, by amount in air", Dimension::NUMBER, 1.0, -9, NONE),
    unit("ppt", "part per trillion, by amount in air", Dimension::NUMBER, 1.0, -12, NONE),
    unit("spots_v1", "sunspot number, original scale", Dimension::SPOTS_V1, 1.0, 0, NONE),
    unit("spots_v2", "sunspot number, scale since 2015", Dimension::SPOTS_V2, 1.0, 0, NONE),
];
