//! One drive from start to end: starts every thread, waits for the tick to end, and leaves in order.

use std::io::Write;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::thread::JoinHandle;

use crossbeam_channel::bounded;

use super::answers::Shared;
use super::board::Board;
use super::gather::{Asked, PadSource, ScriptedHands};
use super::sentinel::{self, Pulse};
use super::socket::{ConsoleError, Socket, own_path};
use super::ticker::Ticker;
use super::{CAUTION, alarms, console, printer, service, warn};
use crate::config::Plan;
use crate::link::{self, LinkError, Links, StopLine};
use crate::pad::{self, PadError};
use crate::record::{self, RecordError};
use crate::standin::hands::Script;
use crate::sys::{clock, sched};

/// How a drive is wanted.
#[derive(Debug, Default)]
pub struct DriveOptions {
    /// Wait for ports and a gamepad that are not there yet.
    pub wait: bool,
    /// Play this in place of a gamepad.
    pub hands: Option<Script>,
    /// The wheels are off the floor: hands may play on real drivers.
    pub on_stands: bool,
    /// Where run files go, before the plan's own.
    pub record_dir: Option<PathBuf>,
    /// Tell only trips.
    pub quiet: bool,
}

/// How a drive ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ended {
    /// Parked in order.
    Parked,
    /// Tripped and latched when the end was asked.
    Tripped,
    /// Drivers that would not latch: stopped and left.
    Forced,
}

/// Why a drive could not run.
#[derive(Debug, thiserror::Error)]
pub enum DriveError {
    /// The console's socket.
    #[error(transparent)]
    Console(#[from] ConsoleError),
    /// A port.
    #[error(transparent)]
    Link(#[from] LinkError),
    /// The run file.
    #[error(transparent)]
    Record(#[from] RecordError),
    /// The gamepad's part.
    #[error(transparent)]
    Pad(#[from] PadError),
    /// There is no gamepad, or none that is meant.
    #[error(
        "no gamepad{}: plug it in (`gripline pads` lists what may be read), or start with --wait",
        if .0.is_empty() { String::new() } else { format!(" whose name contains '{}'", .0) }
    )]
    NoPad(String),
    /// A script was to be played on drivers that move something.
    #[error(
        "the drivers of link '{0}' do not say that they are simulated: a script of hands plays on them only with --on-stands, the wheels off the floor"
    )]
    HandsOnRealDrivers(String),
    /// A thread could not be started.
    #[error("cannot start a thread: {0}; end other programs")]
    Thread(std::io::Error),
}

/// Events that can wait for the terminal.
const EVENTS: usize = 256;
/// At the end a terminal that takes nothing is waited for this long.
const LAST_WORDS_MS: u64 = 1000;

/// Drives until the end is asked.
///
/// # Errors
/// When it cannot start; nothing has moved then.
pub fn drive(plan: Plan, options: DriveOptions) -> Result<Ended, DriveError> {
    say(CAUTION);
    sched::survive_file_limits();
    let origin = clock::now();
    if plan.tick.lock_memory
        && let Err(error) = sched::lock_memory()
    {
        warn(&format!(
            "memory is not locked ({error}): ticks may come late when memory is short; run as a service or set `ulimit -l unlimited`"
        ));
    }
    let plan = Arc::new(plan);
    let socket = Socket::bind(own_path(&plan))?;
    let _socket_goes = socket.remover();
    let dir = options.record_dir.clone().or_else(|| plan.record.dir.clone()).unwrap_or_else(default_dir);
    let recorder = record::start(&dir, &plan)?;
    let tap_recorder = recorder.clone();
    let tap: link::Tap = Arc::new(move |link, way, bytes, at| tap_recorder.frame(link, way, at, bytes));
    // What only carries bytes comes right behind the tick; threads inherit it from the one that starts them.
    let lifted = sched::Lifted::to(plan.tick.realtime.saturating_sub(1));
    let Links { lines, news, stop } = link::start(&plan, options.wait, tap).inspect_err(|_| {
        // Nothing has happened that a record of would help.
        remove(recorder.path());
    })?;
    alarms::panic_pulls(stop.clone());
    let asked = Arc::new(Asked::default());
    let pad = match options.hands {
        Some(script) => PadSource::Hands(Box::new(ScriptedHands::new(script, &plan.pad, options.on_stands))),
        None => PadSource::Feed(start_pad(&plan, stop.clone())?),
    };
    drop(lifted);
    alarms::signals_ask(Arc::clone(&asked), stop.clone());

    let (pulse, board) = (Arc::new(Pulse::default()), Arc::new(Board::default()));
    let sentinel = sentinel::start(Arc::clone(&pulse), stop.clone(), &plan).map_err(DriveError::Thread)?;
    let (print, printed) = bounded(EVENTS);
    let printing = printer::Printing {
        plan: Arc::clone(&plan),
        events: printed,
        board: Arc::clone(&board),
        recorder: recorder.clone(),
        origin,
        quiet: options.quiet,
    };
    let printer = printer::start(printing).map_err(DriveError::Thread)?;
    let shared = Shared {
        plan: Arc::clone(&plan),
        stop: stop.clone(),
        asked: Arc::clone(&asked),
        board: Arc::clone(&board),
        run: recorder.path().to_owned(),
        recorder: recorder.clone(),
    };
    console::start(socket, shared).map_err(DriveError::Thread)?;
    service::start(Arc::clone(&pulse), Arc::clone(&board)).map_err(DriveError::Thread)?;
    say(&format!("recording to {}", recorder.path().display()));

    let ticker = Ticker {
        plan,
        pad,
        lines,
        news,
        stop,
        asked,
        recorder: recorder.clone(),
        print,
        board,
        pulse: Arc::clone(&pulse),
        wait: options.wait,
    };
    let thread = std::thread::Builder::new().name("tick".into()).stack_size(512 * 1024);
    let ticker = thread.spawn(move || ticker.run()).map_err(DriveError::Thread)?;
    let ended = ticker.join().unwrap_or(Ok(Ended::Forced));
    pulse.end();
    link::ending();
    let _ = sentinel.join();
    recorder.close();
    join_within(&printer, LAST_WORDS_MS);
    ended
}

fn start_pad(plan: &Plan, stop: StopLine) -> Result<pad::PadFeed, PadError> {
    pad::start(&plan.pad, move |by| {
        stop.pull(by);
    })
}

fn join_within(thread: &JoinHandle<()>, within_ms: u64) {
    let until = clock::now().plus_ns(within_ms * 1_000_000);
    while !thread.is_finished() && clock::now() < until {
        clock::sleep_ms(5);
    }
}

fn remove(run: &Path) {
    let _ = std::fs::remove_file(run);
}

fn default_dir() -> PathBuf {
    std::env::var_os("STATE_DIRECTORY").map_or_else(|| PathBuf::from("runs"), PathBuf::from)
}

/// One line on stdout. Nobody may be reading: the drive does not depend on it.
fn say(what: &str) {
    let _ = writeln!(std::io::stdout(), "{what}");
}
