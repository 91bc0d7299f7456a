//! Pace, frame and heading, and the twist of a tick.

use super::Core;
use super::event::{Event, say};
use super::io::{Buttons, Inputs, Outputs, Phase};
use crate::base::Twist;
use crate::shaping::{Frame, Goal};

impl Core {
    /// The buttons for pace, frame and heading: in every phase but Tripped, and never a step in velocity.
    pub(super) fn turn_knobs(&mut self, inputs: &Inputs, out: &mut Outputs) {
        if self.state.tripped() || !inputs.pad.present {
            return;
        }
        let pressed = inputs.pad.pressed;
        self.change_pace(pressed, out);
        if pressed.has(Buttons::FRAME) {
            self.state.frame = match self.state.frame {
                Frame::Base => Frame::Room,
                Frame::Room => Frame::Base,
            };
            // A stop goes on in the frame in which it began; the one asked comes when it is over, see `shape`.
            if self.state.phase != Phase::Stopping {
                self.shaper.request_frame(self.state.frame);
            }
        }
        if pressed.has(Buttons::ZERO_HEADING) {
            let fell_rad = self.state.wheels.odometry.zero_heading();
            self.shaper.shift_heading(-fell_rad);
            say(out, Event::HeadingZeroed);
        }
    }

    fn change_pace(&mut self, pressed: Buttons, out: &mut Outputs) {
        let fastest = u8::try_from(self.settings.paces.len().saturating_sub(1)).unwrap_or(u8::MAX);
        let mut pace = self.state.pace;
        if pressed.has(Buttons::PACE_UP) {
            pace = pace.saturating_add(1).min(fastest);
        }
        if pressed.has(Buttons::PACE_DOWN) {
            pace = pace.saturating_sub(1);
        }
        if pace != self.state.pace {
            self.state.pace = pace;
            say(out, Event::Pace { pace });
        }
    }

    /// The twist of this tick; zero outside Driving and Stopping.
    pub(super) fn shape(&mut self, inputs: &Inputs, out: &mut Outputs) {
        let goal = match self.state.phase {
            Phase::Parked | Phase::Ready | Phase::Tripped => {
                self.shaper.request_frame(self.state.frame);
                self.state.sent.push(Twist::ZERO, self.settings.kept_every);
                return;
            }
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
        self.state.sent.push(shaped.in_base_frame, self.settings.kept_every);
    }
}
