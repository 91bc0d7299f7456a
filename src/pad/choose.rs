//! Which pad: by a part of its name, or by its id.

use std::path::PathBuf;

use gilrs::{Axis, Button, Gamepad, Gilrs, LinuxGamepadExt};

use super::thread::PadError;
use crate::config::{PadAxis, PadButton, PadPlan};
use crate::sys::evdev::{RawReports, Watch};

/// A gamepad, as the configuration would name it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct PadFound {
    /// What to write as `name`.
    pub name: String,
    /// What to write as `id`.
    pub id: String,
    /// Its device file.
    pub path: PathBuf,
    /// Its axes and buttons are known by a mapping.
    pub mapped: bool,
    /// Its device file may be read.
    pub readable: bool,
    /// Raw reports can be read beside it.
    pub raw_reports: bool,
}

/// The gamepads that there are.
///
/// # Errors
/// When the system does not let them be looked for.
pub fn list() -> Result<Vec<PadFound>, PadError> {
    let gilrs = super::thread::build()?;
    Ok(gilrs.gamepads().map(|(_, pad)| found(&pad)).collect())
}

fn found(pad: &Gamepad<'_>) -> PadFound {
    let path = pad.devpath().to_owned();
    let watch = Watch::open(&path);
    let serial = watch.as_ref().ok().and_then(Watch::serial);
    let ids = format!("{:04x}:{:04x}", pad.vendor_id().unwrap_or(0), pad.product_id().unwrap_or(0));
    PadFound {
        name: pad.os_name().to_owned(),
        id: serial.map_or_else(|| ids.clone(), |serial| format!("{ids}:{serial}")),
        mapped: pad.mapping_source() != gilrs::MappingSource::None,
        readable: watch.is_ok(),
        raw_reports: RawReports::beside(&path).is_some(),
        path,
    }
}

/// Whether a pad is the one that the plan means.
pub(super) fn is_meant(pad: &Gamepad<'_>, plan: &PadPlan) -> bool {
    if !plan.name.is_empty() && !pad.os_name().contains(&plan.name) && !pad.name().contains(&plan.name) {
        return false;
    }
    if plan.id.is_empty() {
        return true;
    }
    let it = found(pad);
    let wanted = plan.id.to_ascii_lowercase();
    it.id.to_ascii_lowercase() == wanted || it.id.to_ascii_lowercase().starts_with(&format!("{wanted}:"))
}

/// The first connected pad that is meant and whose device file answers.
pub(super) fn choose(gilrs: &Gilrs, plan: &PadPlan) -> Option<(gilrs::GamepadId, Watch, PathBuf)> {
    gilrs.gamepads().filter(|(_, pad)| pad.is_connected() && is_meant(pad, plan)).find_map(|(id, pad)| {
        let watch = Watch::open(pad.devpath()).ok()?;
        (!watch.is_gone()).then(|| (id, watch, pad.devpath().to_owned()))
    })
}

/// gilrs' axis of ours.
pub(super) const fn axis(axis: PadAxis) -> Axis {
    match axis {
        PadAxis::LeftStickX => Axis::LeftStickX,
        PadAxis::LeftStickY => Axis::LeftStickY,
        PadAxis::LeftZ => Axis::LeftZ,
        PadAxis::RightStickX => Axis::RightStickX,
        PadAxis::RightStickY => Axis::RightStickY,
        PadAxis::RightZ => Axis::RightZ,
        PadAxis::DPadX => Axis::DPadX,
        PadAxis::DPadY => Axis::DPadY,
    }
}

/// gilrs' button of ours.
pub(super) const fn button(button: PadButton) -> Button {
    match button {
        PadButton::South => Button::South,
        PadButton::East => Button::East,
        PadButton::North => Button::North,
        PadButton::West => Button::West,
        PadButton::C => Button::C,
        PadButton::Z => Button::Z,
        PadButton::LeftTrigger => Button::LeftTrigger,
        PadButton::LeftTrigger2 => Button::LeftTrigger2,
        PadButton::RightTrigger => Button::RightTrigger,
        PadButton::RightTrigger2 => Button::RightTrigger2,
        PadButton::Select => Button::Select,
        PadButton::Start => Button::Start,
        PadButton::Mode => Button::Mode,
        PadButton::LeftThumb => Button::LeftThumb,
        PadButton::RightThumb => Button::RightThumb,
        PadButton::DPadUp => Button::DPadUp,
        PadButton::DPadDown => Button::DPadDown,
        PadButton::DPadLeft => Button::DPadLeft,
        PadButton::DPadRight => Button::DPadRight,
    }
}
