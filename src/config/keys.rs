//! Every key there is: one row each, with its unit, range, default and one line of help. The parser reads ranges and
//! defaults from here and nowhere else, and the printed reference is this table.

pub use super::reference::reference;

/// What a value may be.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Kind {
    /// A finite number from least to most.
    Number(f64, f64),
    /// A whole number from least to most.
    Whole(i64, i64),
    /// Two finite numbers from least to most.
    Pair(f64, f64),
    /// A text of at most so many bytes; empty only where the default is.
    Text(usize),
    /// true or false.
    Flag,
    /// One of these words.
    Word(&'static [&'static str]),
    /// A button by gilrs' name.
    Button,
    /// An axis by gilrs' name, a leading `-` turns its sign.
    Axis,
}

/// One key.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Key {
    /// Its table.
    pub table: &'static str,
    /// Its name.
    pub name: &'static str,
    /// Unit, empty for none.
    pub unit: &'static str,
    /// What it may be.
    pub kind: Kind,
    /// Default as it would be written; `None`: must be given; `Some("")` for kinds other than text: may be left out.
    pub default: Option<&'static str>,
    /// One line of help.
    pub help: &'static str,
    /// Why a number outside the range cannot be, where that is not plain; empty otherwise.
    pub why: &'static str,
}

const fn key(
    table: &'static str,
    name: &'static str,
    unit: &'static str,
    kind: Kind,
    default: Option<&'static str>,
    help: &'static str,
) -> Key {
    Key { table, name, unit, kind, default, help, why: "" }
}

impl Key {
    const fn because(self, why: &'static str) -> Self {
        Self { why, ..self }
    }
}

use Kind::{Axis, Button, Flag, Number, Pair, Text, Whole, Word};

/// Names of gilrs' buttons that a pad may be mapped to.
pub const BUTTONS: &[&str] = &[
    "South",
    "East",
    "North",
    "West",
    "C",
    "Z",
    "LeftTrigger",
    "LeftTrigger2",
    "RightTrigger",
    "RightTrigger2",
    "Select",
    "Start",
    "Mode",
    "LeftThumb",
    "RightThumb",
    "DPadUp",
    "DPadDown",
    "DPadLeft",
    "DPadRight",
];
/// Names of gilrs' axes.
pub const AXES: &[&str] =
    &["LeftStickX", "LeftStickY", "LeftZ", "RightStickX", "RightStickY", "RightZ", "DPadX", "DPadY"];

/// The tables, in the order in which they are printed: name, whether there may be several, one line of help.
pub const TABLES: &[(&str, bool, &str)] = &[
    ("base", false, "the base as a whole"),
    ("wheel", true, "one table a wheel, any number from three up"),
    ("link", true, "one table a serial line to drivers"),
    ("pace", true, "speed steps, slowest first; the first is taken at start"),
    ("limits", false, "limits of motion"),
    ("pad", false, "which gamepad, and what its axes and buttons mean"),
    ("room", false, "the room's frame and the heading in it"),
    ("guard", false, "what stops the base"),
    ("bay", false, "the room that there is"),
    ("loop", false, "the tick"),
    ("record", false, "run files"),
    ("console", false, "status, stop and reset of a running drive"),
    ("bench", false, "thresholds of the bench's verdicts (none yet)"),
];

/// All keys.
pub const KEYS: &[Key] = &[
    key("base", "name", "", Text(40), None, "what people call the base; names its run files"),
    key("base", "outline_m", "m", Pair(0.01, 20.0), None, "length and width of the base"),
    key("wheel", "name", "", Text(40), None, "what people call the wheel"),
    key(
        "wheel",
        "at_m",
        "m",
        Pair(-20.0, 20.0),
        None,
        "contact point, x forward and y left of the base's middle",
    ),
    key(
        "wheel",
        "drive_deg",
        "degrees",
        Number(-360.0, 360.0),
        None,
        "rolling direction from +x, anticlockwise",
    ),
    key(
        "wheel",
        "roller_deg",
        "degrees",
        Number(-80.0, 80.0),
        None,
        "roller angle: 0 for an omni wheel, 45 or -45 for mecanum",
    )
    .because("near 90 degrees the rollers roll the way the wheel does, and it drives nothing"),
    key("wheel", "radius_m", "m", Number(0.001, 5.0), None, "rolling radius")
        .because("no wheel has such a radius"),
    key("wheel", "max_rad_s", "rad/s", Number(0.01, 10000.0), None, "greatest speed of the wheel"),
    key("wheel", "max_rad_s2", "rad/s^2", Number(0.01, 1e6), None, "greatest acceleration of the wheel"),
    key("wheel", "link", "", Text(40), None, "name of the link that its driver hangs on"),
    key("wheel", "channel", "", Whole(0, 28), None, "channel on that link"),
    key("wheel", "reversed", "", Flag, Some("false"), "the channel turns the wheel backwards"),
    key("wheel", "gear", "", Number(0.001, 1000.0), Some("1.0"), "turns of the driver a turn of the wheel"),
    key("link", "name", "", Text(40), None, "what people call the line"),
    key("link", "port", "", Text(200), None, "device of the serial adaptor"),
    key("link", "baud", "bit/s", Whole(1200, 12_000_000), None, "speed of the line, 8N1"),
    key(
        "link",
        "valid_ms",
        "ms",
        Whole(2, 60_000),
        Some("100"),
        "how long a motion frame is good for: the drivers stop by themselves after it",
    ),
    key("link", "expect", "", Text(24), None, "name that the drivers must tell"),
    key("link", "channels", "", Whole(1, 29), None, "number of channels that the drivers must tell"),
    key(
        "link",
        "speed_lsb_urad_s",
        "urad/s",
        Whole(1, 100_000_000),
        None,
        "size of one count of speed, as the drivers tell it",
    ),
    key(
        "link",
        "angle_lsb_urad",
        "urad",
        Whole(1, 100_000_000),
        None,
        "size of one count of angle, as the drivers tell it",
    ),
    key("link", "fifo_bytes", "bytes", Whole(1, 65_536), Some("256"), "transmit FIFO of the adaptor"),
    key(
        "link",
        "latency_ms",
        "ms",
        Number(0.0, 1000.0),
        Some("16.0"),
        "latency of the adaptor (16 is the usual default of USB adaptors)",
    ),
    key("pace", "name", "", Text(40), None, "what people call the pace"),
    key("pace", "travel_m_s", "m/s", Number(0.001, 20.0), None, "travel speed at full stick"),
    key("pace", "turn_rad_s", "rad/s", Number(0.001, 50.0), None, "turn rate at full stick"),
    key(
        "limits",
        "speed_up_m_s2",
        "m/s^2",
        Number(0.01, 50.0),
        Some("0.8"),
        "greatest acceleration of travel",
    ),
    key(
        "limits",
        "slow_down_m_s2",
        "m/s^2",
        Number(0.01, 50.0),
        Some("1.0"),
        "greatest deceleration while following the sticks",
    ),
    key(
        "limits",
        "stop_m_s2",
        "m/s^2",
        Number(0.01, 50.0),
        Some("1.5"),
        "deceleration of a stop, by host or drivers",
    ),
    key(
        "limits",
        "turn_rad_s2",
        "rad/s^2",
        Number(0.01, 500.0),
        Some("3.0"),
        "greatest turn acceleration, also of a stop",
    ),
    key(
        "limits",
        "grip_m_s2",
        "m/s^2",
        Number(0.01, 50.0),
        Some("1.5"),
        "greatest centripetal acceleration that the floor gives",
    ),
    key(
        "limits",
        "smoothing_s",
        "s",
        Number(0.0, 5.0),
        Some("0.1"),
        "length of the moving average over the twist",
    ),
    key(
        "limits",
        "saturation",
        "",
        Word(&["together", "keep-turn", "keep-travel"]),
        Some("together"),
        "what gives way when the wheels are not fast enough",
    ),
    key("pad", "name", "", Text(100), Some(""), "a part of the gamepad's name; empty: the first found"),
    key(
        "pad",
        "id",
        "",
        Text(100),
        Some(""),
        "vvvv:pppp or vvvv:pppp:serial, as `gripline pads` prints it; empty: any",
    ),
    key(
        "pad",
        "wired",
        "",
        Flag,
        Some("false"),
        "there is a cable: a pad that only reports changes is not taken for dead when still",
    ),
    key("pad", "forward", "", Axis, Some("LeftStickY"), "forward travel"),
    key("pad", "left", "", Axis, Some("-LeftStickX"), "travel to the left"),
    key("pad", "turn_left", "", Axis, Some("-RightStickX"), "turn anticlockwise"),
    key("pad", "deadband", "", Number(0.0, 0.5), Some("0.12"), "deflection below which nothing is meant"),
    key(
        "pad",
        "curve",
        "",
        Number(1.0, 4.0),
        Some("1.6"),
        "exponent of the response: 1 straight, above it gentler round the centre",
    ),
    key("pad", "hold", "", Button, Some("RightTrigger2"), "the hold-to-run control"),
    key("pad", "hold_on", "", Number(0.05, 1.0), Some("0.6"), "pressed from here on"),
    key("pad", "hold_off", "", Number(0.01, 0.99), Some("0.4"), "released below this"),
    key(
        "pad",
        "hold_squeeze",
        "",
        Number(0.1, 1.0),
        Some(""),
        "with three positions: squeezed through from here on, which asks for a stop",
    ),
    key("pad", "ready", "", Button, Some("Start"), "asks for Ready"),
    key("pad", "reset", "", Button, Some("Select"), "held, asks to end a trip"),
    key("pad", "stop", "", Button, Some("East"), "stop"),
    key("pad", "pace_up", "", Button, Some("DPadUp"), "next faster pace"),
    key("pad", "pace_down", "", Button, Some("DPadDown"), "next slower pace"),
    key("pad", "frame", "", Button, Some("North"), "base frame or room frame"),
    key("pad", "zero_heading", "", Button, Some("West"), "the present heading becomes the room's forward"),
    key("room", "heading", "", Word(&["wheels", "gyro"]), Some("wheels"), "where the heading comes from"),
    key(
        "room",
        "lead_ms",
        "ms",
        Number(0.0, 500.0),
        Some("0.0"),
        "delay between deciding and moving, for predicting the heading",
    ),
    key(
        "guard",
        "stop_category",
        "",
        Whole(0, 1),
        Some("1"),
        "category (IEC 60204-1) of a stop that a person asks: 1 ramps, 0 takes the torque off at once",
    ),
    key(
        "guard",
        "pad_quiet_stream_ms",
        "ms",
        Number(20.0, 5000.0),
        Some("200.0"),
        "silence of a pad whose reports keep coming while still",
    ),
    key(
        "guard",
        "pad_quiet_change_ms",
        "ms",
        Number(100.0, 10_000.0),
        Some("2000.0"),
        "silence of a pad that only reports changes",
    ),
    key(
        "guard",
        "feedback_quiet_ms",
        "ms",
        Number(10.0, 2000.0),
        Some("100.0"),
        "no valid feedback from a link",
    ),
    key(
        "guard",
        "not_heard_ms",
        "ms",
        Number(10.0, 2000.0),
        Some("100.0"),
        "age of the last frame that a link has acknowledged",
    ),
    key("guard", "late_ms", "ms", Number(1.0, 1000.0), Some("50.0"), "a tick that comes later than this"),
    key(
        "guard",
        "driver_ms",
        "ms",
        Number(0.0, 500.0),
        Some(""),
        "delay of the drivers, as bench measures it; 20 is assumed",
    ),
    key(
        "guard",
        "follow_share",
        "",
        Number(0.01, 1.0),
        Some("0.1"),
        "not following: allowed share of the greatest speed",
    ),
    key("guard", "follow_lag_s", "s", Number(0.0, 2.0), Some("0.08"), "not following: lag of a sound wheel"),
    key("guard", "follow_s", "s", Number(0.05, 10.0), Some("0.5"), "not following: for how long"),
    key(
        "guard",
        "slowing_s",
        "s",
        Number(0.05, 5.0),
        Some("0.2"),
        "not slowing: how long after the start of the ramp",
    ),
    key(
        "guard",
        "runaway_share",
        "",
        Number(0.01, 1.0),
        Some("0.05"),
        "runaway: share of the greatest speed",
    ),
    key(
        "guard",
        "runaway_s",
        "s",
        Number(0.05, 10.0),
        Some("0.3"),
        "runaway: how long the command must have been zero",
    ),
    key(
        "guard",
        "runaway_rad",
        "rad",
        Number(0.01, 10.0),
        Some("0.1"),
        "runaway: how far the wheel must have moved",
    ),
    key(
        "guard",
        "skid_share",
        "",
        Number(0.01, 1.0),
        Some("0.1"),
        "skid: residual as a share of the greatest speed",
    ),
    key("guard", "skid_s", "s", Number(0.05, 10.0), Some("1.0"), "skid: for how long"),
    key(
        "guard",
        "standstill_share",
        "",
        Number(0.001, 0.2),
        Some("0.02"),
        "standstill: share of the greatest speed",
    ),
    key("guard", "standstill_s", "s", Number(0.02, 2.0), Some("0.1"), "standstill: for how long"),
    key(
        "guard",
        "stop_margin_s",
        "s",
        Number(0.05, 5.0),
        Some("0.5"),
        "how much longer than its ramp a stop may take",
    ),
    key("guard", "ready_idle_s", "s", Number(1.0, 3600.0), Some("60.0"), "Ready left alone goes to Parked"),
    key("guard", "reset_hold_s", "s", Number(0.2, 10.0), Some("1.0"), "how long reset must be held"),
    key("bay", "clear_m", "m", Number(0.01, 1000.0), Some(""), "free distance round the base"),
    key(
        "bay",
        "coast_m_s2",
        "m/s^2",
        Number(0.001, 50.0),
        Some(""),
        "deceleration without torque, as drill measures it",
    ),
    key("loop", "rate_hz", "Hz", Number(20.0, 2000.0), Some("200.0"), "ticks a second"),
    key(
        "loop",
        "realtime",
        "",
        Whole(0, 98),
        Some("40"),
        "SCHED_FIFO priority of the tick; 0: ordinary scheduling",
    ),
    key("loop", "cpu", "", Whole(0, 1023), Some(""), "core to pin the tick to"),
    key("loop", "lock_memory", "", Flag, Some("true"), "keep the program in memory"),
    key(
        "record",
        "dir",
        "",
        Text(200),
        Some(""),
        "folder of the run files; empty: the service's state folder, else ./runs",
    ),
    key(
        "record",
        "keep_gb",
        "GB",
        Number(0.01, 100_000.0),
        Some("4.0"),
        "oldest run files are deleted beyond this",
    ),
    key("console", "socket", "", Text(100), Some(""), "socket of the console; empty: in the runtime folder"),
    key("console", "reset", "", Flag, Some("false"), "whether the console may reset a trip"),
];

/// The row of a key.
#[must_use]
pub fn find(table: &str, name: &str) -> Option<&'static Key> {
    KEYS.iter().find(|it| it.table == table && it.name == name)
}

/// A table's header as it is written in a file.
#[must_use]
pub fn header(table: &str) -> String {
    match TABLES.iter().find(|it| it.0 == table) {
        Some((_, true, _)) => format!("[[{table}]]"),
        Some(_) | None => format!("[{table}]"),
    }
}

impl Kind {
    /// The range in words.
    #[must_use]
    pub fn range(&self) -> String {
        match self {
            Self::Number(least, most) => format!("{least} to {most}"),
            Self::Whole(least, most) => format!("whole, {least} to {most}"),
            Self::Pair(least, most) => format!("two numbers, {least} to {most}"),
            Self::Text(most) => format!("text, at most {most} bytes"),
            Self::Flag => "true or false".into(),
            Self::Word(words) => words.iter().map(|it| format!("\"{it}\"")).collect::<Vec<_>>().join(" or "),
            Self::Button => "a button by gilrs' name".into(),
            Self::Axis => "an axis by gilrs' name, \"-\" before it turns its sign".into(),
        }
    }
}
