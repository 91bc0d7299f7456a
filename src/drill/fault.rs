//! The faults that a drill provokes: who does it, what must come of it, and what it is held against.

use crate::config::{Plan, WheelPlan};
use crate::core::budget::Guard;

/// One fault.
#[derive(Debug)]
pub struct Fault {
    /// Its name, for `--only` and in reports.
    pub name: &'static str,
    /// What happens.
    pub what: &'static str,
    /// How it is provoked on the stand-in.
    pub how: How,
    /// How it is provoked on a real base.
    pub real: Real,
    /// What must come of it.
    pub must: Must,
    /// The guards that may be first to see it: what is measured is held against the slowest of them.
    pub guards: &'static [Guard],
}

/// Who provokes a fault on the stand-in.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum How {
    /// The scripted hands.
    Hands(Gesture),
    /// The stand-in.
    Standin(Harm),
    /// The drill itself, from outside the drive.
    Act(Act),
}

/// Who provokes it on a real base.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Real {
    /// A person, who is told this.
    Person(&'static str),
    /// The drill itself.
    Itself,
    /// Nobody: it would harm the base, or cannot be made on purpose.
    StandinOnly,
}

/// What must come of a fault.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Must {
    /// The base stops within its budget.
    Stop,
    /// The drive goes on as if nothing were.
    GoOn,
    /// Either: what of it gets through is chance. If it stops, then within its budget from that decision on.
    Either,
}

/// What hands do.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Gesture {
    ReleaseHold,
    PressStop,
    Unplug,
    FallSilent,
}

/// What the stand-in does.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Harm {
    CutBoth,
    CutToDrivers,
    CutFromDrivers,
    BlockPort,
    /// One bit in ten to this power flips.
    FlipBits(u8),
    RestartDriver,
    ReportFault,
    OpenStopInput,
    StickWheel,
    RunWheelAway,
    KillEncoder,
    LoseGrip,
}

impl Harm {
    /// The line that asks the stand-in for it.
    pub(super) fn line(self, plan: &Plan, pace: usize) -> String {
        let wheel = fastest(plan).map_or("", |it| it.name.as_str());
        let link = plan.links.first().map_or("", |it| it.name.as_str());
        match self {
            Self::CutBoth => "cut".into(),
            Self::CutToDrivers => "deaf".into(),
            Self::CutFromDrivers => "mute".into(),
            Self::BlockPort => "blocked".into(),
            Self::FlipBits(power) => format!("noisy 1e-{power}"),
            Self::RestartDriver => format!("restart {link}"),
            Self::ReportFault => format!("over-current {link}"),
            Self::OpenStopInput => format!("stop-input open {link}"),
            Self::StickWheel => format!("stuck {wheel}"),
            Self::RunWheelAway => format!("runaway {:.3} {wheel}", runaway_share(plan, pace)),
            Self::KillEncoder => format!("dead-encoder {wheel}"),
            // As far from its command as a wheel that is stuck.
            Self::LoseGrip => format!("skid 2 {wheel}"),
        }
    }

    /// Whether it strikes while the base stands under torque rather than in travel: only then can the guard that it is
    /// for tell it from a wheel that does not follow.
    pub(super) const fn strikes_in_ready(self) -> bool {
        matches!(self, Self::RunWheelAway)
    }
}

/// The wheel that turns fastest when the base drives straight ahead: what is wrong with it shows.
fn fastest(plan: &Plan) -> Option<&WheelPlan> {
    let wheels = plan.wheels.iter().zip(plan.layout.rows());
    let share = |(wheel, row): &(&WheelPlan, &[f64; 3])| libm::fabs(row[1]) / wheel.max_rad_s;
    wheels.max_by(|a, b| share(a).total_cmp(&share(b))).map(|it| it.0)
}

/// As fast as the pace, and well above what the guard lets pass.
fn runaway_share(plan: &Plan, pace: usize) -> f64 {
    let Some((wheel, pace)) = fastest(plan).zip(plan.paces.get(pace)) else { return 0.1 };
    let share = pace.pace.travel_m_s / (wheel.geometry.radius_m * wheel.max_rad_s);
    share.clamp(2.0 * plan.guard.runaway_share, 1.0)
}

/// What the drill does itself.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Act {
    AskConsoleStop,
    HoldTickThread,
    Kill,
    Suspend,
    Terminate,
    FillDisk,
    FloodConsole,
    StepWallClock,
    StartSecondDrive,
    /// The torque goes off in travel, to see how far the base rolls.
    TakeTorqueOff,
}

const STAND_IN: Real = Real::StandinOnly;

/// All of them, in the order in which they are provoked.
pub const FAULTS: [Fault; 28] = [
    Fault {
        name: "torque-off",
        what: "a stop of category 0: how far the base rolls without torque",
        how: How::Act(Act::TakeTorqueOff),
        real: Real::Person("press the stop button: the torque goes off at once, the base rolls out"),
        must: Must::Stop,
        guards: &[Guard::StopAsked],
    },
    Fault {
        name: "hold-released",
        what: "the hold control released in travel",
        how: How::Hands(Gesture::ReleaseHold),
        real: Real::Person("let go of the hold control, and leave the stick where it is"),
        must: Must::Stop,
        guards: &[Guard::Release],
    },
    Fault {
        name: "stop-button",
        what: "the stop button of the pad",
        how: How::Hands(Gesture::PressStop),
        real: Real::Person("press the stop button"),
        must: Must::Stop,
        guards: &[Guard::StopAsked],
    },
    Fault {
        name: "console-stop",
        what: "a stop asked at the console",
        how: How::Act(Act::AskConsoleStop),
        real: Real::Itself,
        must: Must::Stop,
        guards: &[Guard::StopAsked],
    },
    Fault {
        name: "pad-unplugged",
        what: "the gamepad or its receiver pulled out",
        how: How::Hands(Gesture::Unplug),
        real: Real::Person("pull the gamepad's plug or receiver out"),
        must: Must::Stop,
        guards: &[Guard::PadGone],
    },
    Fault {
        name: "pad-silent",
        what: "the gamepad says nothing more, its device stays",
        how: How::Hands(Gesture::FallSilent),
        real: Real::Person(
            "take the gamepad's batteries out, receiver in place (a pad on a cable: hold it quite still)",
        ),
        must: Must::Stop,
        guards: &[Guard::PadQuietStream],
    },
    Fault {
        name: "line-cut",
        what: "the line to the drivers cut both ways",
        how: How::Standin(Harm::CutBoth),
        real: Real::Person("pull the plug of the line to the drivers"),
        must: Must::Stop,
        guards: &[Guard::FeedbackQuiet, Guard::NotHeard, Guard::WriteFails, Guard::HostSilent],
    },
    Fault {
        name: "line-cut-to-drivers",
        what: "the line cut towards the drivers only",
        how: How::Standin(Harm::CutToDrivers),
        real: Real::Person("open the wire to the drivers (the adaptor's transmit)"),
        must: Must::Stop,
        guards: &[Guard::FeedbackQuiet, Guard::NotHeard, Guard::HostSilent],
    },
    Fault {
        name: "line-cut-from-drivers",
        what: "the line cut from the drivers only",
        how: How::Standin(Harm::CutFromDrivers),
        real: Real::Person("open the wire from the drivers (the adaptor's receive)"),
        must: Must::Stop,
        guards: &[Guard::FeedbackQuiet, Guard::NotHeard],
    },
    Fault {
        name: "port-blocked",
        what: "the port takes nothing more from the drive",
        how: How::Standin(Harm::BlockPort),
        real: STAND_IN,
        must: Must::Stop,
        guards: &[Guard::NotHeard, Guard::FeedbackQuiet, Guard::WriteFails, Guard::HostSilent],
    },
    Fault {
        name: "bit-errors-1e-4",
        what: "one bit in 10,000 flips, both ways",
        how: How::Standin(Harm::FlipBits(4)),
        real: STAND_IN,
        must: Must::Either,
        guards: &[Guard::HostSilent, Guard::NotHeard, Guard::FeedbackQuiet],
    },
    Fault {
        name: "bit-errors-1e-3",
        what: "one bit in 1,000 flips, both ways",
        how: How::Standin(Harm::FlipBits(3)),
        real: STAND_IN,
        must: Must::Either,
        guards: &[Guard::HostSilent, Guard::NotHeard, Guard::FeedbackQuiet],
    },
    Fault {
        name: "bit-errors-1e-2",
        what: "one bit in 100 flips, both ways",
        how: How::Standin(Harm::FlipBits(2)),
        real: STAND_IN,
        must: Must::Either,
        guards: &[Guard::HostSilent, Guard::NotHeard, Guard::FeedbackQuiet],
    },
    Fault {
        name: "driver-restart",
        what: "a driver starts anew in motion",
        how: How::Standin(Harm::RestartDriver),
        real: Real::Person("switch the drivers' logic supply off and on"),
        must: Must::Stop,
        guards: &[Guard::DriverRestart, Guard::DriverSays],
    },
    Fault {
        name: "driver-fault",
        what: "a driver reports a fault",
        how: How::Standin(Harm::ReportFault),
        real: Real::Person("make a driver report a fault, where it has a way to be made to"),
        must: Must::Stop,
        guards: &[Guard::DriverSays],
    },
    Fault {
        name: "stop-input",
        what: "a driver's stop input opened",
        how: How::Standin(Harm::OpenStopInput),
        real: Real::Person("open a driver's stop input"),
        must: Must::Stop,
        guards: &[Guard::DriverSays, Guard::StopAsked],
    },
    Fault {
        name: "wheel-stuck",
        what: "a wheel held fast",
        how: How::Standin(Harm::StickWheel),
        real: STAND_IN,
        must: Must::Stop,
        guards: &[Guard::NotFollowing],
    },
    Fault {
        name: "wheel-runaway",
        what: "a wheel turns although told to stand (in Ready)",
        how: How::Standin(Harm::RunWheelAway),
        real: STAND_IN,
        must: Must::Stop,
        guards: &[Guard::Runaway],
    },
    Fault {
        name: "encoder-dead",
        what: "a wheel's encoder stands still",
        how: How::Standin(Harm::KillEncoder),
        real: STAND_IN,
        must: Must::Stop,
        guards: &[Guard::NotFollowing],
    },
    Fault {
        name: "skid",
        what: "a wheel loses its grip and spins",
        how: How::Standin(Harm::LoseGrip),
        real: Real::Person("lift one wheel off the floor, or hold the base back, by hand and with care"),
        must: Must::Stop,
        guards: &[Guard::NotFollowing, Guard::Skid],
    },
    Fault {
        name: "tick-hung",
        what: "the control thread hangs, all others live",
        how: How::Act(Act::HoldTickThread),
        real: Real::Itself,
        must: Must::Stop,
        guards: &[Guard::LateTick],
    },
    Fault {
        name: "killed",
        what: "the drive killed (SIGKILL)",
        how: How::Act(Act::Kill),
        real: Real::Itself,
        must: Must::Stop,
        guards: &[Guard::HostSilent],
    },
    Fault {
        name: "suspended",
        what: "the drive suspended for 0.8 s (SIGSTOP, SIGCONT)",
        how: How::Act(Act::Suspend),
        real: Real::Itself,
        must: Must::Stop,
        guards: &[Guard::HostSilent],
    },
    Fault {
        name: "terminated",
        what: "the end asked (SIGTERM) in travel",
        how: How::Act(Act::Terminate),
        real: Real::Itself,
        must: Must::Stop,
        guards: &[Guard::Release],
    },
    Fault {
        name: "disk-full",
        what: "the run file cannot grow any more",
        how: How::Act(Act::FillDisk),
        real: Real::Itself,
        must: Must::GoOn,
        guards: &[Guard::Release],
    },
    Fault {
        name: "console-flooded",
        what: "sixteen clients flood the console",
        how: How::Act(Act::FloodConsole),
        real: Real::Itself,
        must: Must::GoOn,
        guards: &[Guard::Release],
    },
    Fault {
        name: "clock-stepped",
        what: "the wall clock stepped ahead by 10 s and back",
        how: How::Act(Act::StepWallClock),
        real: Real::Itself,
        must: Must::GoOn,
        guards: &[Guard::Release],
    },
    Fault {
        name: "second-drive",
        what: "a second drive started, on the same console and on the same ports",
        how: How::Act(Act::StartSecondDrive),
        real: Real::Itself,
        must: Must::GoOn,
        guards: &[Guard::Release],
    },
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_unique_and_every_fault_has_something_to_be_held_against() {
        for (index, fault) in FAULTS.iter().enumerate() {
            assert!(FAULTS.iter().skip(index + 1).all(|it| it.name != fault.name), "{}", fault.name);
            assert!(!fault.guards.is_empty());
        }
    }
}
