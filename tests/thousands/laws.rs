//! What holds in every tick of every drive, whatever goes wrong: frames fit the phase, wheels turn only in Driving and
//! Stopping, no limit is passed, nothing sent skids the wheels.

use gripline::base::Twist;
use gripline::config::{Plan, WheelPlan};
use gripline::core::{Event, Outputs, Phase};
use gripline::shaping::Frame;
use gripline::wire::{Mode, ToDrivers};

use crate::law;

/// What rounding may add to a limit.
const ROUNDING: f64 = 1.0 + 1e-6;
/// So fast the room's frame follows a heading that jumps.
const HEADING_CORRECTION_RAD_S: f64 = 0.5;

pub(crate) struct Laws {
    /// Greatest turn and travel of any pace.
    fastest: (f64, f64),
    /// What a change of frame or the room's frame may add to the travel acceleration.
    grip_m_s2: f64,
    before: Twist,
    /// The sticks have meant nothing but the base's frame so far.
    base_frame_only: bool,
    stopping_ticks: u32,
}

impl Laws {
    pub(crate) fn new(plan: &Plan) -> Self {
        let paces = || plan.paces.iter().map(|it| it.pace);
        let grip = |it: gripline::shaping::Pace| plan.limits.grip_m_s2.min(it.travel_m_s * it.turn_rad_s);
        Self {
            fastest: (
                paces().map(|it| it.turn_rad_s).fold(0.0, f64::max),
                paces().map(|it| it.travel_m_s).fold(0.0, f64::max),
            ),
            grip_m_s2: paces().map(grip).fold(0.0, f64::max),
            before: Twist::ZERO,
            base_frame_only: true,
            stopping_ticks: 0,
        }
    }

    /// Looks at what one tick decided. `stop_s`: how long the host's own stop may take.
    pub(crate) fn look(&mut self, plan: &Plan, out: &Outputs, stop_s: f64) -> Result<(), String> {
        frames(plan, out)?;
        self.limits(plan, out)?;
        law!(
            !out.events.iter().any(|it| matches!(it, Event::LastCheckFired)),
            "the shaper's last check fired"
        );
        self.stopping_ticks = if out.phase == Phase::Stopping { self.stopping_ticks + 1 } else { 0 };
        let stopping_s = f64::from(self.stopping_ticks.saturating_sub(1)) * plan.tick.period_s();
        law!(stopping_s <= stop_s, "in Stopping for {stopping_s:.3} s, {stop_s:.3} allowed");
        Ok(())
    }

    fn limits(&mut self, plan: &Plan, out: &Outputs) -> Result<(), String> {
        let twist = out.view.sent;
        let before = core::mem::replace(&mut self.before, twist);
        self.base_frame_only &= out.view.frame == Frame::Base;
        let (turn, travel) = self.fastest;
        law!(twist.turn_rad_s.abs() <= turn * 1.001, "turns at {} of {turn} rad/s", twist.turn_rad_s);
        law!(twist.travel_m_s() <= travel * 1.001, "travels at {} of {travel} m/s", twist.travel_m_s());
        if out.phase == Phase::Tripped {
            // The drivers make the ramp.
            return Ok(());
        }
        let per_s = 1.0 / plan.tick.period_s();
        let limits = &plan.limits;
        let step = Twist::new(
            (twist.turn_rad_s - before.turn_rad_s) * per_s,
            (twist.x_m_s - before.x_m_s) * per_s,
            (twist.y_m_s - before.y_m_s) * per_s,
        );
        law!(step.turn_rad_s.abs() <= limits.turn_rad_s2 * ROUNDING, "{} rad/s2", step.turn_rad_s);
        let most = limits.speed_up_m_s2.max(limits.slow_down_m_s2).max(limits.stop_m_s2);
        // In the room's frame the twist also turns with the base, and follows a heading that was corrected.
        let turns = self.grip_m_s2 * 1.01 + HEADING_CORRECTION_RAD_S * travel;
        let most = if self.base_frame_only { most } else { most + turns };
        law!(step.travel_m_s() <= most * ROUNDING, "{} of {most} m/s2", step.travel_m_s());
        let change = plan.layout.wheel_speeds(step);
        let speeds = plan.layout.wheel_speeds(twist);
        for ((speed, change), wheel) in speeds.iter().zip(&change).zip(&plan.wheels) {
            law!(speed.abs() <= wheel.max_rad_s * ROUNDING, "{}: {speed} rad/s", wheel.name);
            law!(change.abs() <= wheel.max_rad_s2 * ROUNDING, "{}: {change} rad/s2", wheel.name);
        }
        Ok(())
    }
}

/// Wheel speed in one count of the drivers, with its sign.
pub(crate) fn rad_s_per_count(plan: &Plan, wheel: &WheelPlan) -> f64 {
    let lsb = f64::from(plan.links[wheel.link].speed_lsb_urad_s) * 1e-6 / wheel.gear;
    if wheel.reversed { -lsb } else { lsb }
}

/// Every frame fits its phase, and its counts are those of a twist.
fn frames(plan: &Plan, out: &Outputs) -> Result<(), String> {
    let motion = matches!(out.phase, Phase::Driving | Phase::Stopping);
    let told = plan.layout.wheel_speeds(out.view.sent);
    for frame in &out.frames {
        let index = usize::from(frame.link);
        let link = &plan.links[index];
        let drive = match &frame.message {
            ToDrivers::Drive(drive) => drive,
            ToDrivers::Clear { .. } => {
                law!(out.phase == Phase::Tripped, "a Clear in {:?}", out.phase);
                continue;
            }
            ToDrivers::Ask => continue,
            ToDrivers::Stop { .. } => return Err("a Stop past the stop line".to_owned()),
        };
        let mode = match out.phase {
            Phase::Parked => Mode::Park,
            Phase::Ready => Mode::Hold,
            Phase::Driving | Phase::Stopping => Mode::Run,
            Phase::Tripped => return Err("a Drive in Tripped".to_owned()),
        };
        law!(drive.mode == mode, "{:?} in {:?}", drive.mode, out.phase);
        law!(drive.valid_ms == link.valid_ms && drive.ramp_ms > 0, "{drive:?}");
        law!(drive.speeds.len() == usize::from(link.channels), "{drive:?}");
        law!(motion || drive.speeds.iter().all(|it| *it == 0), "{drive:?} in {:?}", out.phase);
        let mut used = 0;
        for (wheel, told) in plan.wheels.iter().zip(&told).filter(|(it, _)| it.link == index) {
            let lsb = rad_s_per_count(plan, wheel);
            let counts = drive.speeds[usize::from(wheel.channel)];
            used += u32::from(counts != 0);
            let off = (f64::from(counts) - told / lsb).abs();
            law!(off <= 0.5 + 1e-6, "{}: {counts} counts for {told} rad/s is off by {off}", wheel.name);
        }
        let sent = u32::try_from(drive.speeds.iter().filter(|it| **it != 0).count()).unwrap();
        law!(sent == used, "an unused channel is told to turn: {drive:?}");
    }
    law!(out.cause.is_some() == (out.phase == Phase::Tripped), "{:?} in {:?}", out.cause, out.phase);
    law!(!out.pull_stop || out.phase == Phase::Tripped, "the stop line is pulled in {:?}", out.phase);
    law!(out.release_stop_line.is_none() || out.phase != Phase::Tripped, "the stop line rests in Tripped");
    law!(out.stop_sequence.len() == plan.links.len() && out.events.len() <= 16, "no stop for a link");
    Ok(())
}
