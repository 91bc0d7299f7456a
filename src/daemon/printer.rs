//! Lines for the terminal, on a thread of its own: the tick hands events over and never waits for a terminal.

use std::io::{IsTerminal, Write};
use std::sync::Arc;

use crossbeam_channel::Receiver;

use crate::config::Plan;
use crate::core::io::{Outputs, Phase};
use crate::core::{Event, words};
use crate::shaping::Frame;
use crate::units::{Mono, deg};

/// What the tick hands over.
#[derive(Clone, Debug)]
pub(super) enum Print {
    /// Something happened.
    Event(Mono, Event),
    /// How things stand, a few times a second.
    Status(Outputs),
}

/// Starts the printer; it ends when the tick does.
pub(super) fn start(
    plan: Arc<Plan>,
    take: Receiver<Print>,
    origin: Mono,
    quiet: bool,
) -> std::io::Result<std::thread::JoinHandle<()>> {
    std::thread::Builder::new().name("printer".into()).stack_size(256 * 1024).spawn(move || {
        let live = std::io::stdout().is_terminal();
        let mut shown = false;
        let mut skipped = Skipped::default();
        for print in take {
            let mut out = std::io::stdout().lock();
            // Nobody may be reading; the drive does not depend on it.
            let _ = match print {
                Print::Event(at, event) => {
                    if (quiet && !matches!(event, Event::Trip(_))) || skipped.too_often(at, &event) {
                        continue;
                    }
                    let clear = if shown { "\r\x1b[K" } else { "" };
                    shown = false;
                    writeln!(out, "{clear}{:9.3} {}", at.since_s(origin), words::event(&event, &plan))
                }
                Print::Status(status) if live && !quiet => {
                    shown = true;
                    write!(out, "\r\x1b[K{}", status_line(&status, &plan))
                }
                Print::Status(_) => Ok(()),
            };
            let _ = out.flush();
        }
        if shown {
            let _ = writeln!(std::io::stdout());
        }
    })
}

/// Events that can come every tick are told once a second.
#[derive(Default)]
struct Skipped {
    last: Option<Mono>,
}

impl Skipped {
    fn too_often(&mut self, at: Mono, event: &Event) -> bool {
        if !matches!(
            event,
            Event::SendSkipped { .. } | Event::FramesRefused { .. } | Event::TicksMissed { .. }
        ) {
            return false;
        }
        let soon = self.last.is_some_and(|last| at.since_ns(last) < 1_000_000_000);
        if !soon {
            self.last = Some(at);
        }
        soon
    }
}

/// One line that says how things stand.
pub(super) fn status_line(out: &Outputs, plan: &Plan) -> String {
    let view = &out.view;
    let pace = plan.paces.get(usize::from(view.pace)).map_or("", |it| it.name.as_str());
    let frame = match view.frame {
        Frame::Base => "base",
        Frame::Room => "room",
    };
    let why = match (out.phase, &out.cause, &view.waits_for) {
        (Phase::Tripped, Some(cause), _) => format!("  {}", words::cause(cause, plan)),
        (Phase::Parked, _, Some(wait)) => format!("  {}", words::wait(wait, plan)),
        _ => String::new(),
    };
    format!(
        "{:8} {pace} {frame}  {:5.2} m/s {:5.2} rad/s  at ({:.2}, {:.2}) m {:.0} deg{why}",
        out.phase.name(),
        view.sent.travel_m_s(),
        view.sent.turn_rad_s,
        view.pose.x_m,
        view.pose.y_m,
        deg(view.pose.heading_rad),
    )
}
