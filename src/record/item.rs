//! What one packet of a run file holds.
//!
//! | interface | packet |
//! | --- | --- |
//! | 0 frames | link u8, way u8 (0 to the drivers, 1 from them), the frame as on the line |
//! | 1 pad | postcard of [`Pad`] |
//! | 2 ticks | postcard of [`Tick`] |
//! | 3 events | kind u8 (0 event, 1 snapshot, 2 lost), postcard of the event, the core's state, or a count u32 |
//!
//! postcard (its published wire format 1.0) writes numbers as variable-length integers and floats as they are.

use serde::{Deserialize, Serialize};

use crate::base::PerWheel;
use crate::core::io::{Inputs, Outputs, PadInput, Phase};
use crate::core::{Cause, CoreState, Event};
use crate::shaping::Frame;
use crate::units::Mono;
use crate::wire::Direction;

/// Version of these layouts; it stands in the section header and changes with any of them.
pub const FORMAT: u32 = 1;

/// A change at the pad.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Pad(pub PadInput);

/// One tick: its inputs whole, since replay depends on them, and what people want to see of its decisions.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Tick {
    /// Everything that the step saw.
    pub inputs: Inputs,
    /// The phase after it.
    pub phase: Phase,
    /// Why it is Tripped.
    pub cause: Option<Cause>,
    /// The stick frame.
    pub frame: Frame,
    /// Index of the pace.
    pub pace: u8,
    /// What the sticks ask for (turn, x, y), in the stick frame.
    pub demand: [f32; 3],
    /// What is sent (turn, x, y), in the base frame, before rounding.
    pub sent: [f64; 3],
    /// Where odometry believes the base is: x, y, heading.
    pub pose: [f64; 3],
    /// Measured wheel speeds, rad/s.
    pub measured_rad_s: PerWheel<f32>,
    /// Sent counts of the driver.
    pub sent_counts: PerWheel<i16>,
    /// Greatest skid residual, rad/s.
    pub skid_rad_s: f32,
    /// The stop line was pulled or repeated, with this ramp.
    pub stop_ramp_ms: Option<u16>,
    /// CRC-32/ISCSI over postcard of the whole [`Outputs`]: what replay compares.
    pub outputs_crc: u32,
}

impl Tick {
    /// From a step's inputs and outputs.
    #[must_use]
    pub fn new(inputs: &Inputs, out: &Outputs, outputs_crc: u32) -> Self {
        let view = &out.view;
        Self {
            inputs: inputs.clone(),
            phase: out.phase,
            cause: out.cause,
            frame: view.frame,
            pace: view.pace,
            demand: [view.demand.turn_rad_s as f32, view.demand.x_m_s as f32, view.demand.y_m_s as f32],
            sent: [view.sent.turn_rad_s, view.sent.x_m_s, view.sent.y_m_s],
            pose: [view.pose.x_m, view.pose.y_m, view.pose.heading_rad],
            measured_rad_s: view.measured_rad_s.iter().map(|it| *it as f32).collect(),
            sent_counts: view.sent_counts.clone(),
            skid_rad_s: view.skid_rad_s as f32,
            stop_ramp_ms: out.pull_stop.then_some(out.stop_ramp_ms),
            outputs_crc,
        }
    }
}

/// One packet, read back.
#[derive(Clone, Debug, PartialEq)]
pub enum Item {
    /// A frame on a line.
    Frame {
        /// When.
        at: Mono,
        /// The link.
        link: u8,
        /// Which way.
        direction: Direction,
        /// As on the line, end mark included.
        bytes: Vec<u8>,
    },
    /// A change at the pad.
    Pad(Mono, Pad),
    /// A tick.
    Tick(Box<Tick>),
    /// An event.
    Event(Mono, Event),
    /// The core's state before the tick that follows.
    Snapshot(Mono, Box<CoreState>),
    /// So many chunks found no room before here.
    Lost(Mono, u32),
}
