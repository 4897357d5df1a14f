use std::fmt;

use sha2::{Digest, Sha256};

/// SHA-256 over everything that a result follows from.
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Fingerprint(pub [u8; 32]);

impl Fingerprint {
    /// The first twelve hexadecimal digits, for people.
    pub fn short(&self) -> String {
        self.to_string().chars().take(12).collect()
    }
}

impl fmt::Display for Fingerprint {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.iter().try_for_each(|byte| write!(formatter, "{byte:02x}"))
    }
}

impl fmt::Debug for Fingerprint {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(formatter, "{self}")
    }
}

/// Collects the parts of a fingerprint; every part is written with its length, so that no two lists of parts
/// run together into the same bytes.
pub(super) struct Parts(Sha256);

impl Parts {
    pub(super) fn new(kind: &str) -> Self {
        let mut parts = Self(Sha256::new());
        parts.text(kind);
        parts
    }

    pub(super) fn bytes(&mut self, bytes: &[u8]) {
        self.0.update((bytes.len() as u64).to_le_bytes());
        self.0.update(bytes);
    }

    pub(super) fn text(&mut self, text: &str) {
        self.bytes(text.as_bytes());
    }

    pub(super) fn number(&mut self, number: u64) {
        self.bytes(&number.to_le_bytes());
    }

    pub(super) fn float(&mut self, number: f64) {
        // Zero and minus zero are one value of the language.
        self.number((number + 0.0).to_bits());
    }

    pub(super) fn print(&mut self, print: Fingerprint) {
        self.bytes(&print.0);
    }

    pub(super) fn finish(self) -> Fingerprint {
        Fingerprint(self.0.finalize().into())
    }
}
