use std::sync::Arc;

use sha2::{Digest, Sha256};

use crate::base::Diagnostic;
use crate::value::{AxisKind, Clock};

/// The number of members where nobody sets it.
pub(super) const DEFAULT_MEMBERS: u64 = 1000;
/// The seed where nobody sets it.
pub(super) const DEFAULT_SEED: u64 = 1;

/// What an evaluation depends on besides the expression.
#[derive(Clone, Debug)]
pub(super) struct Environment {
    pub(super) clock: Option<Arc<Clock>>,
    /// Tells environments apart: a hash of the clock.
    pub(super) key: u64,
    pub(super) members: u64,
    pub(super) seed: u64,
    /// Why there is no clock although one is defined.
    pub(super) clock_problem: Option<Arc<Diagnostic>>,
    /// Why the number of members or the seed cannot be had although one is defined.
    pub(super) members_problem: Option<Arc<Diagnostic>>,
}

impl Environment {
    /// The environment in which settings are evaluated.
    pub(super) fn empty() -> Self {
        Self {
            clock: None,
            key: 0,
            members: DEFAULT_MEMBERS,
            seed: DEFAULT_SEED,
            clock_problem: None,
            members_problem: None,
        }
    }

    /// The same, where a clock is defined that cannot be had: told apart from one without any clock.
    pub(super) fn without_clock(&self, problem: Arc<Diagnostic>) -> Self {
        let digest: [u8; 32] = Sha256::digest(format!("{}\0{}", problem.code, problem.message)).into();
        Self { key: key_of(&digest), clock: None, clock_problem: Some(problem), ..self.clone() }
    }

    /// The same with another clock.
    pub(super) fn with_clock(&self, clock: Arc<Clock>) -> Self {
        let axis = &clock.axis;
        let mut hash = Sha256::new();
        hash.update([u8::from(axis.kind == AxisKind::Steps)]);
        hash.update((axis.len() as u64).to_le_bytes());
        hash.update(clock.step_years.to_bits().to_le_bytes());
        if let Some((start, end)) = axis.bounds() {
            hash.update(start.to_bits().to_le_bytes());
            hash.update(end.to_bits().to_le_bytes());
        }
        hash.update(axis.era.symbol());
        let digest: [u8; 32] = hash.finalize().into();
        Self { clock: Some(clock), key: key_of(&digest), clock_problem: None, ..self.clone() }
    }
}

/// The first eight bytes of a hash; zero stands for no clock.
fn key_of(digest: &[u8; 32]) -> u64 {
    digest.iter().take(8).fold(0u64, |key, byte| (key << 8) | u64::from(*byte)).max(1)
}
