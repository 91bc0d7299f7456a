//! The gripline link, version 1: frames to bytes and back. No allocation, no ports, no knowledge of what a frame is
//! for; builds without an operating system.
//!
//! ```text
//! before COBS:  kind u8 | sequence u8 | body | crc u32      little-endian, at most 200 bytes
//! on the line:  COBS of that | 0x00
//! ```

pub mod deframe;
pub mod driver;
pub mod frame;
pub mod size;

pub use deframe::Deframer;
pub use frame::{
    WireError, emit_from_drivers, emit_to_drivers, kind, parse_from_drivers, parse_to_drivers, stop_on_line,
    stop_plain,
};

use arrayvec::{ArrayString, ArrayVec};
use serde::{Deserialize, Serialize};

/// The most channels that one link can carry: what fits 200 bytes before COBS.
pub const MAX_CHANNELS: usize = 29;
/// The most bytes of a frame before COBS.
pub const MAX_PLAIN: usize = 200;
/// The most bytes of a frame on the line: COBS adds one byte to at most 253, and the end mark one.
pub const MAX_ON_LINE: usize = MAX_PLAIN + 2;

/// One value a channel.
pub type PerChannel<T> = ArrayVec<T, MAX_CHANNELS>;

/// What a Drive frame asks of the channels.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[repr(u8)]
pub enum Mode {
    /// No torque.
    Park = 0,
    /// Zero speed with torque.
    Hold = 1,
    /// The speeds given.
    Run = 2,
}

/// Body of a Drive frame.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Drive {
    /// What is asked.
    pub mode: Mode,
    /// How long it is good for, from reception.
    pub valid_ms: u16,
    /// The ramp to zero if that time runs out.
    pub ramp_ms: u16,
    /// Speed of each channel in counts; all zero unless `Run`.
    pub speeds: PerChannel<i16>,
}

/// What the host says.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum ToDrivers {
    /// Who are you? Answered by Identity.
    Ask,
    /// Motion, hold or park.
    Drive(Drive),
    /// Ramp to zero and latch; `ramp_ms` 0: torque off at once.
    Stop {
        /// Time of the linear ramp to zero.
        ramp_ms: u16,
    },
    /// Unlatch, with the present token.
    Clear {
        /// The token of the latest Feedback.
        token: u16,
    },
}

/// Body of an Identity frame.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Identity {
    /// Version of the line's format; 1.
    pub version: u8,
    /// See [`flag`].
    pub flags: u8,
    /// Number of channels.
    pub channels: u8,
    /// Micro-radians a second in one count of speed.
    pub speed_lsb_urad_s: u32,
    /// Micro-radians in one count of angle.
    pub angle_lsb_urad: u32,
    /// Longest `valid_ms` taken.
    pub silence_ms: u16,
    /// Longer ramps are shortened to it.
    pub ramp_max_ms: u16,
    /// New at each start of the driver.
    pub boot: u16,
    /// What the drivers call themselves, at most 24 bytes.
    pub name: ArrayString<24>,
}

/// Bits of [`Identity::flags`].
pub mod flag {
    /// There is no hardware behind it.
    pub const SIMULATED: u8 = 1;
    /// Feedback carries a yaw rate.
    pub const YAW_RATE: u8 = 2;
    /// There is a stop input.
    pub const STOP_INPUT: u8 = 4;
}

/// Bits of [`Feedback::status`].
pub mod status {
    /// Stopped; only Clear ends it.
    pub const LATCHED: u16 = 1 << 0;
    /// The stop input is open.
    pub const STOP_INPUT_OPEN: u16 = 1 << 1;
    /// The latch came from validity running out.
    pub const WENT_SILENT: u16 = 1 << 2;
    /// Over-current.
    pub const OVER_CURRENT: u16 = 1 << 3;
    /// Over-temperature.
    pub const OVER_TEMPERATURE: u16 = 1 << 4;
    /// Under-voltage.
    pub const UNDER_VOLTAGE: u16 = 1 << 5;
    /// An encoder does not answer or does not make sense.
    pub const ENCODER: u16 = 1 << 6;
    /// `yaw_rate` may be used.
    pub const YAW_RATE_VALID: u16 = 1 << 7;
    /// Torque is on.
    pub const TORQUE_ON: u16 = 1 << 8;
    /// The commanded speeds could not be held; all channels were scaled together.
    pub const SCALED: u16 = 1 << 9;
    /// A frame came out of order (hold before park, run before hold).
    pub const OUT_OF_ORDER: u16 = 1 << 10;
    /// The bits that are faults of the drivers.
    pub const FAULTS: u16 = OVER_CURRENT | OVER_TEMPERATURE | UNDER_VOLTAGE | ENCODER;
}

/// Counts of [`Feedback::yaw_rate`] in one rad/s.
pub const YAW_COUNTS_PER_RAD_S: f64 = 2048.0;

/// Angle and speed of one channel.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct ChannelState {
    /// Angle in counts; wraps.
    pub angle: i32,
    /// Speed in counts.
    pub speed: i16,
}

/// Body of a Feedback frame.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Feedback {
    /// Sequence of the last frame taken.
    pub ack: u8,
    /// See [`status`].
    pub status: u16,
    /// What Clear must carry.
    pub token: u16,
    /// New at each start of the driver.
    pub boot: u16,
    /// The driver's clock; wraps.
    pub clock_us: u32,
    /// Supply voltage.
    pub supply_mv: u16,
    /// Yaw rate in 1/2048 rad/s.
    pub yaw_rate: i16,
    /// Frames dropped or refused since start; wraps.
    pub refused: u16,
    /// One entry a channel.
    pub channels: PerChannel<ChannelState>,
}

/// What the drivers say.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum FromDrivers {
    /// Answer to Ask.
    Identity(Identity),
    /// State of the drivers.
    Feedback(Feedback),
}

/// Which way a frame goes.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Direction {
    /// From the host.
    ToDrivers,
    /// To the host.
    FromDrivers,
}
