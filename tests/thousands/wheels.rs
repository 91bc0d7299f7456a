//! Wheels that do not do what they are told: when the core must have seen it, judged from what the wheels truly do.

use gripline::base::PerWheel;
use gripline::config::Plan;
use gripline::core::budget::{BudgetRow, Guard};
use gripline::core::{Outputs, Phase};
use gripline::standin::sim::Truth;
use gripline::units::Mono;

use crate::faults::Budget;
use crate::law;
use crate::laws::rad_s_per_count;

/// Thresholds here are above the guards' own: what is between them may or may not be seen, since links are heard at
/// different moments and later than the truth.
const CLEARLY: f64 = 1.3;
/// Ticks that are looked back at.
const KEPT: usize = 16;

pub(crate) struct WheelWatch {
    told: Vec<PerWheel<f64>>,
    tick: usize,
    phase: Phase,
    phase_since: Mono,
    /// Since when each wheel has been astray or running away, and how far it has turned in the latter.
    astray: PerWheel<Option<Mono>>,
    away: PerWheel<Option<(Mono, f64)>>,
    fast: PerWheel<Option<Mono>>,
    skids: Option<Mono>,
    /// What the wheels were told when it tripped, and the ramp.
    stop: (PerWheel<f64>, f64),
}

impl WheelWatch {
    pub(crate) fn new(plan: &Plan, now: Mono) -> Self {
        let zeros: PerWheel<f64> = plan.wheels.iter().map(|_| 0.0).collect();
        Self {
            told: vec![zeros.clone(); KEPT],
            tick: 0,
            phase: Phase::Parked,
            phase_since: now,
            astray: plan.wheels.iter().map(|_| None).collect(),
            away: plan.wheels.iter().map(|_| None).collect(),
            fast: plan.wheels.iter().map(|_| None).collect(),
            skids: None,
            stop: (zeros, 0.0),
        }
    }

    /// After every tick: what was told. Returns whether the phase is a new one.
    pub(crate) fn tell(&mut self, now: Mono, out: &Outputs) {
        if out.phase != self.phase {
            let own = |it| matches!(it, Phase::Driving | Phase::Stopping);
            if out.phase == Phase::Tripped {
                self.stop = (self.back(0).clone(), f64::from(out.stop_ramp_ms) * 1e-3);
            }
            if !(own(self.phase) && own(out.phase)) {
                self.astray.iter_mut().for_each(|it| *it = None);
                self.skids = None;
            }
            self.away.iter_mut().for_each(|it| *it = None);
            self.fast.iter_mut().for_each(|it| *it = None);
            (self.phase, self.phase_since) = (out.phase, now);
        }
        self.tick += 1;
        let place = &mut self.told[self.tick % KEPT];
        place.clone_from(&out.view.sent_rad_s);
    }

    fn back(&self, ticks: usize) -> &PerWheel<f64> {
        &self.told[(self.tick + KEPT - ticks) % KEPT]
    }

    /// `dead`: encoders that stand still.
    pub(crate) fn look(
        &mut self,
        now: Mono,
        budget: &Budget<'_>,
        pace: usize,
        truth: &Truth,
        dead: &[bool],
    ) -> Result<(), String> {
        // As the drivers report it: a speed beyond the counts of the line is cut.
        let plan = budget.plan;
        let speeds = truth.wheel_rad_s.iter().zip(dead).zip(&plan.wheels);
        let read: PerWheel<f64> = speeds
            .map(|((speed, dead), wheel)| {
                let most = f64::from(i16::MAX) * rad_s_per_count(plan, wheel).abs();
                if *dead { 0.0 } else { speed.clamp(-most, most) }
            })
            .collect();
        match self.phase {
            Phase::Driving | Phase::Stopping => {
                self.following(now, budget.plan, &read, budget.row(Guard::NotFollowing, pace))?;
                if budget.plan.wheels.len() > 3 {
                    self.skid(now, budget.plan, &read, budget.row(Guard::Skid, pace))?;
                }
                Ok(())
            }
            Phase::Ready => self.runaway(now, budget.plan, &read, budget.row(Guard::Runaway, pace)),
            Phase::Tripped if truth.torque => {
                self.slowing(now, budget.plan, &read, budget.row(Guard::NotSlowing, pace))
            }
            Phase::Parked | Phase::Tripped => Ok(()),
        }
    }

    fn following(
        &mut self,
        now: Mono,
        plan: &Plan,
        read: &PerWheel<f64>,
        row: &BudgetRow,
    ) -> Result<(), String> {
        let centre = (plan.guard.driver_ms.unwrap() / 10.0) as usize;
        for (index, wheel) in plan.wheels.iter().enumerate() {
            let told = |back: usize| self.back(back)[index];
            let window = centre.saturating_sub(3)..(centre + 6).min(KEPT - 1);
            let (mut least, mut change) = (f64::INFINITY, 0.0_f64);
            for back in window {
                least = least.min((read[index] - told(back)).abs());
                change = change.max((told(back) - told(back + 1)).abs());
            }
            let lag = change / plan.tick.period_s() * plan.guard.follow_lag_s;
            let clearly = least > (plan.guard.follow_share * wheel.max_rad_s + lag) * CLEARLY;
            let since = &mut self.astray[index];
            *since = if clearly { since.or(Some(now)) } else { None };
            let astray_s = since.map_or(0.0, |it| now.since_s(it));
            let most_s = until_stop(row);
            law!(
                astray_s <= most_s,
                "{} has been astray for {astray_s:.3} s, {most_s:.3} allowed",
                wheel.name
            );
        }
        Ok(())
    }

    fn skid(&mut self, now: Mono, plan: &Plan, read: &PerWheel<f64>, row: &BudgetRow) -> Result<(), String> {
        let residual = plan.layout.skid(read);
        let over = |(it, wheel): (&f64, &gripline::config::WheelPlan)| {
            it.abs() > plan.guard.skid_share * wheel.max_rad_s * CLEARLY
        };
        let skids = residual.iter().zip(&plan.wheels).any(over);
        self.skids = if skids { self.skids.or(Some(now)) } else { None };
        let skids_s = self.skids.map_or(0.0, |it| now.since_s(it));
        let most_s = until_stop(row);
        law!(skids_s <= most_s, "wheels have been skidding for {skids_s:.3} s, {most_s:.3} allowed");
        Ok(())
    }

    /// Told to stand under torque.
    fn runaway(
        &mut self,
        now: Mono,
        plan: &Plan,
        read: &PerWheel<f64>,
        row: &BudgetRow,
    ) -> Result<(), String> {
        for ((index, wheel), speed) in plan.wheels.iter().enumerate().zip(read) {
            if speed.abs() <= plan.guard.runaway_share * wheel.max_rad_s * CLEARLY {
                self.away[index] = None;
                continue;
            }
            let since = self.away[index].get_or_insert((now, 0.0)).0;
            let (away_s, most_s) = (now.since_s(since), until_stop(row));
            law!(
                away_s <= most_s,
                "{} has been running away for {away_s:.3} s, {most_s:.3} allowed",
                wheel.name
            );
        }
        Ok(())
    }

    /// In the drivers' ramp.
    fn slowing(
        &mut self,
        now: Mono,
        plan: &Plan,
        read: &PerWheel<f64>,
        row: &BudgetRow,
    ) -> Result<(), String> {
        let (from, ramp_s) = &self.stop;
        let age_s = now.since_s(self.phase_since);
        if age_s < row.detect_s || age_s > *ramp_s {
            return Ok(());
        }
        let late_s = plan.guard.driver_ms.unwrap() * 1e-3 + plan.guard.follow_lag_s;
        let left = (1.0 - (age_s - late_s) / ramp_s).clamp(0.0, 1.0);
        for ((index, wheel), speed) in plan.wheels.iter().enumerate().zip(read) {
            let should = from[index].abs() * left + plan.guard.follow_share * wheel.max_rad_s;
            let since = &mut self.fast[index];
            *since = if speed.abs() > should * CLEARLY { since.or(Some(now)) } else { None };
            let fast_s = since.map_or(0.0, |it| now.since_s(it));
            let most_s = row.tick_s + row.wire_s + row.driver_s;
            law!(fast_s <= most_s, "{} has not been slowing for {fast_s:.3} s more", wheel.name);
        }
        Ok(())
    }
}

/// From the beginning until the stop is sent and heard.
fn until_stop(row: &BudgetRow) -> f64 {
    row.detect_s + row.tick_s + row.wire_s
}
