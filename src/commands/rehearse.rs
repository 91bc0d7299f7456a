//! `gripline rehearse`: the whole drive on a simulated base, with scripted hands.

use std::path::PathBuf;

use gripline::config;
use gripline::rehearse::{self, RehearseError, USUAL_S, Wanted};
use serde_json::json;

use super::{Exit, fail, print};

/// Rehearse the whole drive on a simulated base: no hardware, nothing moves.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// The base's configuration; without it, the built-in tray cart
    config: Option<PathBuf>,
    /// Play this script in place of the whole drive
    #[arg(long, value_name = "FILE")]
    hands: Option<PathBuf>,
    /// About how long the whole drive takes
    #[arg(long, default_value_t = USUAL_S)]
    seconds: f64,
    /// Folder for the run file
    #[arg(long, value_name = "DIR", default_value = "runs")]
    record_dir: PathBuf,
    /// The report as JSON, without progress
    #[arg(long)]
    json: bool,
}

pub(crate) fn run(args: Args) -> Exit {
    if !args.seconds.is_finite() || !(20.0..=600.0).contains(&args.seconds) {
        return fail(Exit::CouldNotRun, format_args!("--seconds {}: give 20 to 600", args.seconds));
    }
    let config = match &args.config {
        None => (config::EXAMPLE.to_owned(), "the built-in example".to_owned()),
        Some(path) => match config::small_text(path) {
            Ok(text) => (text, path.display().to_string()),
            Err(error) => {
                return fail(
                    Exit::CouldNotRun,
                    format_args!(
                        "cannot read configuration {}: {error}; give the path of a configuration, or none",
                        path.display()
                    ),
                );
            }
        },
    };
    if let Some(path) = &args.hands
        && let Err(error) = std::fs::metadata(path)
    {
        return fail(
            Exit::CouldNotRun,
            format_args!(
                "cannot read the hands in {}: {error}; give a file of lines seconds,input,value",
                path.display()
            ),
        );
    }
    let program = match std::env::current_exe() {
        Ok(program) => program,
        Err(error) => {
            return fail(
                Exit::Hardware,
                format_args!("cannot find this program itself: {error}; is /proc mounted?"),
            );
        }
    };
    let wanted =
        Wanted { program, config, hands: args.hands, seconds: args.seconds, record_dir: args.record_dir };
    let quiet = args.json;
    let outcome = rehearse::rehearse(&wanted, &mut |line| {
        if !quiet {
            let _ = print(format_args!("{line}\n"));
        }
    });
    match outcome {
        Ok(report) => {
            let shown = if args.json {
                print(format_args!("{:#}\n", json!({ "ok": report.ok(), "report": report })))
            } else {
                print(format_args!("\n{}", report.table()))
            };
            match (report.ok(), &report.too_late) {
                (_, Some(_)) => Exit::Hardware,
                (true, None) => shown,
                (false, None) => Exit::Failed,
            }
        }
        Err(error @ RehearseError::Config(_)) => fail(Exit::CouldNotRun, error),
        Err(error) => fail(Exit::Hardware, error),
    }
}
