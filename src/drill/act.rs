//! What the drill does to a running drive itself.

use std::io::{ErrorKind, Write};
use std::os::unix::net::UnixStream;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread::JoinHandle;
use std::time::Duration;

use serde_json::json;

use super::fault::Act;
use crate::daemon;
use crate::sys::clock;
use crate::sys::disturb::{self, Held, Signal};

/// How long the control thread hangs, or the drive is suspended.
pub(super) const HELD_S: f64 = 0.8;
/// The wall clock is stepped by so much.
const STEP_S: i32 = 10;
/// As many clients flood the console as it lets in.
const FLOODERS: usize = 16;

/// What an act needs to know of the drive.
pub(super) struct Target<'a> {
    pub(super) program: &'a Path,
    pub(super) pid: u32,
    pub(super) socket: PathBuf,
    /// What follows `drive` on its command line, but for its console.
    pub(super) arguments: Vec<String>,
}

/// Why an act did not come off.
pub(super) enum Refused {
    /// It cannot be done here: in one line.
    Here(String),
    /// It was done, and the drive did not do what it must.
    Missed(String),
}

impl From<String> for Refused {
    fn from(why: String) -> Self {
        Self::Here(why)
    }
}

/// Something that goes on until it is ended.
pub(super) enum Going {
    /// It is done.
    Nothing,
    /// A thread of the drive is held.
    Held(Held),
    /// The drive is suspended.
    Suspended(u32),
    /// Its files may not grow.
    Limited(u32),
    /// Its console is flooded.
    Flooded(Flood),
    /// The wall clock is ahead.
    Stepped(Ahead),
}

/// Does it.
pub(super) fn act(act: Act, target: &Target<'_>) -> Result<Going, Refused> {
    let refused = |what: &str, why: std::io::Error| Refused::Here(format!("{what}: {why}"));
    match act {
        Act::AskConsoleStop => {
            let mut console =
                UnixStream::connect(&target.socket).map_err(|it| refused("the console is not there", it))?;
            daemon::ask(&mut console, &json!({ "ask": "stop" }), Duration::from_secs(1))
                .map_err(|it| refused("the console does not answer", it))?;
            Ok(Going::Nothing)
        }
        Act::HoldTickThread => {
            let thread = disturb::thread_named(target.pid, "tick")
                .ok_or_else(|| Refused::Here("the drive has no tick thread".into()))?;
            Held::hold(thread)
                .map(Going::Held)
                .map_err(|it| refused("one thread of another process may not be held here", it))
        }
        Act::Kill => signal(target, Signal::Kill).map(|()| Going::Nothing),
        Act::Suspend => signal(target, Signal::Suspend).map(|()| Going::Suspended(target.pid)),
        Act::Terminate => signal(target, Signal::Terminate).map(|()| Going::Nothing),
        Act::FillDisk => disturb::limit_files(target.pid, Some(1))
            .map(|()| Going::Limited(target.pid))
            .map_err(|it| refused("the files of the drive cannot be limited", it)),
        Act::FloodConsole => Ok(Going::Flooded(Flood::start(&target.socket))),
        Act::StepWallClock => disturb::step_wall_clock(STEP_S)
            .map(|()| Going::Stepped(Ahead))
            .map_err(|it| refused("the wall clock may not be stepped here", it)),
        Act::StartSecondDrive => second_drive(target).map(|()| Going::Nothing),
        // Done by the stop button, with another configuration.
        Act::TakeTorqueOff => Ok(Going::Nothing),
    }
}

fn signal(target: &Target<'_>, signal: Signal) -> Result<(), Refused> {
    disturb::signal(target.pid, signal)
        .map_err(|it| Refused::Here(format!("the drive cannot be sent a signal: {it}")))
}

impl Going {
    /// Ends it.
    pub(super) fn end(self) {
        match self {
            Self::Nothing => {}
            Self::Held(held) => drop(held),
            Self::Suspended(pid) => drop(disturb::signal(pid, Signal::Continue)),
            Self::Limited(pid) => drop(disturb::limit_files(pid, None)),
            Self::Flooded(flood) => drop(flood),
            Self::Stepped(ahead) => drop(ahead),
        }
    }
}

/// The wall clock is ahead; put back when dropped, whatever happens to the drill.
pub(super) struct Ahead;

impl Drop for Ahead {
    fn drop(&mut self) {
        let _ = disturb::step_wall_clock(-STEP_S);
    }
}

/// A second drive, once on the same console and once on the same ports: both must be turned away.
fn second_drive(target: &Target<'_>) -> Result<(), Refused> {
    let other = target.socket.with_extension("second");
    for socket in [&target.socket, &other] {
        let mut child = Command::new(target.program)
            .arg("drive")
            .args(&target.arguments)
            .arg("--socket")
            .arg(socket)
            .stdin(Stdio::null())
            .stdout(Stdio::null())
            .stderr(Stdio::null())
            .spawn()
            .map_err(|it| Refused::Here(format!("a second drive cannot be started: {it}")))?;
        let until = clock::now().plus_ns(3_000_000_000);
        let turned_away = loop {
            match child.try_wait() {
                Ok(Some(status)) => break !status.success(),
                Ok(None) if clock::now() < until => clock::sleep_ms(5),
                Ok(None) | Err(_) => break false,
            }
        };
        let _ = child.kill();
        let _ = child.wait();
        if !turned_away {
            return Err(Refused::Missed("a second drive was not turned away".into()));
        }
    }
    Ok(())
}

/// Clients that send whatever they can and read nothing; ended when dropped.
#[derive(Debug)]
pub struct Flood {
    stop: Arc<AtomicBool>,
    threads: Vec<JoinHandle<()>>,
}

impl Flood {
    /// Sixteen of them, as many as the console lets in.
    #[must_use]
    pub fn start(socket: &Path) -> Self {
        let stop = Arc::new(AtomicBool::new(false));
        let threads = (0..FLOODERS).filter_map(|index| {
            let (stop, socket) = (Arc::clone(&stop), socket.to_owned());
            std::thread::Builder::new().name("flood".into()).spawn(move || flood(index, &socket, &stop)).ok()
        });
        Self { threads: threads.collect(), stop }
    }
}

impl Drop for Flood {
    fn drop(&mut self) {
        self.stop.store(true, Ordering::Relaxed);
        for thread in self.threads.drain(..) {
            let _ = thread.join();
        }
    }
}

/// One client in four each: sound requests whose answers it never reads, half lines, endless lines, rubbish.
fn flood(index: usize, socket: &Path, stop: &AtomicBool) {
    let line: &[u8] = match index % 4 {
        0 => b"{\"ask\":\"status\"}\n",
        1 => b"{\"ask\":",
        2 => &[b'x'; 900],
        _ => b"\x00\xff\n\n}{\n",
    };
    while !stop.load(Ordering::Relaxed) {
        let Ok(mut stream) = UnixStream::connect(socket) else {
            clock::sleep_ms(1);
            continue;
        };
        let _ = stream.set_nonblocking(true);
        while !stop.load(Ordering::Relaxed) {
            match stream.write(line) {
                // As fast as it goes would only measure how the cores are shared out.
                Ok(_) => clock::sleep_until(clock::now().plus_ns(200_000)),
                Err(error) if error.kind() == ErrorKind::WouldBlock => clock::sleep_ms(1),
                Err(_) => break,
            }
        }
    }
}
