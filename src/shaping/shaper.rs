//! One tick of shaping.

use serde::{Deserialize, Serialize};

use super::average::Average;
use super::region::Region;
use super::{Frame, Limits, Pace, Response, Sticks, stick};
use crate::base::{Layout, PerWheel, Pose, Twist, pose};
use crate::units::wrap_rad;

/// What the shaper works with, fixed after start.
#[derive(Clone, Debug, PartialEq)]
pub struct ShaperSettings {
    /// Full-rank layout.
    pub layout: Layout,
    /// Greatest speed of each wheel, rad/s.
    pub max_rad_s: PerWheel<f64>,
    /// Greatest acceleration of each wheel, rad/s^2.
    pub max_rad_s2: PerWheel<f64>,
    /// `[limits]`.
    pub limits: Limits,
    /// Deadband and curve.
    pub response: Response,
    /// Length of a tick.
    pub period_s: f64,
    /// Delay between deciding and moving, for predicting the heading in the room frame.
    pub lead_s: f64,
    /// Length of the travel part of each row: rad/s of the wheel per m/s in its worst direction.
    pub(super) travel_gain: PerWheel<f64>,
}

impl ShaperSettings {
    /// Settings for a layout; one entry a wheel in both lists.
    #[must_use]
    pub fn new(
        layout: Layout,
        (max_rad_s, max_rad_s2): (PerWheel<f64>, PerWheel<f64>),
        limits: Limits,
        response: Response,
        period_s: f64,
        lead_s: f64,
    ) -> Self {
        let travel_gain = layout.rows().iter().map(|[_, x, y]| libm::hypot(*x, *y)).collect();
        Self { layout, max_rad_s, max_rad_s2, limits, response, period_s, lead_s, travel_gain }
    }

    /// How many ticks the moving average spans: at least `smoothing_s`, so that the jerk stays within its bound.
    #[must_use]
    pub fn samples(&self) -> usize {
        (libm::ceil(self.limits.smoothing_s / self.period_s - 1e-9).max(1.0)) as usize
    }
}

/// What the motion is to become.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Goal {
    /// Follow the sticks at a pace.
    Follow {
        /// As the person holds them.
        sticks: Sticks,
        /// What a full stick means.
        pace: Pace,
    },
    /// Come to rest with `stop_m_s2`, travel and turn by one factor.
    Stop,
}

/// What one tick of shaping gives.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Shaped {
    /// What the sticks ask for after steps 1 to 3, in the stick frame.
    pub demand: Twist,
    /// The twist after smoothing, in the stick frame.
    pub in_stick_frame: Twist,
    /// The twist to send, in the base frame, before rounding to counts.
    pub in_base_frame: Twist,
    /// The last check had to scale: a bug in the steps before it, never expected.
    pub last_check_fired: bool,
}

/// Steps 1 to 3: what the sticks ask for, brought inside what pace, grip and wheels allow; in the stick frame.
#[must_use]
pub fn demand(settings: &ShaperSettings, sticks: Sticks, pace: Pace, frame: Frame) -> Twist {
    let region = Region::new(frame, pace, settings.period_s);
    region.limited(stick::asked(sticks, &settings.response, pace), settings)
}

/// The part of the shaper that changes; a snapshot of it and the same settings go on alike.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ShaperState {
    /// Rate-limited velocity before smoothing, in the stick frame.
    velocity: Twist,
    average: Average,
    /// Frame and pace that bound the motion now.
    region: Region,
    /// Those asked for, while the motion is being brought inside them.
    wanted: Region,
    /// For how many ticks the velocity has been inside `wanted`.
    inside: u16,
    /// Heading that the room frame goes by: the measured one, kept from jumping while moving.
    heading_rad: f64,
}

/// The state of shaping: present velocity, moving average, frame.
#[derive(Clone, Debug)]
pub struct Shaper {
    settings: ShaperSettings,
    state: ShaperState,
}

/// While moving, a heading that jumps (a gyro taking over, a wheel that slipped) is followed at this rate, so that the
/// jump does not become a lurch: half a m/s^2 across at one m/s.
const HEADING_CORRECTION_RAD_S: f64 = 0.5;

/// What is kept free of a wheel's acceleration for the change of arc by chord between two ticks (second order).
const ACCELERATION_USED: f64 = 1.0 - 1e-6;

/// The last check forgives what rounding makes.
const LAST_CHECK: f64 = 1.0 + 1e-9;

impl Shaper {
    /// At rest, in the base frame.
    #[must_use]
    pub fn new(settings: ShaperSettings) -> Self {
        let region = Region::new(Frame::Base, Pace { travel_m_s: 0.0, turn_rad_s: 0.0 }, settings.period_s);
        let state = ShaperState {
            velocity: Twist::ZERO,
            average: Average::new(settings.samples()),
            region,
            wanted: region,
            inside: 0,
            heading_rad: 0.0,
        };
        Self { settings, state }
    }

    /// Goes on from a snapshot that was taken under the same settings.
    #[must_use]
    pub fn resume(settings: ShaperSettings, state: ShaperState) -> Self {
        Self { settings, state }
    }

    /// The part that changes.
    #[must_use]
    pub fn state(&self) -> &ShaperState {
        &self.state
    }

    /// What it works with.
    #[must_use]
    pub fn settings(&self) -> &ShaperSettings {
        &self.settings
    }

    /// One tick. `heading_rad` is the base's present heading in the room.
    pub fn step(&mut self, goal: Goal, heading_rad: f64) -> Shaped {
        self.follow_heading(heading_rad);
        let (demand, slow_down_m_s2) = match goal {
            Goal::Follow { sticks, pace } => {
                self.want(Region::new(self.state.wanted.frame, pace, self.settings.period_s));
                (self.inside_both(stick::asked(sticks, &self.settings.response, pace)), None)
            }
            Goal::Stop => (Twist::ZERO, Some(self.settings.limits.stop_m_s2)),
        };
        self.approach(demand, slow_down_m_s2);
        let smoothed = self.state.average.push(self.state.velocity);
        self.change_region(smoothed);
        // A change of frame has rotated the average.
        let smoothed = self.state.average.mean();
        let (in_base_frame, last_check_fired) = self.last_check(self.in_base_frame(smoothed));
        // The base will have turned by this until the next tick.
        self.state.heading_rad += smoothed.turn_rad_s * self.settings.period_s;
        Shaped { demand, in_stick_frame: smoothed, in_base_frame, last_check_fired }
    }

    /// The frame in force now.
    #[must_use]
    pub fn frame(&self) -> Frame {
        self.state.region.frame
    }

    /// Asks for another frame; taken over without a step in velocity, when the twist is inside both frames' sets.
    pub fn request_frame(&mut self, frame: Frame) {
        self.want(Region::new(frame, self.state.wanted.pace, self.settings.period_s));
        if self.at_rest() {
            self.state.region = self.state.wanted;
        }
    }

    /// The heading's zero or source changed: the heading passed to `step` will from now on be larger by `by_rad` for
    /// the same attitude. Rotates the present state so that the base's motion is unchanged.
    pub fn shift_heading(&mut self, by_rad: f64) {
        self.state.heading_rad += by_rad;
        if self.state.region.frame == Frame::Room {
            self.rotate(by_rad);
        }
    }

    /// Forgets all motion: the base is known to stand (Parked, Ready, Tripped).
    pub fn rest(&mut self) {
        self.state.velocity = Twist::ZERO;
        self.state.average.rest();
        self.state.region = self.state.wanted;
    }

    /// How many ticks a stop would take from here until nothing is left to send: braking, then the average running out.
    #[must_use]
    pub fn ticks_to_rest(&self) -> u32 {
        if self.at_rest() {
            return 0;
        }
        let from = self.state.velocity;
        let braking = self.rate_gauge(from, from.scaled(-1.0), Some(self.settings.limits.stop_m_s2));
        let braking = libm::ceil(braking - 1e-9).clamp(0.0, 1e9) as u32;
        braking.saturating_add(u32::try_from(self.state.average.len()).unwrap_or(u32::MAX))
    }

    /// Nothing left to send: velocity and every sample of the average are zero.
    #[must_use]
    pub fn at_rest(&self) -> bool {
        self.state.velocity == Twist::ZERO && self.state.average.at_rest()
    }

    fn want(&mut self, wanted: Region) {
        if wanted == self.state.wanted {
            return;
        }
        self.state.wanted = wanted;
        self.state.inside = 0;
        if self.at_rest() {
            self.state.region = wanted;
        }
    }

    /// At rest the measured heading is taken as it is; in motion it is followed without a jump.
    fn follow_heading(&mut self, measured_rad: f64) {
        let state = &mut self.state;
        let error = if measured_rad.is_finite() { wrap_rad(measured_rad - state.heading_rad) } else { 0.0 };
        if state.velocity == Twist::ZERO && state.average.at_rest() {
            state.heading_rad += error;
        } else {
            let most = HEADING_CORRECTION_RAD_S * self.settings.period_s;
            state.heading_rad += error.clamp(-most, most);
        }
    }

    /// Steps 2 and 3, inside the set in force and the one that is wanted.
    fn inside_both(&self, asked: Twist) -> Twist {
        let (now, wanted) = (&self.state.region, &self.state.wanted);
        let limited = now.limited(asked, &self.settings);
        if now == wanted {
            return limited;
        }
        let limited = wanted.limited(limited, &self.settings);
        let outside = now.gauge(limited, &self.settings).max(wanted.gauge(limited, &self.settings));
        if outside > 1.0 { limited.scaled(1.0 / outside) } else { limited }
    }

    /// Step 4: the velocity moves straight toward the demand, as far as one tick may.
    fn approach(&mut self, demand: Twist, slow_down_m_s2: Option<f64>) {
        let state = &self.state;
        let from = state.velocity;
        // Outside what is allowed (only after a change of limits): brake along the present twist until inside.
        let outside = slow_down_m_s2.is_none() && state.region.gauge(from, &self.settings) > LAST_CHECK;
        let demand = if outside { Twist::ZERO } else { demand };
        let step = Twist::new(
            demand.turn_rad_s - from.turn_rad_s,
            demand.x_m_s - from.x_m_s,
            demand.y_m_s - from.y_m_s,
        );
        let g = self.rate_gauge(from, step, slow_down_m_s2);
        self.state.velocity = if g > 1.0 {
            Twist::new(
                from.turn_rad_s + step.turn_rad_s / g,
                from.x_m_s + step.x_m_s / g,
                from.y_m_s + step.y_m_s / g,
            )
        } else {
            demand
        };
    }

    /// By how much a step in velocity is larger than one tick may make it.
    fn rate_gauge(&self, from: Twist, step: Twist, slow_down_m_s2: Option<f64>) -> f64 {
        let (settings, region) = (&self.settings, &self.state.region);
        let limits = &settings.limits;
        let per_s = 1.0 / settings.period_s;
        let travel = match slow_down_m_s2 {
            Some(stop) => step.travel_m_s() * per_s / stop,
            None => {
                let speed = from.travel_m_s();
                let (along, across) = if speed > 0.0 {
                    (
                        (step.x_m_s * from.x_m_s + step.y_m_s * from.y_m_s) / speed,
                        (step.y_m_s * from.x_m_s - step.x_m_s * from.y_m_s) / speed,
                    )
                } else {
                    (step.travel_m_s(), 0.0)
                };
                let along_most = if along > 0.0 { limits.speed_up_m_s2 } else { limits.slow_down_m_s2 };
                let across_most = limits.speed_up_m_s2.min(limits.slow_down_m_s2);
                libm::hypot(along * per_s / along_most, across * per_s / across_most)
            }
        };
        let gauge = travel.max(step.turn_rad_s.abs() * per_s / limits.turn_rad_s2);
        let rows = settings.layout.rows().iter().zip(&settings.max_rad_s2);
        // While a set gives way to another, both bounds hold.
        let both = [region, &self.state.wanted];
        let room = both.iter().any(|it| it.frame == Frame::Room);
        let base = both.iter().any(|it| it.frame == Frame::Base);
        let grip = both.iter().map(|it| it.grip_m_s2(settings)).fold(0.0, f64::max);
        let arc = both.iter().map(|it| it.arc_by_chord()).fold(1.0, f64::max);
        let (d_travel, d_turn) = (step.travel_m_s() * per_s * arc, step.turn_rad_s.abs() * per_s);
        rows.zip(&settings.travel_gain).fold(gauge, |greatest, (([h_turn, h_x, h_y], most), gain)| {
            let mut greatest = greatest;
            if base {
                let change = h_turn * step.turn_rad_s + h_x * step.x_m_s + h_y * step.y_m_s;
                greatest = greatest.max(change.abs() * per_s / most);
            }
            if room {
                let left = (most * ACCELERATION_USED - gain * grip * arc).max(most * 1e-3);
                greatest = greatest.max((h_turn.abs() * d_turn + gain * d_travel) / left);
            }
            greatest
        })
    }

    /// Takes the wanted frame and pace over once the whole average lies inside both sets.
    fn change_region(&mut self, smoothed: Twist) {
        if self.state.region == self.state.wanted {
            return;
        }
        let inside = self.state.wanted.gauge(self.state.velocity, &self.settings) <= 1.0;
        self.state.inside = if inside { self.state.inside.saturating_add(1) } else { 0 };
        if usize::from(self.state.inside) < self.state.average.len() {
            return;
        }
        let angle = self.room_angle(smoothed);
        match (self.state.region.frame, self.state.wanted.frame) {
            (Frame::Base, Frame::Room) => self.rotate(angle),
            (Frame::Room, Frame::Base) => self.rotate(-angle),
            (Frame::Base, Frame::Base) | (Frame::Room, Frame::Room) => {}
        }
        self.state.region = self.state.wanted;
    }

    fn rotate(&mut self, angle_rad: f64) {
        self.state.velocity = self.state.velocity.rotated(angle_rad);
        self.state.average.rotate(angle_rad);
    }

    /// The heading at the middle of the tick that is being decided.
    fn room_angle(&self, twist: Twist) -> f64 {
        self.state.heading_rad + twist.turn_rad_s * (self.settings.lead_s + self.settings.period_s / 2.0)
    }

    /// Step 6: the base twist that displaces the base in the room by exactly what is wanted in this tick.
    fn in_base_frame(&self, twist: Twist) -> Twist {
        match self.state.region.frame {
            Frame::Base => twist,
            Frame::Room => {
                let dt = self.settings.period_s;
                let ahead = self.state.heading_rad + twist.turn_rad_s * self.settings.lead_s;
                let seen = Twist::new(0.0, twist.x_m_s * dt, twist.y_m_s * dt).rotated(-ahead);
                let heading_rad = twist.turn_rad_s * dt;
                pose::log(Pose { x_m: seen.x_m_s, y_m: seen.y_m_s, heading_rad }, dt)
            }
        }
    }

    /// Step 7: must never fire.
    fn last_check(&self, twist: Twist) -> (Twist, bool) {
        let rows = self.settings.layout.rows().iter().zip(&self.settings.max_rad_s);
        let outside = rows.fold(0.0_f64, |greatest, ([h_turn, h_x, h_y], max)| {
            let speed = h_turn * twist.turn_rad_s + h_x * twist.x_m_s + h_y * twist.y_m_s;
            greatest.max(speed.abs() / max)
        });
        if outside > LAST_CHECK { (twist.scaled(1.0 / outside), true) } else { (twist, false) }
    }
}
