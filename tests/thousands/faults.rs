//! What can go wrong in a drive, when, for how long, and which row of the stop budget it is held against.

use gripline::config::Plan;
use gripline::core::budget::{BudgetRow, Guard};

use crate::chance::Chance;

macro_rules! kinds {
    ($($kind:ident $name:literal,)*) => {
        #[derive(Clone, Copy, Debug, PartialEq, Eq)]
        pub(crate) enum Kind { $($kind),* }

        impl Kind {
            pub(crate) const ALL: &'static [Self] = &[$(Self::$kind),*];

            pub(crate) fn name(self) -> &'static str {
                match self { $(Self::$kind => $name),* }
            }
        }
    };
}

kinds! {
    HoldReleased "hold released",
    HoldDipped "hold released between two ticks",
    HoldSqueezed "hold squeezed",
    StopButton "stop button",
    ConsoleStop "console stop",
    SecondSignal "second signal",
    PadUnplugged "pad unplugged",
    PadSilent "pad silent",
    LineCut "line cut both ways",
    Deaf "line cut towards the drivers",
    Mute "line cut from the drivers",
    Clogged "port that sends nothing on",
    Refused "port that refuses writes",
    PortGone "port gone and back",
    Noise4 "bit errors at 1e-4",
    Noise3 "bit errors at 1e-3",
    Noise2 "bit errors at 1e-2",
    Restart "driver restarted",
    FaultBits "driver fault bits",
    StopInput "stop input opened",
    Latch "driver latches by itself",
    Stuck "wheel stuck",
    Runaway "wheel running away",
    EncoderDead "encoder dead",
    Skid "wheel skidding",
    Hung "tick hung",
    Killed "process killed",
    KilledStop "process killed, last-act stop",
    Suspended "process suspended",
    Quit "quit",
}

/// One fault of one drive.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Fault {
    pub(crate) kind: Kind,
    pub(crate) at_s: f64,
    /// When it is put right, where it can be.
    pub(crate) for_s: f64,
    /// The link that it meets; `None`: all.
    pub(crate) link: Option<usize>,
    pub(crate) wheel: usize,
    /// Share or factor of a wheel's fault; bits of a driver's.
    pub(crate) value: f64,
}

/// One to three faults, the first at a random moment, the others close to it.
pub(crate) fn draw(chance: &mut Chance, plan: &Plan, lasts_s: f64) -> Vec<Fault> {
    let n = [1, 1, 1, 1, 2, 2, 2, 3][chance.below(8)];
    // Mostly after the base has begun to move, sometimes before.
    let from_s = if chance.one_in(12) { 0.05 } else { 0.7 };
    let first_s = chance.within(from_s, (lasts_s - 0.8).min(3.0).max(from_s + 0.1));
    let mut met: Vec<Kind> = Vec::new();
    (0..n)
        .map(|i| {
            // Two of one sort would be put right together.
            let kind = loop {
                let mut kind = chance.pick(Kind::ALL);
                if kind == Kind::HoldSqueezed && plan.pad.hold_squeeze.is_none() {
                    kind = Kind::StopButton;
                }
                if met.iter().all(|it| *it != kind && !(on_line(*it) && on_line(kind))) {
                    break kind;
                }
            };
            met.push(kind);
            let at_s = if i == 0 { first_s } else { (first_s + chance.within(-0.2, 0.8)).max(0.05) };
            let one = chance.below(plan.links.len());
            let flicker = chance.one_in(6);
            Fault {
                kind,
                at_s,
                for_s: if matches!(kind, Kind::Hung | Kind::Suspended) {
                    chance.within(0.5, 8.0) * plan.guard.late_ms * 1e-3
                } else if flicker {
                    chance.within(0.005, 0.06)
                } else {
                    chance.within(0.9, 2.5)
                },
                link: if chance.one_in(3) { None } else { Some(one) },
                wheel: chance.below(plan.wheels.len()),
                value: chance.even(),
            }
        })
        .collect()
}

fn on_line(kind: Kind) -> bool {
    matches!(kind, Kind::LineCut | Kind::Deaf | Kind::Mute | Kind::Noise4 | Kind::Noise3 | Kind::Noise2)
}

/// What a stop may take: until nothing is commanded any more, until the wheels stand, how far the base goes.
#[derive(Clone, Copy, Debug, Default)]
pub(crate) struct Allowed {
    pub(crate) command_s: f64,
    pub(crate) rest_s: f64,
    pub(crate) distance_m: f64,
}

impl Allowed {
    pub(crate) fn slower(self, other: Self) -> Self {
        Self {
            command_s: self.command_s.max(other.command_s),
            rest_s: self.rest_s.max(other.rest_s),
            distance_m: self.distance_m.max(other.distance_m),
        }
    }

    /// Everything later, at the base's greatest speed.
    pub(crate) fn later(self, by_s: f64, v_m_s: f64) -> Self {
        Self {
            command_s: self.command_s + by_s,
            rest_s: self.rest_s + by_s,
            distance_m: self.distance_m + by_s * v_m_s,
        }
    }
}

/// The stop budget, as it is looked up here.
pub(crate) struct Budget<'a> {
    pub(crate) plan: &'a Plan,
    pub(crate) rows: &'a [BudgetRow],
}

impl Budget<'_> {
    pub(crate) fn row(&self, guard: Guard, pace: usize) -> &BudgetRow {
        self.rows.iter().find(|it| it.guard == guard && it.pace == pace).unwrap()
    }

    /// Speed of the outermost point at full pace.
    pub(crate) fn outermost_m_s(&self, pace: usize) -> f64 {
        let [length, width] = self.plan.outline_m;
        let pace = self.plan.paces[pace].pace;
        pace.travel_m_s + pace.turn_rad_s * length.hypot(width) / 2.0
    }

    pub(crate) fn allowed(&self, guard: Guard, pace: usize) -> Allowed {
        let row = self.row(guard, pace);
        let total_s = row.total_s.unwrap();
        // Without torque nothing is commanded while the base rolls out.
        let rolls_s = if row.category == 0 { row.ramp_s.unwrap() } else { 0.0 };
        Allowed { command_s: total_s - rolls_s, rest_s: total_s, distance_m: row.distance_m.unwrap() }
    }

    /// Rolling out from a pace without torque.
    pub(crate) fn roll_out_s(&self, pace: usize) -> f64 {
        self.outermost_m_s(pace) / self.plan.bay.coast_m_s2.unwrap()
    }

    /// What a fault may take; `None` where it does not have to stop the base.
    pub(crate) fn of(&self, fault: &Fault, pace: usize) -> Option<Allowed> {
        let row = |guard| self.allowed(guard, pace);
        let guard = &self.plan.guard;
        let detect_s = |it| self.row(it, pace).detect_s;
        // A fault that is put right before it must have been seen need not stop anything.
        let lasting = |it: Guard| (fault.for_s > detect_s(it) + 0.04).then(|| row(it));
        match fault.kind {
            Kind::HoldReleased | Kind::HoldDipped | Kind::Quit => Some(row(Guard::Release)),
            Kind::StopButton | Kind::ConsoleStop | Kind::HoldSqueezed => Some(row(Guard::StopAsked)),
            // A signal is no stop that a person asks at the pad: always by a ramp.
            Kind::SecondSignal | Kind::PadUnplugged => Some(row(Guard::PadGone)),
            Kind::PadSilent => {
                if fault.value < 0.5 {
                    lasting(Guard::PadQuietStream)
                } else if self.plan.pad.wired {
                    None
                } else {
                    lasting(Guard::PadQuietChange)
                }
            }
            Kind::LineCut => {
                let host = lasting(Guard::FeedbackQuiet)?;
                Some(lasting(Guard::HostSilent)?.slower(host))
            }
            Kind::Deaf | Kind::Clogged => {
                let host = lasting(Guard::NotHeard)?;
                Some(lasting(Guard::HostSilent)?.slower(host))
            }
            Kind::Mute => lasting(Guard::FeedbackQuiet),
            Kind::Refused => {
                let host = lasting(Guard::WriteFails)?;
                Some(lasting(Guard::HostSilent)?.slower(host))
            }
            Kind::PortGone => Some(row(Guard::WriteFails)),
            Kind::Noise4 | Kind::Noise3 | Kind::Noise2 => None,
            Kind::Restart => {
                // What has no torque any more rolls out.
                let (v, rolls_s) = (self.outermost_m_s(pace), self.roll_out_s(pace));
                let gone = Allowed { command_s: 0.0, rest_s: rolls_s, distance_m: v * rolls_s / 2.0 };
                let driver_s = self.row(Guard::DriverSays, pace).driver_s;
                Some(row(Guard::DriverSays).slower(gone.later(driver_s, v)))
            }
            Kind::FaultBits => lasting(Guard::DriverSays),
            Kind::Latch => Some(row(Guard::DriverSays)),
            Kind::StopInput => {
                (fault.for_s > 0.04).then(|| row(Guard::StopAsked).slower(row(Guard::DriverSays)))
            }
            // These are held by what the wheels do, not by when they begin.
            Kind::Stuck | Kind::Runaway | Kind::EncoderDead | Kind::Skid => None,
            Kind::Hung => (fault.for_s > guard.late_ms * 1e-3 + 0.015).then(|| row(Guard::LateTick)),
            Kind::Killed => Some(row(Guard::HostSilent)),
            // The program that stops in a dead one's place does not know how fast the base is.
            Kind::KilledStop => {
                Some(row(Guard::HostSilent).slower(self.allowed(Guard::PadGone, self.plan.paces.len() - 1)))
            }
            Kind::Suspended => {
                let wakes = row(Guard::PadGone).later(fault.for_s, self.outermost_m_s(pace));
                let silent = row(Guard::HostSilent);
                let valid_s = detect_s(Guard::HostSilent);
                let late = fault.for_s > guard.late_ms * 1e-3 + 0.015;
                late.then(|| if fault.for_s < valid_s { wakes.slower(silent) } else { silent })
            }
        }
    }
}
