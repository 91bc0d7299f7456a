//! The step: one tick from everything seen to everything decided.
//!
//! Order within a tick: hear the links, measure the wheels, then fault, stop, release, quit, reset, ready, press; the
//! first that applies wins. Last, what is sent follows from the phase alone.

use serde::{Deserialize, Serialize};

use super::event::{Event, Request, Wait};
use super::guards::{DriverStop, Look, WheelGuards};
use super::hold::{Hold, HoldSeen};
use super::io::{Buttons, Inputs, Outgoing, Outputs, Phase, Puller};
use super::link::{Link, News, any_yaw_rate};
use super::phase::Happening;
use super::settings::{Settings, ramp_ms, shaper_settings};
use super::wheels::{self, PerLink, Sent, Wheels};
use super::{Cause, cause::DriverTrouble, cause::StopBy, event::Found, event::IdentityField};
use crate::base::Twist;
use crate::config::Plan;
use crate::shaping::{self, Frame, Goal, Shaper, ShaperState};
use crate::units::{Mono, ns_to_s};
use crate::wire::{Drive, Mode, ToDrivers, status};

/// Phases, guards and everything sent. Made once; `step` is called once a tick.
#[derive(Clone, Debug)]
pub struct Core {
    settings: Settings,
    shaper: Shaper,
    state: State,
}

/// Everything that changes, for snapshots. With the same plan, a core resumed from it goes on to the byte.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CoreState {
    state: State,
    shaper: ShaperState,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
struct State {
    phase: Phase,
    cause: Option<Cause>,
    /// A stop was asked at the pad or at a driver since the trip: the console may not reset it.
    reset_at_pad: bool,
    links: PerLink<Link>,
    wheels: Wheels,
    guards: WheelGuards,
    sent: Sent,
    hold: Hold,
    pace: u8,
    last_now: Option<Mono>,
    pad_present: bool,
    ready_since: Mono,
    /// The host's stop: when it must have ended.
    stop_by: Option<(Mono, u32)>,
    quitting: bool,
    /// Park was sent after quitting.
    parked_to_quit: bool,
    driver_stop: Option<DriverStop>,
    /// The reset button has been held since then, from an edge in Tripped on.
    reset_since: Option<Mono>,
    /// Clear has been on its way since then.
    clearing: Option<Mono>,
    /// The number of the last pull of the stop line that was seen while tripped: a reset answers it.
    answered_pull: u32,
    scaled: bool,
    gyro_used: bool,
    frame: Frame,
    shown_refused: Mono,
}

/// All links must have unlatched this long after a reset.
const CLEAR_WITHIN_NS: u64 = 500_000_000;
/// A Clear that was not taken is repeated.
const CLEAR_EVERY_NS: u64 = 40_000_000;

/// What this tick has seen of links, hold and wheels, before anything is decided.
struct Seen {
    news: PerLink<News>,
    hold: HoldSeen,
    centred: bool,
}

impl Core {
    /// Parked, knowing nothing of anybody.
    #[must_use]
    pub fn new(plan: &Plan) -> Self {
        let settings = Settings::new(plan);
        let state = State {
            phase: Phase::Parked,
            cause: None,
            reset_at_pad: false,
            links: settings.links.iter().map(|_| Link::default()).collect(),
            wheels: Wheels::new(&settings),
            guards: WheelGuards::new(&settings),
            sent: Sent::default(),
            hold: Hold::default(),
            pace: 0,
            last_now: None,
            pad_present: false,
            ready_since: Mono::default(),
            stop_by: None,
            quitting: false,
            parked_to_quit: false,
            driver_stop: None,
            reset_since: None,
            clearing: None,
            answered_pull: 0,
            scaled: false,
            gyro_used: false,
            frame: Frame::Base,
            shown_refused: Mono::default(),
        };
        Self { settings, shaper: Shaper::new(shaper_settings(plan)), state }
    }

    /// Goes on from a snapshot taken under the same plan.
    #[must_use]
    pub fn resume(plan: &Plan, state: CoreState) -> Self {
        Self {
            settings: Settings::new(plan),
            shaper: Shaper::resume(shaper_settings(plan), state.shaper),
            state: state.state,
        }
    }

    /// A snapshot.
    #[must_use]
    pub fn state(&self) -> CoreState {
        CoreState { state: self.state.clone(), shaper: self.shaper.state().clone() }
    }

    /// One tick. Reads no clock, does no I/O, allocates nothing, cannot fail.
    #[must_use]
    pub fn step(&mut self, inputs: &Inputs) -> Outputs {
        let mut out = Outputs::default();
        let seen = self.see(inputs, &mut out);
        self.decide(inputs, &seen, &mut out);
        self.operate(inputs, &mut out);
        self.send(inputs, &mut out);
        self.show(inputs, &seen, &mut out);
        self.state.last_now = Some(inputs.now);
        out
    }

    /// Takes in what links, wheels and pad say.
    fn see(&mut self, inputs: &Inputs, out: &mut Outputs) -> Seen {
        let mut news = PerLink::new();
        for (index, (link, own)) in (0_u8..).zip(self.state.links.iter_mut().zip(&self.settings.links)) {
            let nothing = super::io::LinkInput::default();
            let input = inputs.links.get(usize::from(index)).unwrap_or(&nothing);
            let it = link.hear(input, &self.settings, own);
            match it.told {
                Some(None) => say(out, Event::LinkAnswers { link: index }),
                Some(Some((field, found))) => say(out, Event::LinkDiffers { link: index, field, found }),
                None => {}
            }
            if it.refused > 0 {
                say(out, Event::FramesRefused { link: index, count: it.refused });
            }
            let scaled = input.status_seen & status::SCALED != 0;
            if scaled && !link.scaled {
                say(out, Event::Scaled { link: index });
            }
            link.scaled = scaled;
            news.push(it);
        }
        let State { wheels, links, .. } = &mut self.state;
        let layout = &self.shaper.settings().layout;
        if let Some(gyro) = wheels.measure(inputs.now, &self.settings, layout, links, &news) {
            say(out, Event::HeadingFromGyro(gyro));
        }
        if inputs.pad.present != self.state.pad_present {
            say(out, Event::Pad { present: inputs.pad.present });
        }
        let hold = self.state.hold.look(&inputs.pad, &self.settings.hold);
        let centred = shaping::centred(inputs.pad.sticks, &self.shaper.settings().response);
        Seen { news, hold, centred }
    }

    /// Faults and stops first, then what people ask.
    fn decide(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        let fault = self.fault(inputs, seen, out);
        let stop = self.stop_asked(inputs, seen);
        if let Some(by) = stop {
            self.state.reset_at_pad |= !matches!(by, StopBy::Console);
        }
        self.state.pad_present = inputs.pad.present;
        self.state.quitting |= inputs.quit;
        if let Some(cause) = fault.or(stop.map(Cause::StopAsked)) {
            self.trip(cause, inputs.now, out);
            return;
        }
        match self.state.phase {
            Phase::Parked => self.parked(inputs, seen, out),
            Phase::Ready => self.ready(inputs, seen, out),
            Phase::Driving => self.driving(inputs, seen, out),
            Phase::Stopping => self.stopping(inputs, seen, out),
            Phase::Tripped => self.tripped(inputs, seen, out),
        }
    }

    /// The guards, in the order in which they are told.
    fn fault(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) -> Option<Cause> {
        self.late(inputs, out)
            .or_else(|| self.pulled(inputs, out))
            .or_else(|| self.link_fault(inputs, seen))
            .or_else(|| (self.state.pad_present && !inputs.pad.present).then_some(Cause::PadGone))
            .or_else(|| self.wheel_fault(inputs.now, out))
            .or_else(|| {
                let (by, allowed_ms) = self.state.stop_by?;
                (self.state.phase == Phase::Stopping && inputs.now > by)
                    .then_some(Cause::StopOverdue { allowed_ms })
            })
    }

    /// The tick came too late, or not at all for a while.
    fn late(&self, inputs: &Inputs, out: &mut Outputs) -> Option<Cause> {
        let last = self.state.last_now?;
        let gap = inputs.now.since_ns(last).saturating_sub(self.settings.period_ns);
        let late = inputs.now.since_ns(inputs.due).max(gap);
        let missed = gap / self.settings.period_ns.max(1);
        if missed > 0 {
            say(out, Event::TicksMissed { count: u32::try_from(missed).unwrap_or(u32::MAX) });
        }
        (late > self.settings.times.late_ns).then(|| Cause::LateTick { late_ms: ms(late) })
    }

    /// Somebody else has pulled the stop line.
    fn pulled(&self, inputs: &Inputs, out: &mut Outputs) -> Option<Cause> {
        let pull = inputs.stop_line.filter(|it| it.number != self.state.answered_pull)?;
        if self.state.phase == Phase::Tripped && self.state.clearing.is_none() {
            return None;
        }
        let cause = match pull.by {
            Puller::Core => return None,
            Puller::PadStop => Cause::StopAsked(StopBy::PadButton),
            Puller::PadGone => Cause::PadGone,
            Puller::Console => Cause::StopAsked(StopBy::Console),
            Puller::Sentinel => Cause::NoTick,
            Puller::Panic => Cause::Panic,
            Puller::SecondSignal => Cause::SecondSignal,
            Puller::LinkGone => {
                let link = self.state.links.iter().position(|it| !it.open).unwrap_or(0);
                Cause::WriteFailed { link: u8::try_from(link).unwrap_or(0), gone: true }
            }
        };
        say(out, Event::StopLinePulled(pull));
        Some(cause)
    }

    /// What the links bring up. Silence counts only from a link that has answered.
    fn link_fault(&self, inputs: &Inputs, seen: &Seen) -> Option<Cause> {
        let times = &self.settings.times;
        let tripped = self.state.phase == Phase::Tripped;
        for (index, (link, news)) in (0_u8..).zip(self.state.links.iter().zip(&seen.news)) {
            if news.gone {
                return Some(Cause::WriteFailed { link: index, gone: true });
            }
            let says = |what| Some(Cause::DriverSays { link: index, what });
            if news.restarted {
                return says(DriverTrouble::Restarted);
            }
            if news.changed {
                return says(DriverTrouble::IdentityChanged);
            }
            if tripped || !link.answered() {
                continue;
            }
            let bits = inputs.links.get(usize::from(index)).map_or(0, |it| it.status_seen) | link.status();
            if news.fresh && bits & status::FAULTS != 0 {
                return says(DriverTrouble::Fault { status: bits });
            }
            if news.fresh && bits & status::STOP_INPUT_OPEN != 0 {
                return Some(Cause::StopAsked(StopBy::DriverInput { link: index }));
            }
            if news.fresh && bits & status::LATCHED != 0 {
                return if news.continues {
                    says(DriverTrouble::LatchNotOurs { status: bits })
                } else {
                    Some(Cause::FoundLatched { link: index, status: bits })
                };
            }
            let age = link.feedback_age_ns(inputs.now).unwrap_or(0);
            if age > times.feedback_quiet_ns {
                return Some(Cause::FeedbackQuiet { link: index, age_ms: ms(age) });
            }
            let age = link.unheard_ns(inputs.now).unwrap_or(0);
            if age > times.not_heard_ns {
                return Some(Cause::NotHeard { link: index, age_ms: ms(age) });
            }
            if link.blocked() {
                return Some(Cause::WriteFailed { link: index, gone: false });
            }
        }
        None
    }

    /// The guards on the wheels: with torque they trip, without it turning wheels are only told.
    fn wheel_fault(&mut self, now: Mono, out: &mut Outputs) -> Option<Cause> {
        let quiet_ns = self.settings.times.feedback_quiet_ns;
        let fresh =
            self.state.links.iter().all(|it| it.feedback_age_ns(now).is_some_and(|age| age <= quiet_ns));
        let State { guards, wheels, sent, driver_stop, phase, .. } = &mut self.state;
        let layout = &self.shaper.settings().layout;
        let look = Look { now, settings: &self.settings, layout, wheels, sent };
        let (skid_rad_s, event, skid) = guards.skid(&look);
        out.view.skid_rad_s = skid_rad_s;
        match phase {
            Phase::Parked => {
                guards.pushed(&look).into_iter().for_each(|it| say(out, it));
                None
            }
            Phase::Tripped => match driver_stop {
                // What was measured before the line went quiet tells nothing about the ramp.
                Some(stop) if !stop.escalated() && fresh => stop.not_slowing(&look),
                Some(_) | None => None,
            },
            Phase::Ready => guards.runaway(&look),
            Phase::Driving | Phase::Stopping => {
                event.into_iter().for_each(|it| say(out, it));
                guards.runaway(&look).or_else(|| guards.not_following(&look)).or(skid)
            }
        }
    }

    /// A stop that a person asked. The button counts while it is down, so that a stop is never missed.
    fn stop_asked(&self, inputs: &Inputs, seen: &Seen) -> Option<StopBy> {
        let pad = &inputs.pad;
        let new = pad.pressed.has(Buttons::STOP)
            || (pad.down.has(Buttons::STOP)
                && (self.state.phase != Phase::Tripped || self.state.clearing.is_some()));
        if pad.present && new {
            Some(StopBy::PadButton)
        } else if seen.hold.squeezed && (self.state.phase != Phase::Tripped || self.state.clearing.is_some())
        {
            Some(StopBy::Squeeze)
        } else if inputs.console.stop {
            Some(StopBy::Console)
        } else {
            None
        }
    }

    /// Trips, or tells a further cause while tripped. The first cause stays.
    fn trip(&mut self, cause: Cause, now: Mono, out: &mut Outputs) {
        say(out, Event::Trip(cause));
        let zero = match cause {
            Cause::Runaway { .. } | Cause::NotSlowing { .. } => true,
            Cause::StopAsked(_) => self.settings.stop_asked_is_category_zero(),
            Cause::PadGone
            | Cause::FeedbackQuiet { .. }
            | Cause::NotHeard { .. }
            | Cause::WriteFailed { .. }
            | Cause::LateTick { .. }
            | Cause::NoTick
            | Cause::DriverSays { .. }
            | Cause::NotFollowing { .. }
            | Cause::Skid { .. }
            | Cause::StopOverdue { .. }
            | Cause::SecondSignal
            | Cause::Panic
            | Cause::FoundLatched { .. }
            | Cause::NotCleared { .. } => false,
        };
        let ramp = if zero { 0 } else { self.ramp_ms() };
        let first = self.state.phase != Phase::Tripped;
        if first {
            self.state.cause = Some(cause);
        }
        if first || zero {
            let from = self.shaper.settings().layout.wheel_speeds(self.state.sent.newest());
            self.state.driver_stop = Some(DriverStop::new(now, ramp, from));
        }
        self.state.reset_since = None;
        self.state.clearing = None;
        self.state.reset_at_pad |= matches!(
            cause,
            Cause::StopAsked(StopBy::PadButton | StopBy::Squeeze | StopBy::DriverInput { .. })
        );
        self.go(Happening::Fault, out);
        self.shaper.rest();
        self.state.guards.rest();
        out.pull_stop = true;
    }

    /// Changes the phase if the table says so.
    fn go(&mut self, happening: Happening, out: &mut Outputs) {
        let from = self.state.phase;
        let to = from.after(happening);
        if to != from {
            self.state.phase = to;
            say(out, Event::Phase { from, to });
        }
    }

    fn parked(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        self.shaper.rest();
        if self.state.quitting || !inputs.pad.present || !inputs.pad.pressed.has(Buttons::READY) {
            return;
        }
        match self.waits(inputs, seen) {
            Some(wait) => say(out, Event::Refused { request: Request::Ready, wait }),
            None => {
                self.state.ready_since = inputs.now;
                self.state.hold.spend();
                self.state.guards.rest();
                self.state.sent.rest();
                self.go(Happening::Ready, out);
            }
        }
    }

    fn ready(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        self.shaper.rest();
        let idle = inputs.now.since_ns(self.state.ready_since) >= self.settings.times.ready_idle_ns;
        if self.state.quitting || (idle && !seen.hold.pressed) {
            self.go(Happening::Park, out);
            return;
        }
        if seen.hold.edge {
            let counts = self.state.hold.spend();
            let wait = if !counts {
                Some(Wait::PressSpent)
            } else if seen.centred {
                None
            } else {
                Some(Wait::SticksNotCentred)
            };
            match wait {
                Some(wait) => say(out, Event::Refused { request: Request::Press, wait }),
                None => self.go(Happening::Press, out),
            }
        } else {
            self.state.hold.arm(seen.hold);
        }
    }

    fn driving(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        let quiet = self.pad_quiet_ns(inputs);
        if let Some(quiet) = quiet {
            say(out, Event::PadQuiet { quiet_ms: ms(quiet) });
        }
        if seen.hold.released || quiet.is_some() || self.state.quitting {
            self.begin_stop(inputs.now);
            self.go(Happening::Release, out);
        }
    }

    /// How long the pad has given no sign of life, if that is too long.
    fn pad_quiet_ns(&self, inputs: &Inputs) -> Option<u64> {
        let times = &self.settings.times;
        let limit = match (inputs.pad.streams, self.settings.wired) {
            (true, _) => times.pad_quiet_stream_ns,
            (false, true) => return None,
            (false, false) => times.pad_quiet_change_ns,
        };
        let age = inputs.now.since_ns(inputs.pad.last_sign);
        (age > limit).then_some(age)
    }

    fn begin_stop(&mut self, now: Mono) {
        let limits = &self.shaper.settings().limits;
        let allowed_s = f64::from(self.ramp_ms()) * 1e-3
            + limits.smoothing_s * (1.0 + limits.speed_up_m_s2.max(limits.slow_down_m_s2) / limits.stop_m_s2)
            + self.settings.driver_s()
            + 3.0 * self.settings.follow_lag_s();
        let allowed = crate::units::s_to_ns(allowed_s) + self.settings.times.standstill_ns;
        let allowed = allowed + self.settings.times.stop_margin_ns;
        self.state.stop_by = Some((now.plus_ns(allowed), ms(allowed)));
    }

    fn stopping(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        if seen.hold.edge {
            self.state.hold.spend();
            say(out, Event::Refused { request: Request::Press, wait: Wait::PressSpent });
        }
        if !self.shaper.at_rest() || !self.state.wheels.stands(inputs.now, &self.settings) {
            return;
        }
        self.state.stop_by = None;
        self.state.ready_since = inputs.now;
        self.state.hold.spend();
        self.go(if self.state.quitting { Happening::StoodToQuit } else { Happening::Stood }, out);
    }

    fn tripped(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        self.shaper.rest();
        if let Some(since) = self.state.clearing {
            self.clear(since, inputs, out);
            return;
        }
        if let Some(pull) = inputs.stop_line
            && pull.number != self.state.answered_pull
        {
            // A pull that is new in this tick is seen before any reset is taken.
            self.state.answered_pull = pull.number;
            self.state.reset_since = None;
            return;
        }
        let pad = &inputs.pad;
        if pad.present && pad.pressed.has(Buttons::READY) {
            say(out, Event::Refused { request: Request::Ready, wait: Wait::WrongPhase });
        }
        if pad.present && pad.pressed.has(Buttons::RESET) {
            self.state.reset_since = Some(inputs.now);
        }
        if !pad.present || !pad.down.has(Buttons::RESET) {
            self.state.reset_since = None;
        }
        let held = self
            .state
            .reset_since
            .is_some_and(|since| inputs.now.since_ns(since) >= self.settings.times.reset_hold_ns);
        let refused = if held {
            self.state.reset_since = None;
            self.reset_waits(inputs, seen)
        } else if inputs.console.reset {
            if self.state.reset_at_pad { Some(Wait::ResetAtPad) } else { self.reset_waits(inputs, seen) }
        } else {
            return;
        };
        match refused {
            Some(wait) => say(out, Event::Refused { request: Request::Reset, wait }),
            None => {
                self.state.clearing = Some(inputs.now);
                self.state.links.iter_mut().for_each(|link| link.cleared = None);
            }
        }
    }

    /// Waits for every link to unlatch after a reset.
    fn clear(&mut self, since: Mono, inputs: &Inputs, out: &mut Outputs) {
        let unlatched = |link: &Link| {
            !link.latched()
                && link.heard.as_ref().is_some_and(|(at, _)| link.cleared.is_none_or(|sent| *at > sent))
        };
        if self.state.links.iter().all(unlatched) {
            self.state.clearing = None;
            self.state.cause = None;
            self.state.reset_at_pad = false;
            self.state.driver_stop = None;
            self.state.sent.rest();
            if let Some(pull) = inputs.stop_line {
                out.release_stop_line = Some(pull.number);
            }
            self.go(Happening::Cleared, out);
        } else if inputs.now.since_ns(since) > CLEAR_WITHIN_NS {
            let link = self.state.links.iter().position(|it| !unlatched(it)).unwrap_or(0);
            self.trip(Cause::NotCleared { link: u8::try_from(link).unwrap_or(0) }, inputs.now, out);
        }
    }

    /// What Ready waits for.
    fn waits(&self, inputs: &Inputs, seen: &Seen) -> Option<Wait> {
        let latched = self.state.links.iter().position(Link::latched);
        self.stands_against(inputs, seen)
            .or_else(|| latched.map(|link| Wait::Latched { link: u8::try_from(link).unwrap_or(0) }))
    }

    /// What a reset waits for.
    fn reset_waits(&self, inputs: &Inputs, seen: &Seen) -> Option<Wait> {
        self.stands_against(inputs, seen)
            .or_else(|| (!self.state.wheels.stands(inputs.now, &self.settings)).then_some(Wait::NotStanding))
    }

    /// What stands against both, in the order in which a person would mend it.
    fn stands_against(&self, inputs: &Inputs, seen: &Seen) -> Option<Wait> {
        if self.state.quitting {
            return Some(Wait::Quitting);
        }
        if !inputs.pad.present {
            return Some(Wait::NoPad);
        }
        let quiet = self.settings.times.feedback_quiet_ns;
        let link = (0_u8..).zip(&self.state.links).find_map(|(index, it)| it.wait(index, inputs.now, quiet));
        if link.is_some() {
            return link;
        }
        if self.settings.gyro && !any_yaw_rate(self.state.links.iter()) {
            return Some(Wait::IdentityDiffers {
                link: 0,
                field: IdentityField::YawRate,
                found: Found::Number(0),
            });
        }
        if inputs.pad.down.has(Buttons::STOP) {
            return Some(Wait::StopDown);
        }
        if seen.hold.pressed {
            return Some(Wait::HoldNotReleased);
        }
        (!seen.centred).then_some(Wait::SticksNotCentred)
    }

    /// Pace, frame, heading: allowed in every phase but Tripped, never a step in velocity.
    fn operate(&mut self, inputs: &Inputs, out: &mut Outputs) {
        let pressed = if inputs.pad.present { inputs.pad.pressed } else { Buttons::default() };
        if self.state.phase != Phase::Tripped {
            let last = u8::try_from(self.settings.paces.len().saturating_sub(1)).unwrap_or(0);
            let mut pace = self.state.pace;
            if pressed.has(Buttons::PACE_UP) {
                pace = pace.saturating_add(1).min(last);
            }
            if pressed.has(Buttons::PACE_DOWN) {
                pace = pace.saturating_sub(1);
            }
            if pace != self.state.pace {
                self.state.pace = pace;
                say(out, Event::Pace { pace });
            }
            if pressed.has(Buttons::FRAME) {
                self.state.frame = match self.state.frame {
                    Frame::Base => Frame::Room,
                    Frame::Room => Frame::Base,
                };
                self.shaper.request_frame(self.state.frame);
            }
            if pressed.has(Buttons::ZERO_HEADING) {
                let by_rad = self.state.wheels.odometry.zero_heading();
                self.shaper.shift_heading(-by_rad);
                say(out, Event::HeadingZeroed);
            }
        }
        let before = self.shaper.frame();
        let twist = self.shape(inputs, out);
        if self.shaper.frame() != before || (pressed.has(Buttons::FRAME) && self.shaper.at_rest()) {
            say(out, Event::Frame(self.shaper.frame()));
        }
        self.state.sent.push(twist);
    }

    /// The twist of this tick; zero outside Driving and Stopping.
    fn shape(&mut self, inputs: &Inputs, out: &mut Outputs) -> Twist {
        let goal = match self.state.phase {
            Phase::Parked | Phase::Ready | Phase::Tripped => return Twist::ZERO,
            Phase::Stopping => Goal::Stop,
            Phase::Driving => match self.settings.paces.get(usize::from(self.state.pace)) {
                Some(pace) => Goal::Follow { sticks: inputs.pad.sticks, pace: *pace },
                None => Goal::Stop,
            },
        };
        let heading_rad = self.state.wheels.odometry.pose().heading_rad;
        let shaped = self.shaper.step(goal, heading_rad);
        out.view.demand = shaped.demand;
        if shaped.last_check_fired {
            say(out, Event::LastCheckFired);
        }
        shaped.in_base_frame
    }

    /// The ramp for a stop now: that of the fastest of the last twists, which the drivers may still be at.
    fn ramp_ms(&self) -> u16 {
        let settings = self.shaper.settings();
        let (earlier, _) = self.state.sent.ago(self.settings.driver_s(), self.settings.period_ns);
        [self.state.sent.newest(), earlier]
            .into_iter()
            .map(|twist| {
                let speeds = settings.layout.wheel_speeds(twist);
                let wheels = speeds.iter().zip(&settings.max_rad_s2).map(|(speed, most)| speed.abs() / most);
                ramp_ms(&settings.limits, twist, wheels)
            })
            .fold(1, u16::max)
    }

    /// Frames for every link, from the phase alone.
    fn send(&mut self, inputs: &Inputs, out: &mut Outputs) {
        let layout = &self.shaper.settings().layout;
        let (counts, back) = wheels::counts(&self.settings, &layout.wheel_speeds(self.state.sent.newest()));
        out.stop_ramp_ms = match &self.state.driver_stop {
            Some(stop) if self.state.phase == Phase::Tripped => stop.ramp_ms,
            Some(_) | None => self.ramp_ms(),
        };
        let mode = match self.state.phase {
            Phase::Parked => Some(Mode::Park),
            Phase::Ready => Some(Mode::Hold),
            Phase::Driving | Phase::Stopping => Some(Mode::Run),
            Phase::Tripped => None,
        };
        let tripped = self.state.phase == Phase::Tripped && self.state.clearing.is_none();
        let unlatched = self.state.links.iter().any(|link| link.open && !link.latched());
        out.pull_stop |= tripped && unlatched;
        let in_flight =
            u16::try_from(self.settings.times.driver_ns / self.settings.period_ns.max(1)).unwrap_or(64);
        let clearing = self.state.clearing.is_some();
        for (index, (link, own)) in (0_u8..).zip(self.state.links.iter_mut().zip(&self.settings.links)) {
            // A stop now carries this one; the tick's own frames follow it.
            out.stop_sequence.push(link.sequence);
            if out.pull_stop && link.open {
                link.send(inputs.now);
            }
            let at = usize::from(index);
            let mut put = |link: &mut Link, message| {
                let sequence = link.send(inputs.now);
                let _ = out.frames.try_push(Outgoing { link: index, sequence, message });
            };
            if link.ask_due(inputs.now) {
                put(link, ToDrivers::Ask);
            }
            if !matches!(link.known, super::link::Known::AsPlanned(_)) {
                continue;
            }
            if clearing && link.latched() {
                let due = link.cleared.is_none_or(|sent| inputs.now.since_ns(sent) >= CLEAR_EVERY_NS);
                if due {
                    link.cleared = Some(inputs.now);
                    let token = link.heard.as_ref().map_or(0, |(_, it)| it.token);
                    put(link, ToDrivers::Clear { token });
                }
            }
            let Some(mode) = mode else { continue };
            let unsent = inputs.links.get(at).and_then(|it| it.unsent);
            if !link.has_room(inputs.now, unsent, in_flight) {
                say(out, Event::SendSkipped { link: index });
                continue;
            }
            let mut speeds = wheels::channels(&self.settings, at, &counts);
            if mode != Mode::Run {
                speeds.iter_mut().for_each(|speed| *speed = 0);
            }
            let ramp_ms = out.stop_ramp_ms;
            put(link, ToDrivers::Drive(Drive { mode, valid_ms: own.valid_ms, ramp_ms, speeds }));
        }
        if !out.pull_stop {
            // A stop pulled before the next tick goes on after what was just sent.
            out.stop_sequence = self.state.links.iter().map(|link| link.sequence).collect();
        }
        out.view.sent_rad_s = back;
        out.view.sent_counts = counts;
    }

    /// Figures for people and records, and whether the orderly end is done.
    fn show(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        let state = &mut self.state;
        out.phase = state.phase;
        out.cause = state.cause;
        out.view.frame = self.shaper.frame();
        out.view.pace = state.pace;
        out.view.sent = state.sent.newest();
        out.view.pose = state.wheels.odometry.pose();
        out.view.measured_rad_s = state.wheels.measured_rad_s.clone();
        for link in &state.links {
            let age = link.feedback_age_ns(inputs.now).map_or(f64::INFINITY, ns_to_s);
            out.view.feedback_age_s.push(age as f32);
            out.view.round_trip_s.push(ns_to_s(link.round_trip_ns) as f32);
        }
        let latched = state.links.iter().all(|link| !link.open || link.latched());
        let done = match state.phase {
            Phase::Parked => state.parked_to_quit,
            Phase::Tripped => latched,
            Phase::Ready | Phase::Driving | Phase::Stopping => false,
        };
        out.finished = state.quitting && done;
        state.parked_to_quit = state.quitting && state.phase == Phase::Parked;
        out.view.waits_for = match state.phase {
            Phase::Parked => self.waits(inputs, seen),
            Phase::Tripped => self.reset_waits(inputs, seen),
            Phase::Ready | Phase::Driving | Phase::Stopping => None,
        };
    }
}

/// Tells an event; beyond what one tick can hold it is dropped, since the phase and the cause tell the rest.
fn say(out: &mut Outputs, event: Event) {
    let _ = out.events.try_push(event);
}

fn ms(ns: u64) -> u32 {
    u32::try_from(ns / 1_000_000).unwrap_or(u32::MAX)
}
