//! Stands before each socket and lets only frames of a sensible length through.
//!
//! The length in a frame's head is believed by the socket library before any signature is looked at: a head that claims
//! an exabyte would end the process. So the sockets listen in a private folder, and the guards, which listen where the
//! connection file says, pass on what comes in.
use std::os::unix::fs::DirBuilderExt;
use std::path::{Path, PathBuf};

use tokio::io::{AsyncRead, AsyncReadExt, AsyncWrite, AsyncWriteExt};
use tokio::net::{TcpListener, UnixListener, UnixStream};
use tokio::task::JoinHandle;
use zeromq::Socket;

use super::connection::{Connection, Refusal, Transport};
use super::log;

/// The longest frame that is let through, in bytes.
const LONGEST: u64 = 512 * 1024 * 1024;

/// The greeting with which every connection begins, in bytes (ZMTP 3.1, section "Framing").
const GREETING: usize = 64;

/// Bits of a frame's first byte (ZMTP 3.1): its length takes eight bytes; all other bits that may be set.
const LONG: u8 = 0b010;
const KNOWN: u8 = 0b111;

const CHUNK: usize = 64 * 1024;

/// The guards of one kernel; they go, and so does their folder, when this is dropped.
pub(super) struct Guards {
    folder: PathBuf,
    count: usize,
    places: Vec<PathBuf>,
    tasks: Vec<JoinHandle<()>>,
}

impl Drop for Guards {
    fn drop(&mut self) {
        self.tasks.iter().for_each(JoinHandle::abort);
        // What cannot be removed does no harm: it is a folder of the system's for passing things.
        let _ = std::fs::remove_dir_all(&self.folder);
        for place in &self.places {
            let _ = std::fs::remove_file(place);
        }
    }
}

impl Guards {
    pub(super) fn new() -> Result<Self, Refusal> {
        let folder = std::env::temp_dir()
            .join(format!("rhythmite-{}", uuid::Uuid::new_v4().simple().to_string().split_off(20)));
        std::fs::DirBuilder::new()
            .mode(0o700)
            .create(&folder)
            .map_err(|error| Refusal(format!("the folder {} cannot be made: {error}", folder.display())))?;
        Ok(Self { folder, count: 0, places: Vec::new(), tasks: Vec::new() })
    }

    /// Let a socket listen in the private folder, and a guard where the connection file says.
    pub(super) async fn bind(
        &mut self,
        socket: &mut impl Socket,
        connection: &Connection,
        place: &str,
    ) -> Result<(), Refusal> {
        self.count += 1;
        let inner = self.folder.join(self.count.to_string());
        let refuse = |error: &dyn std::fmt::Display| Refusal(format!("cannot listen at {place}: {error}"));
        socket.bind(&format!("ipc://{}", inner.display())).await.map_err(|error| refuse(&error))?;
        let task = match connection.transport {
            Transport::Tcp => {
                let listener = TcpListener::bind(place).await.map_err(|error| refuse(&error))?;
                tokio::spawn(async move {
                    loop {
                        match listener.accept().await {
                            Ok((stream, _)) => {
                                // Small messages leave at once.
                                let _ = stream.set_nodelay(true);
                                stand(stream.into_split(), inner.clone());
                            }
                            Err(error) => breathe(&error).await,
                        }
                    }
                })
            }
            Transport::Ipc => {
                let listener = listen(Path::new(place)).map_err(|error| refuse(&error))?;
                self.places.push(PathBuf::from(place));
                tokio::spawn(async move {
                    loop {
                        match listener.accept().await {
                            Ok((stream, _)) => stand(stream.into_split(), inner.clone()),
                            Err(error) => breathe(&error).await,
                        }
                    }
                })
            }
        };
        self.tasks.push(task);
        Ok(())
    }
}

/// Listen at a place in the file system. What an earlier kernel left there is no reason not to.
fn listen(place: &Path) -> std::io::Result<UnixListener> {
    UnixListener::bind(place).or_else(|error| {
        if error.kind() != std::io::ErrorKind::AddrInUse
            || std::os::unix::net::UnixStream::connect(place).is_ok()
        {
            return Err(error);
        }
        std::fs::remove_file(place)?;
        UnixListener::bind(place)
    })
}

/// Nobody can be let in now, for want of files or memory: try again a little later.
async fn breathe(error: &std::io::Error) {
    log(&format!("a front end could not be let in: {error}"));
    tokio::time::sleep(std::time::Duration::from_millis(100)).await;
}

/// Pass on what comes from a front end and what goes to it, until either side ends.
fn stand<R, W>((from_outside, mut to_outside): (R, W), inner: PathBuf)
where
    R: AsyncRead + Unpin + Send + 'static,
    W: AsyncWrite + Unpin + Send + 'static,
{
    tokio::spawn(async move {
        let Ok(stream) = UnixStream::connect(&inner).await else { return };
        let (mut from_inside, to_inside) = stream.into_split();
        tokio::select! {
            passed = pass(from_outside, to_inside) => {
                if let Err(error) = passed && error.kind() == std::io::ErrorKind::InvalidData {
                    log(&format!("a front end was cut off: {error}"));
                }
            }
            _ = tokio::io::copy(&mut from_inside, &mut to_outside) => {}
        }
    });
}

/// Copy from one to the other as long as the frames are sensible.
async fn pass(mut from: impl AsyncRead + Unpin, mut to: impl AsyncWrite + Unpin) -> std::io::Result<()> {
    let mut heads = Heads::default();
    let mut chunk = vec![0; CHUNK];
    loop {
        let length = from.read(&mut chunk).await?;
        let Some(bytes) = chunk.get(..length).filter(|bytes| !bytes.is_empty()) else { return Ok(()) };
        heads.look(bytes).map_err(|why| std::io::Error::new(std::io::ErrorKind::InvalidData, why))?;
        to.write_all(bytes).await?;
    }
}

/// Follows the heads of frames in a stream of bytes, wherever it is cut.
struct Heads {
    /// Bytes to come before the next head: of the greeting, or of a frame's body.
    body: u64,
    /// The bytes of the next head that have come.
    head: Vec<u8>,
}

impl Default for Heads {
    fn default() -> Self {
        Self { body: GREETING as u64, head: Vec::new() }
    }
}

impl Heads {
    fn look(&mut self, mut bytes: &[u8]) -> Result<(), String> {
        while !bytes.is_empty() {
            if self.body > 0 {
                let passed = self.body.min(bytes.len() as u64);
                self.body -= passed;
                bytes = bytes.get(passed as usize..).unwrap_or_default();
                continue;
            }
            let Some((byte, rest)) = bytes.split_first() else { break };
            self.head.push(*byte);
            bytes = rest;
            let Some((flags, length)) = self.head.split_first() else { break };
            if flags & !KNOWN != 0 {
                return Err("what it sends are no frames".to_owned());
            }
            if length.len() == if flags & LONG == 0 { 1 } else { 8 } {
                self.body = length.iter().fold(0, |value, byte| (value << 8) | u64::from(*byte));
                self.head.clear();
                if self.body > LONGEST {
                    return Err(format!("it announced a frame of {} bytes", self.body));
                }
            }
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn stream(frames: &[&[u8]]) -> Vec<u8> {
        let mut bytes = vec![0xff; GREETING];
        frames.iter().for_each(|frame| bytes.extend_from_slice(frame));
        bytes
    }

    #[test]
    fn sensible_frames_pass_wherever_the_stream_is_cut() {
        let mut long = vec![LONG, 0, 0, 0, 0, 0, 0, 1, 44];
        long.extend([7; 300]);
        let bytes = stream(&[&[4, 2, 1, 1], &[1, 0], &long, &[0, 1, 9]]);
        for size in 1..=bytes.len() {
            let mut heads = Heads::default();
            for chunk in bytes.chunks(size) {
                heads.look(chunk).unwrap();
            }
            assert!(heads.body == 0 && heads.head.is_empty());
        }
    }

    #[test]
    fn a_frame_that_claims_to_be_enormous_is_cut_off() {
        for size in [1, 80] {
            let bytes = stream(&[&[0, 1, 9], &[LONG, 32, 0, 0, 0, 0, 0, 0, 0]]);
            let mut heads = Heads::default();
            assert!(bytes.chunks(size).any(|chunk| heads.look(chunk).is_err()));
        }
        assert!(Heads::default().look(&stream(&[b"GET / HTTP/1.1"])).is_err());
    }
}
