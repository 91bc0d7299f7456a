//! Why the base was stopped, and what clears it.

use super::super::Cause;
use super::super::cause::{DriverTrouble, StopBy};
use super::{bits, greatest_rad_s, link, port, wheel};
use crate::config::Plan;
use crate::wire::status;

/// Why the base was stopped, with the values that decided it.
#[must_use]
pub fn cause(cause: &Cause, plan: &Plan) -> String {
    let guard = &plan.guard;
    match cause {
        Cause::StopAsked(by) => match by {
            StopBy::PadButton => format!("stop asked at the pad ({:?})", plan.pad.stop),
            StopBy::Squeeze => format!("stop asked at the pad ({:?} squeezed through)", plan.pad.hold),
            StopBy::Console => "stop asked at the console".into(),
            StopBy::DriverInput { link: it } => format!("stop input of {} opened", link(plan, *it)),
        },
        Cause::PadGone => "gamepad unplugged or not answering".into(),
        Cause::FeedbackQuiet { link: it, age_ms } => {
            let limit = guard.feedback_quiet_ms;
            format!("no feedback from {} for {age_ms} ms (limit {limit} ms)", link(plan, *it))
        }
        Cause::NotHeard { link: it, age_ms } => {
            let limit = guard.not_heard_ms;
            format!(
                "{} has acknowledged nothing sent within the last {age_ms} ms (limit {limit} ms)",
                link(plan, *it)
            )
        }
        Cause::WriteFailed { link: it, gone } => {
            let how = if *gone { "is gone" } else { "has taken no bytes for longer than a tick" };
            format!("port {} of {} {how}", port(plan, *it), link(plan, *it))
        }
        Cause::LateTick { late_ms } => format!("a tick came {late_ms} ms late (limit {} ms)", guard.late_ms),
        Cause::NoTick => format!("no tick for more than {} ms, seen by the sentinel", guard.late_ms),
        Cause::DriverSays { link: it, what } => format!("{} {}", link(plan, *it), trouble(*what)),
        Cause::NotFollowing { wheel: it, commanded_rad_s, measured_rad_s } => format!(
            "{} does not follow: told {commanded_rad_s:.2} rad/s, measured {measured_rad_s:.2} rad/s, for {} s more \
             than {:.2} rad/s apart",
            wheel(plan, *it),
            guard.follow_s,
            guard.follow_share * greatest_rad_s(plan, *it)
        ),
        Cause::NotSlowing { wheel: it, commanded_rad_s, measured_rad_s } => format!(
            "{} does not slow down in the stop: should be at {:.2} rad/s, measured {measured_rad_s:.2} rad/s; torque \
             taken off",
            wheel(plan, *it),
            commanded_rad_s.abs()
        ),
        Cause::Runaway { wheel: it, measured_rad_s } => format!(
            "{} runs away: told to stand, measured {measured_rad_s:.2} rad/s (limit {:.2} rad/s); torque taken off",
            wheel(plan, *it),
            guard.runaway_share * greatest_rad_s(plan, *it)
        ),
        Cause::Skid { wheel: it, residual_rad_s } => {
            format!("{} for {} s: residual {residual_rad_s:.2} rad/s", skids(plan, *it), guard.skid_s)
        }
        Cause::StopOverdue { allowed_ms } => format!("not at a standstill {allowed_ms} ms after the release"),
        Cause::SecondSignal => "a second signal before the end".into(),
        Cause::Panic => "a part of the program failed".into(),
        Cause::FoundLatched { link: it, status } => {
            let how = if *status & status::LATCHED == 0 { "with torque on" } else { "latched" };
            format!("{} was found {how} ({})", link(plan, *it), bits(*status))
        }
        Cause::NotCleared { link: it } => {
            format!("{} did not unlatch within 0.5 s of the reset", link(plan, *it))
        }
    }
}

fn trouble(what: DriverTrouble) -> String {
    match what {
        DriverTrouble::Fault { status } => format!("reports a fault: {}", bits(status)),
        DriverTrouble::LatchNotOurs { status } => format!("has latched by itself: {}", bits(status)),
        DriverTrouble::Restarted => "has started anew".into(),
        DriverTrouble::IdentityChanged => "says that it is somebody else than before".into(),
    }
}

/// Who skids, as far as can be told.
pub(super) fn skids(plan: &Plan, it: Option<u8>) -> String {
    it.map_or_else(|| "the wheels skid against each other".into(), |it| format!("{} skids", wheel(plan, it)))
}

/// What clears a trip.
#[must_use]
pub fn clears(cause: &Cause, plan: &Plan) -> String {
    let first = match cause {
        Cause::StopAsked(by) => match by {
            StopBy::PadButton | StopBy::Squeeze | StopBy::Console => "",
            StopBy::DriverInput { .. } => "close the stop input, then ",
        },
        Cause::SecondSignal => return "start the program again".into(),
        Cause::PadGone => "plug the gamepad in again, then ",
        Cause::FeedbackQuiet { .. } | Cause::NotHeard { .. } => {
            "see to the cable and the drivers' power, then "
        }
        Cause::WriteFailed { .. } => "plug the adaptor in again, then ",
        Cause::LateTick { .. } | Cause::NoTick => "find what keeps this computer busy, then ",
        Cause::DriverSays { .. } | Cause::FoundLatched { .. } | Cause::NotCleared { .. } => {
            "see to the drivers, then "
        }
        Cause::NotFollowing { .. }
        | Cause::NotSlowing { .. }
        | Cause::Runaway { .. }
        | Cause::StopOverdue { .. } => "see to wheel, motor and encoder, then ",
        Cause::Skid { .. } => "see to wheels and floor, then ",
        Cause::Panic => return "start the program again, and keep the run file for a report".into(),
    };
    format!(
        "{first}hold {:?} for {} s with the hold control released and the sticks centred",
        plan.pad.reset, plan.guard.reset_hold_s
    )
}
