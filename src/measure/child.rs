//! The program's own parts as processes: the stand-in, the drive, and a temporary folder for both. For the tools round
//! the drive, so that what they measure is the program itself.

use std::ffi::OsStr;
use std::io::{BufRead, BufReader, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, Command, ExitStatus, Stdio};
use std::sync::atomic::{AtomicU32, Ordering};
use std::sync::mpsc;
use std::time::Duration;

use crate::config::Plan;
use crate::sys::clock;

/// Why a part could not be run.
#[derive(Debug, thiserror::Error)]
pub enum ChildError {
    /// The system refused something.
    #[error("cannot {what}: {source}; see to disk space and permissions")]
    System {
        /// What.
        what: String,
        /// Why.
        source: std::io::Error,
    },
    /// A part ended early or said nothing.
    #[error("{part} {what}; run it by itself to see why")]
    Part {
        /// Which.
        part: &'static str,
        /// What became of it.
        what: String,
    },
}

/// For `map_err`: what it was that the system refused.
pub fn failed(what: impl Into<String>) -> impl FnOnce(std::io::Error) -> ChildError {
    let what = what.into();
    move |source| ChildError::System { what, source }
}

/// A temporary folder that goes away with this value.
#[derive(Debug)]
pub struct Folder {
    /// Where it is.
    pub path: PathBuf,
}

impl Folder {
    /// A new one, named after what it is for.
    ///
    /// # Errors
    /// When it cannot be made.
    pub fn new(what_for: &str) -> Result<Self, ChildError> {
        static COUNT: AtomicU32 = AtomicU32::new(0);
        let number = COUNT.fetch_add(1, Ordering::Relaxed);
        let path = std::env::temp_dir().join(format!("gripline-{what_for}-{}-{number}", std::process::id()));
        std::fs::create_dir_all(&path).map_err(failed("make a temporary folder"))?;
        Ok(Self { path })
    }

    /// A file in it.
    ///
    /// # Errors
    /// When it cannot be written.
    pub fn write(&self, name: &str, text: &str) -> Result<PathBuf, ChildError> {
        let path = self.path.join(name);
        std::fs::write(&path, text).map_err(failed("write into the temporary folder"))?;
        Ok(path)
    }

    /// Where the stand-in links the port of a link.
    #[must_use]
    pub fn port(&self, link: &str) -> PathBuf {
        self.path.join("links").join(link)
    }

    /// Where the stand-in writes what truly happened.
    #[must_use]
    pub fn trace(&self) -> PathBuf {
        self.path.join("trace.csv")
    }

    /// The drive's console.
    #[must_use]
    pub fn socket(&self) -> PathBuf {
        self.path.join("console.sock")
    }
}

impl Drop for Folder {
    fn drop(&mut self) {
        let _ = std::fs::remove_dir_all(&self.path);
    }
}

/// The stand-in as a process; ended when dropped.
#[derive(Debug)]
pub struct Standin {
    child: Child,
    input: Option<ChildStdin>,
}

impl Standin {
    /// Starts it in that folder and waits until its ports are there.
    ///
    /// # Errors
    /// When it cannot be started or makes no ports.
    pub fn start(program: &Path, config: &Path, folder: &Folder, plan: &Plan) -> Result<Self, ChildError> {
        let mut child = Command::new(program)
            .arg("standin")
            .arg(config)
            .arg("--link-dir")
            .arg(folder.path.join("links"))
            .arg("--trace")
            .arg(folder.trace())
            .args(["--quiet", "--until-eof"])
            .stdin(Stdio::piped())
            .stdout(Stdio::null())
            .spawn()
            .map_err(failed("start the stand-in"))?;
        let input = child.stdin.take();
        let mut it = Self { child, input };
        let part = |what: String| ChildError::Part { part: "the stand-in", what };
        for _ in 0..500 {
            if plan.links.iter().all(|link| folder.port(&link.name).exists()) {
                return Ok(it);
            }
            if let Ok(Some(status)) = it.child.try_wait() {
                return Err(part(format!("ended at once ({status})")));
            }
            clock::sleep_ms(10);
        }
        Err(part("made no ports within five seconds".into()))
    }

    /// Says a line to it: a fault.
    pub fn say(&mut self, line: &str) {
        if let Some(input) = &mut self.input {
            let _ = writeln!(input, "{line}");
            let _ = input.flush();
        }
    }

    /// Lets it end by itself, so that its trace is whole.
    pub fn end(&mut self) {
        self.input = None;
        for _ in 0..200 {
            if matches!(self.child.try_wait(), Ok(Some(_))) {
                return;
            }
            clock::sleep_ms(10);
        }
        let _ = self.child.kill();
    }
}

impl Drop for Standin {
    fn drop(&mut self) {
        self.input = None;
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

/// What the drive says when the pad, or the hands in its place, are there.
pub const PAD_THERE: &str = "gamepad there";
const RECORDING: &str = "recording to ";

/// The drive as a process; killed when dropped.
#[derive(Debug)]
pub struct Driving {
    child: Child,
    lines: mpsc::Receiver<String>,
    /// Where it records, once it has said so.
    pub run: Option<PathBuf>,
}

/// What came of waiting for a line.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Said {
    /// A line.
    Line(String),
    /// Nothing in that time.
    Nothing,
    /// It has ended, or closed its output.
    Ended,
}

impl Driving {
    /// Starts it with its console in that folder, and more arguments.
    ///
    /// # Errors
    /// When it cannot be started.
    pub fn start<A: AsRef<OsStr>>(
        program: &Path,
        config: &Path,
        folder: &Folder,
        record_dir: &Path,
        more: impl IntoIterator<Item = A>,
    ) -> Result<Self, ChildError> {
        let mut command = Command::new(program);
        command.arg("drive").arg(config).arg("--record-dir").arg(record_dir);
        command.arg("--socket").arg(folder.socket()).args(more);
        let mut child =
            command.stdin(Stdio::null()).stdout(Stdio::piped()).spawn().map_err(failed("start the drive"))?;
        let out = child.stdout.take();
        let (tell, lines) = mpsc::channel();
        std::thread::spawn(move || {
            for line in out.into_iter().flat_map(|it| BufReader::new(it).lines()).map_while(Result::ok) {
                if tell.send(line).is_err() {
                    return;
                }
            }
        });
        Ok(Self { child, lines, run: None })
    }

    /// The arguments that make it use the stand-in's ports.
    #[must_use]
    pub fn ports(folder: &Folder, plan: &Plan) -> Vec<String> {
        let port = |name: &str| format!("{name}={}", folder.port(name).display());
        plan.links.iter().flat_map(|link| ["--port".to_owned(), port(&link.name)]).collect()
    }

    /// Its next line, waited for that long.
    pub fn said(&mut self, within: Duration) -> Said {
        match self.lines.recv_timeout(within) {
            Ok(line) => {
                if let Some(path) = line.strip_prefix(RECORDING) {
                    self.run = Some(path.into());
                }
                Said::Line(line)
            }
            Err(mpsc::RecvTimeoutError::Timeout) => Said::Nothing,
            Err(mpsc::RecvTimeoutError::Disconnected) => Said::Ended,
        }
    }

    /// Its process.
    #[must_use]
    pub fn pid(&self) -> u32 {
        self.child.id()
    }

    /// Kills it at once.
    pub fn kill(&mut self) {
        let _ = self.child.kill();
    }

    /// Waits for its end.
    ///
    /// # Errors
    /// When there is nothing to wait for.
    pub fn wait(&mut self) -> Result<ExitStatus, ChildError> {
        self.child.wait().map_err(failed("wait for the drive"))
    }

    /// How it ended, if it has.
    pub fn ended(&mut self) -> Option<ExitStatus> {
        self.child.try_wait().ok().flatten()
    }
}

impl Drop for Driving {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::core::{Event, words};

    #[test]
    fn the_drive_says_what_is_listened_for() {
        let (plan, _) = crate::config::parse(crate::config::EXAMPLE, "example").unwrap();
        assert_eq!(words::event(&Event::Pad { present: true }, &plan), PAD_THERE);
    }
}
