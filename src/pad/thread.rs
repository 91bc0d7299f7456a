//! The pad's thread.

use std::path::PathBuf;
use std::time::Duration;

use crossbeam_channel::bounded;
use gilrs::{EventType, GamepadId, Gilrs, GilrsBuilder};
use rtrb::{Producer, RingBuffer};

use super::choose::{self, choose};
use super::hand_over::PadFeed;
use super::state::State;
use crate::config::{PadAxis, PadButton, PadPlan};
use crate::core::io::{PadInput, Puller};
use crate::sys::clock;
use crate::sys::evdev::{RawReports, Watch};
use crate::units::Mono;

/// Why there can be no gamepad at all.
#[derive(Debug, thiserror::Error)]
pub enum PadError {
    /// The library cannot start.
    #[error("cannot look for gamepads: {0}; is /dev/input there, and are you in the group `input`?")]
    Start(String),
    /// The thread cannot start.
    #[error("cannot start the gamepad's thread: {0}; end other programs")]
    Thread(std::io::Error),
}

/// One wait for events: so often the device is looked at.
const WAIT: Duration = Duration::from_millis(4);
/// Without a pad, or after an early wake, this long.
const PAUSE_MS: u64 = 2;
/// Without a pad, so often one is looked for.
const LOOK_EVERY_NS: u64 = 250_000_000;
/// The device of raw reports may be made, and given to us, a little after that of events.
const RAW_WITHIN_NS: u64 = 10_000_000_000;
/// Reports in one second of a still pad from which on it counts as streaming.
const STREAM_FROM: u32 = 10;

/// gilrs without its own filters, which depend on the order of events, and without force feedback.
pub(super) fn build() -> Result<Gilrs, PadError> {
    match GilrsBuilder::new().with_default_filters(false).with_force_feedback(false).build() {
        Ok(gilrs) => Ok(gilrs),
        Err(gilrs::Error::NotImplemented(gilrs)) => Ok(gilrs),
        Err(error) => Err(PadError::Start(error.to_string())),
    }
}

/// Starts the pad's thread. `on_stop` is called on it, at once, when the stop button is pressed or the device of a
/// held pad goes away: the stop line does not wait for the tick.
///
/// # Errors
/// When gamepads cannot be looked for at all. That there is none is no error: it is waited for.
pub fn start(plan: &PadPlan, on_stop: impl Fn(Puller) + Send + 'static) -> Result<PadFeed, PadError> {
    let (tell, take) = RingBuffer::new(64);
    let plan = plan.clone();
    let (started, begun) = bounded(1);
    std::thread::Builder::new()
        .name("pad".into())
        .stack_size(512 * 1024)
        .spawn(move || match build() {
            Ok(gilrs) => {
                let _ = started.send(Ok(()));
                let state = State::new(&plan);
                Thread { gilrs, plan, state, held: None, tell, on_stop, looked: None, changed: true }.run();
            }
            Err(error) => {
                let _ = started.send(Err(error));
            }
        })
        .map_err(PadError::Thread)?;
    begun.recv().unwrap_or_else(|_| Err(PadError::Start("its thread ended".into())))?;
    Ok(PadFeed { take, last: PadInput::default() })
}

/// The pad that is believed.
struct Held {
    id: GamepadId,
    watch: Watch,
    /// Its device.
    path: PathBuf,
    raw: Option<RawReports>,
    /// When raw reports are to be looked for again, and until when at all.
    raw_sought: (Mono, Mono),
    /// Reports and events of the present second.
    second: (Mono, u32, u32),
    last_told: Mono,
}

struct Thread<F> {
    gilrs: Gilrs,
    plan: PadPlan,
    state: State,
    held: Option<Held>,
    tell: Producer<PadInput>,
    on_stop: F,
    looked: Option<Mono>,
    /// Something has changed that was not handed over yet.
    changed: bool,
}

impl<F: Fn(Puller)> Thread<F> {
    fn run(&mut self) {
        loop {
            let before = clock::now();
            let event = self.gilrs.next_event_blocking(Some(WAIT));
            let now = clock::now();
            match event {
                Some(event) => self.event(&event, now),
                // After an unplug gilrs wakes at once, again and again, until it notices.
                None if now.since_ns(before) < 1_000_000 => clock::sleep_ms(PAUSE_MS),
                None => {}
            }
            self.watch(now);
            if self.held.is_none() {
                self.look(now);
            }
            self.hand_over(now);
        }
    }

    fn event(&mut self, event: &gilrs::Event, now: Mono) {
        let Some(held) = self.held.as_mut().filter(|it| it.id == event.id) else { return };
        held.second.2 += 1;
        self.state.alive(now);
        self.changed = true;
        match event.event {
            EventType::AxisChanged(axis, value, _) => {
                if let Some(axis) = ours(axis) {
                    self.state.axis(axis, f64::from(value));
                }
                // Pads that gilrs has no layout for tell a trigger as an axis, from -1 released.
                if let Some((_, trigger)) = TRIGGER_AXES.into_iter().find(|(it, _)| *it == axis)
                    && self.gilrs.gamepad(event.id).button_code(trigger).is_none()
                {
                    self.button(trigger, f64::from(value).midpoint(1.0));
                }
            }
            EventType::ButtonChanged(button, value, _) => self.button(button, f64::from(value)),
            // gilrs tells every change of a button as a value, and beside it press and release at thresholds of its own:
            // those would hide where an analogue trigger really is.
            EventType::ButtonPressed(..) | EventType::ButtonReleased(..) => {}
            EventType::Disconnected => self.lose(),
            // These, and kinds that later versions may add, change no value.
            EventType::ButtonRepeated(..)
            | EventType::Connected
            | EventType::Dropped
            | EventType::ForceFeedbackEffectCompleted
            | _ => {}
        }
    }

    fn button(&mut self, button: gilrs::Button, value: f64) {
        let Some(button) = PadButton::ALL.into_iter().find(|it| choose::button(*it) == button) else {
            return;
        };
        if self.state.button(button, value, false) {
            (self.on_stop)(Puller::PadStop);
        }
    }

    /// Looks at the device itself, and counts its raw reports.
    fn watch(&mut self, now: Mono) {
        let Some(held) = &mut self.held else { return };
        if held.watch.is_gone() {
            self.lose();
            return;
        }
        if held.raw.is_none() && now < held.raw_sought.1 && now >= held.raw_sought.0 {
            held.raw = RawReports::beside(&held.path);
            held.raw_sought.0 = now.plus_ns(LOOK_EVERY_NS);
        }
        let Some(raw) = &mut held.raw else { return };
        let reports = raw.count();
        if reports > 0 {
            self.state.alive(now);
        }
        held.second.1 += reports;
        if now.since_ns(held.second.0) >= 1_000_000_000 {
            let (_, reports, events) = held.second;
            // Reports without events are a stream; a pad that was moved all the time tells nothing either way.
            if events == 0 {
                self.state.streams(reports >= STREAM_FROM);
            }
            held.second = (now, 0, 0);
        }
        // The time of the last sign must reach the tick although nothing changed.
        self.changed |= reports > 0 && now.since_ns(held.last_told) >= 10_000_000;
    }

    fn lose(&mut self) {
        if self.held.take().is_some() {
            (self.on_stop)(Puller::PadGone);
        }
        self.state.unplugged();
        self.changed = true;
        self.looked = None;
    }

    /// Looks for the pad that is meant, and reads where everything on it truly is.
    fn look(&mut self, now: Mono) {
        if self.looked.is_some_and(|last| now.since_ns(last) < LOOK_EVERY_NS) {
            return;
        }
        self.looked = Some(now);
        let Some((id, watch, path)) = choose(&self.gilrs, &self.plan) else { return };
        self.state.plugged(now);
        self.read_truth(id, &watch);
        let raw_sought = (now, now.plus_ns(RAW_WITHIN_NS));
        self.held =
            Some(Held { id, watch, path, raw: None, raw_sought, second: (now, 0, 0), last_told: now });
        self.changed = true;
    }

    fn read_truth(&mut self, id: GamepadId, watch: &Watch) {
        let pad = self.gilrs.gamepad(id);
        for axis in PadAxis::ALL {
            if let Some(code) = pad.axis_code(choose::axis(axis))
                && let Some(value) = axis_value(watch, code.into_u32())
            {
                // The kernel's y axes point down, gilrs' up.
                let down = matches!(axis, PadAxis::LeftStickY | PadAxis::RightStickY | PadAxis::DPadY);
                self.state.axis(axis, if down { 0.0 - value } else { value });
            }
        }
        for button in PadButton::ALL {
            // A trigger that is told as an axis, as in `event`.
            let meant = choose::button(button);
            let axis = TRIGGER_AXES.into_iter().find(|(_, it)| *it == meant).map(|(axis, _)| axis);
            let trigger = axis.and_then(|axis| pad.axis_code(axis));
            let code = pad.button_code(choose::button(button)).or(trigger).map(|it| it.into_u32());
            if let Some(value) = code.and_then(|code| button_value(watch, code)) {
                self.state.button(button, value, true);
            }
        }
    }

    fn hand_over(&mut self, now: Mono) {
        if !self.changed {
            return;
        }
        // Without room the tick stands still: what happened is kept until it takes it.
        if self.tell.push(self.state.input()).is_ok() {
            self.state.taken();
            self.changed = false;
            if let Some(held) = &mut self.held {
                held.last_told = now;
            }
        }
    }
}

/// Axes that stand in for the trigger buttons on pads without a known layout.
const TRIGGER_AXES: [(gilrs::Axis, gilrs::Button); 2] =
    [(gilrs::Axis::LeftZ, gilrs::Button::LeftTrigger2), (gilrs::Axis::RightZ, gilrs::Button::RightTrigger2)];

const EV_KEY: u32 = 1;
const EV_ABS: u32 = 3;

/// An axis from -1 to 1.
fn axis_value(watch: &Watch, code: u32) -> Option<f64> {
    if code >> 16 != EV_ABS {
        return None;
    }
    let info = watch.axis(u16::try_from(code & 0xffff).ok()?)?;
    let (least, most) = (f64::from(info.minimum), f64::from(info.maximum));
    (most > least).then(|| (f64::from(info.value) - least) / (most - least) * 2.0 - 1.0)
}

/// A button from 0 to 1, whether it is a key or a trigger.
fn button_value(watch: &Watch, code: u32) -> Option<f64> {
    let number = u16::try_from(code & 0xffff).ok()?;
    match code >> 16 {
        EV_KEY => watch.key(number).map(|down| if down { 1.0 } else { 0.0 }),
        EV_ABS => axis_value(watch, code).map(|it| it.midpoint(1.0)),
        _ => None,
    }
}

fn ours(axis: gilrs::Axis) -> Option<PadAxis> {
    PadAxis::ALL.into_iter().find(|it| choose::axis(*it) == axis)
}
