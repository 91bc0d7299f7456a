//! One drive from start to end.

use std::io::IsTerminal;
use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicU32, Ordering};

use crossbeam_channel::{Sender, bounded};

use super::console::{self, ConsoleError};
use super::gather::{Asked, Gather, PadSource, ScriptedHands};
use super::printer::{self, Print};
use super::sentinel::{self, Pulse};
use super::{CAUTION, tick};
use crate::config::Plan;
use crate::core::Core;
use crate::core::io::{Outputs, Phase, Puller};
use crate::link::{self, LinkError, Links};
use crate::pad::{self, PadError};
use crate::record::{self, RecordError, Recorder};
use crate::standin::hands::{Hands, Script};
use crate::sys::{clock, sched};
use crate::units::Mono;
use crate::wire::{MAX_ON_LINE, Mode, ToDrivers, emit_to_drivers};

/// How a drive is wanted.
#[derive(Debug, Default)]
pub struct DriveOptions {
    /// Wait for ports that are not there yet.
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
    /// A second signal, or drivers that would not latch: stopped and left.
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
    /// A script was to be played on drivers that move something.
    #[error(
        "the drivers of link '{0}' do not say that they are simulated: a script of hands plays on them only with --on-stands, the wheels off the floor"
    )]
    HandsOnRealDrivers(String),
    /// A thread could not be started.
    #[error("cannot start a thread: {0}; end other programs")]
    Thread(std::io::Error),
}

/// Set by the signal handler: how many signals have come.
static SIGNALS: AtomicU32 = AtomicU32::new(0);

/// Drives until the end is asked.
///
/// # Errors
/// When it cannot start; nothing has moved then.
pub fn drive(plan: Plan, options: DriveOptions) -> Result<Ended, DriveError> {
    println!("{CAUTION}");
    let origin = clock::now();
    if plan.tick.lock_memory
        && let Err(error) = sched::lock_memory()
    {
        warn(&format!(
            "memory is not locked ({error}): ticks may come late when memory is short; run as a service or raise `ulimit -l`"
        ));
    }
    let plan = Arc::new(plan);
    let socket = console::bind(&console::socket_path(&plan))?;
    let dir = options.record_dir.clone().or_else(|| plan.record.dir.clone()).unwrap_or_else(default_dir);
    let recorder = record::start(&dir, &plan)?;
    let tap_recorder = recorder.clone();
    let tap: link::Tap = Arc::new(move |link, way, bytes, at| tap_recorder.frame(link, way, at, bytes));
    let Links { mut lines, news, stop } = link::start(&plan, options.wait, tap)?;
    let asked = Arc::new(Asked::default());
    panic_pulls(stop.clone());
    signals_ask(Arc::clone(&asked), stop.clone());

    let mut pad = match options.hands {
        Some(script) => PadSource::Hands(Box::new(ScriptedHands {
            hands: Hands::new(script, &plan.pad),
            on_stands: options.on_stands,
            began: None,
        })),
        None => {
            let line = stop.clone();
            PadSource::Feed(pad::start(&plan.pad, move |by| {
                line.pull(by);
            })?)
        }
    };
    let pulse = Arc::new(Pulse::default());
    let period_ns = plan.tick.period_ns();
    let late_ns = crate::units::s_to_ns(plan.guard.late_ms * 1e-3);
    let sentinel = sentinel::start(Arc::clone(&pulse), stop.clone(), late_ns, period_ns, plan.tick.realtime)
        .map_err(DriveError::Thread)?;
    let (print, printed) = bounded(256);
    let printer =
        printer::start(Arc::clone(&plan), printed, origin, options.quiet).map_err(DriveError::Thread)?;
    let (show, shown) = bounded(2);
    let want = Arc::new(AtomicBool::new(false));
    console::start(
        socket,
        console::Shared {
            plan: Arc::clone(&plan),
            stop: stop.clone(),
            asked: Arc::clone(&asked),
            want: Arc::clone(&want),
            shown,
            run: recorder.path().to_owned(),
            failures: recorder.clone(),
        },
    )
    .map_err(DriveError::Thread)?;
    println!("recording to {}", recorder.path().display());

    let tick_plan = Arc::clone(&plan);
    let tick_pulse = Arc::clone(&pulse);
    let tick_asked = Arc::clone(&asked);
    let tick_stop = stop.clone();
    let tick_recorder = recorder.clone();
    let live = std::io::stdout().is_terminal();
    let ticker = std::thread::Builder::new().name("tick".into()).stack_size(512 * 1024).spawn(move || {
        let plan = tick_plan;
        make_punctual(&plan);
        let mut ticks = Ticks {
            core: Core::new(&plan),
            gather: Gather::new(plan.links.iter().map(|it| it.channels)),
            stop: tick_stop,
            recorder: tick_recorder,
            print,
            show,
            want,
            pulse: tick_pulse,
            live,
            count: 0,
            out: Outputs::default(),
        };
        let mut due = clock::now().plus_ns(1_000_000);
        let mut ended_at: Option<Mono> = None;
        loop {
            clock::sleep_until(due);
            let now = clock::now();
            #[cfg(feature = "test-faults")]
            super::test_faults::strike(origin, now);
            ticks.gather.gather((now, due), &mut pad, &mut lines, &news, &ticks.stop, &tick_asked);
            if let PadSource::Hands(script) = &pad {
                if !script.on_stands
                    && let Some(link) = ticks.gather.real_drivers()
                {
                    return Err(DriveError::HandsOnRealDrivers(
                        plan.links.get(link).map_or_else(String::new, |it| it.name.clone()),
                    ));
                }
                if script.began.is_some_and(|began| script.hands.ended(now.since_s(began))) {
                    tick_asked.quit.store(true, Ordering::Relaxed);
                }
            }
            ticks.tick(&mut lines, now);
            if ticks.out.finished {
                return Ok(if ticks.out.phase == Phase::Tripped { Ended::Tripped } else { Ended::Parked });
            }
            let signals = SIGNALS.load(Ordering::Relaxed);
            if ticks.gather.inputs.quit {
                // Drivers that never latch must not keep the program for ever; nor a person who asks twice.
                let since = *ended_at.get_or_insert(now);
                let long = ticks.out.phase == Phase::Tripped && now.since_ns(since) > 2_000_000_000;
                if long
                    || (signals > 1 && now.since_ns(since) > 200_000_000 && ticks.out.phase == Phase::Tripped)
                {
                    return Ok(Ended::Forced);
                }
            }
            due = tick::next_deadline(due, clock::now(), period_ns);
        }
    });
    let ticker = ticker.map_err(DriveError::Thread)?;
    let ended = ticker.join().unwrap_or(Ok(Ended::Forced));
    pulse.end();
    link::ending();
    let _ = sd_notify::notify(&[sd_notify::NotifyState::Stopping]);
    let _ = sentinel.join();
    let _ = printer.join();
    recorder.close();
    console::remove(&console::socket_path(&plan));
    ended
}

/// What the tick owns.
struct Ticks {
    core: Core,
    gather: Gather,
    stop: link::StopLine,
    recorder: Recorder,
    print: Sender<Print>,
    show: Sender<Outputs>,
    want: Arc<AtomicBool>,
    pulse: Arc<Pulse>,
    live: bool,
    count: u64,
    out: Outputs,
}

impl Ticks {
    fn tick(&mut self, lines: &mut [link::Line], now: Mono) {
        if self.count.is_multiple_of(SNAPSHOT_EVERY) {
            self.recorder.snapshot(now, &self.core.state());
        }
        self.out = self.core.step(&self.gather.inputs);
        self.act(lines);
        self.recorder.tick(&self.gather.inputs, &self.out);
        for event in &self.out.events {
            self.recorder.event(now, event);
            let _ = self.print.try_send(Print::Event(now, *event));
        }
        if self.want.swap(false, Ordering::Relaxed) {
            let _ = self.show.try_send(self.out.clone());
        }
        if self.live && self.count.is_multiple_of(STATUS_EVERY) {
            let _ = self.print.try_send(Print::Status(self.out.clone()));
        }
        if self.count == 0 {
            let _ = sd_notify::notify(&[sd_notify::NotifyState::Ready]);
        }
        self.count += 1;
        self.pulse.beat(clock::now());
    }

    /// Does what was decided: the stop line first, then frames.
    fn act(&mut self, lines: &mut [link::Line]) {
        for (index, sequence) in self.out.stop_sequence.iter().enumerate() {
            self.stop.arm(index, *sequence, self.out.stop_ramp_ms);
        }
        if self.out.pull_stop {
            if self.stop.standing().is_some() {
                self.stop.repeat();
            } else {
                self.stop.pull(Puller::Core);
            }
        }
        if let Some(number) = self.out.release_stop_line {
            self.stop.release(number);
        }
        for link in &mut self.gather.inputs.links {
            link.write_blocked = false;
        }
        for frame in &self.out.frames {
            let Some(line) = lines.get_mut(usize::from(frame.link)) else { continue };
            let mut bytes = [0; MAX_ON_LINE];
            let len = emit_to_drivers(frame.sequence, &frame.message, &mut bytes);
            let motion = match &frame.message {
                ToDrivers::Drive(drive) => drive.mode != Mode::Park,
                ToDrivers::Ask | ToDrivers::Stop { .. } | ToDrivers::Clear { .. } => false,
            };
            let sent = line.send(bytes.get(..len).unwrap_or(&[]), motion);
            if matches!(sent, link::Sent::Blocked | link::Sent::Partly | link::Sent::Gone)
                && let Some(link) = self.gather.inputs.links.get_mut(usize::from(frame.link))
            {
                link.write_blocked = true;
            }
        }
    }
}

/// A snapshot is written once a second at 200 Hz.
const SNAPSHOT_EVERY: u64 = 200;
/// The status line is renewed five times a second at 200 Hz.
const STATUS_EVERY: u64 = 40;

/// Priority, core and stack of the tick's thread; what is refused is said once.
fn make_punctual(plan: &Plan) {
    sched::no_timer_slack();
    if plan.tick.realtime > 0
        && let Err(error) = sched::set_realtime(plan.tick.realtime)
    {
        warn(&format!(
            "no real-time priority ({error}): ticks may come late on a busy machine; run as a service or raise `ulimit -r`"
        ));
    }
    if let Some(cpu) = plan.tick.cpu
        && let Err(error) = sched::pin_to(cpu)
    {
        warn(&format!("cannot stay on core {cpu} ({error}); correct `cpu` of [loop]"));
    }
    sched::touch_stack();
}

/// Any thread that panics pulls the stop line first; then the program ends, for the service manager to see.
fn panic_pulls(stop: link::StopLine) {
    let usual = std::panic::take_hook();
    std::panic::set_hook(Box::new(move |info| {
        stop.pull(Puller::Panic);
        usual(info);
        eprintln!(
            "gripline: a part of the program failed; the stop line was pulled; please report it with the run file"
        );
        for _ in 0..20 {
            clock::sleep_ms(5);
            stop.repeat();
        }
        std::process::exit(1);
    }));
}

/// The first signal asks for an orderly end, a second one pulls the stop line.
fn signals_ask(asked: Arc<Asked>, stop: link::StopLine) {
    let handler = move || {
        asked.quit.store(true, Ordering::Relaxed);
        if SIGNALS.fetch_add(1, Ordering::Relaxed) > 0 {
            stop.pull(Puller::SecondSignal);
        }
    };
    if let Err(error) = ctrlc::set_handler(handler) {
        warn(&format!("signals do not ask for an orderly end: {error}"));
    }
}

fn default_dir() -> PathBuf {
    std::env::var_os("STATE_DIRECTORY").map_or_else(|| PathBuf::from("runs"), PathBuf::from)
}

fn warn(what: &str) {
    eprintln!("gripline: {what}");
}
