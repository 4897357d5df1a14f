//! The two-layer energy balance model with efficacy of deep-ocean heat uptake, stepped exactly.
//!
//! C dT/dt = F − λT − εγ(T − T_d),  C_d dT_d/dt = γ(T − T_d),  N = F − λT − (ε − 1)γ(T − T_d)
//!
//! with T and T_d the temperature changes of the surface and deep layers (K), F the forcing and N the imbalance at the
//! top of the atmosphere (W m-2), time in years. The solution over a step is written with the exponential of the
//! system and its integrals, so that it is exact for a forcing that is constant, or straight, within each step: no
//! step is too long.
//!
//! Sources: Geoffroy et al. (2013a), Journal of Climate 26, 1841 (the model and its closed solution); Geoffroy et al.
//! (2013b), Journal of Climate 26, 1859 (efficacy).

use crate::science::matrix_functions::{Exponentials, Matrix, Mode};

/// The five parameters of the model.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TwoLayerParameters {
    /// C, heat capacity of the surface layer, W yr m-2 K-1; above zero.
    pub heat_capacity: f64,
    /// C_d, heat capacity of the deep layer, W yr m-2 K-1; above zero.
    pub deep_heat_capacity: f64,
    /// γ, heat exchange between the layers, W m-2 K-1; zero or above. At zero the deep layer stands apart.
    pub exchange: f64,
    /// λ, radiative feedback, W m-2 K-1, positive for a stable climate; any finite number. At zero heat is kept for
    /// ever, below zero the model runs away.
    pub feedback: f64,
    /// ε, efficacy of deep-ocean heat uptake, no dimension; above zero, 1 for the plain model.
    pub heat_uptake_efficacy: f64,
}

/// Why the model cannot be built or run.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum TwoLayerError {
    /// The heat capacity is this, and not a finite number above zero.
    HeatCapacity(f64),
    /// The deep heat capacity is this, and not a finite number above zero.
    DeepHeatCapacity(f64),
    /// The exchange is this, and not a finite number of zero or above.
    Exchange(f64),
    /// The feedback is this, and not a finite number.
    Feedback(f64),
    /// The efficacy is this, and not a finite number above zero.
    HeatUptakeEfficacy(f64),
    /// The step that begins at entry `index` lasts `step_years`, which is not a finite number above zero.
    StepLength {
        /// Place of the step, counted from zero.
        index: usize,
        /// Its length in years.
        step_years: f64,
    },
    /// There are `axis` steps or instants and `forcing` values.
    LengthMismatch {
        /// Length of the time axis.
        axis: usize,
        /// Length of the forcing.
        forcing: usize,
    },
}

impl TwoLayerParameters {
    /// Whether the model can be run with these parameters.
    ///
    /// # Errors
    /// The first parameter that is out of its range, as a [`TwoLayerError`].
    pub fn validate(&self) -> Result<(), TwoLayerError> {
        let above_zero = |value: f64| value.is_finite() && value > 0.0;
        if !above_zero(self.heat_capacity) {
            Err(TwoLayerError::HeatCapacity(self.heat_capacity))
        } else if !above_zero(self.deep_heat_capacity) {
            Err(TwoLayerError::DeepHeatCapacity(self.deep_heat_capacity))
        } else if !(self.exchange.is_finite() && self.exchange >= 0.0) {
            Err(TwoLayerError::Exchange(self.exchange))
        } else if !self.feedback.is_finite() {
            Err(TwoLayerError::Feedback(self.feedback))
        } else if !above_zero(self.heat_uptake_efficacy) {
            Err(TwoLayerError::HeatUptakeEfficacy(self.heat_uptake_efficacy))
        } else {
            Ok(())
        }
    }

    /// The system matrix A of dx/dt = A x + (F / C, 0), in 1/yr.
    fn system(&self) -> Matrix {
        let uptake = self.heat_uptake_efficacy * self.exchange;
        Matrix {
            a: -(self.feedback + uptake) / self.heat_capacity,
            b: uptake / self.heat_capacity,
            c: self.exchange / self.deep_heat_capacity,
            d: -self.exchange / self.deep_heat_capacity,
        }
    }

    /// λγ / (C C_d): the determinant of the system without the cancellation of its four terms.
    fn determinant(&self) -> f64 {
        (self.feedback / self.heat_capacity) * (self.exchange / self.deep_heat_capacity)
    }

    /// N = F − λT − (ε − 1)γ(T − T_d), W m-2.
    #[must_use]
    pub fn imbalance(&self, forcing_w_per_m2: f64, state: State) -> f64 {
        forcing_w_per_m2
            - self.feedback * state.temperature
            - (self.heat_uptake_efficacy - 1.0) * self.exchange * (state.temperature - state.deep_temperature)
    }
}

/// The temperature changes of the two layers, K; the default is no change.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct State {
    /// T, of the surface layer.
    pub temperature: f64,
    /// T_d, of the deep layer.
    pub deep_temperature: f64,
}

/// The model's answer along a time axis: one value per step (its exact mean) or per instant.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Response {
    /// T, K.
    pub temperature: Vec<f64>,
    /// T_d, K.
    pub deep_temperature: Vec<f64>,
    /// N, W m-2.
    pub imbalance: Vec<f64>,
    /// The state at the end of the last step, or at the last instant.
    pub end: State,
}

impl Response {
    fn with_capacity(length: usize, initial: State) -> Self {
        Self {
            temperature: Vec::with_capacity(length),
            deep_temperature: Vec::with_capacity(length),
            imbalance: Vec::with_capacity(length),
            end: initial,
        }
    }

    fn push(&mut self, parameters: &TwoLayerParameters, forcing_w_per_m2: f64, state: State) {
        self.temperature.push(state.temperature);
        self.deep_temperature.push(state.deep_temperature);
        self.imbalance.push(parameters.imbalance(forcing_w_per_m2, state));
    }
}

/// Everything that carries the model over one step of a given length h.
///
/// With φ₀(z) = eᶻ and φₖ₊₁(z) = (φₖ(z) − 1/k!) / z, A the system and b = (1/C, 0), for a forcing that goes straight
/// from F₀ to F₁ within the step:
/// - end of the step: φ₀(hA) x + h φ₁(hA) b F₀ + h φ₂(hA) b (F₁ − F₀);
/// - mean over the step: φ₁(hA) x + h φ₂(hA) b F₀ + h φ₃(hA) b (F₁ − F₀).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Propagator {
    step_years: f64,
    end: Matrix,
    mean: Matrix,
    forced: [State; 3],
    modes: [Mode; 2],
    /// h/C.
    gain: f64,
}

impl Propagator {
    /// The propagator over steps of `step_years`.
    ///
    /// # Errors
    /// [`TwoLayerError`] when a parameter is out of its range, or the step length is not a finite number above zero.
    pub fn new(parameters: &TwoLayerParameters, step_years: f64) -> Result<Self, TwoLayerError> {
        parameters.validate()?;
        if !(step_years.is_finite() && step_years > 0.0) {
            return Err(TwoLayerError::StepLength { index: 0, step_years });
        }
        let Exponentials { phi, modes } =
            Exponentials::of(parameters.system(), parameters.determinant(), step_years);
        let gain = step_years / parameters.heat_capacity;
        let forced =
            |matrix: Matrix| State { temperature: gain * matrix.a, deep_temperature: gain * matrix.c };
        Ok(Self {
            step_years,
            end: phi[0],
            mean: phi[1],
            forced: [forced(phi[1]), forced(phi[2]), forced(phi[3])],
            modes,
            gain,
        })
    }

    /// The length of the step that it was built for, in years.
    #[must_use]
    pub fn step_years(&self) -> f64 {
        self.step_years
    }

    /// The state at the end of a step, and the mean state over it, for a constant forcing (W m-2).
    #[must_use]
    pub fn step_constant(&self, state: State, forcing_w_per_m2: f64) -> (State, State) {
        self.step_linear(state, forcing_w_per_m2, forcing_w_per_m2)
    }

    /// The state at the end of a step, and the mean state over it, for a forcing (W m-2) that goes straight from one
    /// value at its start to another at its end.
    #[must_use]
    pub fn step_linear(&self, state: State, start_w_per_m2: f64, end_w_per_m2: f64) -> (State, State) {
        let rise = end_w_per_m2 - start_w_per_m2;
        let forced = |level: State, slope: State| State {
            temperature: level.temperature * start_w_per_m2 + slope.temperature * rise,
            deep_temperature: level.deep_temperature * start_w_per_m2 + slope.deep_temperature * rise,
        };
        let [first, second, third] = self.forced;
        (carry(self.end, state, forced(first, second)), carry(self.mean, state, forced(second, third)))
    }

    /// Whether this serves steps of `step_years` too: lengths that agree to 1e-10 differ by the rounding of the times
    /// they were taken from (a month at year 2000 is only known to 3e-12), and moves no temperature by more than that.
    fn serves(&self, step_years: f64) -> bool {
        (self.step_years - step_years).abs() <= 1e-10 * self.step_years
    }
}

/// M x + f.
fn carry(matrix: Matrix, state: State, forced: State) -> State {
    State {
        temperature: matrix.a * state.temperature + (matrix.b * state.deep_temperature + forced.temperature),
        deep_temperature: (matrix.d * state.deep_temperature + forced.deep_temperature)
            + matrix.c * state.temperature,
    }
}

/// The propagator in use, built again only when the step length changes.
struct PropagatorCache<'parameters> {
    parameters: &'parameters TwoLayerParameters,
    held: Option<Propagator>,
}

impl PropagatorCache<'_> {
    fn over(&mut self, index: usize, step_years: f64) -> Result<Propagator, TwoLayerError> {
        match self.held {
            Some(propagator) if propagator.serves(step_years) => Ok(propagator),
            _ if !(step_years.is_finite() && step_years > 0.0) => {
                Err(TwoLayerError::StepLength { index, step_years })
            }
            _ => Ok(*self.held.insert(Propagator::new(self.parameters, step_years)?)),
        }
    }
}

/// The response to a forcing that is constant within each step: exact step means of T, T_d and N, and the end state.
///
/// `step_lengths_years` and `forcing_w_per_m2` have one value per step. A gap (NaN) in the forcing leaves that step and
/// every later one NaN: what came after depends on what was missed.
///
/// # Errors
/// [`TwoLayerError`] when a parameter is out of its range, a step length is not a finite number above zero, or the two
/// slices differ in length.
pub fn respond_constant_over_steps(
    parameters: &TwoLayerParameters,
    step_lengths_years: &[f64],
    forcing_w_per_m2: &[f64],
    initial: State,
) -> Result<Response, TwoLayerError> {
    parameters.validate()?;
    check_lengths(step_lengths_years, forcing_w_per_m2)?;
    let mut cache = PropagatorCache { parameters, held: None };
    let mut response = Response::with_capacity(forcing_w_per_m2.len(), initial);
    for (index, (&step_years, &forcing)) in step_lengths_years.iter().zip(forcing_w_per_m2).enumerate() {
        let (end, mean) = cache.over(index, step_years)?.step_constant(response.end, forcing);
        response.push(parameters, forcing, mean);
        response.end = end;
    }
    Ok(response)
}

/// The response to a forcing that goes straight between instants: T, T_d and N at the instants, of which the first has
/// the `initial` state.
///
/// `times_years` ascends. A gap (NaN) in the forcing leaves that instant and every later one NaN (at the first instant
/// the temperatures are still the initial ones).
///
/// # Errors
/// [`TwoLayerError`] when a parameter is out of its range, the times do not ascend or are not finite, or the two slices
/// differ in length.
pub fn respond_linear_between_instants(
    parameters: &TwoLayerParameters,
    times_years: &[f64],
    forcing_w_per_m2: &[f64],
    initial: State,
) -> Result<Response, TwoLayerError> {
    parameters.validate()?;
    check_lengths(times_years, forcing_w_per_m2)?;
    let mut cache = PropagatorCache { parameters, held: None };
    let mut response = Response::with_capacity(forcing_w_per_m2.len(), initial);
    if let Some(&first) = forcing_w_per_m2.first() {
        response.push(parameters, first, initial);
    }
    for (index, (times, forcings)) in times_years.windows(2).zip(forcing_w_per_m2.windows(2)).enumerate() {
        let propagator = cache.over(index, times[1] - times[0])?;
        let (end, _) = propagator.step_linear(response.end, forcings[0], forcings[1]);
        response.push(parameters, forcings[1], end);
        response.end = end;
    }
    Ok(response)
}

fn check_lengths(axis: &[f64], forcing: &[f64]) -> Result<(), TwoLayerError> {
    if axis.len() == forcing.len() {
        Ok(())
    } else {
        Err(TwoLayerError::LengthMismatch { axis: axis.len(), forcing: forcing.len() })
    }
}

/// The step means of T alone, from rest, over regular steps of constant forcing (W m-2): the cheap way for thousands of
/// members, the same numbers as [`respond_constant_over_steps`] to rounding.
///
/// In its two modes the model is v ← eᶻ v + F, twice over, and the mean of T over the step
/// h/C (φ₂(hA)₁₁ F + Σ share φ₁(z)² v): nine operations a step, two steps at a time, because each would wait for the one
/// before.
///
/// Writes as many values as the shorter of the two slices has. A gap in the forcing leaves every later value NaN.
pub fn temperature_over_steps(propagator: &Propagator, forcing_w_per_m2: &[f64], temperature: &mut [f64]) {
    let gain = propagator.gain;
    let direct = propagator.forced[1].temperature;
    let [low, high] = propagator.modes;
    let [shown_low, shown_high] = [low, high].map(|mode| gain * mode.share * mode.first * mode.first);
    let (twice_low, twice_high) = (low.decay * low.decay, high.decay * high.decay);
    let (mut v_low, mut v_high) = (0.0, 0.0);
    let length = forcing_w_per_m2.len().min(temperature.len());
    let (forcing, temperature) = (&forcing_w_per_m2[..length], &mut temperature[..length]);
    let mut pairs = forcing.chunks_exact(2);
    let mut out = temperature.chunks_exact_mut(2);
    for (pair, out) in (&mut pairs).zip(&mut out) {
        let (next_low, next_high) = (low.decay * v_low + pair[0], high.decay * v_high + pair[0]);
        out[0] = direct * pair[0] + (shown_low * v_low + shown_high * v_high);
        out[1] = direct * pair[1] + (shown_low * next_low + shown_high * next_high);
        v_low = twice_low * v_low + (low.decay * pair[0] + pair[1]);
        v_high = twice_high * v_high + (high.decay * pair[0] + pair[1]);
    }
    if let ([forcing], [out]) = (pairs.remainder(), out.into_remainder()) {
        *out = direct * forcing + (shown_low * v_low + shown_high * v_high);
    }
}

/// The equilibrium warming T = T_d = F / λ, K, of a forcing that lasts; `None` unless the feedback is above zero.
#[must_use]
pub fn equilibrium_temperature(parameters: &TwoLayerParameters, forcing_w_per_m2: f64) -> Option<f64> {
    (parameters.feedback > 0.0).then(|| forcing_w_per_m2 / parameters.feedback)
}

/// The two modes of the model. After a step of forcing T(t) = F/λ (1 − a_f e^(−t/τ_f) − a_s e^(−t/τ_s)).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TimeConstants {
    /// τ_f, years.
    pub fast_years: f64,
    /// τ_s, years.
    pub slow_years: f64,
    /// a_f, the share of the equilibrium warming that the fast mode brings.
    pub fast_share: f64,
    /// a_s = 1 − a_f.
    pub slow_share: f64,
    /// φ_f, the ratio T_d / T within the fast mode.
    pub fast_ratio: f64,
    /// φ_s, the ratio T_d / T within the slow mode.
    pub slow_ratio: f64,
}

/// The time constants and shares of the two modes, in closed form:
///
/// τ = −1/μ for the eigenvalues μ of the system, φ = γ / (γ + μ C_d), a_f = (φ_s − 1) / (φ_s − φ_f).
///
/// `None` unless feedback and exchange are above zero (with either at zero a time constant is infinite), or when the
/// parameters are out of their ranges.
///
/// Source: Geoffroy et al. (2013a), table 1, with εγ for γ in the surface equation (2013b).
#[must_use]
pub fn time_constants(parameters: &TwoLayerParameters) -> Option<TimeConstants> {
    if parameters.validate().is_err() || parameters.feedback <= 0.0 || parameters.exchange <= 0.0 {
        return None;
    }
    let system = parameters.system();
    let modes = system.eigenvalues(parameters.determinant());
    // d = −γ/C_d, so φ = −d / (μ − d); the differences μ − d come without cancellation.
    let fast_ratio = system.d / modes.deep_above_low;
    let slow_ratio = -system.d / modes.high_above_deep;
    let spread = slow_ratio - fast_ratio;
    Some(TimeConstants {
        fast_years: -1.0 / modes.low,
        slow_years: -1.0 / modes.high,
        fast_share: (slow_ratio - 1.0) / spread,
        slow_share: (1.0 - fast_ratio) / spread,
        fast_ratio,
        slow_ratio,
    })
}

#[cfg(test)]
#[path = "two_layer_tests.rs"]
mod tests;
