//! `gripline status`: how a running drive stands.

use std::path::PathBuf;
use std::time::Duration;

use gripline::daemon::console;
use serde_json::{Value, json};

use super::{Exit, fail, print};

/// Tell how a running drive stands.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// The base's configuration; may be left out where one drive is running
    config: Option<PathBuf>,
    /// As JSON
    #[arg(long)]
    json: bool,
}

pub(crate) fn run(args: Args) -> Exit {
    let socket = match super::find_socket(args.config.as_deref()) {
        Ok(socket) => socket,
        Err(exit) => return exit,
    };
    let answer = match console::ask(&socket, &json!({ "ask": "status" }), Duration::from_secs(1)) {
        Ok(answer) => answer,
        Err(error) => {
            return fail(
                Exit::Failed,
                format_args!(
                    "no drive answers at {}: {error}; start `gripline drive`, or stop a hung one by `gripline stop CONFIG`",
                    socket.display()
                ),
            );
        }
    };
    if args.json {
        return print(format_args!("{answer:#}\n"));
    }
    if let Some(error) = answer.get("error").and_then(Value::as_str) {
        return fail(Exit::Failed, error);
    }
    let text = |key: &str| answer.get(key).and_then(Value::as_str).unwrap_or("").to_owned();
    let number =
        |a: &str, b: &str| answer.get(a).and_then(|it| it.get(b)).and_then(Value::as_f64).unwrap_or(f64::NAN);
    let mut lines =
        format!("{}: {}, pace {}, {} frame\n", text("base"), text("phase"), text("pace"), text("frame"));
    for (key, words) in [("cause", "stopped because"), ("clears", "to go on"), ("waits_for", "waits for")] {
        if !text(key).is_empty() {
            lines += &format!("{words}: {}\n", text(key));
        }
    }
    lines += &format!(
        "sent {:.3} rad/s, {:.3} m/s forward, {:.3} m/s left; at ({:.3}, {:.3}) m, heading {:.3} rad\nrecording to {}\n",
        number("sent", "turn_rad_s"),
        number("sent", "x_m_s"),
        number("sent", "y_m_s"),
        number("pose", "x_m"),
        number("pose", "y_m"),
        number("pose", "heading_rad"),
        text("run")
    );
    print(lines)
}
