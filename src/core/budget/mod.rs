//! The stop budget: how long and how far the base goes on after each guard, at each pace, at worst. A planning figure
//! for the room that a base needs; `drill` and `rehearse` hold what they measure against it.
//!
//! total = detect + tick + smoothing + wire + driver + ramp, and
//! distance = v (detect + tick + wire + driver + smoothing / 2) + v ramp / 2, v being the outermost point of the base
//! at full travel and turn together (a linear ramp from v to zero: v^2 / 2a with a = v / ramp, handbook mechanics).

mod motion;

pub use motion::PaceMotion;

use super::Cause;
use super::cause::DriverTrouble;
use super::settings::ASSUMED_DRIVER_MS;
use crate::config::{Plan, StopCategory, WheelPlan};
use crate::units::deg;
use crate::wire::driver::FEEDBACK_EVERY_US;
use crate::wire::size;

/// Walking speed of a person, ISO 13855:2010, 5.2 (K for the body, in m/s).
pub const WALKING_M_S: f64 = 1.6;

/// A yaw angle by links that start their ramps apart is worth a warning from here on.
const YAW_WORTH_SAYING_RAD: f64 = 5.0 * core::f64::consts::PI / 180.0;

/// What stops the base, as far as it has a budget of its own.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Guard {
    /// The hold control released; quit by a signal goes the same way.
    Release,
    /// Asked by a person.
    StopAsked,
    /// Unplugged, or its device does not answer.
    PadGone,
    /// A pad whose reports keep coming while still.
    PadQuietStream,
    /// A pad that only reports changes.
    PadQuietChange,
    /// No feedback from a link.
    FeedbackQuiet,
    /// What is sent is not acknowledged.
    NotHeard,
    /// A port is gone or blocked: the drivers behind it stop because they hear nothing.
    WriteFails,
    /// A tick late or missing.
    LateTick,
    /// A driver reports trouble.
    DriverSays,
    /// A driver starts anew, and is without torque from then on whatever the host does.
    DriverRestart,
    /// A wheel away from its command.
    NotFollowing,
    /// A wheel that goes on in a ramp; counted from the ramp's start.
    NotSlowing,
    /// A wheel that turns although told to stand; counted from that command.
    Runaway,
    /// Wheels against each other.
    Skid,
    /// The host dead: the drivers by themselves, counted from the last frame that they took.
    HostSilent,
}

impl Guard {
    /// All of them, in the order in which they are printed.
    pub const ALL: [Self; 16] = [
        Self::Release,
        Self::StopAsked,
        Self::PadGone,
        Self::PadQuietStream,
        Self::PadQuietChange,
        Self::FeedbackQuiet,
        Self::NotHeard,
        Self::WriteFails,
        Self::LateTick,
        Self::DriverSays,
        Self::DriverRestart,
        Self::NotFollowing,
        Self::NotSlowing,
        Self::Runaway,
        Self::Skid,
        Self::HostSilent,
    ];

    /// Its name in tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Release => "release",
            Self::StopAsked => "stop asked",
            Self::PadGone => "pad gone",
            Self::PadQuietStream => "pad quiet (streaming)",
            Self::PadQuietChange => "pad quiet (on change)",
            Self::FeedbackQuiet => "feedback quiet",
            Self::NotHeard => "not heard",
            Self::WriteFails => "write fails",
            Self::LateTick => "late tick",
            Self::DriverSays => "driver says",
            Self::DriverRestart => "driver restart",
            Self::NotFollowing => "not following",
            Self::NotSlowing => "not slowing",
            Self::Runaway => "runaway",
            Self::Skid => "skid",
            Self::HostSilent => "host silent",
        }
    }

    /// The guard whose budget a trip is held against; `None` where there is nothing to stop or no budget of its own.
    #[must_use]
    pub fn of(cause: &Cause) -> Option<Self> {
        match cause {
            Cause::StopAsked(_) | Cause::SecondSignal | Cause::Panic => Some(Self::StopAsked),
            Cause::PadGone => Some(Self::PadGone),
            Cause::FeedbackQuiet { .. } => Some(Self::FeedbackQuiet),
            Cause::NotHeard { .. } => Some(Self::NotHeard),
            Cause::WriteFailed { .. } => Some(Self::WriteFails),
            Cause::LateTick { .. } | Cause::NoTick => Some(Self::LateTick),
            Cause::DriverSays { what: DriverTrouble::Restarted, .. } => Some(Self::DriverRestart),
            Cause::DriverSays { .. } => Some(Self::DriverSays),
            Cause::NotFollowing { .. } => Some(Self::NotFollowing),
            Cause::NotSlowing { .. } => Some(Self::NotSlowing),
            Cause::Runaway { .. } => Some(Self::Runaway),
            Cause::Skid { .. } => Some(Self::Skid),
            Cause::StopOverdue { .. } | Cause::FoundLatched { .. } | Cause::NotCleared { .. } => None,
        }
    }

    /// Whether a base of that plan has it.
    fn applies(self, plan: &Plan) -> bool {
        match self {
            // With a cable such a pad is not taken for dead when still.
            Self::PadQuietChange => !plan.pad.wired,
            // Three wheels cannot contradict each other.
            Self::Skid => plan.wheels.len() > 3,
            Self::Release
            | Self::StopAsked
            | Self::PadGone
            | Self::PadQuietStream
            | Self::FeedbackQuiet
            | Self::NotHeard
            | Self::WriteFails
            | Self::LateTick
            | Self::DriverSays
            | Self::DriverRestart
            | Self::NotFollowing
            | Self::NotSlowing
            | Self::Runaway
            | Self::HostSilent => true,
        }
    }

    fn kind(self, plan: &Plan) -> Kind {
        match self {
            Self::Release | Self::PadQuietStream | Self::PadQuietChange => Kind::Host,
            Self::StopAsked if plan.guard.stop_category == StopCategory::Zero => Kind::Coast,
            Self::NotSlowing | Self::Runaway => Kind::Coast,
            Self::HostSilent => Kind::Silence,
            Self::DriverRestart => Kind::Gone,
            Self::StopAsked
            | Self::PadGone
            | Self::FeedbackQuiet
            | Self::NotHeard
            | Self::WriteFails
            | Self::LateTick
            | Self::DriverSays
            | Self::NotFollowing
            | Self::Skid => Kind::Drivers,
        }
    }

    /// How long the guard takes to see what it is for.
    fn detect_s(self, plan: &Plan) -> f64 {
        let guard = &plan.guard;
        let period_s = plan.tick.period_s();
        let valid_s = plan.links.iter().map(|it| f64::from(it.valid_ms) * 1e-3).fold(0.0, f64::max);
        match self {
            Self::Release | Self::StopAsked | Self::PadGone | Self::DriverRestart => 0.0,
            Self::PadQuietStream => guard.pad_quiet_stream_ms * 1e-3,
            Self::PadQuietChange => guard.pad_quiet_change_ms * 1e-3,
            Self::FeedbackQuiet => guard.feedback_quiet_ms * 1e-3,
            Self::NotHeard => guard.not_heard_ms * 1e-3,
            // The host sees it within a tick, but whoever hears nothing any more goes on until validity runs out.
            Self::WriteFails => valid_s.max(period_s),
            Self::LateTick => guard.late_ms * 1e-3,
            Self::DriverSays => heard_unanswered_s(plan),
            Self::NotFollowing => guard.follow_s + driver_s(plan) + heard_s(plan),
            Self::NotSlowing => guard.slowing_s + driver_s(plan) + heard_unanswered_s(plan),
            // Told to stand for a while, and then turned by its angle at the least speed that counts.
            Self::Runaway => {
                let slowest = plan.wheels.iter().map(|it| it.max_rad_s).fold(f64::INFINITY, f64::min);
                let turns_s = guard.runaway_rad / (guard.runaway_share * slowest);
                driver_s(plan) + guard.follow_lag_s + guard.runaway_s + turns_s + heard_s(plan)
            }
            Self::Skid => guard.skid_s + heard_s(plan),
            Self::HostSilent => valid_s,
        }
    }
}

/// Who makes the stop.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Kind {
    /// The host shrinks the motion to zero: category 2.
    Host,
    /// The stop line; the drivers ramp: category 1.
    Drivers,
    /// The drivers by themselves: category 1.
    Silence,
    /// The stop line; torque off at once: category 0.
    Coast,
    /// The torque is gone by itself: category 0.
    Gone,
}

/// One guard at one pace. `None` stands for what cannot be known without `coast_m_s2`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BudgetRow {
    /// The guard.
    pub guard: Guard,
    /// Stop category (IEC 60204-1): 0 torque off, 1 ramp then torque off, 2 ramp and hold.
    pub category: u8,
    /// Index in `Plan::paces`.
    pub pace: usize,
    /// From what happens to the guard's seeing it.
    pub detect_s: f64,
    /// Until the tick that acts on it.
    pub tick_s: f64,
    /// What the moving average adds to a ramp by the host.
    pub smoothing_s: f64,
    /// Frames that wait before the stop, the adaptor's FIFO, its latency.
    pub wire_s: f64,
    /// The drivers' own delay.
    pub driver_s: f64,
    /// The ramp, or rolling out without torque.
    pub ramp_s: Option<f64>,
    /// All of it.
    pub total_s: Option<f64>,
    /// How far the outermost point goes in it.
    pub distance_m: Option<f64>,
    /// How far a person walks in it (ISO 13855: K T).
    pub person_m: Option<f64>,
}

/// The budget of every guard at every pace, pace by pace.
#[must_use]
pub fn budget(plan: &Plan) -> Vec<BudgetRow> {
    let guards = || Guard::ALL.into_iter().filter(|it| it.applies(plan));
    plan.paces
        .iter()
        .enumerate()
        .flat_map(|(at, pace)| {
            let motion = PaceMotion::new(plan, &pace.pace);
            guards().map(move |guard| row(plan, at, &motion, guard))
        })
        .collect()
}

fn row(plan: &Plan, pace: usize, motion: &PaceMotion, guard: Guard) -> BudgetRow {
    let kind = guard.kind(plan);
    let v = motion.outermost_m_s;
    let (tick_s, wire_s) = match kind {
        // Counted from the last frame taken, or from the driver's own end; nobody has to send anything.
        Kind::Silence | Kind::Gone => (0.0, 0.0),
        Kind::Host | Kind::Drivers | Kind::Coast => {
            (plan.tick.period_s(), plan.links.iter().map(motion::wire_s).fold(0.0, f64::max))
        }
    };
    let smoothing_s = if kind == Kind::Host { smoothing_s(plan) } else { 0.0 };
    let ramp_s = match kind {
        Kind::Host => Some(motion.host_ramp_s),
        Kind::Drivers | Kind::Silence => Some(motion.driver_ramp_s),
        Kind::Coast | Kind::Gone => plan.bay.coast_m_s2.map(|it| v / it),
    };
    let (detect_s, driver_s) = (guard.detect_s(plan), driver_s(plan));
    let before_s = detect_s + tick_s + wire_s + driver_s;
    let total_s = ramp_s.map(|it| before_s + smoothing_s + it);
    BudgetRow {
        guard,
        category: match kind {
            Kind::Host => 2,
            Kind::Drivers | Kind::Silence => 1,
            Kind::Coast | Kind::Gone => 0,
        },
        pace,
        detect_s,
        tick_s,
        smoothing_s,
        wire_s,
        driver_s,
        ramp_s,
        total_s,
        distance_m: ramp_s.map(|it| v * (before_s + smoothing_s / 2.0) + v * it / 2.0),
        person_m: total_s.map(|it| WALKING_M_S * it),
    }
}

/// Until the next feedback, which answers each frame, and while it is on the line.
fn heard_s(plan: &Plan) -> f64 {
    let feedback = plan.links.iter().map(|it| it.seconds(size::feedback(usize::from(it.channels))));
    plan.tick.period_s() + feedback.fold(0.0, f64::max)
}

/// The same of drivers that refuse what they hear, since they are latched or have just started: they send feedback by
/// themselves and no more often than that.
fn heard_unanswered_s(plan: &Plan) -> f64 {
    let period_s = plan.tick.period_s();
    heard_s(plan) - period_s + period_s.max(FEEDBACK_EVERY_US as f64 * 1e-6)
}

/// The drivers' delay, configured or assumed.
fn driver_s(plan: &Plan) -> f64 {
    plan.guard.driver_ms.unwrap_or(ASSUMED_DRIVER_MS) * 1e-3
}

/// The moving average as it is built: whole ticks, none where it has one sample.
fn smoothing_s(plan: &Plan) -> f64 {
    let shaper = super::settings::shaper_settings(plan);
    if shaper.samples() > 1 { shaper.samples() as f64 * shaper.period_s } else { 0.0 }
}

/// The row that needs most room at a pace, among those that are known.
#[must_use]
pub fn farthest(rows: &[BudgetRow], pace: usize) -> Option<(&BudgetRow, f64)> {
    rows.iter()
        .filter(|it| it.pace == pace)
        .filter_map(|it| it.distance_m.map(|distance_m| (it, distance_m)))
        .max_by(|a, b| a.1.total_cmp(&b.1))
}

/// For each pace whether the bay bears it: every known distance within `clear_m`. All where `clear_m` is not given.
#[must_use]
pub fn paces_that_fit(plan: &Plan) -> Vec<bool> {
    let rows = budget(plan);
    (0..plan.paces.len())
        .map(|pace| match (plan.bay.clear_m, farthest(&rows, pace)) {
            (Some(clear_m), Some((_, distance_m))) => distance_m <= clear_m,
            (Some(_) | None, _) => true,
        })
        .collect()
}

/// What is odd about the stopping of a base, in plain words.
#[must_use]
pub fn warnings(plan: &Plan) -> Vec<String> {
    let rows = budget(plan);
    let mut all = Vec::new();
    for (at, pace) in plan.paces.iter().enumerate() {
        if let (Some(clear_m), Some((row, distance_m))) = (plan.bay.clear_m, farthest(&rows, at))
            && distance_m > clear_m
        {
            all.push(format!(
                "the bay does not bear pace \"{}\": {} may take {distance_m:.2} m, and `clear_m` is {clear_m}; drive will not \
                 offer this pace; make it slower, the guard quicker or the bay larger",
                pace.name,
                row.guard.name()
            ));
        }
        let motion = PaceMotion::new(plan, &pace.pace);
        if motion.apart_yaw_rad > YAW_WORTH_SAYING_RAD {
            all.push(format!(
                "at pace \"{}\" the links may start their ramps {:.0} ms apart, which turns the base by up to {:.1} degrees; \
                 raise `baud`, lower `latency_ms` with another adaptor, or put all wheels on one link",
                pace.name,
                motion.apart_s * 1e3,
                deg(motion.apart_yaw_rad)
            ));
        }
    }
    all.extend(stuck_unseen(plan));
    if plan.bay.clear_m.is_none() {
        all.push(
            "`clear_m` of [bay] is not given: the stopping distances are compared with nothing".to_owned(),
        );
    }
    if plan.bay.coast_m_s2.is_none() {
        all.push(
            "`coast_m_s2` of [bay] is not given: how far the base rolls with the torque off is unknown, and so are the \
             stops of category 0"
                .to_owned(),
        );
    }
    all
}

/// Wheels that the slowest pace never turns fast enough for a stuck one to be told from a sound one.
fn stuck_unseen(plan: &Plan) -> Option<String> {
    let pace = plan.paces.first()?;
    let unseen = |(wheel, row): &(&WheelPlan, &[f64; 3])| {
        let most = libm::hypot(row[1], row[2]) * pace.pace.travel_m_s;
        most <= plan.guard.follow_share * wheel.max_rad_s
    };
    let names: Vec<String> = plan
        .wheels
        .iter()
        .zip(plan.layout.rows())
        .filter(unseen)
        .map(|(wheel, _)| format!("\"{}\"", wheel.name))
        .collect();
    (!names.is_empty()).then(|| {
        format!(
            "at pace \"{}\" travel never turns {} faster than `follow_share` lets pass: one that is stuck is not seen at \
             that pace; lower `follow_share`, or start with a faster pace",
            pace.name,
            names.join(", ")
        )
    })
}
