//! `gripline stop`: stops the base, also when the drive is dead or hung.

use std::io::ErrorKind;
use std::os::fd::{AsFd, OwnedFd};
use std::os::unix::net::UnixStream;
use std::time::Duration;

use gripline::config::{LinkPlan, Plan};
use gripline::core::settings::longest_ramp_ms;
use gripline::daemon;
use gripline::link::{self, LinkError};
use gripline::sys::{clock, sched, tty};
use gripline::wire::{Deframer, FromDrivers, parse_from_drivers, status, stop_on_line, stop_plain};
use serde_json::{Value, json};

use super::target::Target;
use super::{Exit, fail, print, warn};

/// Stop the base: through the running drive, or straight at the drivers when that does not answer.
///
/// Without CONFIG every drive that runs here is stopped, as long as it answers. With it the drivers are reached even
/// when the drive is dead or hung; one that still holds their ports is ended.
#[derive(clap::Args)]
pub(crate) struct Args {
    #[command(flatten)]
    target: Target,
    /// Use another device for a link; LINK=PATH where there are several links, once for each
    #[arg(long, value_name = "[LINK=]PATH")]
    port: Vec<String>,
    /// Called by the service manager when the drive has ended: after a failure straight to the ports; after an orderly
    /// end ($SERVICE_RESULT is `success`) nothing is left to do
    #[arg(long)]
    last_act: bool,
    /// As JSON
    #[arg(long)]
    json: bool,
}

/// The drive has so long to answer.
const ANSWER_WITHIN: Duration = Duration::from_millis(200);
/// And so long until its tick has taken the stop up.
const TRIP_WITHIN_NS: u64 = 500_000_000;
/// Drivers have so long to tell that they are latched.
const LATCH_WITHIN_NS: u64 = 1_000_000_000;
/// The stop is written so often.
const REPEAT_NS: u64 = 10_000_000;
/// A port that was held is tried again so often, so far apart.
const TRIES: u32 = 25;
const TRY_MS: u64 = 20;

pub(crate) fn run(args: Args) -> Exit {
    if args.last_act && std::env::var("SERVICE_RESULT").is_ok_and(|it| it == "success") {
        return told(&args, &json!({ "stopped_by": "nobody" }), "the drive had ended in order");
    }
    let mut plan = match args.target.plan() {
        Ok(plan) => plan,
        Err(exit) => return exit,
    };
    if let Some(plan) = &mut plan
        && let Err(exit) = super::use_ports(plan, &args.port)
    {
        return exit;
    }
    if !args.last_act && through_drives(&args, plan.as_ref()) {
        return told(&args, &json!({ "stopped_by": "drive" }), "stopped through the running drive");
    }
    match plan {
        Some(plan) => straight(&args, &plan),
        None => fail(Exit::Failed, "no drive answers; give its CONFIG to reach the drivers straight"),
    }
}

/// Through every drive that is meant; false when there is none or one does not answer.
fn through_drives(args: &Args, plan: Option<&Plan>) -> bool {
    let mut drives = args.target.listening(plan).unwrap_or_else(|error| {
        if error.kind() == ErrorKind::PermissionDenied {
            warn("no permission for the console of this drive; join the group `gripline`, or be the user that started it");
        }
        Vec::new()
    });
    let asked = drives.iter_mut().map(|it| daemon::ask(it, &json!({ "ask": "stop" }), ANSWER_WITHIN));
    let asked: Vec<bool> = asked.map(|it| it.is_ok_and(|it| it.get("done").is_some())).collect();
    !drives.is_empty() && asked.into_iter().all(|it| it) && drives.iter_mut().all(has_tripped)
}

/// The console pulls the stop line by itself; the tick must be alive to go on with it.
fn has_tripped(drive: &mut UnixStream) -> bool {
    let until = clock::now().plus_ns(TRIP_WITHIN_NS);
    while clock::now() < until {
        let Ok(status) = daemon::ask(drive, &json!({ "ask": "status" }), ANSWER_WITHIN) else { return false };
        if status.get("error").is_none() && status.get("phase").and_then(Value::as_str) == Some("Tripped") {
            return true;
        }
        clock::sleep_ms(5);
    }
    false
}

/// To every port of the plan, all at once.
fn straight(args: &Args, plan: &Plan) -> Exit {
    let ramp_ms = longest_ramp_ms(plan);
    let mut links: Vec<Straight<'_>> =
        plan.links.iter().map(|link| Straight::take(link, args, ramp_ms)).collect();
    let until = clock::now().plus_ns(LATCH_WITHIN_NS);
    while links.iter().any(|it| it.outcome == Outcome::Unheard) && clock::now() < until {
        let next = clock::now().plus_ns(REPEAT_NS);
        links.iter_mut().for_each(|it| it.stop(ramp_ms));
        while clock::now() < next {
            clock::sleep_ms(1);
            links.iter_mut().for_each(Straight::hear);
        }
    }
    let missed = links.iter().any(|it| !it.is_done(args));
    if !args.json {
        for link in &links {
            print(format_args!("link '{}': {}\n", link.plan.name, link.outcome.words()));
        }
    }
    let links: Vec<Value> = links
        .iter()
        .map(|it| json!({ "name": it.plan.name, "latched": it.outcome == Outcome::Latched }))
        .collect();
    let exit = told(args, &json!({ "stopped_by": "ports", "links": links }), "");
    if missed { Exit::Hardware } else { exit }
}

#[derive(Clone, Copy, PartialEq, Eq)]
enum Outcome {
    Latched,
    Unheard,
    NoPort,
    Absent,
}

impl Outcome {
    fn words(self) -> &'static str {
        match self {
            Self::Latched => "stopped and latched",
            Self::Unheard => "stop sent, but nobody confirmed it: see to the base",
            Self::NoPort | Self::Absent => {
                "not reached: its drivers stop by themselves when the line is quiet"
            }
        }
    }
}

/// One link, reached without a drive.
struct Straight<'plan> {
    plan: &'plan LinkPlan,
    port: Option<OwnedFd>,
    deframer: Deframer,
    sequence: u8,
    outcome: Outcome,
}

impl<'plan> Straight<'plan> {
    /// Takes the port and stops its drivers at once: the other links may take a while to be had.
    fn take(plan: &'plan LinkPlan, args: &Args, ramp_ms: u16) -> Self {
        let (port, outcome) = match take_port(plan) {
            Ok(port) => (Some(port), Outcome::Unheard),
            Err(LinkError::Absent { .. }) if args.last_act => (None, Outcome::Absent),
            Err(error) => {
                warn(error);
                (None, Outcome::NoPort)
            }
        };
        let mut link = Self { plan, port, deframer: Deframer::new(), sequence: 0, outcome };
        link.stop(ramp_ms);
        link
    }

    fn stop(&mut self, ramp_ms: u16) {
        let Some(port) = self.port.as_ref().filter(|_| self.outcome == Outcome::Unheard) else { return };
        let _ = tty::discard_unsent(port.as_fd());
        let _ = tty::write(port.as_fd(), &stop_on_line(stop_plain(self.sequence, ramp_ms)));
        self.sequence = self.sequence.wrapping_add(1);
    }

    /// Takes what has come, without waiting.
    fn hear(&mut self) {
        let Some(port) = &self.port else { return };
        let mut bytes = [0; 512];
        let got = tty::read(port.as_fd(), &mut bytes).unwrap_or(0);
        for &byte in bytes.get(..got).unwrap_or(&[]) {
            if let Some(Ok(plain)) = self.deframer.push(byte)
                && let Ok((_, FromDrivers::Feedback(feedback))) = parse_from_drivers(plain)
                && feedback.status & status::LATCHED != 0
            {
                self.outcome = Outcome::Latched;
            }
        }
    }

    fn is_done(&self, args: &Args) -> bool {
        match self.outcome {
            Outcome::Latched => true,
            Outcome::Absent => args.last_act,
            Outcome::Unheard | Outcome::NoPort => false,
        }
    }
}

/// Opens a port; where a drive that does not answer still holds it, that process is ended.
fn take_port(link: &LinkPlan) -> Result<OwnedFd, LinkError> {
    let mut tries = 0;
    loop {
        match link::open(&link.name, &link.port, link.baud) {
            Ok((port, _)) => return Ok(port),
            Err(error @ LinkError::Busy { .. }) if tries < TRIES => {
                if tries == 0 && !end_holder(link) {
                    return Err(error);
                }
            }
            Err(error) => return Err(error),
        }
        tries += 1;
        clock::sleep_ms(TRY_MS);
    }
}

/// Ends the drive that holds a port; false when it is held by something else, or cannot be ended.
fn end_holder(link: &LinkPlan) -> bool {
    let Some(holder) = link::holder(&link.port).filter(|it| it.is_gripline) else { return false };
    warn(format_args!("process {} holds {} and does not answer: ending it", holder.pid, link.port.display()));
    match sched::kill(holder.pid, link::is_gripline) {
        Ok(ended) => ended,
        Err(error) => {
            warn(format_args!(
                "cannot end process {}: {error}; end it yourself, then stop again",
                holder.pid
            ));
            false
        }
    }
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
