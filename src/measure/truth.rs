//! What the simulated base truly did, from the stand-in's trace.

use std::io::{BufRead, BufReader};
use std::path::Path;

use crate::base::Pose;
use crate::config::Plan;

/// One row of the trace.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Moment {
    /// On the monotonic clock, seconds.
    pub t_s: f64,
    /// Where it is.
    pub pose: Pose,
    /// How fast each wheel turns.
    pub wheel_rad_s: Vec<f64>,
}

/// Reads a trace; a torn last line is left out.
///
/// # Errors
/// When there is none.
pub fn read(path: &Path) -> std::io::Result<Vec<Moment>> {
    let file = BufReader::new(std::fs::File::open(path)?);
    Ok(file.lines().map_while(Result::ok).skip(1).filter_map(|line| moment(&line)).collect())
}

/// `t_s, pose_x_m, pose_y_m, heading_rad, turn_rad_s, x_m_s, y_m_s, torque, wheel_<i>_rad_s...`
fn moment(line: &str) -> Option<Moment> {
    let values: Vec<f64> = line.split(',').map(|it| it.parse().ok()).collect::<Option<_>>()?;
    let [t_s, x_m, y_m, heading_rad, _, _, _, _, wheels @ ..] = values.as_slice() else { return None };
    let pose = Pose { x_m: *x_m, y_m: *y_m, heading_rad: *heading_rad };
    Some(Moment { t_s: *t_s, pose, wheel_rad_s: wheels.to_vec() })
}

/// Longer than this between two rows the stand-in itself was held up: then its wheels answer late, and nothing can be
/// told of the drive.
const HELD_UP_S: f64 = 0.02;

/// Whether the stand-in was held up between two moments, in words.
#[must_use]
pub fn held_up(truth: &[Moment], from_s: f64, to_s: f64) -> Option<String> {
    let within = truth.iter().filter(|it| (from_s..=to_s).contains(&it.t_s));
    let gaps = within.clone().zip(within.skip(1)).map(|(a, b)| b.t_s - a.t_s);
    let most = gaps.fold(0.0, f64::max);
    (most > HELD_UP_S).then(|| format!("the stand-in itself was held up for {:.0} ms", most * 1e3))
}

/// How a stop truly went: seconds until every wheel stood for good, and the way of the outermost point meanwhile.
pub fn stop(truth: &[Moment], from_s: f64, plan: &Plan) -> Option<(f64, f64)> {
    let start = truth.iter().position(|it| it.t_s >= from_s)?;
    let share = plan.guard.standstill_share;
    let stands = |it: &Moment| {
        it.wheel_rad_s.iter().zip(&plan.wheels).all(|(speed, wheel)| speed.abs() <= share * wheel.max_rad_s)
    };
    let after = truth.get(start..)?;
    let stood = after.iter().position(stands)?;
    let outer_m = libm::hypot(plan.outline_m[0], plan.outline_m[1]) / 2.0;
    let way: f64 = after
        .get(..=stood)?
        .windows(2)
        .map(|it| match it {
            [a, b] => {
                libm::hypot(b.pose.x_m - a.pose.x_m, b.pose.y_m - a.pose.y_m)
                    + (b.pose.heading_rad - a.pose.heading_rad).abs() * outer_m
            }
            _ => 0.0,
        })
        .sum();
    after.get(stood).map(|it| (it.t_s - from_s, way))
}
