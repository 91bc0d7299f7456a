//! A checked configuration. Only the parser makes one; whoever holds it need not ask again.

use std::path::PathBuf;

use crate::base::{Layout, Wheel};
use crate::shaping::{Limits, Pace, Response};
use crate::wire::size;

/// The most links one base may have.
pub const MAX_LINKS: usize = 8;
/// The most paces one base may have.
pub const MAX_PACES: usize = 32;

/// Everything that a configuration says, checked.
#[derive(Clone, Debug)]
pub struct Plan {
    /// The text it came from, for the record.
    pub text: String,
    /// `[base] name`.
    pub name: String,
    /// `[base] outline_m`: length, width.
    pub outline_m: [f64; 2],
    /// `[[wheel]]`, in the order of the file.
    pub wheels: Vec<WheelPlan>,
    /// The layout of those wheels.
    pub layout: Layout,
    /// `[[link]]`, in the order of the file.
    pub links: Vec<LinkPlan>,
    /// `[[pace]]`, slowest first.
    pub paces: Vec<PacePlan>,
    /// `[limits]`.
    pub limits: Limits,
    /// `[pad]`.
    pub pad: PadPlan,
    /// `[room]`.
    pub room: RoomPlan,
    /// `[guard]`.
    pub guard: GuardPlan,
    /// `[bay]`.
    pub bay: BayPlan,
    /// `[loop]`.
    pub tick: TickPlan,
    /// `[record]`.
    pub record: RecordPlan,
    /// `[console]`.
    pub console: ConsolePlan,
}

/// One `[[wheel]]`.
#[derive(Clone, Debug, PartialEq)]
pub struct WheelPlan {
    /// What people call it.
    pub name: String,
    /// Where it is and how it rolls.
    pub geometry: Wheel,
    /// Greatest speed of the wheel.
    pub max_rad_s: f64,
    /// Greatest acceleration of the wheel.
    pub max_rad_s2: f64,
    /// Index in `Plan::links`.
    pub link: usize,
    /// Channel on that link.
    pub channel: u8,
    /// The channel turns the wheel backwards.
    pub reversed: bool,
    /// Turns of the driver a turn of the wheel.
    pub gear: f64,
}

/// One `[[link]]`.
#[derive(Clone, Debug, PartialEq)]
pub struct LinkPlan {
    /// What people call it.
    pub name: String,
    /// Device path.
    pub port: PathBuf,
    /// Bits a second.
    pub baud: u32,
    /// How long each motion frame is good for.
    pub valid_ms: u16,
    /// What Identity must say.
    pub expect: String,
    /// Channels that Identity must say; 1 to 29.
    pub channels: u8,
    /// Size of a count of speed.
    pub speed_lsb_urad_s: u32,
    /// Size of a count of angle.
    pub angle_lsb_urad: u32,
    /// The adaptor's transmit FIFO; default 256.
    pub fifo_bytes: u32,
    /// The adaptor's latency; default 16.
    pub latency_ms: f64,
}

impl LinkPlan {
    /// How long so many bytes take on this line: ten bits a byte (8N1).
    #[must_use]
    pub fn seconds(&self, bytes: usize) -> f64 {
        bytes as f64 * 10.0 / f64::from(self.baud)
    }

    /// Share of the line that is used, to the drivers and from them, with a frame each way in every tick.
    #[must_use]
    pub fn load(&self, tick: &TickPlan) -> [f64; 2] {
        let channels = usize::from(self.channels);
        [size::drive(channels), size::feedback(channels)].map(|it| self.seconds(it) * tick.rate_hz)
    }
}

/// One `[[pace]]`.
#[derive(Clone, Debug, PartialEq)]
pub struct PacePlan {
    /// What people call it.
    pub name: String,
    /// What a full stick means.
    pub pace: Pace,
}

/// Axes of a pad, by gilrs' names.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[expect(missing_docs, reason = "the names are gilrs' own")]
pub enum PadAxis {
    LeftStickX,
    LeftStickY,
    LeftZ,
    RightStickX,
    RightStickY,
    RightZ,
    DPadX,
    DPadY,
}

impl PadAxis {
    /// All of them, in the order in which [`super::keys`] names them.
    pub const ALL: [Self; 8] = [
        Self::LeftStickX,
        Self::LeftStickY,
        Self::LeftZ,
        Self::RightStickX,
        Self::RightStickY,
        Self::RightZ,
        Self::DPadX,
        Self::DPadY,
    ];
}

/// Buttons of a pad, by gilrs' names.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[expect(missing_docs, reason = "the names are gilrs' own")]
pub enum PadButton {
    South,
    East,
    North,
    West,
    C,
    Z,
    LeftTrigger,
    LeftTrigger2,
    RightTrigger,
    RightTrigger2,
    Select,
    Start,
    Mode,
    LeftThumb,
    RightThumb,
    DPadUp,
    DPadDown,
    DPadLeft,
    DPadRight,
}

impl PadButton {
    /// All of them, in the order in which [`super::keys`] names them.
    pub const ALL: [Self; 19] = [
        Self::South,
        Self::East,
        Self::North,
        Self::West,
        Self::C,
        Self::Z,
        Self::LeftTrigger,
        Self::LeftTrigger2,
        Self::RightTrigger,
        Self::RightTrigger2,
        Self::Select,
        Self::Start,
        Self::Mode,
        Self::LeftThumb,
        Self::RightThumb,
        Self::DPadUp,
        Self::DPadDown,
        Self::DPadLeft,
        Self::DPadRight,
    ];
}

/// An axis and whether its sign is turned; written `"LeftStickX"` or `"-LeftStickX"`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SignedAxis {
    /// The axis; gilrs' sign: up and right positive.
    pub axis: PadAxis,
    /// Its sign is turned.
    pub inverted: bool,
}

/// `[pad]`.
#[derive(Clone, Debug, PartialEq)]
pub struct PadPlan {
    /// A part of the pad's name; empty: the first pad found.
    pub name: String,
    /// `vvvv:pppp` in hexadecimal, or that and `:serial`; empty: any.
    pub id: String,
    /// There is a cable: a pad that only reports changes is not taken for dead when still.
    pub wired: bool,
    /// Forward travel; default `"LeftStickY"`.
    pub forward: SignedAxis,
    /// Leftward travel; default `"-LeftStickX"`.
    pub left: SignedAxis,
    /// Anticlockwise turn; default `"-RightStickX"`.
    pub turn_left: SignedAxis,
    /// Deadband and curve.
    pub response: Response,
    /// The hold control; default `RightTrigger2`.
    pub hold: PadButton,
    /// Pressed from here on.
    pub hold_on: f64,
    /// Released below this.
    pub hold_off: f64,
    /// With three positions: squeezed through from here on.
    pub hold_squeeze: Option<f64>,
    /// Asks for Ready; default `Start`.
    pub ready: PadButton,
    /// Asks to end Tripped; default `Select`.
    pub reset: PadButton,
    /// Stop; default `East`.
    pub stop: PadButton,
    /// Default `DPadUp`.
    pub pace_up: PadButton,
    /// Default `DPadDown`.
    pub pace_down: PadButton,
    /// Default `North`.
    pub frame: PadButton,
    /// Default `West`.
    pub zero_heading: PadButton,
}

/// Where the heading comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum HeadingSource {
    /// The wheels' odometry.
    Wheels,
    /// The yaw gyro in the feedback.
    Gyro,
}

/// `[room]`.
#[derive(Clone, Debug, PartialEq)]
pub struct RoomPlan {
    /// Where the heading comes from; default wheels.
    pub heading: HeadingSource,
    /// Delay between deciding and moving; default 0.
    pub lead_ms: f64,
}

/// Which stop category a stop asked by a person makes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum StopCategory {
    /// Torque off at once.
    Zero,
    /// A ramp, then torque off.
    One,
}

/// `[guard]`: one key a guard.
#[derive(Clone, Debug, PartialEq)]
pub struct GuardPlan {
    /// Category of a stop asked; default 1.
    pub stop_category: StopCategory,
    /// A pad that streams; default 200.
    pub pad_quiet_stream_ms: f64,
    /// A pad that only reports changes; default 2000.
    pub pad_quiet_change_ms: f64,
    /// Default 100.
    pub feedback_quiet_ms: f64,
    /// Default 100.
    pub not_heard_ms: f64,
    /// Default 50.
    pub late_ms: f64,
    /// The drivers' delay; default none: bench's figure or 0.02 s assumed.
    pub driver_ms: Option<f64>,
    /// Not following: share of the greatest speed; default 0.1.
    pub follow_share: f64,
    /// Not following: lag of a sound wheel; default 0.08.
    pub follow_lag_s: f64,
    /// Not following: how long; default 0.5.
    pub follow_s: f64,
    /// Not slowing: how long after the ramp's start; default 0.2.
    pub slowing_s: f64,
    /// Runaway: share of the greatest speed; default 0.05.
    pub runaway_share: f64,
    /// Runaway: how long the command must have been zero; default 0.3.
    pub runaway_s: f64,
    /// Runaway: how far the wheel must have moved; default 0.1.
    pub runaway_rad: f64,
    /// Skid: share of the greatest speed; default 0.1.
    pub skid_share: f64,
    /// Skid: how long until the trip; default 1.0.
    pub skid_s: f64,
    /// Standstill: share of the greatest speed; default 0.02.
    pub standstill_share: f64,
    /// Standstill: how long; default 0.1.
    pub standstill_s: f64,
    /// Stopping may take this much longer than its ramp; default 0.5.
    pub stop_margin_s: f64,
    /// Ready left alone goes to Parked; default 60.
    pub ready_idle_s: f64,
    /// How long reset must be held; default 1.0.
    pub reset_hold_s: f64,
}

/// `[bay]`.
#[derive(Clone, Debug, PartialEq)]
pub struct BayPlan {
    /// Free distance round the base.
    pub clear_m: Option<f64>,
    /// Deceleration without torque, measured by `drill`.
    pub coast_m_s2: Option<f64>,
}

/// `[loop]`.
#[derive(Clone, Debug, PartialEq)]
pub struct TickPlan {
    /// Ticks a second; default 200.
    pub rate_hz: f64,
    /// SCHED_FIFO priority, 0: ordinary scheduling; default 40. The sentinel runs one above.
    pub realtime: u8,
    /// Core to pin the tick to.
    pub cpu: Option<usize>,
    /// Lock memory; default true.
    pub lock_memory: bool,
}

impl TickPlan {
    /// Length of a tick in nanoseconds, rounded.
    #[must_use]
    pub fn period_ns(&self) -> u64 {
        crate::units::s_to_ns(1.0 / self.rate_hz)
    }

    /// Length of a tick in seconds: that of the rounded nanoseconds, which the clock really makes.
    #[must_use]
    pub fn period_s(&self) -> f64 {
        crate::units::ns_to_s(self.period_ns())
    }
}

/// `[record]`.
#[derive(Clone, Debug, PartialEq)]
pub struct RecordPlan {
    /// Folder of the run files; `None`: the state folder of the service, else `./runs`.
    pub dir: Option<PathBuf>,
    /// Older runs are deleted beyond this; default 4.
    pub keep_gb: f64,
}

/// `[console]`.
#[derive(Clone, Debug, PartialEq)]
pub struct ConsolePlan {
    /// Socket path; `None`: in the runtime folder.
    pub socket: Option<PathBuf>,
    /// Whether the console may reset; default false.
    pub reset: bool,
}

#[cfg(test)]
mod tests {
    use super::super::keys;
    use super::*;

    /// The parser finds a name's place in the one list and takes what stands there in the other.
    #[test]
    fn names_and_values_of_axes_and_buttons_stand_in_one_order() {
        assert_eq!(PadAxis::ALL.map(|it| format!("{it:?}"))[..], *keys::AXES);
        assert_eq!(PadButton::ALL.map(|it| format!("{it:?}"))[..], *keys::BUTTONS);
    }
}
