//! The step: one tick from everything seen to everything decided.
//!
//! Order within a tick: hear the links, measure the wheels, then fault, stop, release, quit, reset, ready, press; the
//! first that applies wins. Last, what is sent follows from the phase alone.

use super::cause::Cause;
use super::event::{Event, say};
use super::guards::{DriverStop, stands_at_pad};
use super::hold::HoldSeen;
use super::io::{Inputs, LinkInput, Outputs, Phase};
use super::link::{Known, News};
use super::phase::Happening;
use super::settings::{Settings, shaper_settings};
use super::state::{CoreState, PerLink, State};
use crate::base::Twist;
use crate::config::{Plan, StopCategory};
use crate::shaping::{self, Shaper};
use crate::units::{Mono, ns_to_s};

/// Phases, guards and everything sent. Made once; `step` is called once a tick.
#[derive(Clone, Debug)]
pub struct Core {
    pub(super) settings: Settings,
    pub(super) shaper: Shaper,
    pub(super) state: State,
}

/// What this tick has seen of links, hold and sticks, before anything is decided.
pub(super) struct Seen {
    pub(super) news: PerLink<News>,
    pub(super) hold: HoldSeen,
    pub(super) centred: bool,
}

/// A trip must not keep the program from ending for ever: by then drivers that hear nothing have stopped by themselves.
const LATCHED_TO_QUIT_NS: u64 = 1_000_000_000;

impl Core {
    /// Parked, knowing nothing of anybody.
    #[must_use]
    pub fn new(plan: &Plan) -> Self {
        let settings = Settings::new(plan);
        let state = State::new(&settings);
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
        let frame_before = self.shaper.frame();
        let seen = self.see(inputs, &mut out);
        self.decide(inputs, &seen, &mut out);
        self.turn_knobs(inputs, &mut out);
        self.shape(inputs, &mut out);
        if self.shaper.frame() != frame_before {
            say(&mut out, Event::Frame(self.shaper.frame()));
        }
        self.send(inputs, &mut out);
        self.show(inputs, &seen, &mut out);
        self.state.last_now = Some(inputs.now);
        out
    }

    /// Takes in what links, wheels and pad say.
    fn see(&mut self, inputs: &Inputs, out: &mut Outputs) -> Seen {
        let mut news = PerLink::new();
        let nothing = LinkInput::default();
        for (index, (link, own)) in (0_u8..).zip(self.state.links.iter_mut().zip(&self.settings.links)) {
            let input = inputs.links.get(usize::from(index)).unwrap_or(&nothing);
            let it = link.hear(input, &self.settings, own);
            match &link.known {
                Known::AsPlanned(_) if it.told => say(out, Event::LinkAnswers { link: index }),
                Known::Differs(field) if it.told => {
                    say(out, Event::LinkDiffers { link: index, field: *field });
                }
                Known::AsPlanned(_) | Known::Differs(_) | Known::Nothing => {}
            }
            if it.refused > 0 {
                say(out, Event::FramesRefused { link: index, count: it.refused });
            }
            if it.scaled {
                say(out, Event::Scaled { link: index });
            }
            news.push(it);
        }
        let State { wheels, links, sent, .. } = &mut self.state;
        let told_to_stand =
            sent.newest() == Twist::ZERO && sent.back(self.settings.driver_back) == Twist::ZERO;
        let layout = &self.shaper.settings().layout;
        let heard = (links.as_slice(), news.as_slice());
        if let Some(gyro) = wheels.measure(inputs.now, &self.settings, layout, heard, told_to_stand) {
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
        let stop = self.stop_asked(inputs, seen).map(Cause::StopAsked);
        self.state.pad_present = inputs.pad.present;
        if inputs.quit {
            self.state.quitting = self.state.quitting.or(Some(inputs.now));
        }
        if let Some(cause) = fault.or(stop) {
            self.trip(cause, inputs.now, out);
            self.state.reset_at_pad |= stop.is_some_and(|it| it.wants_reset_at_pad());
            return;
        }
        match self.state.phase {
            Phase::Parked => self.parked(inputs, seen, out),
            Phase::Ready => self.ready(inputs, seen, out),
            Phase::Driving => self.driving(inputs, seen, out),
            Phase::Stopping => self.stopping(inputs, seen, out),
            Phase::Tripped => {
                self.state.reset_at_pad |= stands_at_pad(&inputs.pad, seen.hold.squeezed);
                self.tripped(inputs, seen, out);
            }
        }
    }

    /// Trips, or tells a further cause while tripped. The first cause stays.
    pub(super) fn trip(&mut self, cause: Cause, now: Mono, out: &mut Outputs) {
        say(out, Event::Trip(cause));
        let zero = cause.category(self.settings.guard.stop_category) == StopCategory::Zero;
        let first = !self.state.tripped();
        if first {
            self.state.cause = Some(cause);
        }
        if first || zero {
            let ramp_ms = if zero { 0 } else { self.ramp_ms() };
            self.state.driver_stop = Some(if self.state.phase == Phase::Parked {
                DriverStop::of_others(now, ramp_ms)
            } else {
                let from = self.shaper.settings().layout.wheel_speeds(self.state.sent.newest());
                DriverStop::new(now, ramp_ms, from)
            });
        }
        self.state.stop_by = None;
        self.state.reset_since = None;
        self.state.clearing = None;
        self.state.reset_at_pad |= cause.wants_reset_at_pad();
        self.go(Happening::Fault, out);
        self.shaper.rest();
        self.state.guards.rest();
        out.pull_stop = true;
    }

    /// Changes the phase if the table says so.
    pub(super) fn go(&mut self, happening: Happening, out: &mut Outputs) {
        let from = self.state.phase;
        let to = from.after(happening);
        if to != from {
            self.state.phase = to;
            say(out, Event::Phase { from, to });
        }
    }

    /// Figures for people and records, and whether the orderly end is done.
    fn show(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) {
        out.finished = self.finished(inputs.now);
        let state = &self.state;
        out.phase = state.phase;
        out.cause = state.cause;
        out.view.frame = self.shaper.frame();
        out.view.pace = state.pace;
        out.view.sent = state.sent.newest();
        out.view.pose = state.wheels.odometry.pose();
        out.view.measured_rad_s.clone_from(&state.wheels.measured_rad_s);
        for link in &state.links {
            let age = link.feedback_age_ns(inputs.now).map_or(f64::INFINITY, ns_to_s);
            out.view.feedback_age_s.push(age as f32);
            out.view.round_trip_s.push(ns_to_s(link.round_trip_ns) as f32);
        }
        out.view.waits_for = match state.phase {
            Phase::Parked => self.ready_waits(inputs, seen),
            Phase::Tripped => self.reset_waits(inputs, seen),
            Phase::Ready | Phase::Driving | Phase::Stopping => None,
        };
    }

    /// Parked and told so once after the end was asked; or tripped and every link latched.
    fn finished(&mut self, now: Mono) -> bool {
        let state = &mut self.state;
        let Some(since) = state.quitting else { return false };
        let parked = state.phase == Phase::Parked;
        let told_so = core::mem::replace(&mut state.parked_to_quit, parked);
        match state.phase {
            Phase::Parked => told_so,
            Phase::Tripped => {
                state.links.iter().all(|link| !link.open || link.latched())
                    || now.since_ns(since) > LATCHED_TO_QUIT_NS
            }
            Phase::Ready | Phase::Driving | Phase::Stopping => false,
        }
    }
}

/// Whole milliseconds of a span.
pub(super) fn ms(ns: u64) -> u32 {
    u32::try_from(ns / 1_000_000).unwrap_or(u32::MAX)
}
