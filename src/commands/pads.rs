//! `gripline pads`: the gamepads there are, as the configuration would name them.

use std::path::PathBuf;

use gripline::config::PadPlan;
use gripline::core::io::{Buttons, PadInput};
use gripline::pad;
use gripline::sys::clock;
use serde_json::{Value, json};

use super::{Exit, fail, print};

/// List the gamepads there are; with --live show what each stick and button means while it moves.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// Use the [pad] table of this configuration for --live, in place of the defaults
    config: Option<PathBuf>,
    /// Show changes until a signal comes
    #[arg(long)]
    live: bool,
    /// As JSON; with --live one line a change
    #[arg(long)]
    json: bool,
}

pub(crate) fn run(args: Args) -> Exit {
    let found = match pad::list() {
        Ok(found) => found,
        Err(error) => return fail(Exit::Hardware, error),
    };
    if !args.live {
        return list(&found, args.json);
    }
    let plan = match &args.config {
        Some(path) => match super::read_plan(path) {
            Ok(plan) => plan.pad,
            Err(exit) => return exit,
        },
        None => match gripline::config::parse(gripline::config::EXAMPLE, "the built-in example") {
            Ok((plan, _)) => plan.pad,
            Err(mistakes) => {
                return fail(
                    Exit::CouldNotRun,
                    mistakes.first().map_or_else(String::new, ToString::to_string),
                );
            }
        },
    };
    live(&plan, args.json)
}

fn list(found: &[pad::PadFound], as_json: bool) -> Exit {
    if as_json {
        let pads: Vec<Value> = found
            .iter()
            .map(|it| {
                json!({ "name": it.name, "id": it.id, "path": it.path, "mapped": it.mapped, "readable": it.readable, "raw_reports": it.raw_reports })
            })
            .collect();
        return print(format_args!("{:#}\n", json!({ "pads": pads })));
    }
    if found.is_empty() {
        return print(
            "no gamepad found: plug one in; if it is in, see that /dev/input/event* may be read (group `input`, or the udev rules)\n",
        );
    }
    let mut text = String::new();
    for it in found {
        text += &format!("name = {:?}   id = {:?}   ({})\n", it.name, it.id, it.path.display());
        if !it.readable {
            text += "  its device file may not be read: join the group `input`, or install the udev rules\n";
        }
        if !it.mapped {
            text += "  no mapping is known for it: see by --live what its sticks and buttons are called\n";
        }
        text += if it.raw_reports {
            "  raw reports can be read beside it; --live tells whether they keep coming while it is still\n"
        } else {
            "  only reports changes: after 2 s without one it counts as gone, unless `wired = true` in [pad]\n"
        };
    }
    let unreadable = found.iter().all(|it| !it.readable);
    let exit = print(text);
    if unreadable { Exit::Hardware } else { exit }
}

fn live(plan: &PadPlan, as_json: bool) -> Exit {
    let mut feed = match pad::start(plan, |_| {}) {
        Ok(feed) => feed,
        Err(error) => return fail(Exit::Hardware, error),
    };
    let mut last: Option<PadInput> = None;
    loop {
        let mut now = feed.poll();
        let pressed = now.pressed;
        // Only what a person did or lost is a change.
        now.last_sign = gripline::units::Mono::default();
        now.pressed = Buttons::default();
        now.hold_least = now.hold;
        if last != Some(now) || pressed != Buttons::default() {
            let exit = if as_json {
                print(format_args!("{}\n", as_value(&now, pressed)))
            } else {
                print(as_line(&now))
            };
            if exit != Exit::Done {
                return exit;
            }
            last = Some(now);
        }
        clock::sleep_ms(5);
    }
}

const NAMES: [(&str, Buttons); 7] = [
    ("ready", Buttons::READY),
    ("reset", Buttons::RESET),
    ("stop", Buttons::STOP),
    ("pace_up", Buttons::PACE_UP),
    ("pace_down", Buttons::PACE_DOWN),
    ("frame", Buttons::FRAME),
    ("zero_heading", Buttons::ZERO_HEADING),
];

fn names(buttons: Buttons) -> Vec<&'static str> {
    NAMES.iter().filter(|(_, it)| buttons.has(*it)).map(|(name, _)| *name).collect()
}

fn as_value(it: &PadInput, pressed: Buttons) -> Value {
    json!({
        "present": it.present, "streams": it.streams, "forward": it.sticks.x, "left": it.sticks.y,
        "turn_left": it.sticks.turn, "hold": it.hold, "down": names(it.down), "pressed": names(pressed),
    })
}

fn as_line(it: &PadInput) -> String {
    if !it.present {
        return "no gamepad\n".into();
    }
    let kind = if it.streams { "streams" } else { "reports changes" };
    format!(
        "forward {:6.3}  left {:6.3}  turn left {:6.3}  hold {:5.3}  {kind}  {}\n",
        it.sticks.x,
        it.sticks.y,
        it.sticks.turn,
        it.hold,
        names(it.down).join(" ")
    )
}
