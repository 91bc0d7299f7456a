//! One fault on the stand-in, from a fresh start to the end of the drive.

use std::os::unix::net::UnixStream;
use std::time::Duration;

use serde_json::{Value, json};

use super::act::{self, Going, HELD_S, Refused, Target};
use super::fault::{Act, Fault, Gesture, How, Must};
use super::listen;
use super::report::Row;
use super::script::{Script, script};
use super::seen::{Seen, Struck, Watch};
use super::setup::{DrillError, Setup};
use crate::config::Plan;
use crate::core::budget::Guard;
use crate::daemon;
use crate::measure::child::{ChildError, Driving, Folder, PAD_THERE, Said, Standin, failed};
use crate::measure::truth;
use crate::sys::clock;
use crate::units::{Mono, s_to_ns};

/// The controls stay where they are for at least so long after a fault, to see that nothing moves again.
const WATCH_S: f64 = 1.8;
/// The script's clock and this one differ by less than this: the watch ends so long before hands let go.
const LET_GO_NS: u64 = 100_000_000;
/// The base is at its pace from this share on.
const AT_PACE: f64 = 0.9;

/// Provokes one fault on a stand-in of its own.
///
/// # Errors
/// When it could not be run. What was run and missed is in the row.
pub fn on_standin(setup: &mut Setup, fault: &'static Fault) -> Result<Row, DrillError> {
    let torque_off = matches!(fault.how, How::Act(Act::TakeTorqueOff));
    let bound = setup.bound(fault);
    let watch_s = WATCH_S.max(bound.map_or(0.0, |it| it.0) + 1.0);
    let press = Fault { how: How::Hands(Gesture::PressStop), ..*fault };
    let script = script(&setup.plan, setup.pace, if torque_off { &press } else { fault }, watch_s);
    let folder = Folder::new("drill")?;
    let text = if torque_off { setup.text_of_category_0()? } else { setup.text.clone() };
    let config = folder.write("base.toml", &text)?;
    let hands = folder.write("hands.csv", &script.hands)?;
    let mut standin = Standin::start(&setup.program, &config, &folder, &setup.plan)?;
    let mut arguments = Driving::ports(&folder, &setup.plan);
    arguments.extend(["--hands".into(), hands.display().to_string()]);
    let mut driving = Driving::start(&setup.program, &config, &folder, &setup.record_dir, &arguments)?;
    let began = wait_for_hands(&mut driving)?;
    arguments.splice(
        0..0,
        [config.display().to_string(), "--record-dir".into(), folder.path.display().to_string()],
    );
    let mut strike =
        Strike { setup, fault, script: &script, began, folder: &folder, arguments, went_on: true };
    let outcome = strike.play(&mut driving, &mut standin)?;
    let went_on = strike.went_on;
    let mut plan = setup.plan.clone();
    for link in &mut plan.links {
        link.port = folder.port(&link.name);
    }
    let mut row = finish(setup, &plan, fault, &script, outcome, driving, (began, went_on))?;
    standin.end();
    forgive_standin(&mut row, &folder, began.plus_ns(s_to_ns(script.strike_s)))?;
    Ok(row)
}

/// A miss on a machine that held the stand-in up tells nothing of the drive.
fn forgive_standin(row: &mut Row, folder: &Folder, struck: Mono) -> Result<(), DrillError> {
    if row.ok == Some(false) {
        let truth = truth::read(&folder.trace()).map_err(failed("read the stand-in's trace"))?;
        let struck_s = crate::units::ns_to_s(struck.ns());
        if let Some(why) = truth::held_up(&truth, struck_s - 0.2, struck_s + WATCH_S) {
            row.ok = None;
            row.too_late = true;
            row.note = format!("{why}; {}", row.note);
        }
    }
    Ok(())
}

fn wait_for_hands(driving: &mut Driving) -> Result<Mono, DrillError> {
    let until = clock::now().plus_ns(10_000_000_000);
    let part = |what: &str| ChildError::Part { part: "the drive", what: what.into() };
    loop {
        match driving.said(Duration::from_millis(20)) {
            Said::Line(line) if line.contains(PAD_THERE) => return Ok(clock::now()),
            Said::Line(_) => {}
            Said::Nothing if clock::now() < until => {}
            Said::Nothing => return Err(part("did not begin within ten seconds").into()),
            Said::Ended => return Err(part("ended at once").into()),
        }
    }
}

struct Strike<'a> {
    setup: &'a Setup,
    fault: &'static Fault,
    script: &'a Script,
    began: Mono,
    folder: &'a Folder,
    arguments: Vec<String>,
    /// Whenever it was asked, it drove on at its pace.
    went_on: bool,
}

/// What striking came to.
struct Done {
    struck: Struck,
    /// It could not be done here, or not be judged.
    unjudged: Option<String>,
    /// It was done and something else went wrong.
    missed: Option<String>,
    killed: bool,
    /// This machine is too slow.
    too_late: bool,
}

impl Strike<'_> {
    fn at(&self, seconds: f64) -> Mono {
        self.began.plus_ns(s_to_ns(seconds))
    }

    fn play(&mut self, driving: &mut Driving, standin: &mut Standin) -> Result<Done, DrillError> {
        let in_ready = matches!(self.fault.how, How::Standin(harm) if harm.strikes_in_ready());
        self.let_run(driving, self.at(self.script.strike_s - 0.05));
        let mut out = Done {
            struck: Struck::Script(self.script.strike_s),
            unjudged: None,
            missed: None,
            killed: false,
            too_late: false,
        };
        if !in_ready && !self.drives_on() {
            out.unjudged = Some("the base was not at its pace in time".into());
            out.too_late = true;
        }
        self.let_run(driving, self.at(self.script.strike_s));
        let going = match self.fault.how {
            How::Hands(_) | How::Act(Act::TakeTorqueOff) => Going::Nothing,
            How::Standin(harm) => {
                out.struck = Struck::At(clock::now());
                standin.say(&harm.line(&self.setup.plan, self.setup.pace));
                Going::Nothing
            }
            How::Act(what) => {
                out.struck = Struck::At(clock::now());
                out.killed = what == Act::Kill;
                let target = Target {
                    program: &self.setup.program,
                    pid: driving.pid(),
                    socket: self.folder.socket(),
                    arguments: self.arguments.clone(),
                };
                match act::act(what, &target) {
                    Ok(going) => going,
                    Err(Refused::Here(why)) => {
                        out.unjudged = Some(why);
                        Going::Nothing
                    }
                    Err(Refused::Missed(why)) => {
                        out.missed = Some(why);
                        Going::Nothing
                    }
                }
            }
        };
        if out.killed {
            // The drivers are to be heard from the first moment on.
            return Ok(out);
        }
        let held_to = clock::now().plus_ns(s_to_ns(HELD_S));
        while clock::now() < held_to {
            self.let_run(driving, clock::now().plus_ns(40_000_000));
            if self.fault.must == Must::GoOn {
                self.went_on &= self.drives_on();
            }
        }
        going.end();
        let watch_to = self.at(self.script.let_go_s - 0.3);
        self.let_run(driving, watch_to);
        if self.fault.must == Must::GoOn {
            self.went_on &= self.drives_on();
        }
        // The line is sound again for the rest: nothing may move by that either.
        standin.say("clear");
        Ok(out)
    }

    fn let_run(&self, driving: &mut Driving, until: Mono) {
        loop {
            let left_ns = until.since_ns(clock::now());
            if left_ns == 0 {
                return;
            }
            let wait = Duration::from_nanos(left_ns.min(20_000_000));
            if driving.said(wait) == Said::Ended {
                clock::sleep_until(until);
            }
        }
    }

    fn drives_on(&self) -> bool {
        let within = Duration::from_millis(300);
        let status = UnixStream::connect(self.folder.socket())
            .and_then(|mut it| daemon::ask(&mut it, &json!({ "ask": "status" }), within));
        status.is_ok_and(|it| is_at_pace(&it, self.setup.pace_m_s()))
    }
}

/// Whether a status tells of a base that drives at its pace.
pub(super) fn is_at_pace(status: &Value, pace_m_s: f64) -> bool {
    let number = |key: &str| status.pointer(key).and_then(Value::as_f64).unwrap_or(0.0);
    let travel_m_s = libm::hypot(number("/sent/x_m_s"), number("/sent/y_m_s"));
    status.get("phase").and_then(Value::as_str) == Some("Driving") && travel_m_s >= AT_PACE * pace_m_s
}

/// Waits for the drive's end, reads its record and judges.
fn finish(
    setup: &mut Setup,
    plan: &Plan,
    fault: &'static Fault,
    script: &Script,
    outcome: Done,
    mut driving: Driving,
    (began, went_on): (Mono, bool),
) -> Result<Row, DrillError> {
    let let_go = began.plus_ns(s_to_ns(script.let_go_s));
    let mut dead = None;
    if outcome.killed {
        // The record may lack the last 100 ms; the drivers tell the rest to whoever opens their ports.
        dead = Some(listen_to_the_end(plan, &mut driving, outcome.struck, let_go)?);
    }
    let ended = wait_for_end(&mut driving, began.plus_ns(s_to_ns(script.end_s + 8.0)));
    let mut verdict = Verdict { unjudged: outcome.unjudged, missed: outcome.missed.into_iter().collect() };
    if !outcome.killed && ended != Some(true) {
        verdict.missed.push("the drive did not end in order".into());
    }
    let run = driving
        .run
        .clone()
        .ok_or(ChildError::Part { part: "the drive", what: "ended without a run file".into() })?;
    let seen = match dead {
        Some((seen, heard)) => {
            verdict.unjudged = verdict.unjudged.or(heard.err());
            seen
        }
        None => Watch::read(&run, plan, outcome.struck, Some(before_ns(let_go, LET_GO_NS)))?.seen,
    };
    let mut row = judge(setup, fault, &seen, verdict, went_on);
    row.run = Some(run);
    row.too_late |= outcome.too_late;
    Ok(row)
}

/// The moment so long before.
fn before_ns(at: Mono, ns: u64) -> Mono {
    Mono::from_ns(at.ns().saturating_sub(ns))
}

/// What a killed drive left in its record, and what the drivers tell after it until `until`.
pub(super) fn listen_to_the_end(
    plan: &Plan,
    driving: &mut Driving,
    struck: Struck,
    until: Mono,
) -> Result<(Seen, Result<(), String>), DrillError> {
    let _ = driving.wait();
    while driving.said(Duration::ZERO) != Said::Ended {}
    let run = driving
        .run
        .as_ref()
        .ok_or(ChildError::Part { part: "the drive", what: "ended without a run file".into() })?;
    let mut watch = Watch::read(run, plan, struck, None)?;
    let heard = listen::after_the_drive(plan, &mut watch, until);
    Ok((watch.seen, heard))
}

/// Whether it ended in order; `None` when it had to be killed.
fn wait_for_end(driving: &mut Driving, until: Mono) -> Option<bool> {
    while clock::now() < until {
        let _ = driving.said(Duration::from_millis(10));
        if let Some(status) = driving.ended() {
            while driving.said(Duration::from_millis(50)) != Said::Ended {}
            return Some(status.success());
        }
    }
    driving.kill();
    None
}

/// What is already known to be wrong.
#[derive(Default)]
pub(super) struct Verdict {
    pub(super) unjudged: Option<String>,
    pub(super) missed: Vec<String>,
}

/// Holds what was seen against what must be.
pub(super) fn judge(
    setup: &mut Setup,
    fault: &'static Fault,
    seen: &Seen,
    mut verdict: Verdict,
    went_on: bool,
) -> Row {
    let cause = seen.decided.as_ref().map(|it| it.1.clone());
    let stops = match fault.must {
        Must::Stop => true,
        Must::GoOn => false,
        Must::Either => cause.is_some(),
    };
    // What of it gets through is chance: then only the decision can be counted from.
    let from = match (fault.must, &seen.decided) {
        (Must::Either, Some((decided, _))) => Some(*decided),
        _ => seen.struck,
    };
    let since = |at: Option<Mono>| at.zip(from).map(|(at, from)| at.since_s(from));
    let standstill_s = since(seen.standstill).filter(|_| !seen.blind && stops);
    let way_m = if fault.must == Must::Either { seen.after_decision_m } else { seen.way_m };
    let distance_m = (stops && seen.standstill.is_some()).then_some(way_m);
    if matches!(fault.how, How::Act(Act::TakeTorqueOff)) && verdict.unjudged.is_none() {
        match roll_out_m_s2(seen) {
            Some(coast) => setup.rolls_out_at(coast),
            None => verdict.unjudged = Some("the base did not roll far enough to tell".into()),
        }
    }
    let bound = stops.then(|| setup.bound(fault)).flatten();
    let mut note = Vec::new();
    if stops {
        must_stop(fault, seen, (standstill_s, distance_m, bound), &mut verdict, &mut note);
    } else if fault.must == Must::GoOn && (!went_on || cause.as_deref().is_some_and(|it| it != "release")) {
        verdict.missed.push("the drive did not go on as if nothing were".into());
    }
    let hangs = fault.guards.contains(&Guard::LateTick) || fault.how == How::Act(Act::Suspend);
    let too_late = !hangs && cause.as_deref().is_some_and(|it| it == "late-tick" || it == "no-tick");
    if too_late {
        verdict.unjudged.get_or_insert_with(|| "a tick of its own came too late on this machine".into());
    }
    if stops && bound.is_none() {
        note.push("no budget: `coast_m_s2` is not known".into());
    }
    let ok = match (&verdict.unjudged, verdict.missed.is_empty()) {
        (Some(why), _) => {
            note.push(why.clone());
            None
        }
        (None, true) => Some(true),
        (None, false) => {
            note.append(&mut verdict.missed);
            Some(false)
        }
    };
    Row {
        fault: fault.name,
        what: fault.what,
        pace: setup.pace_name().into(),
        first_stop_s: since(seen.first_stop).filter(|_| stops),
        standstill_s,
        distance_m,
        budget_s: bound.map(|it| it.0),
        budget_m: bound.map(|it| it.1),
        cause,
        ok,
        note: note.join("; "),
        run: None,
        too_late,
        sent: seen.sent.clone(),
        measured: seen.measured.clone(),
    }
}

type Measured = (Option<f64>, Option<f64>, Option<(f64, f64)>);

fn must_stop(
    fault: &Fault,
    seen: &Seen,
    (standstill_s, distance_m, bound): Measured,
    verdict: &mut Verdict,
    note: &mut Vec<String>,
) {
    let killed = matches!(fault.how, How::Act(Act::Kill));
    if seen.decided.is_none() && !killed {
        verdict.missed.push("the drive decided nothing".into());
    }
    match (seen.standstill, seen.blind) {
        (None, _) => verdict.missed.push("it was never seen to stand".into()),
        (Some(_), true) => note.push("standstill behind the cut feedback: when is not seen".into()),
        (Some(_), false) => {}
    }
    if let Some((budget_s, budget_m)) = bound {
        if standstill_s.is_some_and(|it| it > budget_s) {
            verdict.missed.push("later than its budget".into());
        }
        if distance_m.is_some_and(|it| it > budget_m) {
            verdict.missed.push("farther than its budget".into());
        }
    }
    if seen.moved_again {
        verdict.missed.push("IT MOVED AGAIN".into());
    }
}

/// Deceleration of the base as it rolls out: the lower of the one that the way tells and the one that the time tells,
/// since the budget counts with it for both.
fn roll_out_m_s2(seen: &Seen) -> Option<f64> {
    let (decided, _) = seen.decided.as_ref()?;
    let struck = seen.struck?;
    let from_s = decided.since_s(struck);
    let after: Vec<_> = seen.measured.iter().filter(|it| it.t_s >= from_s).collect();
    let v = after.first()?.m_s;
    // Near standstill the encoders' steps and dry friction tell little.
    let end = after.iter().position(|it| it.m_s <= 0.1 * v)?;
    let part = after.get(..=end)?;
    let (first, last) = (part.first()?, part.last()?);
    let seconds = last.t_s - first.t_s;
    let way: f64 = part
        .windows(2)
        .map(|it| match it {
            [a, b] => (a.m_s + b.m_s) / 2.0 * (b.t_s - a.t_s),
            _ => 0.0,
        })
        .sum();
    let w = last.m_s;
    let (by_time, by_way) = ((v - w) / seconds, (v * v - w * w) / (2.0 * way));
    (v > 0.05 && by_time.is_finite() && by_way.is_finite()).then_some(by_time.min(by_way))
}
