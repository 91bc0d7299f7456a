//! The simulated base: drivers of every link, wheels, floor. Pure: the time comes in as a number, chance from a seed;
//! the same calls give the same bytes and the same path.

use super::board::{Board, Mount};
use super::fault::{Fault, LinkFault, WheelFault};
use super::floor::Floor;
use super::wheels::{Chase, Progress};
use crate::base::{PerWheel, Pose, Twist};
use crate::config::Plan;
use crate::units::{Mono, ns_to_s};

/// The usual [`SimSettings::stretch_ns`]: a motor driver's own loop runs about this fast.
const STRETCH_NS: u64 = 500_000;
/// How fast a wheel without torque takes on the speed at which the floor drags it, seconds.
const DRAG_LAG_S: f64 = 0.02;
/// How much better the wheels are than the configuration asks of them.
const RESERVE: f64 = 1.1;
/// How much harder than the configuration's greatest acceleration the motors can push. A wheel that lags behind an
/// even acceleration by one time constant needs all of it just to keep up.
const PUSH_RESERVE: f64 = 2.0;

/// What a simulated base is like, beyond its configuration.
#[derive(Clone, Debug, PartialEq)]
pub struct SimSettings {
    /// Time constant of a wheel's speed control.
    pub lag_s: f64,
    /// From a frame taken to the first reaction of a wheel.
    pub dead_time_s: f64,
    /// Deceleration of the outermost point when no wheel has torque; `[bay] coast_m_s2` goes before it.
    pub coast_m_s2: f64,
    /// What the yaw gyro reads too much.
    pub gyro_bias_rad_s: f64,
    /// Standard deviation of each reading of the yaw gyro.
    pub gyro_noise_rad_s: f64,
    /// Supply without load.
    pub supply_v: f64,
    /// The longest `valid_ms` that the drivers take; at least that of the plan.
    pub silence_ms: u16,
    /// The longest ramp that the drivers make.
    pub ramp_max_ms: u16,
    /// The longest stretch over which commands count as constant. Longer ones are coarser and cost less.
    pub stretch_ns: u64,
}

impl Default for SimSettings {
    /// A sound base of middling size; common practice, no particular device.
    fn default() -> Self {
        Self {
            lag_s: 0.03,
            dead_time_s: 0.004,
            coast_m_s2: 0.6,
            gyro_bias_rad_s: 0.002,
            gyro_noise_rad_s: 0.003,
            supply_v: 24.0,
            silence_ms: 1000,
            ramp_max_ms: 10_000,
            stretch_ns: STRETCH_NS,
        }
    }
}

/// How things truly are, which nobody but a simulation can know.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Truth {
    /// When.
    pub at: Mono,
    /// Where the base is.
    pub pose: Pose,
    /// How it moves, in its own frame.
    pub twist: Twist,
    /// How fast each wheel turns, rad/s.
    pub wheel_rad_s: PerWheel<f64>,
    /// Whether any wheel is under torque.
    pub torque: bool,
}

/// A base that is not there.
#[derive(Clone, Debug)]
pub struct Sim {
    settings: SimSettings,
    boards: Vec<Board>,
    wheels: Vec<SimWheel>,
    floor: Floor,
    now: Option<Mono>,
}

#[derive(Clone, Debug)]
struct SimWheel {
    mount: Mount,
    max_rad_s: f64,
    max_rad_s2: f64,
    speed_rad_s: f64,
    /// What the encoder has counted, radians at the wheel.
    counted_rad: f64,
    fault: WheelFault,
}

impl Sim {
    /// A base at rest at the room's origin, its drivers just started.
    #[must_use]
    pub fn new(plan: &Plan, seed: u64, settings: SimSettings) -> Self {
        let settings =
            SimSettings { coast_m_s2: plan.bay.coast_m_s2.unwrap_or(settings.coast_m_s2), ..settings };
        let boards = (0..).zip(&plan.links).map(|(index, link)| Board::new(link, index, seed, &settings));
        let wheels = plan.wheels.iter().map(|wheel| SimWheel {
            mount: Mount::of(wheel, plan.links.get(wheel.link)),
            max_rad_s: wheel.max_rad_s,
            max_rad_s2: wheel.max_rad_s2,
            speed_rad_s: 0.0,
            counted_rad: 0.0,
            fault: WheelFault::Free,
        });
        let geometry = plan.wheels.iter().map(|wheel| wheel.geometry).collect();
        Self {
            boards: boards.collect(),
            wheels: wheels.collect(),
            floor: Floor::new(&plan.layout, geometry, plan.outline_m),
            settings,
            now: None,
        }
    }

    /// Lets time pass until `to`. The first call only sets the clock; a `to` in the past changes nothing.
    pub fn step(&mut self, to: Mono) {
        let mut now = match self.now {
            Some(now) => now,
            None => {
                self.boards.iter_mut().for_each(|board| board.begin(to));
                self.measure();
                to
            }
        };
        while now < to {
            let stretch_ns = to.since_ns(now).min(self.settings.stretch_ns.max(1));
            now = now.plus_ns(stretch_ns);
            self.move_wheels(now, ns_to_s(stretch_ns));
            self.measure();
            for board in &mut self.boards {
                board.tick(now);
            }
        }
        self.now = Some(now);
    }

    /// Gives the drivers of a link what was written to them; they read it at the time of the latest step.
    pub fn bytes_in(&mut self, link: usize, bytes: &[u8]) {
        if let (Some(board), Some(now)) = (self.boards.get_mut(link), self.now) {
            board.hear(bytes, now);
        }
    }

    /// Appends to `out` what the drivers of a link have said by the time of the latest step.
    pub fn bytes_out(&mut self, link: usize, out: &mut Vec<u8>) {
        if let (Some(board), Some(now)) = (self.boards.get_mut(link), self.now) {
            board.say(now, out);
        }
    }

    /// Whether the drivers' end of a link takes no bytes: whoever carries them leaves them on the line.
    #[must_use]
    pub fn is_blocked(&self, link: usize) -> bool {
        self.boards.get(link).is_some_and(Board::blocked)
    }

    /// How things truly are.
    #[must_use]
    pub fn truth(&self) -> Truth {
        let wheel_rad_s: PerWheel<f64> = self.wheels.iter().map(|wheel| wheel.speed_rad_s).collect();
        Truth {
            at: self.now.unwrap_or_default(),
            pose: self.floor.pose(),
            twist: self.floor.twist(&wheel_rad_s),
            wheel_rad_s,
            torque: self.boards.iter().any(Board::torque),
        }
    }

    /// What the drivers make their wheels turn at now, rad/s at the wheel; zero without torque.
    #[must_use]
    pub fn commanded_rad_s(&self) -> PerWheel<f64> {
        let target = |wheel: &SimWheel| {
            self.boards.get(wheel.mount.link).map_or(0.0, |board| wheel.mount.target_rad_s(board))
        };
        self.wheels.iter().map(target).collect()
    }

    /// Makes something go wrong, or right again.
    pub fn fault(&mut self, fault: Fault) {
        match fault {
            Fault::Link(which, fault) => {
                let now = self.now.unwrap_or_default();
                for (index, board) in
                    self.boards.iter_mut().enumerate().filter(|(index, _)| which.has(*index))
                {
                    board.fault(fault, now);
                    if fault == LinkFault::Restart {
                        self.wheels
                            .iter_mut()
                            .filter(|w| w.mount.link == index)
                            .for_each(|w| w.counted_rad = 0.0);
                    }
                }
                self.measure();
            }
            Fault::Wheel(which, fault) => {
                for (index, wheel) in
                    self.wheels.iter_mut().enumerate().filter(|(index, _)| which.has(*index))
                {
                    wheel.fault = fault;
                    self.floor.set_grip(index, !matches!(fault, WheelFault::Skid { .. }));
                }
            }
            Fault::Clear => {
                let now = self.now.unwrap_or_default();
                self.boards.iter_mut().for_each(|board| board.put_right(now));
                for (index, wheel) in self.wheels.iter_mut().enumerate() {
                    wheel.fault = WheelFault::Free;
                    self.floor.set_grip(index, true);
                }
            }
        }
    }

    fn move_wheels(&mut self, now: Mono, dt_s: f64) {
        for board in &mut self.boards {
            board.act(now, self.settings.dead_time_s);
        }
        let torque = self.boards.iter().any(Board::torque);
        if !torque && self.wheels.iter().all(|wheel| wheel.speed_rad_s == 0.0) {
            return;
        }
        let turned = if torque { self.push(dt_s) } else { self.coast(dt_s) };
        self.floor.roll(&turned);
        for (wheel, turned_rad) in self.wheels.iter_mut().zip(&turned) {
            if wheel.fault != WheelFault::EncoderDead {
                wheel.counted_rad += turned_rad;
            }
        }
    }

    /// No wheel has torque: the base rolls out as one body. Gives the angle that each wheel has turned.
    fn coast(&mut self, dt_s: f64) -> PerWheel<f64> {
        let speeds = self.wheels.iter().map(|wheel| wheel.speed_rad_s).collect();
        let (left, at_full_s) = self.floor.coast(self.floor.twist(&speeds), self.settings.coast_m_s2, dt_s);
        self.wheels
            .iter_mut()
            .map(|wheel| {
                let turned_rad = wheel.speed_rad_s * at_full_s;
                wheel.speed_rad_s *= left;
                if wheel.fault == WheelFault::Stuck {
                    wheel.speed_rad_s = 0.0;
                    return 0.0;
                }
                turned_rad
            })
            .collect()
    }

    /// Some wheels have torque, the others are dragged along. Gives the angle that each wheel has turned.
    fn push(&mut self, dt_s: f64) -> PerWheel<f64> {
        let speeds = self.wheels.iter().map(|wheel| wheel.speed_rad_s).collect();
        // Only wheels without torque are.
        let dragged = if self.boards.iter().all(Board::torque) {
            speeds
        } else {
            self.floor.dragged(self.floor.twist(&speeds))
        };
        let targets = self.targets();
        let lag_s = self.settings.lag_s;
        let together: Vec<Progress> = (0..self.boards.len())
            .map(|link| {
                let sound = self
                    .wheels
                    .iter()
                    .zip(&targets)
                    .filter(|(wheel, _)| wheel.mount.link == link && wheel.follows())
                    .map(|(wheel, target)| wheel.chase(*target));
                Progress::of(sound, lag_s, dt_s)
            })
            .collect();
        let boards = &self.boards;
        self.wheels
            .iter_mut()
            .zip(targets.iter().zip(&dragged))
            .map(|(wheel, (target, dragged))| {
                let alone = |target, lag_s| {
                    let chase = wheel.chase(target);
                    Progress::of([chase].into_iter(), lag_s, dt_s).apply(chase)
                };
                let torque = boards.get(wheel.mount.link).is_some_and(Board::torque);
                let (speed_rad_s, turned_rad) = match wheel.fault {
                    WheelFault::Stuck => (0.0, 0.0),
                    _ if !torque => alone(*dragged, DRAG_LAG_S),
                    WheelFault::Runaway { share } => alone(share * wheel.max_rad_s, lag_s),
                    WheelFault::Skid { factor } => alone(factor * target, lag_s),
                    WheelFault::Free | WheelFault::EncoderDead => together
                        .get(wheel.mount.link)
                        .map_or((0.0, 0.0), |progress| progress.apply(wheel.chase(*target))),
                };
                wheel.speed_rad_s = speed_rad_s;
                turned_rad
            })
            .collect()
    }

    /// The speeds that the drivers make for, rad/s at the wheel; all wheels of a link scaled by one factor where the
    /// supply does not give enough for one of them, which the drivers then say.
    fn targets(&mut self) -> PerWheel<f64> {
        let mut targets: PerWheel<f64> = self
            .wheels
            .iter()
            .map(|wheel| {
                self.boards.get(wheel.mount.link).map_or(0.0, |board| wheel.mount.target_rad_s(board))
            })
            .collect();
        for (link, board) in self.boards.iter_mut().enumerate() {
            let able = RESERVE * board.supply_v() / self.settings.supply_v;
            let of_link = || self.wheels.iter().enumerate().filter(|(_, wheel)| wheel.mount.link == link);
            let most = of_link()
                .filter_map(|(i, wheel)| targets.get(i).map(|target| libm::fabs(*target) / wheel.max_rad_s))
                .fold(0.0, f64::max);
            board.set_scaled(most > able);
            if most > able {
                for (i, _) in of_link() {
                    if let Some(target) = targets.get_mut(i) {
                        *target *= able / most;
                    }
                }
            }
        }
        targets
    }

    /// Hands every board what its encoders and its gyro read.
    fn measure(&mut self) {
        let speeds: PerWheel<f64> = self.wheels.iter().map(|wheel| wheel.speed_rad_s).collect();
        let turn_rad_s = self.floor.twist(&speeds).turn_rad_s;
        for (link, board) in self.boards.iter_mut().enumerate() {
            let load = self.wheels.iter().filter(|wheel| wheel.mount.link == link);
            board.read_load(load.map(|wheel| libm::fabs(wheel.speed_rad_s) / wheel.max_rad_s).sum());
            board.read_gyro(turn_rad_s, &self.settings);
        }
        for wheel in &self.wheels {
            if let Some(board) = self.boards.get_mut(wheel.mount.link) {
                let dead = wheel.fault == WheelFault::EncoderDead;
                board.read_encoder(
                    &wheel.mount,
                    wheel.counted_rad,
                    if dead { 0.0 } else { wheel.speed_rad_s },
                );
            }
        }
    }
}

impl SimWheel {
    /// Whether it does what its driver wants.
    fn follows(&self) -> bool {
        match self.fault {
            WheelFault::Free | WheelFault::EncoderDead => true,
            WheelFault::Stuck | WheelFault::Runaway { .. } | WheelFault::Skid { .. } => false,
        }
    }

    fn chase(&self, target_rad_s: f64) -> Chase {
        Chase { speed_rad_s: self.speed_rad_s, target_rad_s, max_rad_s2: PUSH_RESERVE * self.max_rad_s2 }
    }
}

#[cfg(test)]
mod tests;
