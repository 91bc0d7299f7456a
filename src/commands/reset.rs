//! `gripline reset`: ends a trip from the console, where that is allowed.

use std::time::Duration;

use serde_json::{Value, json};

use super::target::Target;
use super::{Exit, fail, print};

/// End a trip from the console, where the configuration allows it; never moves anything.
#[derive(clap::Args)]
pub(crate) struct Args {
    #[command(flatten)]
    target: Target,
    /// You see the base and nobody is near it
    #[arg(long)]
    in_sight: bool,
    /// As JSON
    #[arg(long)]
    json: bool,
}

pub(crate) fn run(args: Args) -> Exit {
    let request = json!({ "ask": "reset", "in_sight": args.in_sight });
    let answer = match args.target.ask(&request, Duration::from_secs(3)) {
        Ok(answer) => answer,
        Err(exit) => return exit,
    };
    if args.json {
        print(format_args!("{answer:#}\n"));
    }
    let text = |key: &str| answer.get(key).and_then(Value::as_str);
    if let Some(cause) = text("cause").filter(|_| !args.json) {
        print(format_args!("tripped: {cause}\n"));
    }
    match text("error") {
        Some(error) => fail(Exit::Failed, error),
        None if args.json => Exit::Done,
        None => print(format_args!("reset; now {}\n", text("phase").unwrap_or("Parked"))),
    }
}
