//! One file a command: its arguments (`Args`), and `run`, which does it and says how it went. What several commands
//! need is here: the exit statuses, and the one place that prints an error.

pub(crate) mod check;
pub(crate) mod drill;
pub(crate) mod drive;
pub(crate) mod pads;
pub(crate) mod rehearse;
pub(crate) mod reset;
pub(crate) mod review;
pub(crate) mod standin;
pub(crate) mod status;
pub(crate) mod stop;
mod target;

use std::fmt::Display;
use std::io::Write;
use std::process::ExitCode;

/// How a command went; the exit status of the program.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[repr(u8)]
pub(crate) enum Exit {
    /// Done.
    Done = 0,
    /// Ran, and found a failure.
    Failed = 1,
    /// Could not run: configuration, usage.
    CouldNotRun = 2,
    /// Hardware, permission, or a host too late to judge by.
    Hardware = 3,
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        Self::from(exit as u8)
    }
}

/// Says why something was not done, in one line on stderr, and hands the status on: `return fail(Exit::Hardware, e)`.
/// The text says what, where and what to do, without a name before it and without a full stop after it.
pub(crate) fn fail(exit: Exit, why: impl Display) -> Exit {
    warn(why);
    exit
}

/// One line on stderr about something that is not as it should be, without ending anything.
pub(crate) fn warn(what: impl Display) {
    // Nobody may be listening (a closed pipe): then there is nobody to tell.
    let _ = writeln!(std::io::stderr().lock(), "gripline: {what}");
}

/// Prints to stdout. A reader that went away (`| head`) is no failure, a full disk is.
pub(crate) fn print(text: impl Display) -> Exit {
    let mut out = std::io::stdout().lock();
    match write!(out, "{text}").and_then(|()| out.flush()) {
        Ok(()) => Exit::Done,
        Err(e) if e.kind() == std::io::ErrorKind::BrokenPipe => Exit::Done,
        Err(e) => fail(Exit::Hardware, format_args!("cannot write to the standard output: {e}")),
    }
}

/// Help and version as asked; wrong arguments as one line.
pub(crate) fn usage(error: &clap::Error) -> Exit {
    if !error.use_stderr() {
        return print(error.render());
    }
    let text = error.render().to_string();
    // clap's message is its first paragraph, sometimes over several lines; usage and hints follow after a blank one.
    let first: Vec<&str> = text.lines().map(str::trim).take_while(|l| !l.is_empty()).collect();
    let what = first.join(" ");
    let what = what.strip_prefix("error: ").unwrap_or(&what);
    fail(
        Exit::CouldNotRun,
        format_args!("{what}; gripline --help and gripline COMMAND --help say what there is"),
    )
}

/// Reads a configuration; what is wrong with it is told, and is the status to end with.
pub(crate) fn read_plan(path: &std::path::Path) -> Result<gripline::config::Plan, Exit> {
    match gripline::config::load(path) {
        Ok((plan, warnings)) => {
            warnings.iter().for_each(|it| warn(format_args!("{it}")));
            Ok(plan)
        }
        Err(error) => Err(fail(Exit::CouldNotRun, error)),
    }
}

/// Uses other devices than the configuration's: `PATH`, or `LINK=PATH` where there are several links.
pub(crate) fn use_ports(plan: &mut gripline::config::Plan, given: &[String]) -> Result<(), Exit> {
    for given in given {
        use_port(plan, given).map_err(|why| fail(Exit::CouldNotRun, why))?;
    }
    Ok(())
}

fn use_port(plan: &mut gripline::config::Plan, given: &str) -> Result<(), String> {
    let (name, path) = match given.split_once('=') {
        Some((name, path)) => (Some(name), path),
        None => (None, given),
    };
    let names = plan.links.iter().map(|it| it.name.as_str()).collect::<Vec<_>>().join(", ");
    let link = match (name, plan.links.as_mut_slice()) {
        (None, [one]) => one,
        (None, _) => {
            return Err(format!(
                "--port {given}: there are several links; say LINK={given} with one of {names}"
            ));
        }
        (Some(name), links) => links
            .iter_mut()
            .find(|it| it.name == name)
            .ok_or_else(|| format!("--port {given}: there is no link '{name}'; known: {names}"))?,
    };
    link.port = path.into();
    Ok(())
}
