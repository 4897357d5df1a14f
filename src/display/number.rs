//! Numbers as people read them. Full precision is in JSON and in saved files.

/// A certain number: six significant digits, no trailing zeros.
pub fn plain(value: f64) -> String {
    significant(value, 6)
}

pub(super) fn significant(value: f64, digits: i32) -> String {
    if value.is_nan() {
        return "gap".to_owned();
    }
    if value.abs() < f64::MIN_POSITIVE {
        return "0".to_owned();
    }
    let magnitude = value.abs().log10().floor() as i32;
    if !(-5..15).contains(&magnitude) {
        let text = format!("{value:.*e}", digits as usize - 1);
        return match text.split_once('e') {
            Some((mantissa, exponent)) => format!("{}e{exponent}", trimmed(mantissa)),
            None => text,
        };
    }
    let decimals = (digits - 1 - magnitude).max(0) as usize;
    trimmed(&format!("{value:.decimals$}"))
}

fn trimmed(text: &str) -> String {
    if !text.contains('.') {
        return text.to_owned();
    }
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "-0" { "0".to_owned() } else { text.to_owned() }
}

/// A value with its 5–95 % range, all three rounded to two significant digits of the half-width:
/// `18.0 [11.4, 24.6]`.
pub fn with_range(value: f64, low: f64, high: f64) -> String {
    let half = 0.5 * (high - low);
    if !half.is_finite() {
        return format!("{} [{}, {}]", plain(value), plain(low), plain(high));
    }
    if half <= 1e-12 * value.abs().max(f64::MIN_POSITIVE) {
        return plain(value);
    }
    let decimals = 1 - half.log10().floor() as i32;
    if decimals > 12 || value.abs().max(half) >= 1e15 {
        return format!("{} [{}, {}]", significant(value, 3), significant(low, 3), significant(high, 3));
    }
    format!("{} [{}, {}]", rounded(value, decimals), rounded(low, decimals), rounded(high, decimals))
}

/// A number with so many decimals; negative: rounded to tens, hundreds. Minus nothing is nothing.
pub(super) fn rounded(value: f64, decimals: i32) -> String {
    let scale = 10f64.powi(decimals);
    let rounded = (value * scale).round() / scale;
    let decimals = decimals.clamp(0, 15) as usize;
    format!("{:.decimals$}", if rounded.abs() < 0.5 / scale { 0.0 } else { rounded })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_range_decides_how_many_digits_are_shown() {
        assert_eq!(with_range(18.0123, 11.42, 24.58), "18.0 [11.4, 24.6]");
        assert_eq!(with_range(1234.0, 800.0, 1700.0), "1230 [800, 1700]");
        assert_eq!(with_range(-0.0001, -0.5, 0.5), "0.00 [-0.50, 0.50]");
        assert_eq!(with_range(2.0, 2.0, 2.0), "2");
    }

    #[test]
    fn a_certain_number_has_six_digits_at_most() {
        assert_eq!(plain(3.0833333333), "3.08333");
        assert_eq!(plain(1_361_000.0), "1361000");
        assert_eq!(plain(1e-9), "1e-9");
        assert_eq!(plain(-0.0), "0");
        assert_eq!(plain(f64::NAN), "gap");
    }
}
