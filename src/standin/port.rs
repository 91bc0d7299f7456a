//! One port of the stand-in: a pseudo-terminal of its own, or a port that is there already.

use std::fs::File;
use std::io::{ErrorKind, Read, Write};
use std::os::fd::{AsFd, BorrowedFd};
use std::path::{Path, PathBuf};

use super::serve::ServeError;
use crate::sys::serial::{KeptPty, has_unread, make_ready, open_kept_pty, open_nonblocking};
use crate::units::Mono;

/// How long to wait before a lost port is tried again.
const RETRY_NS: u64 = 500_000_000;
/// What nobody has read for so long is thrown away, so that whoever comes next finds nothing older.
const STALE_NS: u64 = 200_000_000;

/// What changed at a port.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum PortNews {
    /// Somebody has come to the pseudo-terminal.
    Read,
    /// Nobody reads it any more: closed, or stuck.
    Unread,
    /// The port is gone; it is tried again twice a second.
    Lost(String),
    /// It is back.
    Back,
}

/// One port.
#[derive(Debug)]
pub(super) enum Port {
    /// A pseudo-terminal of our own.
    Pty(OwnPty),
    /// A port that was there before.
    Given(GivenPort),
}

impl Port {
    pub(super) fn pty() -> Result<Self, ServeError> {
        let KeptPty { master, slave, path } = open_kept_pty().map_err(ServeError::Pty)?;
        let (read_out, waits, is_read) = (Mono::default(), false, false);
        Ok(Self::Pty(OwnPty { master, keeper: slave, path, read_out, waits, is_read }))
    }

    pub(super) fn given(path: &Path, baud: u32) -> Result<Self, ServeError> {
        let file = open_nonblocking(path, baud)
            .map_err(|source| ServeError::Port { path: path.to_owned(), source })?;
        Ok(Self::Given(GivenPort { file: Some(file), path: path.to_owned(), baud, retry: Mono::default() }))
    }

    pub(super) fn path(&self) -> &Path {
        match self {
            Self::Pty(port) => &port.path,
            Self::Given(port) => &port.path,
        }
    }

    /// What to wait on.
    pub(super) fn descriptor(&self) -> Option<BorrowedFd<'_>> {
        match self {
            Self::Pty(port) => Some(port.master.as_fd()),
            Self::Given(port) => port.file.as_ref().map(AsFd::as_fd),
        }
    }

    /// Appends what has come in; says what changed.
    pub(super) fn read(&mut self, now: Mono, heard: &mut Vec<u8>) -> Option<PortNews> {
        match self {
            Self::Pty(port) => port.read(now, heard),
            Self::Given(port) => port.read(now, heard),
        }
    }

    /// Writes without waiting: what does not fit is lost, as on a line that nobody listens to.
    pub(super) fn write(&mut self, bytes: &[u8], now: Mono) -> Option<PortNews> {
        match self {
            Self::Pty(port) => {
                let _ = port.master.write(bytes);
                None
            }
            Self::Given(port) => port.write(bytes, now),
        }
    }
}

/// A pseudo-terminal: its drivers' end, and one descriptor of the other end that keeps it alive and raw when the host
/// closes its own. Nothing is ever read from that.
#[derive(Debug)]
pub(super) struct OwnPty {
    master: File,
    keeper: File,
    path: PathBuf,
    /// When nothing was last seen to wait for the host.
    read_out: Mono,
    /// Something waits for it.
    waits: bool,
    /// Somebody is there.
    is_read: bool,
}

impl OwnPty {
    fn read(&mut self, now: Mono, heard: &mut Vec<u8>) -> Option<PortNews> {
        let (before, heard_before) = (self.is_read, heard.len());
        // A pseudo-terminal of which we keep both ends does not fail.
        let _ = drain(&mut self.master, heard);
        let waited = std::mem::replace(&mut self.waits, has_unread(self.keeper.as_fd()));
        if heard.len() > heard_before || (waited && !self.waits) {
            self.is_read = true;
        }
        if !self.waits {
            self.read_out = now;
        } else if now.since_ns(self.read_out) > STALE_NS {
            make_ready(self.keeper.as_fd());
            self.waits = false;
            self.is_read = false;
        }
        match (before, self.is_read) {
            (false, true) => Some(PortNews::Read),
            (true, false) => Some(PortNews::Unread),
            (false, false) | (true, true) => None,
        }
    }
}

/// A port that was there before, and that may go and come back.
#[derive(Debug)]
pub(super) struct GivenPort {
    file: Option<File>,
    path: PathBuf,
    baud: u32,
    retry: Mono,
}

impl GivenPort {
    fn read(&mut self, now: Mono, heard: &mut Vec<u8>) -> Option<PortNews> {
        if let Some(file) = &mut self.file {
            return drain(file, heard).err().map(|why| self.lose(now, &why));
        }
        if now < self.retry {
            return None;
        }
        self.retry = now.plus_ns(RETRY_NS);
        self.file = open_nonblocking(&self.path, self.baud).ok();
        self.file.is_some().then_some(PortNews::Back)
    }

    fn write(&mut self, bytes: &[u8], now: Mono) -> Option<PortNews> {
        match self.file.as_mut()?.write(bytes) {
            Ok(_) => None,
            Err(why) if patient(why.kind()) => None,
            Err(why) => Some(self.lose(now, &why)),
        }
    }

    fn lose(&mut self, now: Mono, why: &std::io::Error) -> PortNews {
        // Dropping a dead port can take half a minute where its queue will not drain.
        if let Some(file) = self.file.take() {
            let _ = std::thread::Builder::new().name("dropper".to_owned()).spawn(move || drop(file));
        }
        self.retry = now.plus_ns(RETRY_NS);
        PortNews::Lost(why.to_string())
    }
}

fn drain(file: &mut File, heard: &mut Vec<u8>) -> std::io::Result<()> {
    let mut buffer = [0_u8; 4096];
    loop {
        match file.read(&mut buffer) {
            Ok(0) => return Err(ErrorKind::BrokenPipe.into()),
            Ok(length) => heard.extend_from_slice(buffer.get(..length).unwrap_or_default()),
            Err(why) if patient(why.kind()) => return Ok(()),
            Err(why) => return Err(why),
        }
    }
}

fn patient(kind: ErrorKind) -> bool {
    kind == ErrorKind::WouldBlock || kind == ErrorKind::Interrupted
}
