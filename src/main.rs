//! The command line: what there is to type, and nothing of how it works. One file a command in `commands/`.

mod commands;

use std::process::ExitCode;

use clap::{Parser, Subcommand};

/// Drive a base that can move in any direction with a gamepad, over a serial line, and only while a person holds it.
///
/// Gripline is not a safety device: keep an emergency stop within reach that cuts the power by itself.
#[derive(Parser)]
#[command(name = "gripline", version, max_term_width = 100)]
struct CommandLine {
    #[command(subcommand)]
    command: Command,
}

#[derive(Subcommand)]
enum Command {
    Rehearse(commands::rehearse::Args),
    Check(commands::check::Args),
    Pads(commands::pads::Args),
    Drive(commands::drive::Args),
    Status(commands::status::Args),
    Stop(commands::stop::Args),
    Reset(commands::reset::Args),
    Drill(commands::drill::Args),
    Standin(commands::standin::Args),
    Review(commands::review::Args),
}

fn main() -> ExitCode {
    let line = match CommandLine::try_parse() {
        Ok(line) => line,
        Err(error) => return commands::usage(&error).into(),
    };
    let exit = match line.command {
        Command::Rehearse(args) => commands::rehearse::run(args),
        Command::Check(args) => commands::check::run(args),
        Command::Pads(args) => commands::pads::run(args),
        Command::Drive(args) => commands::drive::run(args),
        Command::Status(args) => commands::status::run(args),
        Command::Stop(args) => commands::stop::run(args),
        Command::Reset(args) => commands::reset::run(args),
        Command::Drill(args) => commands::drill::run(args),
        Command::Standin(args) => commands::standin::run(args),
        Command::Review(args) => commands::review::run(args),
    };
    exit.into()
}
