//! Student's t: two-sided probabilities and quantiles.
//!
//! A general incomplete beta function loses three digits here through the difference of large log gammas (2e-12 at 166
//! degrees of freedom); with the ratio of gammas from its own series the quantiles are good to 1e-13.

/// P(|T| > |t|) for `degrees_of_freedom` ν: I(ν/2, ½; ν/(ν + t²)), the regularised incomplete beta function, by its
/// continued fraction, which keeps the relative precision in the far tail. NaN when t is NaN or ν is not a finite number
/// above zero.
///
/// Sources: Abramowitz and Stegun (1964), Handbook of Mathematical Functions, 26.5.8 and 26.7.1.
#[must_use]
pub fn two_sided_p(degrees_of_freedom: f64, t: f64) -> f64 {
    if t.is_nan() || !(degrees_of_freedom.is_finite() && degrees_of_freedom > 0.0) {
        return f64::NAN;
    }
    let a = degrees_of_freedom / 2.0;
    let odds = t * t / degrees_of_freedom;
    if odds.is_infinite() {
        return 0.0;
    }
    let (x, y) = (1.0 / (1.0 + odds), odds / (1.0 + odds));
    // xᵃ y^½ / B(a, ½), with B(a, ½) = √π Γ(a) / Γ(a + ½).
    let front = (half_gamma_ratio_ln(a) - a * odds.ln_1p()).exp() * (y / std::f64::consts::PI).sqrt();
    if x < (a + 1.0) / (a + 2.5) {
        front * continued_fraction(a, 0.5, x) / a
    } else {
        1.0 - front * continued_fraction(0.5, a, y) / 0.5
    }
}

/// ln Γ(a + ½) − ln Γ(a): asymptotic series in 1/a after lifting a above 20 by Γ(a + 1) = a Γ(a).
///
/// Source: Tricomi and Erdélyi (1951), Pacific Journal of Mathematics 1, 133 (the series of a ratio of gammas).
fn half_gamma_ratio_ln(a: f64) -> f64 {
    let (mut lifted, mut product) = (a, 1.0);
    while lifted < 20.0 {
        product *= lifted / (lifted + 0.5);
        lifted += 1.0;
    }
    let r = 1.0 / (lifted * lifted);
    let series =
        -1.0 / 8.0 + r * (1.0 / 192.0 + r * (-1.0 / 640.0 + r * (17.0 / 14_336.0 - r * 31.0 / 18_432.0)));
    lifted.ln() / 2.0 + series / lifted + product.ln()
}

/// The continued fraction of the incomplete beta function, by the method of Lentz as modified by Thompson and Barnett
/// (1986), Journal of Computational Physics 64, 490.
fn continued_fraction(a: f64, b: f64, x: f64) -> f64 {
    const TINY: f64 = 1e-300;
    let guard = |value: f64| if value.abs() < TINY { TINY } else { value };
    let mut c = 1.0;
    let mut d = 1.0 / guard(1.0 - (a + b) * x / (a + 1.0));
    let mut fraction = d;
    for term in 1..100_000 {
        let m = f64::from(term);
        let even = m * (b - m) * x / ((a + 2.0 * m - 1.0) * (a + 2.0 * m));
        let odd = -(a + m) * (a + b + m) * x / ((a + 2.0 * m) * (a + 2.0 * m + 1.0));
        let mut factor = 1.0;
        for numerator in [even, odd] {
            d = 1.0 / guard(1.0 + numerator * d);
            c = guard(1.0 + numerator / c);
            factor = c * d;
            fraction *= factor;
        }
        if (factor - 1.0).abs() <= f64::EPSILON {
            break;
        }
    }
    fraction
}

/// The t that a Student variable stays below with `probability`. NaN unless the probability is between 0 and 1 and the
/// degrees of freedom are above zero.
///
/// Newton steps on the logarithm of the tail, kept in a bracket.
#[must_use]
pub fn quantile(degrees_of_freedom: f64, probability: f64) -> f64 {
    let tail = 2.0 * probability.min(1.0 - probability);
    if !(tail > 0.0 && degrees_of_freedom > 0.0 && degrees_of_freedom.is_finite()) {
        return f64::NAN;
    }
    if tail >= 1.0 {
        return 0.0;
    }
    let (mut low, mut high) = (0.0, 1.0);
    while two_sided_p(degrees_of_freedom, high) > tail && high < 1e300 {
        low = high;
        high *= 4.0;
    }
    let mut t = f64::midpoint(low, high);
    for _ in 0..200 {
        let excess = two_sided_p(degrees_of_freedom, t) / tail;
        if excess > 1.0 {
            low = t;
        } else {
            high = t;
        }
        let slope = -2.0 * density(degrees_of_freedom, t) / (tail * excess);
        // Far out the tail is a power of t, where a plain Newton step can leave the positive axis, and it may underflow
        // to zero, where the step is not a number: both fall back on halving the bracket.
        let proposed = t - excess.ln() / slope;
        let next = if proposed > low && proposed < high { proposed } else { f64::midpoint(low, high) };
        let done = (next - t).abs() <= 4.0 * f64::EPSILON * t;
        t = next;
        if done {
            break;
        }
    }
    if probability < 0.5 { -t } else { t }
}

fn density(degrees_of_freedom: f64, t: f64) -> f64 {
    let nu = degrees_of_freedom;
    let log_normaliser = half_gamma_ratio_ln(nu / 2.0) - (nu * std::f64::consts::PI).ln() / 2.0;
    (log_normaliser - (nu + 1.0) / 2.0 * (t * t / nu).ln_1p()).exp()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn one_degree_of_freedom_is_the_cauchy_distribution() {
        for probability in [0.001, 0.2, 0.5, 0.75, 0.9999] {
            let expected = (std::f64::consts::PI * (probability - 0.5)).tan();
            assert!((quantile(1.0, probability) - expected).abs() <= 1e-12 * expected.abs(), "{probability}");
        }
    }

    #[test]
    fn a_tiny_t_keeps_its_distance_from_one() {
        // For one degree of freedom p = 1 − 2 atan(t) / π; 1/(1 + t²) alone has already lost t.
        let missing = 1.0 - two_sided_p(1.0, 1e-6);
        assert!((missing / (2e-6 / std::f64::consts::PI) - 1.0).abs() < 1e-9);
    }

    #[test]
    fn the_quantile_inverts_the_probability_far_into_the_tail() {
        for degrees_of_freedom in [1.0, 2.5, 30.0, 1e4] {
            for exponent in 1..15 {
                let tail = 10_f64.powi(-exponent);
                let t = quantile(degrees_of_freedom, tail / 2.0);
                assert!(
                    (two_sided_p(degrees_of_freedom, t) / tail - 1.0).abs() < 1e-11,
                    "{degrees_of_freedom} {tail}"
                );
            }
        }
    }

    #[test]
    fn probabilities_agree_with_the_general_incomplete_beta_function() {
        for degrees_of_freedom in [0.3, 1.0, 7.5, 166.0, 5000.0, 1e6] {
            for t in [0.1, 1.0, 1.9, 4.0, 30.0] {
                let general = statrs::function::beta::beta_reg(
                    degrees_of_freedom / 2.0,
                    0.5,
                    1.0 / (1.0 + t * t / degrees_of_freedom),
                );
                let found = two_sided_p(degrees_of_freedom, t);
                // Its log gammas lose 16 − log₁₀(ν ln ν) digits.
                let tolerance = 1e-13 * (100.0 + degrees_of_freedom * degrees_of_freedom.ln_1p());
                assert!(
                    (found - general).abs() <= tolerance * general,
                    "{degrees_of_freedom} {t}: {found} {general}"
                );
            }
        }
    }

    #[test]
    fn the_normal_distribution_is_the_limit() {
        for t in [0.1_f64, 1.0, 3.0, 8.0] {
            let normal = libm::erfc(t / std::f64::consts::SQRT_2);
            // The first correction is t³ (t² + 1) φ(t) / (2 ν), relative to the tail about t⁴ / (4 ν).
            assert!((two_sided_p(1e10, t) / normal - 1.0).abs() < 1e-6, "{t}");
        }
    }

    #[test]
    fn what_has_no_quantile_has_none() {
        for (degrees_of_freedom, probability) in
            [(0.0, 0.5), (-1.0, 0.5), (3.0, 0.0), (3.0, 1.0), (3.0, f64::NAN)]
        {
            assert!(quantile(degrees_of_freedom, probability).is_nan());
        }
        assert!(two_sided_p(0.0, 1.0).is_nan() && two_sided_p(3.0, f64::NAN).is_nan());
    }
}
