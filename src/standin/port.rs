//! One port of the stand-in: a pseudo-terminal of its own, or a port that is there already.

use std::fs::File;
use std::io::{ErrorKind, Read, Write};
use std::os::fd::{AsFd, BorrowedFd, OwnedFd};
use std::path::{Path, PathBuf};

use super::serve::ServeError;
use crate::sys::opens::{Opens, discard_unread};
use crate::sys::tty;
use crate::units::Mono;

/// How long to wait before a lost port is tried again.
const RETRY_NS: u64 = 500_000_000;

/// What changed at a port.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum PortNews {
    /// Somebody opened the pseudo-terminal.
    Opened,
    /// Everybody closed it.
    Closed,
    /// The port is gone; it is tried again twice a second.
    Lost(String),
    /// It is back.
    Back,
}

/// One port.
#[derive(Debug)]
pub(super) enum Port {
    /// A pseudo-terminal: its drivers' end, and one descriptor of the other end that keeps it alive and raw when the
    /// host closes its own. Nothing is ever read from that.
    Pty { master: File, keeper: OwnedFd, path: PathBuf, opens: Option<Opens>, hosts: u32 },
    /// A port that was there before.
    Given { file: Option<File>, path: PathBuf, baud: u32, retry: Mono },
}

impl Port {
    pub(super) fn pty() -> Result<Self, ServeError> {
        let tty::Pty { master, slave, path } = tty::open_pty().map_err(ServeError::Pty)?;
        let opens = Opens::of(&path).ok();
        Ok(Self::Pty { master: File::from(master), keeper: slave, path, opens, hosts: 0 })
    }

    pub(super) fn given(path: &Path, baud: u32) -> Result<Self, ServeError> {
        let file = open(path, baud).map_err(|source| ServeError::Port { path: path.to_owned(), source })?;
        Ok(Self::Given { file: Some(file), path: path.to_owned(), baud, retry: Mono::default() })
    }

    pub(super) fn path(&self) -> &Path {
        match self {
            Self::Pty { path, .. } | Self::Given { path, .. } => path,
        }
    }

    /// What to wait on.
    pub(super) fn descriptors(&self) -> impl Iterator<Item = BorrowedFd<'_>> {
        let (file, opens) = match self {
            Self::Pty { master, opens, .. } => (Some(master), opens.as_ref()),
            Self::Given { file, .. } => (file.as_ref(), None),
        };
        file.map(AsFd::as_fd).into_iter().chain(opens.map(AsFd::as_fd))
    }

    /// Appends what has come in; says what changed.
    pub(super) fn read(&mut self, now: Mono, heard: &mut Vec<u8>) -> Option<PortNews> {
        match self {
            Self::Pty { master, keeper, opens, hosts, .. } => {
                let news = opens.as_mut().and_then(|opens| {
                    let (count, closed) = opens.look();
                    let before = std::mem::replace(hosts, count);
                    if closed && count == 0 {
                        // Whoever comes next is to find fresh feedback, as on a line, not what was left unread.
                        discard_unread(keeper.as_fd());
                        return Some(PortNews::Closed);
                    }
                    (before == 0 && count > 0).then_some(PortNews::Opened)
                });
                // A pseudo-terminal of our own does not fail while we keep both ends.
                let _ = drain(master, heard);
                news
            }
            Self::Given { file: Some(open_file), .. } => match drain(open_file, heard) {
                Ok(()) => None,
                Err(why) => self.lose(now, &why),
            },
            Self::Given { file, path, baud, retry } => {
                if now < *retry {
                    return None;
                }
                *retry = now.plus_ns(RETRY_NS);
                *file = open(path, *baud).ok();
                file.is_some().then_some(PortNews::Back)
            }
        }
    }

    /// Writes without waiting: what does not fit is lost, as on a line that nobody listens to.
    pub(super) fn write(&mut self, bytes: &[u8], now: Mono) -> Option<PortNews> {
        match self {
            Self::Pty { master, opens, hosts, .. } => {
                if opens.is_none() || *hosts > 0 {
                    let _ = master.write(bytes);
                }
                None
            }
            Self::Given { file: Some(open_file), .. } => match open_file.write(bytes) {
                Ok(_) => None,
                Err(why) if patient(why.kind()) => None,
                Err(why) => self.lose(now, &why),
            },
            Self::Given { file: None, .. } => None,
        }
    }

    fn lose(&mut self, now: Mono, why: &std::io::Error) -> Option<PortNews> {
        if let Self::Given { file, retry, .. } = self {
            *file = None;
            *retry = now.plus_ns(RETRY_NS);
        }
        Some(PortNews::Lost(why.to_string()))
    }
}

fn open(_: &Path, _: u32) -> std::io::Result<File> {
    todo!()
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
