//! The console: a socket on this machine for status, stop and reset. One line of JSON each way.
//!
//! `{"ask":"status"}`, `{"ask":"stop"}`, `{"ask":"reset","in_sight":true}`. A client that floods, never reads or sends
//! half a line costs the tick nothing: this thread serves a few clients, a line at a time, and drops the rest.

use std::io::{self, Read, Write};
use std::os::unix::fs::PermissionsExt;
use std::os::unix::net::{UnixListener, UnixStream};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::Duration;

use crossbeam_channel::Receiver;
use serde_json::{Value, json};

use super::gather::Asked;
use crate::config::Plan;
use crate::core::io::{Outputs, Phase, Puller};
use crate::core::words;
use crate::link::StopLine;
use crate::record::Recorder;
use crate::shaping::Frame;
use crate::sys::clock;

/// A client that says nothing for so long is dropped.
const PATIENCE: Duration = Duration::from_millis(500);
/// The longest line of a client.
const LONGEST: usize = 1024;

/// Why there is no console.
#[derive(Debug, thiserror::Error)]
pub enum ConsoleError {
    /// Another drive answers there.
    #[error("a drive of this base is already running (console {path}{}): end it first", .pid.map_or_else(String::new, |it| format!(", process {it}")))]
    Taken {
        /// The socket.
        path: PathBuf,
        /// Its process.
        pid: Option<u64>,
    },
    /// The socket cannot be made.
    #[error("cannot make the console's socket {path}: {source}; correct `socket` of [console]")]
    Socket {
        /// The socket.
        path: PathBuf,
        /// Why.
        source: io::Error,
    },
}

/// Where the console of a base is: the plan's own path, else in the runtime folder of the service or of the user.
#[must_use]
pub fn socket_path(plan: &Plan) -> PathBuf {
    if let Some(path) = &plan.console.socket {
        return path.clone();
    }
    let name: String =
        plan.name.chars().map(|it| if it.is_ascii_alphanumeric() { it } else { '-' }).collect();
    let name = format!("gripline-{name}.sock");
    for variable in ["RUNTIME_DIRECTORY", "XDG_RUNTIME_DIR"] {
        if let Some(dir) = std::env::var_os(variable).filter(|it| !it.is_empty()) {
            return Path::new(&dir).join(&name);
        }
    }
    let service = Path::new("/run/gripline");
    if service.is_dir() { service.join(name) } else { std::env::temp_dir().join(name) }
}

/// Makes the socket, for this user and group alone. One that nobody answers at any more is taken over.
///
/// # Errors
/// When another drive answers there, or the socket cannot be made.
pub(super) fn bind(path: &Path) -> Result<UnixListener, ConsoleError> {
    let failed = |source| ConsoleError::Socket { path: path.into(), source };
    match UnixStream::connect(path) {
        Ok(_) => {
            let pid = ask(path, &json!({ "ask": "status" }), Duration::from_millis(500))
                .ok()
                .and_then(|it| it.get("pid").and_then(Value::as_u64));
            return Err(ConsoleError::Taken { path: path.into(), pid });
        }
        Err(error) if error.kind() == io::ErrorKind::ConnectionRefused => {
            std::fs::remove_file(path).map_err(failed)?;
        }
        Err(error) if error.kind() == io::ErrorKind::NotFound => {}
        Err(error) => return Err(failed(error)),
    }
    let listener = UnixListener::bind(path).map_err(failed)?;
    std::fs::set_permissions(path, std::fs::Permissions::from_mode(0o660)).map_err(failed)?;
    Ok(listener)
}

/// Takes the socket away at the end.
pub(super) fn remove(path: &Path) {
    let _ = std::fs::remove_file(path);
}

/// What the console needs of the drive.
pub(super) struct Shared {
    pub(super) plan: Arc<Plan>,
    pub(super) stop: StopLine,
    pub(super) asked: Arc<Asked>,
    pub(super) want: Arc<AtomicBool>,
    pub(super) shown: Receiver<Outputs>,
    pub(super) run: PathBuf,
    pub(super) failures: Recorder,
}

/// Serves until the program ends.
pub(super) fn start(listener: UnixListener, shared: Shared) -> io::Result<()> {
    let shared = Arc::new(shared);
    // Two threads, so that one client that holds its line open does not keep a stop from being heard.
    for index in 0..SERVERS {
        let listener = listener.try_clone()?;
        let shared = Arc::clone(&shared);
        let thread = std::thread::Builder::new().name(format!("console {index}")).stack_size(256 * 1024);
        thread.spawn(move || {
            for client in listener.incoming() {
                match client {
                    // Whatever became of it, the next one is served.
                    Ok(client) => drop(serve(client, &shared)),
                    Err(_) => clock::sleep_ms(50),
                }
            }
        })?;
    }
    Ok(())
}

/// How many clients are served at a time.
const SERVERS: usize = 4;

/// One client: lines in, lines out, until it is silent for too long.
fn serve(mut client: UnixStream, shared: &Shared) -> io::Result<()> {
    client.set_read_timeout(Some(PATIENCE))?;
    client.set_write_timeout(Some(PATIENCE))?;
    let mut line = Vec::new();
    // A client that floods is dropped after so many lines; it may come again.
    for _ in 0..100 {
        if !read_line(&mut client, &mut line)? {
            return Ok(());
        }
        let answer = match serde_json::from_slice::<Value>(&line) {
            Ok(request) => answer(&request, shared),
            Err(error) => json!({ "error": format!("not a line of JSON: {error}") }),
        };
        client.write_all(format!("{answer}\n").as_bytes())?;
    }
    Ok(())
}

/// One line without its end; false when the client is done. The whole line must come within the patience.
fn read_line(client: &mut UnixStream, line: &mut Vec<u8>) -> io::Result<bool> {
    line.clear();
    let deadline = clock::now().plus_ns(4 * u64::try_from(PATIENCE.as_nanos()).unwrap_or(0));
    let mut byte = [0];
    loop {
        if client.read(&mut byte)? == 0 || line.len() >= LONGEST || clock::now() > deadline {
            return Ok(false);
        }
        if byte == *b"\n" {
            return Ok(true);
        }
        line.extend_from_slice(&byte);
    }
}

fn answer(request: &Value, shared: &Shared) -> Value {
    match request.get("ask").and_then(Value::as_str) {
        Some("status") => match status(shared) {
            Some(out) => shown(&out, shared),
            None => {
                json!({ "error": "no tick answers; `gripline stop` reaches the drivers all the same", "pid": std::process::id() })
            }
        },
        Some("stop") => {
            // At once, without waiting for the tick.
            let pull = shared.stop.pull(Puller::Console);
            shared.asked.stop.store(true, Ordering::Relaxed);
            json!({ "done": "stop", "pull": pull.number, "pid": std::process::id() })
        }
        Some("reset") => reset(request, shared),
        Some(_) | None => json!({ "error": "unknown request; ask for \"status\", \"stop\" or \"reset\"" }),
    }
}

fn reset(request: &Value, shared: &Shared) -> Value {
    let before = status(shared);
    let tripped = before.as_ref().filter(|it| it.phase == Phase::Tripped);
    let cause = tripped.and_then(|it| it.cause.as_ref()).map(|it| words::cause(it, &shared.plan));
    if !shared.plan.console.reset {
        return json!({ "error": "the console may not reset here; reset at the pad, or set `reset = true` in [console]", "cause": cause });
    }
    if request.get("in_sight") != Some(&Value::Bool(true)) {
        return json!({ "error": "a reset is only for somebody who sees the base: say --in-sight", "cause": cause });
    }
    if tripped.is_none() {
        return json!({ "error": "nothing to reset: the base is not tripped" });
    }
    shared.asked.reset.store(true, Ordering::Relaxed);
    // The drivers have half a second to unlatch.
    for _ in 0..14 {
        clock::sleep_ms(50);
        if let Some(out) = status(shared)
            && out.phase != Phase::Tripped
        {
            return json!({ "done": "reset", "cause": cause, "phase": out.phase.name() });
        }
    }
    let wait = status(shared).and_then(|it| it.view.waits_for).map(|it| words::wait(&it, &shared.plan));
    let why = wait
        .unwrap_or_else(|| "the stop was asked at the pad or a stop input, so it is reset at the pad".into());
    json!({ "error": format!("reset refused: {why}"), "cause": cause })
}

/// Asks the tick how things stand; it answers at its next turn, or not at all.
fn status(shared: &Shared) -> Option<Outputs> {
    while shared.shown.try_recv().is_ok() {}
    shared.want.store(true, Ordering::Relaxed);
    shared.shown.recv_timeout(Duration::from_millis(150)).ok()
}

fn shown(out: &Outputs, shared: &Shared) -> Value {
    let (view, plan) = (&out.view, &shared.plan);
    let links: Vec<Value> = plan
        .links
        .iter()
        .enumerate()
        .map(|(index, link)| {
            let age = view.feedback_age_s.get(index).copied().filter(|it| it.is_finite());
            json!({ "name": link.name, "feedback_age_s": age, "round_trip_s": view.round_trip_s.get(index) })
        })
        .collect();
    json!({
        "base": plan.name,
        "pid": std::process::id(),
        "phase": out.phase.name(),
        "cause": out.cause.as_ref().map(|it| words::cause(it, plan)),
        "cause_code": out.cause.as_ref().map(crate::core::Cause::code),
        "clears": out.cause.as_ref().map(|it| words::clears(it, plan)),
        "waits_for": view.waits_for.as_ref().map(|it| words::wait(it, plan)),
        "frame": match view.frame { Frame::Base => "base", Frame::Room => "room" },
        "pace": plan.paces.get(usize::from(view.pace)).map(|it| it.name.as_str()),
        "sent": { "turn_rad_s": view.sent.turn_rad_s, "x_m_s": view.sent.x_m_s, "y_m_s": view.sent.y_m_s },
        "pose": { "x_m": view.pose.x_m, "y_m": view.pose.y_m, "heading_rad": view.pose.heading_rad },
        "measured_rad_s": view.measured_rad_s.as_slice(),
        "skid_rad_s": view.skid_rad_s,
        "links": links,
        "run": shared.run.display().to_string(),
        "record_failures": shared.failures.failures(),
    })
}

/// Asks a console one thing, as the commands do.
///
/// # Errors
/// When nobody answers in time.
pub fn ask(path: &Path, request: &Value, within: Duration) -> io::Result<Value> {
    let mut stream = UnixStream::connect(path)?;
    stream.set_read_timeout(Some(within))?;
    stream.set_write_timeout(Some(within))?;
    stream.write_all(format!("{request}\n").as_bytes())?;
    let mut line = Vec::new();
    let mut byte = [0];
    while stream.read(&mut byte)? == 1 && byte != *b"\n" && line.len() < 64 * 1024 {
        line.extend_from_slice(&byte);
    }
    serde_json::from_slice(&line).map_err(io::Error::other)
}
