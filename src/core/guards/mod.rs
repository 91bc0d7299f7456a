//! The guards: what takes the base to Tripped. One file for each thing that is watched; here their order.

mod following;
mod links;
mod pad;
mod runaway;
mod skid;
mod slowing;
mod ticks;

pub(super) use pad::stands_at_pad;
pub(super) use slowing::DriverStop;

use serde::{Deserialize, Serialize};

use super::event::say;
use super::io::{Inputs, Outputs, Phase};
use super::sent::Sent;
use super::settings::Settings;
use super::state::State;
use super::step::Seen;
use super::wheels::Wheels;
use super::{Cause, Core};
use crate::base::Layout;
use crate::units::Mono;
use following::Following;
use runaway::{Pushed, Runaway};
use skid::Skid;

/// Timers of the guards that look at the wheels.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct WheelGuards {
    following: Following,
    runaway: Runaway,
    skid: Skid,
    pushed: Pushed,
}

/// What those guards look at.
struct Look<'a> {
    now: Mono,
    settings: &'a Settings,
    layout: &'a Layout,
    wheels: &'a Wheels,
    sent: &'a Sent,
}

impl WheelGuards {
    pub(super) fn new(settings: &Settings) -> Self {
        let wheels = settings.wheels.len();
        Self { following: Following::new(wheels), runaway: Runaway::new(wheels), ..Self::default() }
    }

    /// Forgets what was timed under torque.
    pub(super) fn rest(&mut self) {
        self.following.rest();
        self.runaway.rest();
        self.skid.rest();
    }
}

impl Core {
    /// The first guard that trips in this tick, in the order in which a person would look for what is wrong.
    pub(super) fn fault(&mut self, inputs: &Inputs, seen: &Seen, out: &mut Outputs) -> Option<Cause> {
        // All of them look at every tick, so that none misses what it has to remember.
        let late = self.late(inputs, out);
        let pulled = self.pulled(inputs, out);
        let wheels = self.wheel_fault(inputs.now, out);
        late.or(pulled)
            .or_else(|| self.link_fault(inputs, seen))
            .or_else(|| self.pad_gone(inputs))
            .or(wheels)
            .or_else(|| self.stop_overdue(inputs.now))
    }

    /// The guards on the wheels: under torque they trip, without it turning wheels are only told of.
    fn wheel_fault(&mut self, now: Mono, out: &mut Outputs) -> Option<Cause> {
        let quiet_ns = self.settings.times.feedback_quiet_ns;
        let fresh =
            self.state.links.iter().all(|it| it.feedback_age_ns(now).is_some_and(|age| age <= quiet_ns));
        let State { guards, wheels, sent, driver_stop, phase, .. } = &mut self.state;
        let layout = &self.shaper.settings().layout;
        let look = Look { now, settings: &self.settings, layout, wheels, sent };
        let residual = look.layout.skid(&look.wheels.measured_rad_s);
        out.view.skid_rad_s = skid::greatest(&residual);
        match phase {
            Phase::Parked => {
                guards.skid.rest();
                guards.pushed.look(&look).into_iter().for_each(|it| say(out, it));
                None
            }
            Phase::Tripped => {
                guards.skid.rest();
                let stop = driver_stop.as_mut()?;
                if stop.is_over(&look) {
                    guards.pushed.look(&look).into_iter().for_each(|it| say(out, it));
                }
                // What was measured before a line went quiet tells nothing about the ramp.
                if fresh { stop.not_slowing(&look) } else { None }
            }
            Phase::Ready => {
                guards.skid.rest();
                guards.runaway.look(&look)
            }
            Phase::Driving | Phase::Stopping => {
                let (event, skids) = guards.skid.look(&look, &residual);
                event.into_iter().for_each(|it| say(out, it));
                let runaway = guards.runaway.look(&look);
                let astray = guards.following.look(&look);
                runaway.or(astray).or(skids)
            }
        }
    }

    /// The host's own stop has not come to a standstill in time.
    fn stop_overdue(&self, now: Mono) -> Option<Cause> {
        let (by, allowed_ms) = self.state.stop_by?;
        (self.state.phase == Phase::Stopping && now > by).then_some(Cause::StopOverdue { allowed_ms })
    }
}
