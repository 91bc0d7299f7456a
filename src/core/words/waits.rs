//! What a request waits for.

use super::super::event::{IdentityField, Wait};
use super::super::settings::longest_ramp_ms;
use super::{bits, link, port};
use crate::config::{LinkPlan, Plan};

/// What a request waits for, and what to do.
#[must_use]
pub fn wait(wait: &Wait, plan: &Plan) -> String {
    match wait {
        Wait::NoPad => "no gamepad; plug it in, or see `gripline pads`".into(),
        Wait::HoldNotReleased => format!("{:?} (hold) is pressed; let it go", plan.pad.hold),
        Wait::SticksNotCentred => "a stick is off its centre; let it go".into(),
        Wait::LinkNotOpen { link: it } => {
            format!("{} has no port: {} is not open; plug the adaptor in", link(plan, *it), port(plan, *it))
        }
        Wait::NoIdentity { link: it } => {
            format!("{} has not told who it is; see to the drivers' power and `baud`", link(plan, *it))
        }
        Wait::IdentityDiffers { link: it, field } => {
            let own = plan.links.get(usize::from(*it));
            format!("{} is not as configured: {}", link(plan, *it), differs(*field, own, plan))
        }
        Wait::NoFeedback { link: it } => {
            format!("no fresh feedback from {}; see to the cable and the drivers' power", link(plan, *it))
        }
        Wait::Latched { link: it } => format!("{} is latched; reset first", link(plan, *it)),
        Wait::Fault { link: it, status } => {
            format!("{} reports {}; see to the drivers", link(plan, *it), bits(*status))
        }
        Wait::StopInputOpen { link: it } => {
            format!("the stop input of {} is open; close it", link(plan, *it))
        }
        Wait::ResetAtPad => {
            format!(
                "the stop was asked at the pad or at a stop input; reset at the pad ({:?})",
                plan.pad.reset
            )
        }
        Wait::PressSpent => {
            format!("that press is spent; let {:?} (hold) go and press again", plan.pad.hold)
        }
        Wait::Quitting => "the program is ending".into(),
        Wait::WrongPhase => format!("tripped; hold {:?} to reset first", plan.pad.reset),
        Wait::NotStanding => "wheels still turn or torque is still on; wait for the standstill".into(),
        Wait::StopDown => format!("{:?} (stop) is down; let it go", plan.pad.stop),
        Wait::NotLatched { link: it } => format!("the stop has not yet reached {}", link(plan, *it)),
    }
}

/// Names what the drivers say and what the plan says.
fn differs(field: IdentityField, own: Option<&LinkPlan>, plan: &Plan) -> String {
    let planned = |value: fn(&LinkPlan) -> String| own.map_or_else(String::new, value);
    match field {
        IdentityField::Version(it) => format!("its drivers speak version {it} of the line, this program 1"),
        IdentityField::Name(it) => {
            format!(
                "its drivers call themselves \"{it}\", `expect` is {}",
                planned(|own| format!("\"{}\"", own.expect))
            )
        }
        IdentityField::Channels(it) => {
            format!(
                "its drivers have {it} channels, `channels` is {}",
                planned(|own| own.channels.to_string())
            )
        }
        IdentityField::SpeedLsb(it) => format!(
            "a count of speed is {it} urad/s there, `speed_lsb_urad_s` is {}",
            planned(|own| own.speed_lsb_urad_s.to_string())
        ),
        IdentityField::AngleLsb(it) => format!(
            "a count of angle is {it} urad there, `angle_lsb_urad` is {}",
            planned(|own| own.angle_lsb_urad.to_string())
        ),
        IdentityField::Silence(it) => format!(
            "its drivers take no validity longer than {it} ms, `valid_ms` is {}",
            planned(|own| own.valid_ms.to_string())
        ),
        IdentityField::RampMax(it) => format!(
            "its drivers make no ramp longer than {it} ms, this base needs up to {} ms",
            longest_ramp_ms(plan)
        ),
        IdentityField::YawRate => "its drivers have no yaw rate, which `heading = \"gyro\"` needs".into(),
    }
}
