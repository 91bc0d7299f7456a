//! The true path as a CSV file, to be laid over a recorded run: `t_s` is `CLOCK_MONOTONIC` in seconds.

use std::io::{self, Write};

use super::sim::Truth;
use crate::units::{Mono, ns_to_s};

/// Rows stand this far apart.
const EVERY_NS: u64 = 2_000_000;

/// Writes a row every two milliseconds, if it is asked often enough.
#[derive(Debug)]
pub struct Trace<W> {
    out: W,
    due: Mono,
}

impl<W: Write> Trace<W> {
    /// Begins with the heading: time, true pose, true twist in the base frame, whether any wheel is under torque, and
    /// the true speed of each wheel.
    ///
    /// # Errors
    /// What the writer says.
    pub fn new(mut out: W, wheels: usize) -> io::Result<Self> {
        write!(out, "t_s,pose_x_m,pose_y_m,heading_rad,turn_rad_s,x_m_s,y_m_s,torque")?;
        for wheel in 0..wheels {
            write!(out, ",wheel_{wheel}_rad_s")?;
        }
        writeln!(out)?;
        Ok(Self { out, due: Mono::default() })
    }

    /// Writes a row, if one is due.
    ///
    /// # Errors
    /// What the writer says.
    pub fn row(&mut self, truth: &Truth) -> io::Result<()> {
        if truth.at < self.due {
            return Ok(());
        }
        // On a grid, so that rows do not drift apart by what each of them comes late.
        self.due = Mono::from_ns((truth.at.ns() / EVERY_NS + 1) * EVERY_NS);
        let Truth { at, pose, twist, wheel_rad_s, torque } = truth;
        write!(self.out, "{:.6},{:.6},{:.6},{:.6}", ns_to_s(at.ns()), pose.x_m, pose.y_m, pose.heading_rad)?;
        write!(self.out, ",{:.6},{:.6},{:.6}", twist.turn_rad_s, twist.x_m_s, twist.y_m_s)?;
        write!(self.out, ",{}", u8::from(*torque))?;
        for speed in wheel_rad_s {
            write!(self.out, ",{speed:.6}")?;
        }
        writeln!(self.out)
    }

    /// Puts everything written so far where others can read it.
    ///
    /// # Errors
    /// What the writer says.
    pub fn flush(&mut self) -> io::Result<()> {
        self.out.flush()
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::{Pose, Twist};

    #[test]
    fn rows_stand_two_milliseconds_apart_under_a_heading() {
        let mut file = Vec::new();
        let mut trace = Trace::new(&mut file, 2).unwrap();
        for ms in [1000, 1001, 1002, 1003, 1004] {
            let truth = Truth {
                at: Mono::from_ns(ms * 1_000_000),
                pose: Pose { x_m: 1.0, y_m: -2.0, heading_rad: 0.5 },
                twist: Twist::new(0.1, 0.2, 0.3),
                wheel_rad_s: [4.0, -5.0].into_iter().collect(),
                torque: true,
            };
            trace.row(&truth).unwrap();
        }
        trace.flush().unwrap();
        let text = String::from_utf8(file).unwrap();
        let lines: Vec<&str> = text.lines().collect();
        assert_eq!(
            lines[0],
            "t_s,pose_x_m,pose_y_m,heading_rad,turn_rad_s,x_m_s,y_m_s,torque,wheel_0_rad_s,wheel_1_rad_s"
        );
        let values = "1.000000,-2.000000,0.500000,0.100000,0.200000,0.300000,1,4.000000,-5.000000";
        assert_eq!(lines[1], format!("1.000000,{values}"));
        assert_eq!(lines.len(), 4, "{text}");
    }
}
