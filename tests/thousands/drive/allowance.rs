//! How long and how far the base may go on, by the stop budget, at the pace that it is at.

use gripline::base::Twist;
use gripline::config::PacePlan;
use gripline::core::Phase;
use gripline::core::budget::Guard;

use super::{Drive, PACE_KEPT_NS};
use crate::faults::{Allowed, Fault, Kind};

impl Drive<'_> {
    /// The pace in force, or a faster one that the base may still be at.
    pub(super) fn remember_pace(&mut self) {
        let Some(host) = &self.host else { return };
        if host.out.phase == Phase::Stopping {
            return;
        }
        let Twist { turn_rad_s, .. } = host.out.view.sent;
        let travel_m_s = host.out.view.sent.travel_m_s();
        let paces = &self.budget.plan.paces;
        let fits = |it: &PacePlan| {
            travel_m_s <= it.pace.travel_m_s * 1.000_1 && turn_rad_s.abs() <= it.pace.turn_rad_s * 1.000_1
        };
        let at = paces.iter().position(fits).unwrap_or(paces.len() - 1).max(usize::from(host.out.view.pace));
        if at >= self.pace {
            let faster = at > self.pace;
            (self.pace, self.pace_since) = (at, self.now);
            for index in (0..self.faults.len()).filter(|_| faster && !self.report.faults.is_empty()) {
                if let Some(allowed) = self.allowed(&self.faults[index]) {
                    self.slowest = self.slowest.slower(allowed);
                    let allowed = if self.faults.len() > 1 { self.slowest } else { allowed };
                    self.standing.faster(self.now, index, allowed);
                }
            }
        } else if self.now.since_ns(self.pace_since) > PACE_KEPT_NS {
            self.pace = at;
            self.pace_since = self.now;
        }
    }

    /// The core has begun a stop by itself, or the drivers make one.
    pub(super) fn stopped(&mut self, before: Phase) {
        let moving = matches!(before, Phase::Driving | Phase::Stopping | Phase::Ready);
        let allowed = match (self.phase, before) {
            (Phase::Tripped, _) if moving => {
                let mut it = self.budget.allowed(Guard::PadGone, self.pace);
                // Torque can be gone before the ramp is over.
                it.rest_s = it.rest_s.max(self.budget.roll_out_s(self.pace));
                it
            }
            (Phase::Stopping, Phase::Driving) => self.budget.allowed(Guard::Release, self.pace),
            _ => return,
        };
        let allowed = if self.impaired { allowed.slower(self.slowest) } else { allowed };
        let needs_reset = self.phase == Phase::Tripped;
        let why = if needs_reset { "a trip" } else { "a stop by the host" };
        let allowed = Allowed { distance_m: f64::INFINITY, ..self.settled(allowed) };
        self.standing.begin(
            (why, None),
            self.now,
            allowed,
            (self.path_m, self.permission.grants, needs_reset),
        );
    }

    /// What wheels do behind their commands: they lag, and what is left when the torque goes rolls out.
    pub(super) fn settled(&self, allowed: Allowed) -> Allowed {
        let plan = self.budget.plan;
        let row = self.budget.row(Guard::PadGone, self.pace);
        let lag_s = 0.03_f64;
        let slowing_m_s2 = self.budget.outermost_m_s(self.pace) / row.ramp_s.unwrap();
        let left_m_s = slowing_m_s2 * lag_s;
        let coast_m_s2 = plan.bay.coast_m_s2.unwrap();
        Allowed {
            command_s: allowed.command_s,
            rest_s: allowed.rest_s + 0.1 + 5.0 * lag_s + left_m_s / coast_m_s2,
            distance_m: allowed.distance_m
                + left_m_s * lag_s
                + left_m_s * left_m_s / (2.0 * coast_m_s2)
                + 0.005,
        }
    }

    /// How late a frame may be that was written before.
    pub(super) fn late_s(&self) -> f64 {
        self.ports.iter().map(|it| it.delay_ns).max().unwrap_or(0) as f64 * 1e-9 + 0.01
    }

    /// What a fault that begins now may take; `None` where it does not have to stop the base.
    pub(super) fn allowed(&self, fault: &Fault) -> Option<Allowed> {
        let at_pad = matches!(
            fault.kind,
            Kind::HoldReleased | Kind::HoldDipped | Kind::HoldSqueezed | Kind::StopButton
        );
        let killed = matches!(fault.kind, Kind::Killed | Kind::KilledStop);
        if (self.suspended && !killed) || (at_pad && self.pad_silent.is_some()) {
            // Nobody sees it.
            return None;
        }
        let allowed = self.budget.of(fault, self.pace)?;
        // Counted from the last frame that the drivers take, which may be under way.
        let silent = matches!(
            fault.kind,
            Kind::Killed | Kind::KilledStop | Kind::Suspended | Kind::Clogged | Kind::Refused
        );
        let late_s = if silent { self.late_s() } else { 0.0 };
        Some(self.settled(allowed.later(late_s, self.budget.outermost_m_s(self.pace))))
    }
}
