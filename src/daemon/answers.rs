//! What the console answers.

use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::Ordering;

use serde_json::{Value, json};

use super::board::{Board, Standing};
use super::gather::Asked;
use super::request::{Request, request};
use crate::config::Plan;
use crate::core::io::{Phase, Puller};
use crate::core::words;
use crate::link::StopLine;
use crate::record::Recorder;
use crate::shaping::Frame;
use crate::units::Mono;

/// A reset takes the drivers at most half a second; the answer waits a little longer.
const RESET_WITHIN_NS: u64 = 800_000_000;
/// A tick that is older than this does not count as alive.
const ALIVE_NS: u64 = 200_000_000;

/// What the console needs of the drive.
pub(super) struct Shared {
    pub(super) plan: Arc<Plan>,
    pub(super) stop: StopLine,
    pub(super) asked: Arc<Asked>,
    pub(super) board: Arc<Board>,
    pub(super) run: PathBuf,
    pub(super) recorder: Recorder,
}

/// What becomes of a request.
pub(super) enum Answer {
    Now(Value),
    Later(Pending),
}

/// A reset that the tick has still to take or to refuse.
pub(super) struct Pending {
    asked: Mono,
    cause: Option<String>,
}

impl Shared {
    /// Answers one line.
    pub(super) fn answer(&self, line: &[u8], now: Mono) -> Answer {
        match request(line) {
            Ok(Request::Status) => Answer::Now(self.status(now)),
            Ok(Request::Stop) => {
                self.asked.stop.store(true, Ordering::Relaxed);
                // At once, without waiting for the tick.
                let pull = self.stop.pull(Puller::Console);
                Answer::Now(json!({ "done": "stop", "pull": pull.number, "pid": std::process::id() }))
            }
            Ok(Request::Reset { in_sight }) => self.reset(in_sight, now),
            Err(why) => refused(&why, None),
        }
    }

    fn reset(&self, in_sight: bool, now: Mono) -> Answer {
        let Some(standing) = self.board.read().filter(|it| now.since_ns(it.at) < ALIVE_NS) else {
            return refused("no tick answers; `gripline stop CONFIG` reaches the drivers all the same", None);
        };
        let cause = standing.cause.as_ref().map(|it| words::cause(it, &self.plan));
        if !self.plan.console.reset {
            return refused(
                "the console may not reset here; reset at the pad, or set `reset = true` in [console]",
                cause,
            );
        }
        if !in_sight {
            return refused("a reset is only for somebody who sees the base: say --in-sight", cause);
        }
        if standing.phase != Phase::Tripped {
            return refused("nothing to reset: the base is not tripped", None);
        }
        self.asked.reset.store(true, Ordering::Relaxed);
        Answer::Later(Pending { asked: now, cause })
    }

    fn status(&self, now: Mono) -> Value {
        let pid = std::process::id();
        let Some(standing) = self.board.read() else {
            return json!({ "error": "the first tick has not come yet", "base": self.plan.name, "pid": pid });
        };
        let mut answer = self.shown(&standing);
        let age_ns = now.since_ns(standing.at);
        if let Some(answer) = answer.as_object_mut() {
            answer.insert("tick_age_s".into(), json!(crate::units::ns_to_s(age_ns)));
            answer.insert("pid".into(), json!(pid));
            if age_ns > ALIVE_NS {
                let why = format!(
                    "no tick for {:.1} s; `gripline stop CONFIG` reaches the drivers all the same",
                    crate::units::ns_to_s(age_ns)
                );
                answer.insert("error".into(), json!(why));
            }
        }
        answer
    }

    fn shown(&self, now: &Standing) -> Value {
        let (view, plan) = (&now.view, &self.plan);
        let links: Vec<Value> = plan
            .links
            .iter()
            .enumerate()
            .map(|(index, link)| {
                let age = view.feedback_age_s.get(index).copied().filter(|it| it.is_finite());
                let round_trip = view.round_trip_s.get(index).copied().filter(|it| it.is_finite());
                json!({ "name": link.name, "port": link.port.display().to_string(), "feedback_age_s": age, "round_trip_s": round_trip })
            })
            .collect();
        json!({
            "base": plan.name,
            "phase": now.phase.name(),
            "cause": now.cause.as_ref().map(|it| words::cause(it, plan)),
            "cause_code": now.cause.as_ref().map(crate::core::Cause::code),
            "clears": now.cause.as_ref().map(|it| words::clears(it, plan)),
            "waits_for": view.waits_for.as_ref().map(|it| words::wait(it, plan)),
            "frame": match view.frame { Frame::Base => "base", Frame::Room => "room" },
            "pace": plan.paces.get(usize::from(view.pace)).map(|it| it.name.as_str()),
            "sent": { "turn_rad_s": view.sent.turn_rad_s, "x_m_s": view.sent.x_m_s, "y_m_s": view.sent.y_m_s },
            "pose": { "x_m": view.pose.x_m, "y_m": view.pose.y_m, "heading_rad": view.pose.heading_rad },
            "measured_rad_s": view.measured_rad_s.as_slice(),
            "skid_rad_s": view.skid_rad_s,
            "links": links,
            "run": self.run.display().to_string(),
            "record_failures": self.recorder.failures(),
        })
    }
}

impl Pending {
    /// The answer, once there is one.
    pub(super) fn look(&self, now: Mono, shared: &Shared) -> Option<Value> {
        let plan = &shared.plan;
        let standing = shared.board.read()?;
        if standing.at > self.asked && standing.phase != Phase::Tripped {
            return Some(json!({ "done": "reset", "cause": self.cause, "phase": standing.phase.name() }));
        }
        let refusal = standing.refused.filter(|(at, _)| *at > self.asked);
        let why = match (refusal, standing.view.waits_for) {
            (Some((_, wait)), _) => words::wait(&wait, plan),
            _ if now.since_ns(self.asked) < RESET_WITHIN_NS => return None,
            (None, Some(wait)) => words::wait(&wait, plan),
            (None, None) => "the drivers did not unlatch in time".into(),
        };
        Some(json!({ "error": format!("reset refused: {why}"), "cause": self.cause }))
    }
}

fn refused(why: &str, cause: Option<String>) -> Answer {
    Answer::Now(json!({ "error": why, "cause": cause }))
}
