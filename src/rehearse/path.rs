//! The path of the square against the ideal: legs straight along the room's axes, as long as the sent speed makes
//! them, whatever the base's heading did meanwhile.

use crate::base::Pose;
use crate::core::io::Phase;
use crate::measure::truth::Moment;
use crate::record::Tick;
use crate::shaping::Frame;

/// The ideal path, grown tick by tick.
#[derive(Clone, Debug, Default)]
pub(super) struct Ideal {
    points: Vec<[f64; 2]>,
    direction: Option<[f64; 2]>,
    pub(super) began_s: Option<f64>,
    pub(super) ended_s: f64,
}

impl Ideal {
    /// Takes a tick of driving in the room's frame: on by the sent speed, in the direction that the sticks ask for (or
    /// asked for last).
    pub(super) fn take(&mut self, tick: &Tick, period_s: f64) {
        if tick.phase != Phase::Driving || tick.frame != Frame::Room {
            return;
        }
        let now_s = tick.inputs.now.ns() as f64 * 1e-9;
        self.began_s.get_or_insert(now_s);
        self.ended_s = now_s;
        let [_, x, y] = tick.demand.map(f64::from);
        let asked = libm::hypot(x, y);
        if asked > 1e-6 {
            self.direction = Some([x / asked, y / asked]);
        }
        let Some([dx, dy]) = self.direction else { return };
        let [_, sent_x, sent_y] = tick.sent;
        let on = libm::hypot(sent_x, sent_y) * period_s;
        let [x, y] = self.points.last().copied().unwrap_or_default();
        self.points.push([x + dx * on, y + dy * on]);
    }

    /// Length of the ideal path.
    pub(super) fn length_m(&self) -> f64 {
        self.points
            .windows(2)
            .map(|it| match it {
                [a, b] => libm::hypot(b[0] - a[0], b[1] - a[1]),
                _ => 0.0,
            })
            .sum()
    }

    /// The farthest that the base truly was from the path, and how far its end from the path's end.
    pub(super) fn errors_m(&self, truth: &[Moment]) -> Option<(f64, f64)> {
        let began_s = self.began_s?;
        // Wheels lag behind: what was sent in the last tick is made a little later.
        let during = |it: &&Moment| it.t_s >= began_s && it.t_s <= self.ended_s;
        let start: Pose = truth.iter().find(during)?.pose;
        let mut worst: f64 = 0.0;
        let mut last = [0.0; 2];
        for moment in truth.iter().filter(during) {
            last = [moment.pose.x_m - start.x_m, moment.pose.y_m - start.y_m];
            worst = worst.max(self.distance_m(last));
        }
        let end = self.points.last()?;
        Some((worst, libm::hypot(last[0] - end[0], last[1] - end[1])))
    }

    fn distance_m(&self, [x, y]: [f64; 2]) -> f64 {
        self.points
            .windows(2)
            .map(|it| {
                let [[ax, ay], [bx, by]] = [it[0], it[1]];
                let (dx, dy) = (bx - ax, by - ay);
                let square = dx * dx + dy * dy;
                let share = if square > 0.0 {
                    (((x - ax) * dx + (y - ay) * dy) / square).clamp(0.0, 1.0)
                } else {
                    0.0
                };
                libm::hypot(x - ax - share * dx, y - ay - share * dy)
            })
            .fold(libm::hypot(x, y), f64::min)
    }
}
