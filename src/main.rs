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
enum Command {}

fn main() -> ExitCode {
    let line = match CommandLine::try_parse() {
        Ok(line) => line,
        Err(error) => return commands::usage(&error).into(),
    };
    match line.command {}
}
