//! One event in one line.

use super::super::event::{Event, Request, Wait};
use super::super::io::Puller;
use super::causes::{cause, clears, skids};
use super::{link, wait, wheel};
use crate::config::Plan;
use crate::shaping::Frame;

/// One event in one line.
#[must_use]
pub fn event(event: &Event, plan: &Plan) -> String {
    match event {
        Event::Phase { from, to } => format!("{} -> {}", from.name(), to.name()),
        Event::Trip(it) => format!("STOPPED: {}; to go on: {}", cause(it, plan), clears(it, plan)),
        Event::Refused { request, wait: it } => {
            let request = match request {
                Request::Ready => "ready",
                Request::Press => "press of hold",
                Request::Reset => "reset",
            };
            format!("{request} refused: {}", wait(it, plan))
        }
        Event::Pace { pace } => plan.paces.get(usize::from(*pace)).map_or_else(
            || format!("pace {pace}"),
            |it| format!("pace \"{}\": {} m/s, {} rad/s", it.name, it.pace.travel_m_s, it.pace.turn_rad_s),
        ),
        Event::Frame(Frame::Base) => "sticks mean the base's frame".into(),
        Event::Frame(Frame::Room) => "sticks mean the room's frame".into(),
        Event::HeadingZeroed => "the present heading is zero".into(),
        Event::HeadingFromGyro(true) => "heading from the gyro".into(),
        Event::HeadingFromGyro(false) => "yaw rate not valid: heading from the wheels".into(),
        Event::Skidding { wheel: it, residual_rad_s } => {
            format!("{}: residual {residual_rad_s:.2} rad/s", skids(plan, *it))
        }
        Event::Pushed { wheel: it } => {
            format!("{} turns without torque: the base is pushed", wheel(plan, *it))
        }
        Event::LinkAnswers { link: it } => format!("{} answers as configured", link(plan, *it)),
        Event::LinkDiffers { link: it, field } => {
            wait(&Wait::IdentityDiffers { link: *it, field: *field }, plan)
        }
        Event::Pad { present: true } => "gamepad there".into(),
        Event::Pad { present: false } => "gamepad gone".into(),
        Event::Scaled { link: it } => {
            format!("the drivers of {} could not hold the speeds and scaled them", link(plan, *it))
        }
        Event::FramesRefused { link: it, count } => {
            format!("the drivers of {} refused or lost frames: {count}", link(plan, *it))
        }
        Event::LastCheckFired => "the last check scaled a twist: please report this run".into(),
        Event::StopLinePulled(pull) => format!("stop line pulled by {}", puller(pull.by)),
        Event::SendSkipped { link: it } => {
            format!("nothing sent on {}: frames are still unsent", link(plan, *it))
        }
        Event::TicksMissed { count } => format!("ticks missed: {count}"),
        Event::PadQuiet { quiet_ms } => format!(
            "no sign of the pad for {quiet_ms} ms: stopped as by a release; press again to go on (a full stick must \
             be moved a little now and then, or set `wired = true` in [pad])"
        ),
    }
}

fn puller(by: Puller) -> &'static str {
    match by {
        Puller::Core => "a guard",
        Puller::PadStop => "the stop button",
        Puller::PadGone => "the loss of the pad",
        Puller::Console => "the console",
        Puller::Sentinel => "the sentinel",
        Puller::Panic => "a failed part of the program",
        Puller::SecondSignal => "a second signal",
        Puller::LinkGone => "the loss of a port",
    }
}
