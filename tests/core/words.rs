//! Every line that a person may read: one line, lower case, no full stop, with names and values, and what to do.

use std::collections::BTreeSet;

use gripline::core::cause::{Cause, DriverTrouble, StopBy};
use gripline::core::event::{IdentityField, Request, Wait};
use gripline::core::io::{Pull, Puller};
use gripline::core::{Event, Phase, words};
use gripline::shaping::Frame;
use gripline::wire::status;

use crate::world::four_omni;

fn causes() -> Vec<Cause> {
    let says = |what| Cause::DriverSays { link: 1, what };
    let wheel = 2;
    vec![
        Cause::StopAsked(StopBy::PadButton),
        Cause::StopAsked(StopBy::Squeeze),
        Cause::StopAsked(StopBy::Console),
        Cause::StopAsked(StopBy::DriverInput { link: 1 }),
        Cause::PadGone,
        Cause::FeedbackQuiet { link: 1, age_ms: 104 },
        Cause::NotHeard { link: 1, age_ms: 104 },
        Cause::WriteFailed { link: 1, gone: true },
        Cause::WriteFailed { link: 1, gone: false },
        Cause::LateTick { late_ms: 61 },
        Cause::NoTick,
        says(DriverTrouble::Fault { status: status::ENCODER | status::UNDER_VOLTAGE }),
        says(DriverTrouble::LatchNotOurs { status: status::LATCHED | status::WENT_SILENT }),
        says(DriverTrouble::Restarted),
        says(DriverTrouble::IdentityChanged),
        Cause::NotFollowing { wheel, commanded_rad_s: 5.0, measured_rad_s: 0.25 },
        Cause::NotSlowing { wheel, commanded_rad_s: -2.0, measured_rad_s: -5.0 },
        Cause::Runaway { wheel, measured_rad_s: 1.5 },
        Cause::Skid { wheel: Some(wheel), residual_rad_s: 2.5 },
        Cause::Skid { wheel: None, residual_rad_s: 2.5 },
        Cause::StopOverdue { allowed_ms: 770 },
        Cause::SecondSignal,
        Cause::Panic,
        Cause::FoundLatched { link: 1, status: status::LATCHED },
        Cause::NotCleared { link: 1 },
    ]
}

fn waits() -> Vec<Wait> {
    let link = 1;
    let mut all = vec![
        Wait::NoPad,
        Wait::HoldNotReleased,
        Wait::SticksNotCentred,
        Wait::LinkNotOpen { link },
        Wait::NoIdentity { link },
        Wait::NoFeedback { link },
        Wait::Latched { link },
        Wait::Fault { link, status: status::OVER_CURRENT },
        Wait::StopInputOpen { link },
        Wait::ResetAtPad,
        Wait::PressSpent,
        Wait::Quitting,
        Wait::WrongPhase,
        Wait::NotStanding,
        Wait::StopDown,
        Wait::NotLatched { link },
    ];
    for field in [
        IdentityField::Version(2),
        IdentityField::Name("x".parse().unwrap()),
        IdentityField::Channels(3),
        IdentityField::SpeedLsb(2),
        IdentityField::AngleLsb(2),
        IdentityField::Silence(20),
        IdentityField::RampMax(20),
        IdentityField::YawRate,
    ] {
        all.push(Wait::IdentityDiffers { link, field });
    }
    all
}

fn events() -> Vec<Event> {
    let link = 1;
    let mut all = vec![
        Event::Phase { from: Phase::Parked, to: Phase::Ready },
        Event::Pace { pace: 1 },
        Event::Frame(Frame::Base),
        Event::Frame(Frame::Room),
        Event::HeadingZeroed,
        Event::HeadingFromGyro(true),
        Event::HeadingFromGyro(false),
        Event::Skidding { wheel: Some(2), residual_rad_s: 2.5 },
        Event::Skidding { wheel: None, residual_rad_s: 2.5 },
        Event::Pushed { wheel: 2 },
        Event::LinkAnswers { link },
        Event::LinkDiffers { link, field: IdentityField::Version(3) },
        Event::Pad { present: true },
        Event::Pad { present: false },
        Event::Scaled { link },
        Event::FramesRefused { link, count: 3 },
        Event::LastCheckFired,
        Event::SendSkipped { link },
        Event::TicksMissed { count: 3 },
        Event::PadQuiet { quiet_ms: 205 },
    ];
    for by in Puller::ALL {
        all.push(Event::StopLinePulled(Pull { number: 1, by }));
    }
    all.extend(causes().into_iter().map(Event::Trip));
    let requests = [Request::Ready, Request::Press, Request::Reset];
    all.extend(requests.map(|request| Event::Refused { request, wait: Wait::NoPad }));
    all
}

#[test]
fn every_line_is_one_plain_line_of_its_own() {
    let plan = four_omni();
    let mut lines: Vec<String> = causes().iter().map(|it| words::cause(it, &plan)).collect();
    lines.extend(waits().iter().map(|it| words::wait(it, &plan)));
    lines.extend(events().iter().map(|it| words::event(it, &plan)));
    let different: BTreeSet<&String> = lines.iter().collect();
    assert_eq!(different.len(), lines.len());
    for line in &lines {
        assert!(line.len() > 5 && line.len() < 300, "{line}");
        assert!(!line.contains('\n') && !line.contains("  ") && !line.ends_with('.'), "{line}");
        let names = !line.contains("link 1") && !line.contains("wheel 2");
        assert!(names, "the plan's names, not numbers: {line}");
    }
}

#[test]
fn every_cause_has_a_code_and_says_what_clears_it() {
    let plan = four_omni();
    let codes: BTreeSet<&str> = causes().iter().map(Cause::code).collect();
    assert_eq!(codes.len(), 20, "{codes:?}");
    for cause in causes() {
        let clears = words::clears(&cause, &plan);
        assert!(clears.contains("hold Select") || clears.contains("start the program again"), "{clears}");
        let trip = words::event(&Event::Trip(cause), &plan);
        assert!(trip.contains(&words::cause(&cause, &plan)) && trip.ends_with(&clears), "{trip}");
    }
}

#[test]
fn lines_carry_the_values_that_decided() {
    let plan = four_omni();
    let line = |cause: Cause| words::cause(&cause, &plan);
    assert_eq!(
        line(Cause::FeedbackQuiet { link: 1, age_ms: 104 }),
        "no feedback from link \"right\" for 104 ms (limit 100 ms)"
    );
    assert_eq!(
        line(Cause::Runaway { wheel: 2, measured_rad_s: 1.5 }),
        "wheel \"rear right\" runs away: told to stand, measured 1.50 rad/s (limit 1.00 rad/s); torque taken off"
    );
    assert_eq!(
        words::wait(
            &Wait::IdentityDiffers { link: 0, field: IdentityField::Name("other".parse().unwrap()) },
            &plan
        ),
        "link \"left\" is not as configured: its drivers call themselves \"other\", `expect` is \"crate carrier left\""
    );
}
