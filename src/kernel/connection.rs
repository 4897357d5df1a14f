use std::fmt;
use std::path::Path;

use serde_json::{Map, Value as Json};

/// Where the kernel listens and how messages are signed: what the connection file says.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Connection {
    pub(super) transport: Transport,
    pub(super) shell: String,
    pub(super) iopub: String,
    pub(super) stdin: String,
    pub(super) control: String,
    pub(super) heartbeat: String,
    /// The key of the signatures; empty where messages are not signed.
    pub(super) key: Vec<u8>,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Transport {
    Tcp,
    Ipc,
}

/// Why a kernel does not start, in one sentence.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Refusal(pub(super) String);

impl fmt::Display for Refusal {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(&self.0)
    }
}

impl std::error::Error for Refusal {}

fn refuse<T>(why: impl Into<String>) -> Result<T, Refusal> {
    Err(Refusal(why.into()))
}

impl Connection {
    pub(super) fn read(file: &Path) -> Result<Self, Refusal> {
        let shown = file.display();
        let text = std::fs::read_to_string(file)
            .map_err(|error| Refusal(format!("the connection file {shown} cannot be read: {error}")))?;
        Self::parse(&text).map_err(|Refusal(why)| Refusal(format!("the connection file {shown} {why}")))
    }

    fn parse(text: &str) -> Result<Self, Refusal> {
        let file: Map<String, Json> = match serde_json::from_str(text) {
            Ok(Json::Object(file)) => file,
            Ok(_) => return refuse("holds no JSON object"),
            Err(error) => return refuse(format!("is no JSON: {error}")),
        };
        if file.keys().any(|name| name.starts_with("curve_")) {
            return refuse(
                "asks for encrypted connections (CURVE), which this kernel does not have; set `transport_encryption` to `disabled` or `auto`",
            );
        }
        let word = |name: &str| file.get(name).and_then(Json::as_str);
        let transport = match word("transport").unwrap_or("tcp") {
            "tcp" => Transport::Tcp,
            "ipc" => Transport::Ipc,
            other => {
                return refuse(format!("asks for the transport `{other}`; this kernel has `tcp` and `ipc`"));
            }
        };
        let Some(ip) = word("ip") else { return refuse("has no `ip`") };
        let key = word("key").unwrap_or("").as_bytes().to_vec();
        let scheme = word("signature_scheme").unwrap_or("hmac-sha256");
        if !key.is_empty() && scheme != "hmac-sha256" {
            return refuse(format!("asks for signatures by `{scheme}`; this kernel has `hmac-sha256`"));
        }
        let place = |name: &str| {
            let port = file.get(name).and_then(Json::as_u64);
            match (port.and_then(|port| u16::try_from(port).ok()).filter(|port| *port > 0), transport) {
                (None, _) => refuse(format!("has no `{name}` between 1 and 65535")),
                (Some(port), Transport::Tcp) if ip.contains(':') => Ok(format!("[{ip}]:{port}")),
                (Some(port), Transport::Tcp) => Ok(format!("{ip}:{port}")),
                (Some(port), Transport::Ipc) => Ok(format!("{ip}-{port}")),
            }
        };
        Ok(Self {
            transport,
            shell: place("shell_port")?,
            iopub: place("iopub_port")?,
            stdin: place("stdin_port")?,
            control: place("control_port")?,
            heartbeat: place("hb_port")?,
            key,
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const PORTS: &str =
        r#""shell_port":1,"iopub_port":2,"stdin_port":3,"control_port":4,"hb_port":5,"key":"k""#;

    fn parse(rest: &str) -> Result<Connection, Refusal> {
        Connection::parse(&format!("{{{PORTS}{rest}}}"))
    }

    #[test]
    fn places_follow_the_transport() {
        assert_eq!(parse(r#","ip":"127.0.0.1","transport":"tcp""#).unwrap().control, "127.0.0.1:4");
        assert_eq!(parse(r#","ip":"::1""#).unwrap().shell, "[::1]:1");
        assert_eq!(parse(r#","ip":"kernel-7","transport":"ipc""#).unwrap().heartbeat, "kernel-7-5");
    }

    #[test]
    fn what_cannot_be_had_is_refused_with_the_reason() {
        let why = |rest: &str| parse(rest).unwrap_err().0;
        assert!(why(r#","ip":"x","curve_publickey":"a""#).contains("CURVE"));
        assert!(why(r#","ip":"x","transport":"inproc""#).contains("`inproc`"));
        assert!(why(r#","ip":"x","signature_scheme":"hmac-md5""#).contains("`hmac-md5`"));
        assert!(why("").contains("`ip`"));
        assert!(Connection::parse(r#"{"ip":"x"}"#).unwrap_err().0.contains("shell_port"));
        assert!(Connection::parse("[").unwrap_err().0.contains("no JSON"));
    }
}
