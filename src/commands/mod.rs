//! One file a command: its arguments (`Args`), and `run`, which does it and says how it went. What several commands
//! need is here: the exit statuses, and the one place that prints an error.

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
