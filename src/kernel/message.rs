//! Messages of the Jupyter protocol: frames to parts and back, signed.

use std::collections::{HashSet, VecDeque};
use std::sync::{Arc, Mutex, PoisonError};
use std::time::SystemTime;

use bytes::Bytes;
use hmac::{Hmac, KeyInit, Mac};
use serde_json::{Map, Value as Json, json};
use sha2::Sha256;

/// The version of the protocol that is spoken.
pub(super) const PROTOCOL: &str = "5.4";

/// Stands between the identities and the signature.
const DELIMITER: &[u8] = b"<IDS|MSG>";

/// So many signatures are remembered, to refuse a message that is sent again by somebody who recorded it.
const REMEMBERED: usize = 65_536;

/// A request, as a front end sent it.
#[derive(Debug)]
pub(super) struct Request {
    /// Where the reply goes.
    identities: Vec<Bytes>,
    /// The header's own bytes: a reply's parent is the same to the letter.
    raw_header: Bytes,
    header: Map<String, Json>,
    pub(super) metadata: Json,
    pub(super) content: Json,
    /// Whether the content could not be read, such as half of a pair of surrogates; it is nothing then.
    pub(super) unreadable: bool,
}

impl Request {
    pub(super) fn kind(&self) -> &str {
        self.word("msg_type")
    }

    pub(super) fn id(&self) -> &str {
        self.word("msg_id")
    }

    /// The session of the front end that sent it; a page that is loaded again has a new one.
    pub(super) fn client(&self) -> &str {
        self.word("session")
    }

    /// When the front end says it was sent.
    pub(super) fn sent(&self) -> Option<SystemTime> {
        humantime::parse_rfc3339(&self.word("date").replace("+00:00", "Z")).ok()
    }

    fn word(&self, name: &str) -> &str {
        self.header.get(name).and_then(Json::as_str).unwrap_or("")
    }

    pub(super) fn flag(&self, name: &str, otherwise: bool) -> bool {
        self.content.get(name).and_then(Json::as_bool).unwrap_or(otherwise)
    }

    pub(super) fn text(&self, name: &str) -> &str {
        self.content.get(name).and_then(Json::as_str).unwrap_or("")
    }
}

/// Signs what goes out, and tells what came in from somebody who has the key.
pub(super) struct Seal {
    key: Vec<u8>,
    seen: Mutex<Seen>,
}

#[derive(Default)]
struct Seen {
    signatures: HashSet<[u8; 32]>,
    order: VecDeque<[u8; 32]>,
}

impl Seal {
    pub(super) fn new(key: Vec<u8>) -> Self {
        Self { key, seen: Mutex::default() }
    }

    fn over(&self, parts: &[Bytes]) -> Option<Hmac<Sha256>> {
        if self.key.is_empty() {
            return None;
        }
        // A key of any length will do.
        let mut seal = <Hmac<Sha256> as KeyInit>::new_from_slice(&self.key).ok()?;
        parts.iter().for_each(|part| seal.update(part));
        Some(seal)
    }

    fn sign(&self, parts: &[Bytes]) -> Bytes {
        match self.over(parts) {
            Some(seal) => Bytes::from(hexadecimal(&seal.finalize().into_bytes())),
            None => Bytes::new(),
        }
    }

    /// Whether the signature is right and new.
    fn holds(&self, signature: &[u8], parts: &[Bytes]) -> Result<(), &'static str> {
        let Some(seal) = self.over(parts) else { return Ok(()) };
        let Some(given) = bytes_of(signature) else { return Err("its signature is no hexadecimal number") };
        if seal.verify_slice(&given).is_err() {
            return Err("its signature does not fit");
        }
        let Ok(given) = <[u8; 32]>::try_from(given) else { return Err("its signature does not fit") };
        let mut seen = self.seen.lock().unwrap_or_else(PoisonError::into_inner);
        if !seen.signatures.insert(given) {
            return Err("it was sent before");
        }
        seen.order.push_back(given);
        if seen.order.len() > REMEMBERED
            && let Some(oldest) = seen.order.pop_front()
        {
            seen.signatures.remove(&oldest);
        }
        Ok(())
    }

    /// A request from its frames, or why it is none.
    pub(super) fn open(&self, frames: Vec<Bytes>) -> Result<Request, &'static str> {
        let delimiter = frames.iter().position(|frame| frame == DELIMITER).ok_or("it has no delimiter")?;
        let (identities, rest) = frames.split_at(delimiter);
        let [_, signature, parts @ ..] = rest else { return Err("it ends after the delimiter") };
        let Some(parts) = parts.get(..4) else { return Err("it has fewer than four parts") };
        self.holds(signature, parts)?;
        let [header, _, metadata, content] = parts else { return Err("it has fewer than four parts") };
        let read = |part: &Bytes| serde_json::from_slice::<Json>(part).map_err(|_| "a part of it is no JSON");
        let Json::Object(fields) = read(header)? else { return Err("its header is no object") };
        // Whoever sent it waits for a reply.
        let content = read(content);
        let unreadable = content.is_err();
        let request = Request {
            identities: identities.to_vec(),
            raw_header: header.clone(),
            header: fields,
            metadata: read(metadata)?,
            content: content.unwrap_or_default(),
            unreadable,
        };
        if request.kind().is_empty() || request.id().is_empty() {
            return Err("its header has no type or no id");
        }
        Ok(request)
    }
}

/// Makes messages; all of one kernel come from one session.
pub(super) struct Writer {
    seal: Arc<Seal>,
    session: String,
}

impl Writer {
    pub(super) fn new(seal: Arc<Seal>) -> Self {
        Self { seal, session: uuid::Uuid::new_v4().to_string() }
    }

    /// The session of the kernel.
    pub(super) fn session(&self) -> &str {
        &self.session
    }

    /// The frames of a reply to a request.
    pub(super) fn reply(&self, parent: &Request, kind: &str, content: &Json) -> Vec<Bytes> {
        let mut frames = parent.identities.clone();
        frames.extend(self.parts(Some(parent), kind, &json!({}), content));
        frames
    }

    /// The frames of a message to all front ends.
    pub(super) fn publication(
        &self,
        parent: Option<&Request>,
        kind: &str,
        metadata: &Json,
        content: &Json,
    ) -> Vec<Bytes> {
        let mut frames = vec![Bytes::from(format!("kernel.{}.{kind}", self.session))];
        frames.extend(self.parts(parent, kind, metadata, content));
        frames
    }

    fn parts(&self, parent: Option<&Request>, kind: &str, metadata: &Json, content: &Json) -> [Bytes; 6] {
        let header = json!({
            "msg_id": uuid::Uuid::new_v4().to_string(),
            "session": self.session,
            "username": "kernel",
            "date": humantime::format_rfc3339_micros(SystemTime::now()).to_string(),
            "msg_type": kind,
            "version": PROTOCOL,
        });
        let bytes = |part: &Json| Bytes::from(part.to_string());
        let parent = parent.map_or_else(|| Bytes::from_static(b"{}"), |parent| parent.raw_header.clone());
        let [header, metadata, content] = [&header, metadata, content].map(bytes);
        let parts = [header, parent, metadata, content];
        let signature = self.seal.sign(&parts);
        let [header, parent, metadata, content] = parts;
        [Bytes::from_static(DELIMITER), signature, header, parent, metadata, content]
    }
}

fn hexadecimal(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| format!("{byte:02x}")).collect()
}

fn bytes_of(hexadecimal: &[u8]) -> Option<Vec<u8>> {
    let text = std::str::from_utf8(hexadecimal).ok()?;
    if text.len() % 2 != 0 || !text.is_ascii() {
        return None;
    }
    (0..text.len()).step_by(2).map(|at| u8::from_str_radix(text.get(at..at + 2)?, 16).ok()).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn seal(key: &str) -> Seal {
        Seal::new(key.as_bytes().to_vec())
    }

    fn frames(seal: &Seal, parts: [&str; 4]) -> Vec<Bytes> {
        let parts: Vec<Bytes> = parts.iter().map(|part| Bytes::from((*part).to_owned())).collect();
        let mut frames = vec![Bytes::from_static(b"peer"), Bytes::from_static(DELIMITER), seal.sign(&parts)];
        frames.extend(parts);
        frames
    }

    const PARTS: [&str; 4] = [r#"{"msg_id":"1","msg_type":"x","session":"s","new":3}"#, "{}", "{}", "{}"];

    /// RFC 4231, test case 2.
    #[test]
    fn a_signature_is_the_published_one() {
        let parts = [Bytes::from_static(b"what do ya want "), Bytes::from_static(b"for nothing?")];
        let expected = "5bdcc146bf60754e6a042426089575c75a003f089d2739839dec58b964ec3843";
        assert_eq!(seal("Jefe").sign(&parts), expected);
    }

    #[test]
    fn a_message_is_accepted_once() {
        let seal = seal("key");
        let frames = frames(&seal, PARTS);
        assert_eq!(seal.open(frames.clone()).unwrap().kind(), "x");
        assert_eq!(seal.open(frames).unwrap_err(), "it was sent before");
    }

    #[test]
    fn what_is_not_signed_with_the_key_is_refused() {
        let (ours, theirs) = (seal("key"), seal("other"));
        assert!(ours.open(frames(&theirs, PARTS)).is_err());
        for wrong in ["", "zz", "00", "5bdc", "é"] {
            let mut altered = frames(&ours, PARTS);
            altered[2] = Bytes::from(wrong);
            assert!(ours.open(altered).is_err(), "{wrong}");
        }
        assert!(seal("").open(frames(&theirs, PARTS)).is_ok(), "without a key nothing is signed");
    }

    #[test]
    fn frames_that_are_no_message_are_refused() {
        let seal = seal("key");
        let whole = frames(&seal, PARTS);
        for length in 0..whole.len() {
            assert!(seal.open(whole[..length].to_vec()).is_err(), "{length} frames");
        }
        for parts in [["[]", "{}", "{}", "{}"], ["{}", "{}", "{}", "{}"], ["{", "", "", ""]] {
            assert!(seal.open(frames(&seal, parts)).is_err(), "{parts:?}");
        }
        let mut invalid = whole;
        invalid[3] = Bytes::from_static(b"\xff\xfe");
        assert!(seal.open(invalid).is_err());
    }

    #[test]
    fn a_reply_carries_the_header_of_its_request_to_the_letter() {
        let seal = Arc::new(seal("key"));
        let request = seal.open(frames(&seal, PARTS)).unwrap();
        let reply = Writer::new(seal).reply(&request, "x_reply", &json!({"status": "ok"}));
        assert_eq!(reply[0], "peer");
        assert_eq!(reply[4], PARTS[0]);
    }
}
