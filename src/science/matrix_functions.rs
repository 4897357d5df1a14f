//! The exponential of a 2 × 2 system and its integrals, in closed form and without cancellation.
//!
//! For a matrix M with the eigenvalues z₁ ≤ z₂ and any analytic f, f(M) = f(z₁) I + f[z₁, z₂] (M − z₁ I), f[·, ·] being the
//! divided difference. The systems here have non-negative off-diagonals, so that their eigenvalues are real and M − z₁ I
//! has no negative entry; φ₀ … φ₃ and their divided differences are positive. Every sum below adds numbers of one
//! sign, and each entry is found to a few units in the last place, however near the eigenvalues, however long the step.
//!
//! Source: Higham (2008), Functions of Matrices, sections 1.2 and 10.7 (φ functions).

/// A 2 × 2 matrix (a, b; c, d) with b ≥ 0 and c ≥ 0.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Matrix {
    pub(crate) a: f64,
    pub(crate) b: f64,
    pub(crate) c: f64,
    pub(crate) d: f64,
}

/// The eigenvalues of a [`Matrix`] and what is left of its diagonal above the lower one.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Eigenvalues {
    pub(crate) low: f64,
    pub(crate) high: f64,
    /// high − low ≥ 0.
    spread: f64,
    /// a − low ≥ 0.
    surface_above_low: f64,
    /// d − low ≥ 0.
    pub(crate) deep_above_low: f64,
    /// high − d ≥ 0.
    pub(crate) high_above_deep: f64,
}

impl Matrix {
    /// The eigenvalues; `determinant` is passed in because the caller knows it without cancellation.
    pub(crate) fn eigenvalues(self, determinant: f64) -> Eigenvalues {
        let half_trace = f64::midpoint(self.a, self.d);
        let half_difference = (self.a - self.d) / 2.0;
        let coupling = self.b * self.c;
        let radius = (half_difference * half_difference + coupling).sqrt();
        // (a − z)(d − z) = bc: the smaller of the two factors follows from the larger.
        let larger = half_difference.abs() + radius;
        let smaller = if larger > 0.0 { coupling / larger } else { 0.0 };
        let (surface_above_low, deep_above_low) =
            if half_difference < 0.0 { (smaller, larger) } else { (larger, smaller) };
        let (low, high) = if half_trace <= 0.0 {
            let low = half_trace - radius;
            (low, if low < 0.0 { determinant / low } else { 0.0 })
        } else {
            let high = half_trace + radius;
            (determinant / high, high)
        };
        // The trace is the sum of the eigenvalues, so high − d = a − low.
        Eigenvalues {
            low,
            high,
            spread: 2.0 * radius,
            surface_above_low,
            deep_above_low,
            high_above_deep: surface_above_low,
        }
    }
}

/// φ₀ … φ₃ of h M.
pub(crate) struct Exponentials {
    pub(crate) phi: [Matrix; 4],
    /// What the surface shows of the two modes, the lower eigenvalue's first.
    pub(crate) modes: [Mode; 2],
}

/// One mode as the surface layer shows it: f(M)'s first entry is Σ share · f(z) over both modes. The matrix can be made
/// symmetric by scaling its layers, so that the shares lie between 0 and 1 however near the eigenvalues.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Mode {
    /// (a − the other eigenvalue) / (this − the other).
    pub(crate) share: f64,
    /// φ₀(z) = eᶻ.
    pub(crate) decay: f64,
    /// φ₁(z).
    pub(crate) first: f64,
}

impl Exponentials {
    pub(crate) fn of(matrix: Matrix, determinant: f64, step: f64) -> Self {
        let eigenvalues = matrix.eigenvalues(determinant);
        let (low, high) = (step * eigenvalues.low, step * eigenvalues.high);
        let at_low = phi(low);
        let differences = divided_differences(low, high, step * eigenvalues.spread, at_low);
        let assemble = |value: f64, difference: f64| {
            let scaled = step * difference;
            Matrix {
                a: value + scaled * eigenvalues.surface_above_low,
                b: scaled * matrix.b,
                c: scaled * matrix.c,
                d: value + scaled * eigenvalues.deep_above_low,
            }
        };
        let at_high = phi(high);
        // Equal eigenvalues: both modes are the same, and any shares that sum to one will do.
        let share_of_high =
            if eigenvalues.spread > 0.0 { eigenvalues.surface_above_low / eigenvalues.spread } else { 1.0 };
        let share_of_low =
            if eigenvalues.spread > 0.0 { eigenvalues.deep_above_low / eigenvalues.spread } else { 0.0 };
        let mode = |share: f64, phi: [f64; 4]| Mode { share, decay: phi[0], first: phi[1] };
        Self {
            phi: std::array::from_fn(|order| assemble(at_low[order], differences[order])),
            modes: [mode(share_of_low, at_low), mode(share_of_high, at_high)],
        }
    }
}

/// Below this size the series is used, above it the recurrence, whose cancellation is then mild.
const SERIES_LIMIT: f64 = 2.0;
/// 2ⁿ/(n + 1)! is far below the last place of the sum at n = 32.
const SERIES_TERMS: usize = 32;

/// φ₀ … φ₃ of a number.
fn phi(z: f64) -> [f64; 4] {
    if z.abs() < SERIES_LIMIT {
        // φₖ(z) = Σ zʲ/(j + k)!, and downwards φₖ = 1/k! + z φₖ₊₁ with no cancellation to speak of.
        let mut third = 0.0;
        for term in (0..SERIES_TERMS).rev() {
            // Horner in the ratios of neighbouring terms: φ₃ = (1/3!) (1 + z/4 (1 + z/5 (…))).
            third = 1.0 + z / (term as f64 + 4.0) * third;
        }
        third /= 6.0;
        let second = 0.5 + z * third;
        let first = 1.0 + z * second;
        [z.exp(), first, second, third]
    } else {
        let first = z.exp_m1() / z;
        let second = (first - 1.0) / z;
        [z.exp(), first, second, (second - 0.5) / z]
    }
}

/// φ₀[z₁, z₂] … φ₃[z₁, z₂], with z₁ ≤ z₂ and their difference, which the caller knows better than z₂ − z₁ does.
fn divided_differences(low: f64, high: f64, spread: f64, at_low: [f64; 4]) -> [f64; 4] {
    let first = high.exp() * if spread > 0.0 { -(-spread).exp_m1() / spread } else { 1.0 };
    if low.abs().max(high.abs()) < SERIES_LIMIT {
        let mut differences = [first, 0.0, 0.0, 0.0];
        // Σⱼ hⱼ₋₁(z₁, z₂)/(j + k)! with hₙ = z₁ⁿ + z₂ hₙ₋₁ the complete symmetric polynomials.
        let (mut power, mut symmetric, mut factorial) = (1.0, 1.0, 1.0);
        for term in 1..=SERIES_TERMS + 8 {
            factorial *= term as f64;
            let mut divisor = factorial;
            for (order, difference) in differences.iter_mut().enumerate().skip(1) {
                divisor *= (term + order) as f64;
                *difference += symmetric / divisor;
            }
            power *= low;
            symmetric = power + high * symmetric;
        }
        return differences;
    }
    // φₖ₊₁[z₁, z₂] = (φₖ[z₁, z₂] − φₖ₊₁(z₁)) / z₂, with the larger in the place of z₂.
    let (far, at_near) = if low.abs() > high.abs() { (low, phi(high)) } else { (high, at_low) };
    let second = (first - at_near[1]) / far;
    let third = (second - at_near[2]) / far;
    [first, second, third, (third - at_near[3]) / far]
}

#[cfg(test)]
mod tests {
    use super::*;

    /// φₖ by 1/(k − 1)! ∫ (1 − s)ᵏ⁻¹ eˢᶻ ds, Simpson's rule: slow, plain and independent of the closed forms.
    fn phi_by_quadrature(z: f64, order: i32) -> f64 {
        const PANELS: u32 = 20_000;
        let factorial = f64::from((1..order).product::<i32>());
        let integrand = |s: f64| (1.0 - s).powi(order - 1) * (s * z).exp() / factorial;
        let width = 1.0 / f64::from(PANELS);
        let mut sum = integrand(0.0) + integrand(1.0);
        for panel in 1..PANELS {
            sum += if panel % 2 == 1 { 4.0 } else { 2.0 } * integrand(f64::from(panel) * width);
        }
        sum * width / 3.0
    }

    #[test]
    fn the_phi_functions_are_their_integrals() {
        for z in [-30.0, -5.0, -2.0001, -1.9999, -0.3, -1e-9, 0.0, 1e-12, 0.7, 1.99, 2.01, 6.0] {
            let found = phi(z);
            for order in 1..4 {
                let expected = phi_by_quadrature(z, order);
                let error = (found[order as usize] / expected - 1.0).abs();
                assert!(error < 1e-12, "order {order} at {z}: {error:e}");
            }
        }
    }

    #[test]
    fn divided_differences_are_those_of_the_functions_and_meet_the_derivative() {
        for (low, high) in
            [(-40.0, -0.01), (-3.0, -1.0), (-1.5, 0.5), (-0.5, 3.0), (-2.5, -2.1), (-1e-3, 0.0)]
        {
            let found = divided_differences(low, high, high - low, phi(low));
            for (order, found) in found.into_iter().enumerate() {
                let expected = (phi(high)[order] - phi(low)[order]) / (high - low);
                assert!((found / expected - 1.0).abs() < 3e-12, "order {order} at {low}, {high}");
            }
        }
        for place in [-8.0, -1.0, -1e-5, 0.0, 1.0, 4.0] {
            let equal = divided_differences(place, place, 0.0, phi(place));
            let step = 1e-4;
            for (order, equal) in equal.into_iter().enumerate() {
                let slope = (phi(place + step)[order] - phi(place - step)[order]) / (2.0 * step);
                assert!((equal / slope - 1.0).abs() < 1e-7, "order {order} at {place}");
            }
        }
    }
}
