//! `gripline status`: how a running drive stands.

use std::time::Duration;

use serde_json::{Value, json};

use super::target::Target;
use super::{Exit, fail, print};

/// Tell how a running drive stands.
#[derive(clap::Args)]
pub(crate) struct Args {
    #[command(flatten)]
    target: Target,
    /// As JSON
    #[arg(long)]
    json: bool,
}

pub(crate) fn run(args: Args) -> Exit {
    let answer = match args.target.ask(&json!({ "ask": "status" }), Duration::from_secs(1)) {
        Ok(answer) => answer,
        Err(exit) => return exit,
    };
    let error = answer.get("error").and_then(Value::as_str);
    if args.json {
        let printed = print(format_args!("{answer:#}\n"));
        return if error.is_some() { Exit::Failed } else { printed };
    }
    if let Some(error) = error {
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
