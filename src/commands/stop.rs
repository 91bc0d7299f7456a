//! `gripline stop`: stops the base, also when the drive is dead or hung.

use std::io::ErrorKind;
use std::os::fd::{AsFd, OwnedFd};
use std::path::PathBuf;
use std::time::Duration;

use gripline::config::{LinkPlan, Plan};
use gripline::core::settings::longest_ramp_ms;
use gripline::daemon::console;
use gripline::link::{self, LinkError};
use gripline::sys::{clock, sched, tty};
use gripline::wire::{Deframer, FromDrivers, parse_from_drivers, status, stop_on_line, stop_plain};
use serde_json::{Value, json};

use super::{Exit, fail, print, warn};

/// Stop the base: through the running drive, or straight at the drivers when that does not answer.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// The base's configuration; without it only a drive that answers can be stopped
    config: Option<PathBuf>,
    /// Called by the service manager after a crash: straight to the ports, nothing to do is no failure
    #[arg(long)]
    last_act: bool,
    /// As JSON
    #[arg(long)]
    json: bool,
}

/// The drive has so long to answer.
const ANSWER_WITHIN: Duration = Duration::from_millis(200);
/// Drivers have so long to tell that they are latched.
const LATCH_WITHIN_NS: u64 = 1_000_000_000;

pub(crate) fn run(args: Args) -> Exit {
    if !args.last_act {
        let socket = match super::find_socket(args.config.as_deref()) {
            Ok(socket) => Some(socket),
            Err(exit) if args.config.is_none() => return exit,
            Err(exit @ Exit::CouldNotRun) => return exit,
            Err(_) => None,
        };
        if let Some(socket) = socket
            && let Ok(answer) = console::ask(&socket, &json!({ "ask": "stop" }), ANSWER_WITHIN)
            && answer.get("done").is_some()
            && tick_lives(&socket)
        {
            return told(&args, &json!({ "stopped_by": "drive" }), "stopped through the running drive");
        }
    }
    let Some(config) = &args.config else {
        return fail(Exit::Failed, "no drive answers; give its CONFIG to reach the drivers straight");
    };
    match super::read_plan(config) {
        Ok(plan) => straight(&args, &plan),
        Err(exit) => exit,
    }
}

/// The stop line was pulled by the console's own thread; the tick must be alive to go on with it.
fn tick_lives(socket: &std::path::Path) -> bool {
    console::ask(socket, &json!({ "ask": "status" }), ANSWER_WITHIN).is_ok_and(|it| it.get("phase").is_some())
}

/// To every port of the plan; a hung holder is ended first.
fn straight(args: &Args, plan: &Plan) -> Exit {
    let ramp_ms = longest_ramp_ms(plan);
    let mut links = Vec::new();
    let mut missed = 0;
    for link in &plan.links {
        let outcome = match take_port(link) {
            Ok(port) => stop_until_latched(&port, ramp_ms),
            Err(LinkError::Absent { .. }) if args.last_act => Outcome::Absent,
            Err(error) => {
                warn(error);
                Outcome::NoPort
            }
        };
        let fine = match outcome {
            Outcome::Latched => true,
            Outcome::Absent => args.last_act,
            Outcome::Unheard | Outcome::NoPort => false,
        };
        missed += u32::from(!fine);
        if !args.json {
            let words = match outcome {
                Outcome::Latched => "stopped and latched",
                Outcome::Unheard => "stop sent, but nobody confirmed it: see to the base",
                Outcome::NoPort | Outcome::Absent => {
                    "not reached: its drivers stop by themselves when the line is quiet"
                }
            };
            print(format_args!("link '{}': {words}\n", link.name));
        }
        links.push(json!({ "name": link.name, "latched": matches!(outcome, Outcome::Latched) }));
    }
    let answer = json!({ "stopped_by": "ports", "links": links });
    let exit = told(args, &answer, "");
    if missed > 0 { Exit::Hardware } else { exit }
}

#[derive(Clone, Copy)]
enum Outcome {
    Latched,
    Unheard,
    NoPort,
    Absent,
}

/// Opens a port; where a drive that does not answer still holds it, that process is ended.
fn take_port(link: &LinkPlan) -> Result<OwnedFd, LinkError> {
    let mut last = None;
    for attempt in 0..20 {
        match link::open(&link.name, &link.port, link.baud) {
            Ok((port, _)) => return Ok(port),
            Err(error @ LinkError::Busy { .. }) => {
                if attempt == 0
                    && let Some(holder) = link::holder(&link.port).filter(|it| it.is_gripline)
                {
                    warn(format_args!(
                        "process {} holds {} and does not answer: ending it",
                        holder.pid,
                        link.port.display()
                    ));
                    if let Err(error) = sched::kill(holder.pid) {
                        warn(format_args!("cannot end process {}: {error}; end it yourself", holder.pid));
                    }
                }
                last = Some(error);
            }
            Err(error) => return Err(error),
        }
        clock::sleep_ms(20);
    }
    Err(last.unwrap_or_else(|| LinkError::Absent { link: link.name.clone(), path: link.port.clone() }))
}

/// Writes the stop every 10 ms until the drivers tell that they are latched.
fn stop_until_latched(port: &OwnedFd, ramp_ms: u16) -> Outcome {
    let began = clock::now();
    let mut deframer = Deframer::new();
    let mut sequence = 0_u8;
    while clock::now().since_ns(began) < LATCH_WITHIN_NS {
        let _ = tty::discard_unsent(port.as_fd());
        let _ = tty::write(port.as_fd(), &stop_on_line(stop_plain(sequence, ramp_ms)));
        sequence = sequence.wrapping_add(1);
        let until = clock::now().plus_ns(10_000_000);
        while clock::now() < until {
            let mut bytes = [0; 256];
            let _ = tty::wait_readable(port.as_fd(), 5);
            match tty::read(port.as_fd(), &mut bytes) {
                Ok(n) => {
                    for &byte in bytes.get(..n).unwrap_or(&[]) {
                        if let Some(Ok(plain)) = deframer.push(byte)
                            && let Ok((_, FromDrivers::Feedback(feedback))) = parse_from_drivers(plain)
                            && feedback.status & status::LATCHED != 0
                        {
                            return Outcome::Latched;
                        }
                    }
                }
                Err(error) if error.kind() == ErrorKind::WouldBlock => {}
                Err(_) => return Outcome::Unheard,
            }
        }
    }
    Outcome::Unheard
}

fn told(args: &Args, answer: &Value, words: &str) -> Exit {
    if args.json {
        print(format_args!("{answer:#}\n"))
    } else if words.is_empty() {
        Exit::Done
    } else {
        print(format_args!("{words}\n"))
    }
}
