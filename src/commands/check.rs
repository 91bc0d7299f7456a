//! `gripline check`: a configuration on paper, before anything moves.

use std::path::{Path, PathBuf};

use gripline::base::analysis::analyse;
use gripline::check::{Findings, json, picture, text};
use gripline::config::{self, ConfigError, keys};
use serde::Serialize;

use super::{Exit, fail, print};

/// Check a configuration: layout, reach, load of the lines, stop budget. Moves nothing.
///
/// A configuration that is refused is told with every mistake at its line, and the status is 2.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// The base's configuration
    #[arg(required_unless_present = "keys")]
    config: Option<PathBuf>,
    /// As JSON, numbers in full precision
    #[arg(long)]
    json: bool,
    /// Draw the base from above, its reach and its stopping distances
    #[arg(long, value_name = "FILE.svg")]
    picture: Option<PathBuf>,
    /// Print every key of a configuration with unit, range and default; needs no CONFIG
    #[arg(long, conflicts_with_all = ["config", "json", "picture"])]
    keys: bool,
}

pub(crate) fn run(args: Args) -> Exit {
    let Some(path) = args.config else { return print(keys::reference()) };
    let (plan, odd) = match config::load(&path) {
        Ok(read) => read,
        Err(error) => return refused(&path, args.json, &error),
    };
    let findings = Findings::new(&plan, &odd);
    if let Some(file) = args.picture
        && let Err(error) = std::fs::write(&file, picture::svg(&findings))
    {
        let why = format!(
            "cannot write the picture to {}: {error}; give a path that can be written",
            file.display()
        );
        return fail(Exit::Hardware, why);
    }
    if args.json { print_json(&json::Check::new(&findings)) } else { print(text::tables(&findings)) }
}

/// What is wrong; and what the wheels alone tell, where they can be read and one motion is impossible.
fn refused(path: &Path, as_json: bool, error: &ConfigError) -> Exit {
    if let ConfigError::Wrong(_) = error
        && let Some(wheels) = config::small_text(path).ok().and_then(|it| config::wheels(&it))
    {
        let geometry: Vec<_> = wheels.iter().map(|it| it.1).collect();
        let analysis = analyse(&geometry);
        let names: Vec<&str> = wheels.iter().map(|it| it.0.as_str()).collect();
        if analysis.rank < 3 {
            let printed = if as_json {
                print_json(&json::Check::of_wheels(&analysis))
            } else {
                print(text::wheels(&names, &analysis))
            };
            if printed != Exit::Done {
                return printed;
            }
        }
    }
    fail(Exit::CouldNotRun, error)
}

fn print_json(value: &impl Serialize) -> Exit {
    match serde_json::to_string_pretty(value) {
        Ok(text) => print(text + "\n"),
        Err(error) => fail(Exit::Failed, format_args!("cannot write JSON: {error}; please report this")),
    }
}
