//! Opening a port so that nobody else has it, at the speed asked for, and saying why when that cannot be.

use std::io;
use std::os::fd::{AsFd, IntoRawFd, OwnedFd};
use std::path::{Path, PathBuf};
use std::time::Duration;

use serialport::SerialPort;

use super::holder::holder;
use crate::sys::tty;

/// Why a port cannot be used.
#[derive(Debug, thiserror::Error)]
pub enum LinkError {
    /// There is no such device.
    #[error("no port {path}: plug the adaptor in, or correct `port` of link '{link}'")]
    Absent {
        /// The link.
        link: String,
        /// The device.
        path: PathBuf,
    },
    /// Somebody else has it.
    #[error("port {path} of link '{link}' is in use{}: end that first", .pid.map_or_else(String::new, |it| format!(" by process {it}")))]
    Busy {
        /// The link.
        link: String,
        /// The device.
        path: PathBuf,
        /// Who has it, where that can be found.
        pid: Option<u32>,
    },
    /// It is no terminal device.
    #[error("{path} is not a serial port: correct `port` of link '{link}'")]
    NotATty {
        /// The link.
        link: String,
        /// The path.
        path: PathBuf,
    },
    /// No permission.
    #[error(
        "no permission for port {path} of link '{link}': join the group that owns it (`dialout`), or install the udev rules"
    )]
    Denied {
        /// The link.
        link: String,
        /// The device.
        path: PathBuf,
    },
    /// The adaptor does not do that speed.
    #[error("port {path} of link '{link}' does not do {asked} bit/s (it took {got}): correct `baud`")]
    Baud {
        /// The link.
        link: String,
        /// The device.
        path: PathBuf,
        /// Asked for.
        asked: u32,
        /// Read back.
        got: u32,
    },
    /// Anything else.
    #[error("cannot open port {path} of link '{link}': {source}; unplug it and plug it in again")]
    Other {
        /// The link.
        link: String,
        /// The device.
        path: PathBuf,
        /// Why.
        source: io::Error,
    },
}

/// Opens a port: exclusive, raw, 8N1, never waiting. Gives whether the adaptor took the low-latency mode too.
///
/// # Errors
/// When it is absent, in use, no serial port, not permitted, or does not do the speed.
pub fn open(link: &str, path: &Path, baud: u32) -> Result<(OwnedFd, bool), LinkError> {
    let (name, at) = (link.to_owned(), path.to_owned());
    // The library flushes on some paths and its clones undo the exclusive mode; so only its opening is used.
    let opened = serialport::new(path.to_string_lossy(), baud)
        .data_bits(serialport::DataBits::Eight)
        .parity(serialport::Parity::None)
        .stop_bits(serialport::StopBits::One)
        .flow_control(serialport::FlowControl::None)
        .timeout(Duration::from_millis(10))
        .open_native();
    let port = match opened {
        Ok(port) => port,
        Err(error) => return Err(told(error, name, at)),
    };
    let got = port.baud_rate().map_err(|error| told(error, name.clone(), at.clone()))?;
    // Adaptors round the divisor: within what a receiver bears (common practice: 2 %).
    if (f64::from(got) - f64::from(baud)).abs() > 0.02 * f64::from(baud) {
        return Err(LinkError::Baud { link: name, path: at, asked: baud, got });
    }
    // The library gives the descriptor up here, so it never undoes the exclusive mode.
    let port = tty::owned(port.into_raw_fd());
    let other = |source| LinkError::Other { link: link.to_owned(), path: path.to_owned(), source };
    tty::set_nonblocking(&port).map_err(other)?;
    let quick = tty::ask_low_latency(port.as_fd());
    Ok((port, quick))
}

fn told(error: serialport::Error, link: String, path: PathBuf) -> LinkError {
    let os = std::fs::metadata(&path);
    match error.kind() {
        serialport::ErrorKind::Io(io::ErrorKind::PermissionDenied) => LinkError::Denied { link, path },
        serialport::ErrorKind::Io(io::ErrorKind::NotFound) => LinkError::Absent { link, path },
        _ if os.is_err() => LinkError::Absent { link, path },
        _ if !is_character_device(&path) => LinkError::NotATty { link, path },
        _ if error.description.contains("typewriter") || error.description.contains("Inappropriate") => {
            LinkError::NotATty { link, path }
        }
        serialport::ErrorKind::NoDevice => {
            let pid = holder(&path).map(|it| it.pid);
            LinkError::Busy { link, path, pid }
        }
        _ if error.description.contains("busy") || error.description.contains("lock") => {
            let pid = holder(&path).map(|it| it.pid);
            LinkError::Busy { link, path, pid }
        }
        serialport::ErrorKind::InvalidInput
        | serialport::ErrorKind::Unknown
        | serialport::ErrorKind::Io(_) => {
            LinkError::Other { link, path, source: io::Error::other(error.description) }
        }
    }
}

fn is_character_device(path: &Path) -> bool {
    use std::os::unix::fs::FileTypeExt;
    std::fs::metadata(path).is_ok_and(|it| it.file_type().is_char_device())
}
