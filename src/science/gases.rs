//! Radiative forcing of greenhouse gases.

/// Scaling of Myhre et al. (1998), W m-2 per unit of the natural logarithm of the concentration ratio.
const MYHRE_1998_CO2_W_PER_M2: f64 = 5.35;

/// Stratosphere-adjusted forcing of carbon dioxide after Myhre et al. (1998):
///
/// ΔF = 5.35 ln(C / C₀), in W m-2.
///
/// `co2_ppm` is the concentration C and `reference_ppm` the concentration C₀ that the forcing is a change from, both in
/// parts per million by volume. The result is NaN where either is NaN or not above zero. The fit was made for
/// concentrations up to about 1000 ppm.
///
/// Source: Myhre, Highwood, Shine and Stordal (1998), Geophysical Research Letters 25, 2715, table 3.
#[must_use]
pub fn co2_forcing_myhre1998(co2_ppm: f64, reference_ppm: f64) -> f64 {
    if co2_ppm > 0.0 && reference_ppm > 0.0 {
        MYHRE_1998_CO2_W_PER_M2 * (co2_ppm / reference_ppm).ln()
    } else {
        f64::NAN
    }
}

/// [`co2_forcing_myhre1998`] of each concentration, written into `forcing_w_per_m2`, value by value; a longer slice is
/// left as it is past the shorter one's end.
pub fn co2_forcings_myhre1998(co2_ppm: &[f64], reference_ppm: f64, forcing_w_per_m2: &mut [f64]) {
    for (forcing, &concentration) in forcing_w_per_m2.iter_mut().zip(co2_ppm) {
        *forcing = co2_forcing_myhre1998(concentration, reference_ppm);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_reference_concentration_forces_exactly_nothing() {
        assert_eq!(co2_forcing_myhre1998(278.0, 278.0).to_bits(), 0.0_f64.to_bits());
    }

    #[test]
    fn each_doubling_forces_alike() {
        let first = co2_forcing_myhre1998(556.0, 278.0);
        let second = co2_forcing_myhre1998(1112.0, 556.0);
        // Myhre et al. (1998) give 3.7 W m-2 for a doubling (published rounding).
        assert!((first - 3.7).abs() < 0.05);
        assert!((first - second).abs() < 1e-14);
    }

    #[test]
    fn a_concentration_that_is_not_above_zero_has_no_forcing() {
        for (concentration, reference) in
            [(0.0, 278.0), (-3.0, 278.0), (300.0, 0.0), (-3.0, -278.0), (f64::NAN, 278.0)]
        {
            assert!(co2_forcing_myhre1998(concentration, reference).is_nan());
        }
    }

    #[test]
    fn the_form_for_many_values_agrees_with_the_form_for_one() {
        let concentrations = [278.0, 300.0, f64::NAN, 415.0];
        let mut forcing = [9.0; 5];
        co2_forcings_myhre1998(&concentrations, 280.0, &mut forcing);
        for (&value, &concentration) in forcing.iter().zip(&concentrations) {
            assert_eq!(value.to_bits(), co2_forcing_myhre1998(concentration, 280.0).to_bits());
        }
        assert!((forcing[4] - 9.0).abs() < 1e-15);
    }
}
