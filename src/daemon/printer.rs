//! Lines for the terminal, on a thread of its own: the tick hands events over and never waits for a terminal.

use std::io::{IsTerminal, Write};
use std::sync::Arc;

use crossbeam_channel::{Receiver, TryRecvError};

use super::board::{Board, Standing};
use crate::config::Plan;
use crate::core::event::Wait;
use crate::core::io::Phase;
use crate::core::{Event, words};
use crate::record::Recorder;
use crate::shaping::Frame;
use crate::sys::{clock, tty};
use crate::units::{Mono, deg};

/// So often events are looked for. A waiting receiver would make the tick take a lock to wake it.
const LOOK_MS: u64 = 20;
/// The status line is renewed so often.
const RENEW_NS: u64 = 200_000_000;
/// What Parked waits for is told when it has stood this long.
const STANDS_NS: u64 = 1_000_000_000;
/// Events that can come every tick are told this far apart.
const APART_NS: u64 = 1_000_000_000;

/// What the printer needs.
pub(super) struct Printing {
    pub(super) plan: Arc<Plan>,
    pub(super) events: Receiver<(Mono, Event)>,
    pub(super) board: Arc<Board>,
    pub(super) recorder: Recorder,
    pub(super) origin: Mono,
    pub(super) quiet: bool,
}

/// Starts the printer; it ends when the tick does.
pub(super) fn start(printing: Printing) -> std::io::Result<std::thread::JoinHandle<()>> {
    let live = std::io::stdout().is_terminal() && !printing.quiet;
    let printer = Printer {
        printing,
        live,
        shown: false,
        renewed: Mono::default(),
        last_told: [None; 3],
        waits: None,
        record_told: false,
    };
    std::thread::Builder::new().name("printer".into()).stack_size(256 * 1024).spawn(move || printer.run())
}

struct Printer {
    printing: Printing,
    live: bool,
    /// A status line stands on the terminal.
    shown: bool,
    renewed: Mono,
    /// When events that can come every tick were last told, one for each kind.
    last_told: [Option<Mono>; 3],
    /// What Parked waits for, since when, and whether that was told.
    waits: Option<(Wait, Mono, bool)>,
    record_told: bool,
}

impl Printer {
    fn run(mut self) {
        loop {
            match self.printing.events.try_recv() {
                Ok((at, event)) => self.event(at, &event),
                Err(TryRecvError::Empty) => {
                    self.look();
                    clock::sleep_ms(LOOK_MS);
                }
                Err(TryRecvError::Disconnected) => break,
            }
        }
        if self.shown {
            let _ = writeln!(std::io::stdout());
        }
    }

    fn event(&mut self, at: Mono, event: &Event) {
        if (self.printing.quiet && !matches!(event, Event::Trip(_))) || self.too_often(at, event) {
            return;
        }
        let text = words::event(event, &self.printing.plan);
        self.line(at, &text);
    }

    /// A whole line; a status line that stands there gives way.
    fn line(&mut self, at: Mono, text: &str) {
        let clear = if std::mem::take(&mut self.shown) { "\r\x1b[K" } else { "" };
        let mut out = std::io::stdout().lock();
        // Nobody may be reading; the drive does not depend on it.
        let _ = writeln!(out, "{clear}{:9.3} {text}", at.since_s(self.printing.origin));
        let _ = out.flush();
    }

    /// Between events: what Parked waits for, whether the record is written, and the status line.
    fn look(&mut self) {
        let now = clock::now();
        if now.since_ns(self.renewed) < RENEW_NS {
            return;
        }
        self.renewed = now;
        let Some(standing) = self.printing.board.read() else { return };
        if !self.printing.quiet {
            self.waiting(now, &standing);
        }
        if !self.record_told && self.printing.recorder.failures() > 0 {
            self.record_told = true;
            let path = self.printing.recorder.path().display().to_string();
            self.line(
                now,
                &format!("the record {path} is not written in full: free some space; the drive goes on"),
            );
        }
        if self.live {
            let line = status_line(&standing, &self.printing.plan);
            let room = tty::columns().saturating_sub(1);
            let line: String = line.chars().take(room).collect();
            let mut out = std::io::stdout().lock();
            let _ = write!(out, "\r\x1b[K{line}");
            let _ = out.flush();
            self.shown = true;
        }
    }

    /// Tells once what keeps the base parked, unless it is what a person does on the pad from moment to moment.
    fn waiting(&mut self, now: Mono, standing: &Standing) {
        let wait = standing.view.waits_for.filter(|it| standing.phase == Phase::Parked && is_lasting(it));
        match (wait, &mut self.waits) {
            (None, waits) => *waits = None,
            (Some(wait), Some((told, since, done))) if *told == wait => {
                if !*done && now.since_ns(*since) >= STANDS_NS {
                    *done = true;
                    let text = format!("parked: {}", words::wait(&wait, &self.printing.plan));
                    self.line(now, &text);
                }
            }
            (Some(wait), waits) => *waits = Some((wait, now, false)),
        }
    }

    fn too_often(&mut self, at: Mono, event: &Event) -> bool {
        let [skipped, refused, missed] = &mut self.last_told;
        let last = if matches!(event, Event::SendSkipped { .. }) {
            skipped
        } else if matches!(event, Event::FramesRefused { .. }) {
            refused
        } else if matches!(event, Event::TicksMissed { .. }) {
            missed
        } else {
            return false;
        };
        let soon = last.is_some_and(|last| at.since_ns(last) < APART_NS);
        if !soon {
            *last = Some(at);
        }
        soon
    }
}

fn is_lasting(wait: &Wait) -> bool {
    match wait {
        Wait::NoPad
        | Wait::LinkNotOpen { .. }
        | Wait::NoIdentity { .. }
        | Wait::IdentityDiffers { .. }
        | Wait::NoFeedback { .. }
        | Wait::Latched { .. }
        | Wait::Fault { .. }
        | Wait::StopInputOpen { .. } => true,
        Wait::HoldNotReleased
        | Wait::SticksNotCentred
        | Wait::ResetAtPad
        | Wait::PressSpent
        | Wait::Quitting
        | Wait::WrongPhase
        | Wait::NotStanding
        | Wait::NotLatched { .. }
        | Wait::StopDown => false,
    }
}

/// One line that says how things stand.
fn status_line(now: &Standing, plan: &Plan) -> String {
    let view = &now.view;
    let pace = plan.paces.get(usize::from(view.pace)).map_or("", |it| it.name.as_str());
    let frame = match view.frame {
        Frame::Base => "base",
        Frame::Room => "room",
    };
    let why = match (now.phase, &now.cause, &view.waits_for) {
        (Phase::Tripped, Some(cause), _) => format!("  {}", words::cause(cause, plan)),
        (Phase::Parked, _, Some(wait)) => format!("  {}", words::wait(wait, plan)),
        _ => String::new(),
    };
    format!(
        "{:8} {pace} {frame}  {:5.2} m/s {:5.2} rad/s  at ({:.2}, {:.2}) m {:.0} deg{why}",
        now.phase.name(),
        view.sent.travel_m_s(),
        view.sent.turn_rad_s,
        view.pose.x_m,
        view.pose.y_m,
        deg(view.pose.heading_rad),
    )
}
