//! One fault on a real base: a person drives and does what has to be done by hand, the drill watches and measures.

use std::os::unix::net::UnixStream;
use std::time::Duration;

use serde_json::json;

use super::act::{self, Going, HELD_S, Refused, Target};
use super::fault::{Act, Fault, How, Must, Real};
use super::one::{Verdict, is_at_pace, judge, listen_to_the_end};
use super::report::Row;
use super::seen::{Seen, Struck, Watch};
use super::setup::{DrillError, Setup};
use crate::daemon;
use crate::measure::child::{ChildError, Driving, Folder, Said};
use crate::sys::clock;
use crate::sys::disturb::{self, Signal};

/// What a person answers.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Answer {
    /// Go on.
    Go,
    /// Leave this one out.
    Skip,
    /// Leave all that is left out.
    End,
}

/// The people beside the base.
pub trait People {
    /// Tells them something, in a line.
    fn tell(&mut self, what: &str);
    /// Asks whether to go on.
    fn ask(&mut self, what: &str) -> Answer;
}

/// How a real base is drilled, beyond its configuration.
#[derive(Clone, Debug, Default)]
pub struct OnBase {
    /// Arguments for each drive: ports, scripted hands.
    pub arguments: Vec<String>,
}

/// The base must be at its pace for so long before a fault.
const EVEN_NS: u64 = 400_000_000;
/// So long the people have to drive, and then to do what they are told.
const PATIENCE_NS: u64 = 60_000_000_000;
/// And so long after a stop they are watched for motion that must not be.
const WATCH_NS: u64 = 1_800_000_000;

/// Provokes one fault together with the people there; `None`: they want to end.
///
/// # Errors
/// When it could not be run.
pub fn on_base(
    setup: &mut Setup,
    fault: &'static Fault,
    with: &OnBase,
    people: &mut dyn People,
) -> Result<Option<Row>, DrillError> {
    let unjudged = |setup: &mut Setup, why: &str| {
        let verdict = Verdict { unjudged: Some(why.into()), missed: Vec::new() };
        judge(setup, fault, &Seen::default(), verdict, true)
    };
    if fault.real == Real::StandinOnly {
        return Ok(Some(unjudged(setup, "for the stand-in alone")));
    }
    match people.ask(&format!("{}: {}", fault.name, fault.what)) {
        Answer::Go => {}
        Answer::Skip => return Ok(Some(unjudged(setup, "left out"))),
        Answer::End => return Ok(None),
    }
    let folder = Folder::new("drill")?;
    let text = if fault.how == How::Act(Act::TakeTorqueOff) {
        setup.text_of_category_0()?
    } else {
        setup.text.clone()
    };
    let config = folder.write("base.toml", &text)?;
    let mut driving = Driving::start(&setup.program, &config, &folder, &setup.record_dir, &with.arguments)?;
    people.tell(&format!(
        "reset what is tripped, then ready, hold, and drive straight ahead at pace '{}' with a full stick; keep it there",
        setup.pace_name()
    ));
    if !until_at_pace(setup, &folder, &mut driving, people)? {
        return Ok(Some(unjudged(setup, "the base was not driven at its pace within a minute")));
    }
    let outcome = strike(setup, fault, with, &config.display().to_string(), &folder, &mut driving, people);
    people.tell("let go of everything; nothing may move until you press hold again");
    let row = look(setup, fault, driving, outcome)?;
    people.tell(&row.line());
    Ok(Some(row))
}

/// Passes the drive's words on until the base has been at its pace for a while.
fn until_at_pace(
    setup: &Setup,
    folder: &Folder,
    driving: &mut Driving,
    people: &mut dyn People,
) -> Result<bool, DrillError> {
    let until = clock::now().plus_ns(PATIENCE_NS);
    let mut since = None;
    while clock::now() < until {
        match driving.said(Duration::from_millis(20)) {
            Said::Line(line) => people.tell(&format!("    {line}")),
            Said::Nothing => {}
            Said::Ended => {
                return Err(ChildError::Part { part: "the drive", what: "ended".into() }.into());
            }
        }
        if !drives(setup, folder) {
            since = None;
        } else if clock::now().since_ns(*since.get_or_insert_with(clock::now)) > EVEN_NS {
            return Ok(true);
        }
    }
    Ok(false)
}

fn drives(setup: &Setup, folder: &Folder) -> bool {
    let within = Duration::from_millis(300);
    let status = UnixStream::connect(folder.socket())
        .and_then(|mut it| daemon::ask(&mut it, &json!({ "ask": "status" }), within));
    status.is_ok_and(|it| is_at_pace(&it, setup.pace_m_s()))
}

/// What striking came to.
struct Done {
    struck: Struck,
    verdict: Verdict,
    killed: bool,
    went_on: bool,
}

fn strike(
    setup: &Setup,
    fault: &'static Fault,
    with: &OnBase,
    config: &str,
    folder: &Folder,
    driving: &mut Driving,
    people: &mut dyn People,
) -> Done {
    let mut done =
        Done { struck: Struck::AsTheGuardKnows, verdict: Verdict::default(), killed: false, went_on: true };
    let mut going = Going::Nothing;
    match (fault.real, fault.how) {
        (Real::Person(what), _) => {
            people.tell(&format!("NOW: {what}"));
            if !until_stopped(setup, folder, driving, people) {
                done.verdict.unjudged = Some("nothing was seen within a minute".into());
            }
            return done;
        }
        (Real::Itself, How::Act(what)) => {
            done.killed = what == Act::Kill;
            done.struck = Struck::At(clock::now());
            let record = folder.path.display().to_string();
            let mut arguments = vec![config.to_owned(), "--record-dir".into(), record];
            arguments.extend(with.arguments.iter().cloned());
            let target =
                Target { program: &setup.program, pid: driving.pid(), socket: folder.socket(), arguments };
            match act::act(what, &target) {
                Ok(it) => going = it,
                Err(Refused::Here(why)) => done.verdict.unjudged = Some(why),
                Err(Refused::Missed(why)) => done.verdict.missed.push(why),
            }
        }
        (Real::Itself | Real::StandinOnly, _) => {}
    }
    if done.killed {
        return done;
    }
    let until = clock::now().plus_ns(crate::units::s_to_ns(HELD_S));
    while clock::now() < until {
        let _ = driving.said(Duration::from_millis(40));
        if fault.must == Must::GoOn {
            done.went_on &= drives(setup, folder);
        }
    }
    going.end();
    done
}

/// Passes the drive's words on until it does not drive any more.
fn until_stopped(setup: &Setup, folder: &Folder, driving: &mut Driving, people: &mut dyn People) -> bool {
    let until = clock::now().plus_ns(PATIENCE_NS);
    while clock::now() < until {
        match driving.said(Duration::from_millis(20)) {
            Said::Line(line) => people.tell(&format!("    {line}")),
            Said::Nothing => {}
            Said::Ended => return true,
        }
        if !drives(setup, folder) {
            return true;
        }
    }
    false
}

/// Watches a little longer, ends the drive, reads its record and judges.
fn look(
    setup: &mut Setup,
    fault: &'static Fault,
    mut driving: Driving,
    done: Done,
) -> Result<Row, DrillError> {
    let watch_to = clock::now().plus_ns(WATCH_NS);
    let Done { struck, mut verdict, killed, went_on } = done;
    let seen = if killed {
        let (seen, heard) = listen_to_the_end(&setup.plan, &mut driving, struck, watch_to)?;
        verdict.unjudged = verdict.unjudged.or(heard.err());
        seen
    } else {
        clock::sleep_until(watch_to);
        let _ = disturb::signal(driving.pid(), Signal::Terminate);
        let end_by = clock::now().plus_ns(5_000_000_000);
        while driving.ended().is_none() && clock::now() < end_by {
            let _ = driving.said(Duration::from_millis(20));
        }
        driving.kill();
        let run = driving
            .run
            .as_ref()
            .ok_or(ChildError::Part { part: "the drive", what: "ended without a run file".into() })?;
        // In a drive that went on, the people let go of hold at last; that release is none of this fault.
        let until = (fault.must == Must::Stop).then_some(watch_to);
        Watch::read(run, &setup.plan, struck, until)?.seen
    };
    let mut row = judge(setup, fault, &seen, verdict, went_on);
    row.run.clone_from(&driving.run);
    Ok(row)
}
