//! What the drivers' feedback tells of a stop: speeds, way, and when every wheel stood. Fed frame by frame, from a
//! record or from the line itself.

use crate::base::PerWheel;
use crate::config::Plan;
use crate::units::Mono;
use crate::wire::Feedback;

/// Follows the wheels of all links together.
#[derive(Debug)]
pub(super) struct Follower<'a> {
    plan: &'a Plan,
    links: Vec<Heard>,
    /// Turned since the last round, at each wheel.
    turned_rad: PerWheel<f64>,
    speed_rad_s: PerWheel<f64>,
    outer_m: f64,
    before: Option<Round>,
}

#[derive(Clone, Debug, Default)]
struct Heard {
    since_round: bool,
    boot: Option<u16>,
    angles: Vec<i32>,
    /// The driver's clock: as last told, and what has passed on it since the first feedback, microseconds.
    clock: (u32, u64),
    /// What the host's clock shows at the driver's first feedback: the least that any feedback makes of it, nanoseconds.
    /// Feedback that waited somewhere (a suspended program reads it late) is so put where it belongs.
    began_ns: u64,
}

impl Heard {
    /// When this feedback was sent, on the host's clock.
    fn sent_at(&mut self, heard_at: Mono, feedback: &Feedback) -> Mono {
        if self.boot != Some(feedback.boot) {
            self.clock = (feedback.clock_us, 0);
            self.began_ns = heard_at.ns();
        }
        let (before, passed_us) = self.clock;
        let passed_us = passed_us + u64::from(feedback.clock_us.wrapping_sub(before));
        self.clock = (feedback.clock_us, passed_us);
        self.began_ns = self.began_ns.min(heard_at.ns().saturating_sub(passed_us.saturating_mul(1000)));
        Mono::from_ns(self.began_ns).plus_ns(passed_us.saturating_mul(1000))
    }
}

/// Every link has been heard once more.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Round {
    pub(super) at: Mono,
    /// When the round before was.
    pub(super) last: Option<Mono>,
    /// Way of the outermost point since then; what a driver that started anew has turned meanwhile is not in it.
    pub(super) way_m: f64,
    /// Speed of travel.
    pub(super) travel_m_s: f64,
    /// The fastest wheel, as a share of the speed below which it counts as standing.
    pub(super) of_standing: f64,
    /// When the last wheel came to stand, if that was in this round.
    pub(super) came_to_stand: Option<Mono>,
}

impl Round {
    /// Every wheel stands.
    pub(super) fn stands(&self) -> bool {
        self.of_standing <= 1.0
    }
}

impl<'a> Follower<'a> {
    pub(super) fn new(plan: &'a Plan) -> Self {
        let zero = || plan.wheels.iter().map(|_| 0.0).collect();
        Self {
            plan,
            links: vec![Heard::default(); plan.links.len()],
            turned_rad: zero(),
            speed_rad_s: zero(),
            outer_m: libm::hypot(plan.outline_m[0], plan.outline_m[1]) / 2.0,
            before: None,
        }
    }

    /// Takes a feedback; gives the round that it completes.
    pub(super) fn hear(&mut self, heard_at: Mono, link: usize, feedback: &Feedback) -> Option<Round> {
        let heard = self.links.get_mut(link)?;
        let at = heard.sent_at(heard_at, feedback);
        let goes_on = heard.boot == Some(feedback.boot);
        let wheels = self.plan.wheels.iter().zip(self.turned_rad.iter_mut().zip(&mut self.speed_rad_s));
        for (wheel, (turned, speed)) in wheels.filter(|(wheel, _)| wheel.link == link) {
            let channel = usize::from(wheel.channel);
            let Some(state) = feedback.channels.get(channel) else { continue };
            let plan = self.plan.links.get(link)?;
            let sign = if wheel.reversed { -1.0 } else { 1.0 };
            let at_wheel = |lsb: u32| sign * f64::from(lsb) * 1e-6 / wheel.gear;
            *speed = f64::from(state.speed) * at_wheel(plan.speed_lsb_urad_s);
            if let (true, Some(before)) = (goes_on, heard.angles.get(channel)) {
                *turned += f64::from(state.angle.wrapping_sub(*before)) * at_wheel(plan.angle_lsb_urad);
            }
        }
        heard.since_round = true;
        heard.boot = Some(feedback.boot);
        heard.angles = feedback.channels.iter().map(|it| it.angle).collect();
        self.links.iter().all(|it| it.since_round).then(|| self.round(at))
    }

    fn round(&mut self, at: Mono) -> Round {
        self.links.iter_mut().for_each(|it| it.since_round = false);
        // The forward map takes angles to a displacement as it takes speeds to a twist.
        let moved = self.plan.layout.twist(&self.turned_rad);
        self.turned_rad.iter_mut().for_each(|it| *it = 0.0);
        let share = self.plan.guard.standstill_share;
        let of_standing = self
            .speed_rad_s
            .iter()
            .zip(&self.plan.wheels)
            .map(|(it, wheel)| libm::fabs(*it) / (share * wheel.max_rad_s))
            .fold(0.0, f64::max);
        let mut round = Round {
            at,
            last: self.before.map(|it| it.at),
            way_m: moved.travel_m_s() + libm::fabs(moved.turn_rad_s) * self.outer_m,
            travel_m_s: self.plan.layout.twist(&self.speed_rad_s).travel_m_s(),
            of_standing,
            came_to_stand: None,
        };
        if let Some(before) = self.before.filter(|it| !it.stands() && round.stands()) {
            // Somewhere between two feedbacks: where the straight line between them crosses.
            let share = (before.of_standing - 1.0) / (before.of_standing - of_standing);
            let ns = (at.since_ns(before.at) as f64 * share) as u64;
            round.came_to_stand = Some(before.at.plus_ns(ns));
        }
        self.before = Some(round);
        round
    }
}
