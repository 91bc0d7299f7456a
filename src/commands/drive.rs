//! `gripline drive`: the daemon, in the foreground or under the service manager.

use std::path::PathBuf;

use gripline::config;
use gripline::daemon::{self, DriveError, DriveOptions, Ended};
use gripline::standin::hands::Script;

use super::{Exit, fail};

/// Drive the base by gamepad, until a signal asks for the end.
///
/// Gripline is not a safety device: fit a hard-wired emergency stop, try everything with the wheels off the floor
/// first; local rules and a competent person decide whether the base may move.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// The base's configuration
    config: PathBuf,
    /// Wait for ports and a gamepad that are not there yet
    #[arg(long)]
    wait: bool,
    /// Play a script in place of a gamepad: lines `seconds,input,value`
    #[arg(long, value_name = "FILE")]
    hands: Option<PathBuf>,
    /// The wheels are off the floor: a script may play on real drivers
    #[arg(long)]
    on_stands: bool,
    /// Folder for the run file, in place of the configuration's
    #[arg(long, value_name = "DIR")]
    record_dir: Option<PathBuf>,
    /// Use another device for a link; LINK=PATH where there are several links, once for each
    #[arg(long, value_name = "[LINK=]PATH")]
    port: Vec<String>,
    /// Console socket, in place of the configuration's
    #[arg(long, value_name = "PATH")]
    socket: Option<PathBuf>,
    /// Tell only stops
    #[arg(long)]
    quiet: bool,
}

pub(crate) fn run(args: Args) -> Exit {
    let mut plan = match super::read_plan(&args.config) {
        Ok(plan) => plan,
        Err(exit) => return exit,
    };
    if let Err(exit) = super::use_ports(&mut plan, &args.port) {
        return exit;
    }
    if args.socket.is_some() {
        plan.console.socket = args.socket;
    }
    if let Err(why) = offer_paces_that_fit(&mut plan) {
        return fail(Exit::CouldNotRun, why);
    }
    let hands = match args.hands.as_deref().map(read_hands).transpose() {
        Ok(hands) => hands,
        Err(exit) => return exit,
    };
    let options = DriveOptions {
        wait: args.wait,
        hands,
        on_stands: args.on_stands,
        record_dir: args.record_dir,
        quiet: args.quiet,
    };
    match daemon::drive(plan, options) {
        Ok(Ended::Parked | Ended::Tripped) => Exit::Done,
        Ok(Ended::Forced) => {
            fail(Exit::Failed, "ended without an orderly stop: see to the base before you start again")
        }
        Err(error @ DriveError::HandsOnRealDrivers(_)) => fail(Exit::CouldNotRun, error),
        Err(error) => fail(Exit::Hardware, error),
    }
}

/// Takes out the paces that the bay does not bear.
fn offer_paces_that_fit(plan: &mut gripline::config::Plan) -> Result<(), String> {
    let fits = gripline::core::budget::paces_that_fit(plan);
    let mut kept = Vec::new();
    for (pace, fits) in plan.paces.drain(..).zip(fits) {
        if fits {
            kept.push(pace);
        } else {
            super::warn(format_args!(
                "pace '{}' is not offered: its stops need more than `clear_m` of [bay]; see `gripline check`",
                pace.name
            ));
        }
    }
    plan.paces = kept;
    if plan.paces.is_empty() {
        return Err("no pace is left that the bay bears: make the slowest pace slower or the bay larger; see `gripline check`".into());
    }
    Ok(())
}

fn read_hands(path: &std::path::Path) -> Result<Script, Exit> {
    let text = config::small_text(path).map_err(|error| {
        fail(
            Exit::CouldNotRun,
            format_args!(
                "cannot read the hands in {}: {error}; give a file of lines seconds,input,value",
                path.display()
            ),
        )
    })?;
    Script::parse(&text).map_err(|mistakes| {
        let told: Vec<String> = mistakes.iter().map(|it| format!("{}:{it}", path.display())).collect();
        fail(Exit::CouldNotRun, told.join("\n"))
    })
}
