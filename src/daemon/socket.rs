//! Where the console's socket is, for the drive that makes it and for the commands that look for it.

use std::io::{self, Read, Write};
use std::os::fd::AsFd;
use std::os::unix::fs::{DirBuilderExt, MetadataExt, PermissionsExt};
use std::os::unix::net::{UnixListener, UnixStream};
use std::path::{Path, PathBuf};
use std::time::Duration;

use serde_json::Value;

use crate::config::Plan;
use crate::sys::{clock, socket};

/// Where the service has its sockets (`RuntimeDirectory` of the unit file).
const SERVICE_FOLDER: &str = "/run/gripline";
/// The longest answer that a command reads.
const LONGEST_ANSWER: usize = 64 * 1024;

/// Why there is no console.
#[derive(Debug, thiserror::Error)]
pub enum ConsoleError {
    /// Another drive has it.
    #[error(
        "a drive of this base is already running{} (console {path}): end it first",
        .pid.map_or_else(String::new, |it| format!(" as process {it}"))
    )]
    Taken {
        /// The socket.
        path: PathBuf,
        /// Its process.
        pid: Option<u32>,
    },
    /// The socket cannot be made.
    #[error(
        "cannot make the console's socket {path}: {source}; correct `socket` of [console], or give --socket"
    )]
    Socket {
        /// The socket.
        path: PathBuf,
        /// Why.
        source: io::Error,
    },
}

/// The folders in which sockets may be, the preferred one first: the service's, the user's, the machine's, and one of
/// this user's own under the temporary folder.
fn folders() -> Vec<PathBuf> {
    let given = ["RUNTIME_DIRECTORY", "XDG_RUNTIME_DIR"].into_iter().filter_map(|name| {
        let value = std::env::var(name).ok()?;
        // The service manager separates several folders by colons.
        value.split(':').next().filter(|it| !it.is_empty()).map(PathBuf::from)
    });
    let own = std::env::temp_dir().join(format!("gripline-{}", user()));
    given.chain([PathBuf::from(SERVICE_FOLDER), own]).collect()
}

fn user() -> u32 {
    std::fs::metadata("/proc/self").map_or(0, |it| it.uid())
}

fn name(plan: &Plan) -> String {
    let name: String =
        plan.name.chars().map(|it| if it.is_ascii_alphanumeric() { it } else { '-' }).collect();
    format!("gripline-{name}.sock")
}

/// Where a drive makes its socket: the plan's own path, else in the first folder that is there or can be made.
pub(super) fn own_path(plan: &Plan) -> PathBuf {
    if let Some(path) = &plan.console.socket {
        return path.clone();
    }
    let folders = folders();
    let usable = folders.iter().find(|it| is_usable(it)).or(folders.last());
    usable.cloned().unwrap_or_else(std::env::temp_dir).join(name(plan))
}

/// A folder of this user's, made if it is not there. One under the temporary folder that somebody else has made would
/// let them answer in our place.
fn is_usable(folder: &Path) -> bool {
    let service = folder == Path::new(SERVICE_FOLDER);
    let _ = std::fs::DirBuilder::new().mode(if service { 0o750 } else { 0o700 }).create(folder);
    let own = |uid| uid == user() || (service && user() == 0);
    std::fs::symlink_metadata(folder).is_ok_and(|it| it.is_dir() && own(it.uid()))
}

/// A connection to the drive of this configuration, wherever its socket is.
///
/// # Errors
/// `NotFound` or `ConnectionRefused` when there is none; `PermissionDenied` when there is one for others.
pub fn connect(plan: &Plan) -> io::Result<UnixStream> {
    let paths: Vec<PathBuf> = match &plan.console.socket {
        Some(path) => vec![path.clone()],
        None => folders().into_iter().map(|it| it.join(name(plan))).collect(),
    };
    let mut answer = Err(io::Error::from(io::ErrorKind::NotFound));
    for path in paths {
        match UnixStream::connect(path) {
            Ok(stream) => return Ok(stream),
            Err(error) if error.kind() == io::ErrorKind::PermissionDenied => answer = Err(error),
            Err(_) => {}
        }
    }
    answer
}

/// Connections to every drive that runs here, as far as its socket is in one of the usual folders.
#[must_use]
pub fn connect_any() -> Vec<UnixStream> {
    let mut paths: Vec<PathBuf> = folders()
        .iter()
        .filter_map(|it| std::fs::read_dir(it).ok())
        .flatten()
        .flatten()
        .map(|it| it.path())
        .filter(|it| {
            let name = it.file_name().and_then(|it| it.to_str()).unwrap_or("");
            name.starts_with("gripline-") && name.ends_with(".sock")
        })
        .filter_map(|it| std::fs::canonicalize(it).ok())
        .collect();
    paths.sort();
    paths.dedup();
    paths.iter().filter_map(|it| UnixStream::connect(it).ok()).collect()
}

/// Asks the drive at the other end one thing. The whole answer must come within the time.
///
/// # Errors
/// When it does not.
pub fn ask(stream: &mut UnixStream, request: &Value, within: Duration) -> io::Result<Value> {
    let until = clock::now().plus_ns(u64::try_from(within.as_nanos()).unwrap_or(u64::MAX));
    stream.set_write_timeout(Some(within))?;
    stream.write_all(format!("{request}\n").as_bytes())?;
    let mut line = Vec::new();
    let mut bytes = [0; 4096];
    while line.last() != Some(&b'\n') && line.len() < LONGEST_ANSWER {
        let left = Duration::from_nanos(until.since_ns(clock::now()));
        if left.is_zero() {
            return Err(io::Error::from(io::ErrorKind::TimedOut));
        }
        stream.set_read_timeout(Some(left))?;
        match stream.read(&mut bytes) {
            Ok(0) => return Err(io::Error::from(io::ErrorKind::UnexpectedEof)),
            Ok(n) => line.extend_from_slice(bytes.get(..n).unwrap_or(&[])),
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    serde_json::from_slice(&line).map_err(io::Error::other)
}

/// A drive's socket, taken away with it.
#[derive(Debug)]
pub(super) struct Socket {
    pub(super) listener: UnixListener,
    path: PathBuf,
}

impl Socket {
    /// Makes the socket, for this user and group alone. One that nobody listens at any more is cleared away.
    ///
    /// # Errors
    /// When another drive has it, or it cannot be made.
    pub(super) fn bind(path: PathBuf) -> Result<Self, ConsoleError> {
        let failed = |source| ConsoleError::Socket { path: path.clone(), source };
        match UnixStream::connect(&path) {
            // A suspended drive answers nothing, but the system knows who it is.
            Ok(other) => {
                return Err(ConsoleError::Taken { path, pid: socket::peer_pid(other.as_fd()) });
            }
            Err(error) if error.kind() == io::ErrorKind::ConnectionRefused => {
                let is_socket = std::fs::symlink_metadata(&path)
                    .is_ok_and(|it| std::os::unix::fs::FileTypeExt::is_socket(&it.file_type()));
                if !is_socket {
                    return Err(failed(io::Error::other("something else is there")));
                }
                std::fs::remove_file(&path).map_err(failed)?;
            }
            Err(error) if error.kind() == io::ErrorKind::NotFound => {}
            Err(error) => return Err(failed(error)),
        }
        let listener = UnixListener::bind(&path).map_err(failed)?;
        let made = Self { listener, path: path.clone() };
        std::fs::set_permissions(&path, std::fs::Permissions::from_mode(0o660)).map_err(failed)?;
        made.listener.set_nonblocking(true).map_err(failed)?;
        Ok(made)
    }

    /// Takes the socket away at the end, whoever still holds the listener.
    pub(super) fn remover(&self) -> Remover {
        Remover(self.path.clone())
    }
}

/// Takes the socket away when dropped.
#[derive(Debug)]
pub(super) struct Remover(PathBuf);

impl Drop for Remover {
    fn drop(&mut self) {
        let _ = std::fs::remove_file(&self.0);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_socket_that_nobody_listens_at_is_taken_over_and_a_living_one_is_named() {
        let dir = tempfile::tempdir().unwrap();
        let path = dir.path().join("gripline-x.sock");
        drop(UnixListener::bind(&path).unwrap());
        assert!(path.exists(), "a dead socket stays behind");
        let socket = Socket::bind(path.clone()).unwrap();
        match Socket::bind(path.clone()) {
            Err(ConsoleError::Taken { pid, .. }) => assert_eq!(pid, Some(std::process::id())),
            other => panic!("{other:?}"),
        }
        drop(socket.remover());
        assert!(!path.exists());
    }

    #[test]
    fn a_file_that_is_no_socket_is_left_alone() {
        let dir = tempfile::tempdir().unwrap();
        let path = dir.path().join("notes");
        std::fs::write(&path, "mine").unwrap();
        let error = Socket::bind(path.clone()).unwrap_err().to_string();
        assert!(error.contains("notes"), "{error}");
        assert_eq!(std::fs::read(&path).unwrap(), b"mine");
    }

    #[test]
    fn an_answer_must_come_whole_and_in_time() {
        let (mut here, mut there) = UnixStream::pair().unwrap();
        there.write_all(b"{\"half\":").unwrap();
        let error = ask(&mut here, &Value::Null, Duration::from_millis(20)).unwrap_err();
        assert!(matches!(error.kind(), io::ErrorKind::TimedOut | io::ErrorKind::WouldBlock), "{error}");
        there.write_all(b"1}\n").unwrap();
        let (mut here, mut there) = UnixStream::pair().unwrap();
        there.write_all(b"{\"whole\":1}\n").unwrap();
        assert_eq!(ask(&mut here, &Value::Null, Duration::from_secs(20)).unwrap()["whole"], 1);
    }
}
