//! Words for people: each fact as one plain line, with the values that decided it and the names of the plan. Called
//! outside the tick; the one part of the core that allocates.

use super::Cause;
use super::cause::{DriverTrouble, StopBy};
use super::event::{Event, Found, IdentityField, Request, Wait};
use super::io::{Phase, Puller};
use super::settings::longest_ramp_ms;
use crate::config::{LinkPlan, Plan};
use crate::shaping::Frame;
use crate::wire::status;

impl Cause {
    /// A short word for records and tables.
    #[must_use]
    pub const fn code(&self) -> &'static str {
        match self {
            Self::StopAsked(StopBy::PadButton) => "stop-pad",
            Self::StopAsked(StopBy::Squeeze) => "stop-squeeze",
            Self::StopAsked(StopBy::Console) => "stop-console",
            Self::StopAsked(StopBy::DriverInput { .. }) => "stop-input",
            Self::PadGone => "pad-gone",
            Self::FeedbackQuiet { .. } => "feedback-quiet",
            Self::NotHeard { .. } => "not-heard",
            Self::WriteFailed { .. } => "write-fails",
            Self::LateTick { .. } => "late-tick",
            Self::NoTick => "no-tick",
            Self::DriverSays { .. } => "driver-says",
            Self::NotFollowing { .. } => "not-following",
            Self::NotSlowing { .. } => "not-slowing",
            Self::Runaway { .. } => "runaway",
            Self::Skid { .. } => "skid",
            Self::StopOverdue { .. } => "stop-overdue",
            Self::SecondSignal => "second-signal",
            Self::Panic => "panic",
            Self::FoundLatched { .. } => "found-latched",
            Self::NotCleared { .. } => "not-cleared",
        }
    }
}

impl Phase {
    /// The phase's name.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Parked => "Parked",
            Self::Ready => "Ready",
            Self::Driving => "Driving",
            Self::Stopping => "Stopping",
            Self::Tripped => "Tripped",
        }
    }
}

impl Event {
    /// A short word for records.
    #[must_use]
    pub const fn code(&self) -> &'static str {
        match self {
            Self::Phase { .. } => "phase",
            Self::Trip(_) => "trip",
            Self::Refused { .. } => "refused",
            Self::Pace { .. } => "pace",
            Self::Frame(_) => "frame",
            Self::HeadingZeroed => "heading-zeroed",
            Self::HeadingFromGyro(_) => "heading-source",
            Self::Skidding { .. } => "skidding",
            Self::Pushed { .. } => "pushed",
            Self::LinkAnswers { .. } => "link-answers",
            Self::LinkDiffers { .. } => "link-differs",
            Self::Pad { .. } => "pad",
            Self::Scaled { .. } => "scaled",
            Self::FramesRefused { .. } => "frames-refused",
            Self::LastCheckFired => "last-check",
            Self::StopLinePulled(_) => "stop-line",
            Self::SendSkipped { .. } => "send-skipped",
            Self::TicksMissed { .. } => "ticks-missed",
            Self::PadQuiet { .. } => "pad-quiet",
        }
    }
}

fn wheel(plan: &Plan, index: u8) -> String {
    plan.wheels
        .get(usize::from(index))
        .map_or_else(|| format!("wheel {index}"), |it| format!("wheel '{}'", it.name))
}

fn link(plan: &Plan, index: u8) -> String {
    plan.links
        .get(usize::from(index))
        .map_or_else(|| format!("link {index}"), |it| format!("link '{}'", it.name))
}

fn port(plan: &Plan, index: u8) -> String {
    plan.links.get(usize::from(index)).map_or_else(String::new, |it| it.port.display().to_string())
}

/// Names the fault and latch bits of a status.
fn bits(status: u16) -> String {
    let names = [
        (status::OVER_CURRENT, "over-current"),
        (status::OVER_TEMPERATURE, "over-temperature"),
        (status::UNDER_VOLTAGE, "under-voltage"),
        (status::ENCODER, "encoder"),
        (status::WENT_SILENT, "it heard nothing in time"),
        (status::STOP_INPUT_OPEN, "stop input open"),
    ];
    let set: Vec<&str> = names.iter().filter(|(bit, _)| status & bit != 0).map(|(_, name)| *name).collect();
    if set.is_empty() { format!("status 0x{status:04x}") } else { set.join(", ") }
}

/// Why the base was stopped.
#[must_use]
pub fn cause(cause: &Cause, plan: &Plan) -> String {
    match cause {
        Cause::StopAsked(StopBy::PadButton) => "stop button pressed".into(),
        Cause::StopAsked(StopBy::Squeeze) => "hold control squeezed through".into(),
        Cause::StopAsked(StopBy::Console) => "stop asked at the console".into(),
        Cause::StopAsked(StopBy::DriverInput { link: it }) => {
            format!("stop input of {} opened", link(plan, *it))
        }
        Cause::PadGone => "gamepad unplugged or not answering".into(),
        Cause::FeedbackQuiet { link: it, age_ms } => {
            format!(
                "no feedback from {} for {age_ms} ms (limit {} ms)",
                link(plan, *it),
                plan.guard.feedback_quiet_ms
            )
        }
        Cause::NotHeard { link: it, age_ms } => format!(
            "{} has acknowledged nothing newer than {age_ms} ms (limit {} ms)",
            link(plan, *it),
            plan.guard.not_heard_ms
        ),
        Cause::WriteFailed { link: it, gone: true } => {
            format!("port {} of {} is gone", port(plan, *it), link(plan, *it))
        }
        Cause::WriteFailed { link: it, gone: false } => {
            format!("port {} of {} takes no more bytes", port(plan, *it), link(plan, *it))
        }
        Cause::LateTick { late_ms } => {
            format!("a tick came {late_ms} ms late (limit {} ms)", plan.guard.late_ms)
        }
        Cause::NoTick => format!("no tick for {} ms, seen by the sentinel", plan.guard.late_ms),
        Cause::DriverSays { link: it, what } => {
            let what = match what {
                DriverTrouble::Fault { status } => format!("reports a fault: {}", bits(*status)),
                DriverTrouble::LatchNotOurs { status } => format!("has latched by itself: {}", bits(*status)),
                DriverTrouble::Restarted => "has started anew".into(),
                DriverTrouble::IdentityChanged => "answers as somebody else".into(),
            };
            format!("{} {what}", link(plan, *it))
        }
        Cause::NotFollowing { wheel: it, commanded_rad_s, measured_rad_s } => format!(
            "{} does not follow: told {commanded_rad_s:.2} rad/s, measured {measured_rad_s:.2} rad/s",
            wheel(plan, *it)
        ),
        Cause::NotSlowing { wheel: it, commanded_rad_s, measured_rad_s } => format!(
            "{} does not slow down in the stop: should be at {commanded_rad_s:.2} rad/s, measured {measured_rad_s:.2} rad/s",
            wheel(plan, *it)
        ),
        Cause::Runaway { wheel: it, measured_rad_s } => {
            format!("{} runs away: told to stand, measured {measured_rad_s:.2} rad/s", wheel(plan, *it))
        }
        Cause::Skid { wheel: Some(it), residual_rad_s } => {
            format!("{} skids: residual {residual_rad_s:.2} rad/s", wheel(plan, *it))
        }
        Cause::Skid { wheel: None, residual_rad_s } => {
            format!("the wheels skid against each other: residual {residual_rad_s:.2} rad/s")
        }
        Cause::StopOverdue { allowed_ms } => format!("not at a standstill {allowed_ms} ms after the release"),
        Cause::SecondSignal => "a second signal while stopping".into(),
        Cause::Panic => "a part of the program failed".into(),
        Cause::FoundLatched { link: it, status } => {
            format!("{} was found latched ({})", link(plan, *it), bits(*status))
        }
        Cause::NotCleared { link: it } => {
            format!("{} did not unlatch within 0.5 s of the reset", link(plan, *it))
        }
    }
}

/// What clears a trip.
#[must_use]
pub fn clears(cause: &Cause, plan: &Plan) -> String {
    let hold = format!(
        "hold {:?} for {} s with the hold control released and the sticks centred",
        plan.pad.reset, plan.guard.reset_hold_s
    );
    let first = match cause {
        Cause::StopAsked(StopBy::PadButton | StopBy::Squeeze | StopBy::Console) | Cause::SecondSignal => {
            String::new()
        }
        Cause::StopAsked(StopBy::DriverInput { .. }) => "close the stop input, then ".into(),
        Cause::PadGone => "plug the gamepad in again, then ".into(),
        Cause::FeedbackQuiet { .. } | Cause::NotHeard { .. } => {
            "see to cable and drivers' power, then ".into()
        }
        Cause::WriteFailed { .. } => "plug the adaptor in again, then ".into(),
        Cause::LateTick { .. } | Cause::NoTick => "find what keeps this computer busy, then ".into(),
        Cause::DriverSays { .. } | Cause::FoundLatched { .. } | Cause::NotCleared { .. } => {
            "see to the drivers, then ".into()
        }
        Cause::NotFollowing { .. }
        | Cause::NotSlowing { .. }
        | Cause::Runaway { .. }
        | Cause::Skid { .. }
        | Cause::StopOverdue { .. } => "see to wheel, motor and encoder, then ".into(),
        Cause::Panic => "report it with the run file, then ".into(),
    };
    format!("{first}{hold}")
}

/// In what a link is not as configured: both values.
fn differs(index: u8, field: IdentityField, found: Found, plan: &Plan) -> String {
    let own = plan.links.get(usize::from(index));
    let number = |of: fn(&LinkPlan) -> u32| own.map_or(0, of).to_string();
    let (what, wanted) = match field {
        IdentityField::Version => ("the version of the line's format", "1".into()),
        IdentityField::Name => {
            ("its name (`expect`)", own.map_or_else(String::new, |it| format!("\"{}\"", it.expect)))
        }
        IdentityField::Channels => ("`channels`", number(|it| u32::from(it.channels))),
        IdentityField::SpeedLsb => ("`speed_lsb_urad_s`", number(|it| it.speed_lsb_urad_s)),
        IdentityField::AngleLsb => ("`angle_lsb_urad`", number(|it| it.angle_lsb_urad)),
        IdentityField::Silence => {
            ("the longest `valid_ms`", format!("at least {}", number(|it| u32::from(it.valid_ms))))
        }
        IdentityField::RampMax => ("the longest ramp in ms", format!("at least {}", longest_ramp_ms(plan))),
        IdentityField::YawRate => ("the yaw rate that `heading = \"gyro\"` needs", "1".into()),
    };
    let found = match found {
        Found::Number(number) => number.to_string(),
        Found::Name(name) => format!("\"{name}\""),
    };
    format!(
        "{} is not as configured in {what}: the drivers say {found}, the configuration wants {wanted}",
        link(plan, index)
    )
}

/// What a request waits for.
#[must_use]
pub fn wait(wait: &Wait, plan: &Plan) -> String {
    match wait {
        Wait::NoPad => "no gamepad; plug it in, or see `gripline pads`".into(),
        Wait::HoldNotReleased => format!("{:?} (hold) is pressed; let it go", plan.pad.hold),
        Wait::SticksNotCentred => "a stick is off its centre; let it go".into(),
        Wait::LinkNotOpen { link: it } => {
            format!("{} is not open: no port {}", link(plan, *it), port(plan, *it))
        }
        Wait::NoIdentity { link: it } => {
            format!("{} has not told who it is; see to the drivers' power and the baud rate", link(plan, *it))
        }
        Wait::IdentityDiffers { link: it, field, found } => differs(*it, *field, *found, plan),
        Wait::NoFeedback { link: it } => format!("no fresh feedback from {}", link(plan, *it)),
        Wait::Latched { link: it } => format!("{} is latched; reset first", link(plan, *it)),
        Wait::Fault { link: it, status } => format!("{} reports {}", link(plan, *it), bits(*status)),
        Wait::StopInputOpen { link: it } => {
            format!("the stop input of {} is open; close it", link(plan, *it))
        }
        Wait::ResetAtPad => "the stop was asked at the pad or a stop input; reset at the pad".into(),
        Wait::PressSpent => "that press is spent; let the hold control go and press again".into(),
        Wait::Quitting => "the program is ending".into(),
        Wait::WrongPhase => "tripped; reset first".into(),
        Wait::NotStanding => "wheels still turn".into(),
        Wait::StopDown => format!("{:?} (stop) is down; let it go", plan.pad.stop),
    }
}

/// One event in one line.
#[must_use]
pub fn event(event: &Event, plan: &Plan) -> String {
    match event {
        Event::Phase { from, to } => format!("{} -> {}", from.name(), to.name()),
        Event::Trip(it) => format!("STOPPED: {}; to go on: {}", cause(it, plan), clears(it, plan)),
        Event::Refused { request, wait: it } => {
            let request = match request {
                Request::Ready => "ready",
                Request::Press => "press",
                Request::Reset => "reset",
            };
            format!("{request} refused: {}", wait(it, plan))
        }
        Event::Pace { pace } => {
            let pace = plan.paces.get(usize::from(*pace));
            pace.map_or_else(String::new, |it| {
                format!("pace '{}': {} m/s, {} rad/s", it.name, it.pace.travel_m_s, it.pace.turn_rad_s)
            })
        }
        Event::Frame(Frame::Base) => "sticks mean the base's frame".into(),
        Event::Frame(Frame::Room) => "sticks mean the room's frame".into(),
        Event::HeadingZeroed => "the present heading is zero".into(),
        Event::HeadingFromGyro(true) => "heading from the gyro".into(),
        Event::HeadingFromGyro(false) => "yaw rate not valid: heading from the wheels".into(),
        Event::Skidding { wheel: Some(it), residual_rad_s } => {
            format!("{} skids: residual {residual_rad_s:.2} rad/s", wheel(plan, *it))
        }
        Event::Skidding { wheel: None, residual_rad_s } => {
            format!("wheels skid: residual {residual_rad_s:.2} rad/s")
        }
        Event::Pushed { wheel: it } => {
            format!("{} turns without torque: the base is pushed", wheel(plan, *it))
        }
        Event::LinkAnswers { link: it } => format!("{} answers as configured", link(plan, *it)),
        Event::LinkDiffers { link: it, field, found } => differs(*it, *field, *found, plan),
        Event::Pad { present: true } => "gamepad there".into(),
        Event::Pad { present: false } => "gamepad gone".into(),
        Event::Scaled { link: it } => {
            format!("{} could not hold the speeds and scaled them", link(plan, *it))
        }
        Event::FramesRefused { link: it, count } => {
            format!("{} refused or lost {count} frames", link(plan, *it))
        }
        Event::LastCheckFired => "the last check scaled a twist: please report this run".into(),
        Event::StopLinePulled(pull) => {
            let by = match pull.by {
                Puller::Core => "a guard",
                Puller::PadStop => "the stop button",
                Puller::PadGone => "the loss of the pad",
                Puller::Console => "the console",
                Puller::Sentinel => "the sentinel",
                Puller::Panic => "a failed part of the program",
                Puller::SecondSignal => "a second signal",
                Puller::LinkGone => "the loss of a port",
            };
            format!("stop line pulled by {by}")
        }
        Event::SendSkipped { link: it } => {
            format!("nothing sent on {}: frames are still unsent", link(plan, *it))
        }
        Event::TicksMissed { count } => format!("{count} ticks missed"),
        Event::PadQuiet { quiet_ms } => {
            format!(
                "the pad has been quiet for {quiet_ms} ms: stopped as by a release; with a full stick, move it a little"
            )
        }
    }
}
