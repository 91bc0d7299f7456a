//! Everything of the core that changes.

use arrayvec::ArrayVec;
use serde::{Deserialize, Serialize};

use super::guards::{DriverStop, WheelGuards};
use super::hold::Hold;
use super::io::Phase;
use super::link::Link;
use super::sent::Sent;
use super::settings::Settings;
use super::wheels::Wheels;
use super::{Cause, Core, MAX_LINKS};
use crate::shaping::{Frame, ShaperState};
use crate::units::Mono;

/// A snapshot. With the same plan, a core resumed from it goes on to the byte.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CoreState {
    pub(super) state: State,
    pub(super) shaper: ShaperState,
}

/// One value a link: few enough to be kept in place.
pub type PerLink<T> = ArrayVec<T, MAX_LINKS>;

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct State {
    pub(super) phase: Phase,
    /// Why it is Tripped: the first cause of the trip.
    pub(super) cause: Option<Cause>,
    pub(super) links: PerLink<Link>,
    pub(super) wheels: Wheels,
    pub(super) guards: WheelGuards,
    pub(super) sent: Sent,
    pub(super) hold: Hold,
    /// Index of the pace in force.
    pub(super) pace: u8,
    /// The frame that was asked last; the shaper knows the one in force.
    pub(super) frame: Frame,
    pub(super) last_now: Option<Mono>,
    pub(super) pad_present: bool,
    /// Since when Ready has been left alone.
    pub(super) ready_since: Mono,
    /// The host's stop: when it must have come to a standstill, and how many ms it had.
    pub(super) stop_by: Option<(Mono, u32)>,
    /// Since when the orderly end has been asked.
    pub(super) quitting: Option<Mono>,
    /// Park was sent after quitting.
    pub(super) parked_to_quit: bool,
    /// The stop by the drivers that goes with the trip.
    pub(super) driver_stop: Option<DriverStop>,
    /// A stop was asked at the pad or at a driver's stop input since the trip: the console may not reset it.
    pub(super) reset_at_pad: bool,
    /// The reset button has been held since then, from an edge in Tripped on.
    pub(super) reset_since: Option<Mono>,
    /// Clear has been on its way since then.
    pub(super) clearing: Option<Mono>,
    /// The last pull of the stop line that has been looked at.
    pub(super) pull_seen: Option<u32>,
}

impl State {
    pub(super) fn new(settings: &Settings) -> Self {
        Self {
            phase: Phase::Parked,
            cause: None,
            links: settings.links.iter().map(|_| Link::default()).collect(),
            wheels: Wheels::new(settings),
            guards: WheelGuards::new(settings),
            sent: Sent::default(),
            hold: Hold::default(),
            pace: 0,
            frame: Frame::Base,
            last_now: None,
            pad_present: false,
            ready_since: Mono::default(),
            stop_by: None,
            quitting: None,
            parked_to_quit: false,
            driver_stop: None,
            reset_at_pad: false,
            reset_since: None,
            clearing: None,
            pull_seen: None,
        }
    }

    pub(super) fn tripped(&self) -> bool {
        self.phase == Phase::Tripped
    }
}

/// What a state comes down to without its times and numbers: states with the same outline take the same ways. For
/// tests that look at all of them.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub struct Outline {
    /// The phase.
    pub phase: Phase,
    /// The code of the cause.
    pub cause: Option<&'static str>,
    /// The hold control is pressed.
    pub pressed: bool,
    /// A press would count.
    pub armed: bool,
    /// Nothing left to send by the shaper.
    pub at_rest: bool,
    /// A pad is there.
    pub pad_present: bool,
    /// The orderly end has been asked.
    pub quitting: bool,
    /// The reset button is being held.
    pub resetting: bool,
    /// Clear is on its way.
    pub clearing: bool,
    /// The console may not reset.
    pub reset_at_pad: bool,
    /// The stop of this trip takes the torque off at once.
    pub category_zero: bool,
    /// A link each: open, as planned, heard, said to be latched.
    pub links: PerLink<[bool; 4]>,
}

impl Core {
    /// The state without times and numbers.
    #[must_use]
    pub fn outline(&self) -> Outline {
        let state = &self.state;
        let (pressed, armed) = state.hold.outline();
        let links = state.links.iter().map(|it| [it.open, it.as_planned(), it.heard.is_some(), it.latched()]);
        Outline {
            phase: state.phase,
            cause: state.cause.map(|it| it.code()),
            pressed,
            armed,
            at_rest: self.shaper.at_rest(),
            pad_present: state.pad_present,
            quitting: state.quitting.is_some(),
            resetting: state.reset_since.is_some(),
            clearing: state.clearing.is_some(),
            reset_at_pad: state.reset_at_pad,
            category_zero: state.driver_stop.as_ref().is_some_and(|it| it.ramp_ms == 0),
            links: links.collect(),
        }
    }
}
