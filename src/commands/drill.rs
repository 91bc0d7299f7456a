//! `gripline drill`: faults on purpose, measured and held against the stop budget.

use std::io::{BufRead, IsTerminal, Write};
use std::path::PathBuf;

use gripline::drill::{self, Answer, DrillError, FAULTS, Fault, OnBase, People, Report, Row, Setup};
use gripline::{config, daemon};

use super::{Exit, fail, print};

/// Provoke faults one after the other, measure time and distance to standstill, and hold them against the stop budget.
///
/// On a real base a person drives and does by hand what it is told; it moves. Gripline is not a safety device: fit a
/// hard-wired emergency stop, try everything with the wheels off the floor first; local rules and a competent person
/// decide whether the base may move.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// The base's configuration
    config: PathBuf,
    /// On simulated drivers and a simulated base: all faults, by itself
    #[arg(long)]
    standin: bool,
    /// Only this fault; may be given several times. `--only help` lists them
    #[arg(long, value_name = "FAULT")]
    only: Vec<String>,
    /// At this pace, in place of the slowest
    #[arg(long, value_name = "NAME")]
    pace: Option<String>,
    /// A real base may be drilled at a faster pace than the slowest: its bay and the people round it bear that
    #[arg(long)]
    faster: bool,
    /// Scripted hands in place of a person, for simulated drivers or a base on stands
    #[arg(long, value_name = "FILE", conflicts_with = "standin")]
    hands: Option<PathBuf>,
    /// The wheels are off the floor: a script may play on real drivers
    #[arg(long)]
    on_stands: bool,
    /// Use another device for a link; LINK=PATH where there are several links, once for each
    #[arg(long, value_name = "[LINK=]PATH")]
    port: Vec<String>,
    /// Folder for the run files
    #[arg(long, value_name = "DIR", default_value = "runs")]
    record_dir: PathBuf,
    /// The report as JSON, without progress
    #[arg(long)]
    json: bool,
    /// Write a page with the table and a plot for each fault
    #[arg(long, value_name = "FILE")]
    html: Option<PathBuf>,
}

pub(crate) fn run(args: Args) -> Exit {
    if args.only.iter().any(|it| it == "help") {
        return list();
    }
    let faults = match chosen(&args.only) {
        Ok(faults) => faults,
        Err(why) => return fail(Exit::CouldNotRun, why),
    };
    if !args.standin && args.hands.is_none() && !std::io::stdin().is_terminal() {
        return fail(
            Exit::CouldNotRun,
            "a base is drilled with somebody at the terminal, and standard input is none; run it there, or with --standin",
        );
    }
    let mut setup = match set_up(&args) {
        Ok(setup) => setup,
        Err(exit) => return exit,
    };
    if !args.json {
        print(format_args!("{}\n", daemon::CAUTION));
    }
    let outcome = if args.standin {
        on_standin(&args, &mut setup, &faults)
    } else {
        on_base(&args, &mut setup, &faults)
    };
    let drills = match outcome {
        Ok(rows) => rows,
        Err(error @ DrillError::Config(_)) => return fail(Exit::CouldNotRun, error),
        Err(error) => return fail(Exit::Hardware, error),
    };
    let report = setup.report(args.standin, drills);
    show(&args, &report)
}

fn list() -> Exit {
    let lines: String = FAULTS.iter().map(|it| format!("{:<22} {}\n", it.name, it.what)).collect();
    print(lines)
}

fn chosen(only: &[String]) -> Result<Vec<&'static Fault>, String> {
    if only.is_empty() {
        return Ok(FAULTS.iter().collect());
    }
    only.iter()
        .map(|name| {
            FAULTS
                .iter()
                .find(|it| it.name == name)
                .ok_or_else(|| format!("--only {name}: there is no such fault; `--only help` lists them"))
        })
        .collect()
}

fn set_up(args: &Args) -> Result<Setup, Exit> {
    let program = std::env::current_exe().map_err(|error| {
        fail(Exit::Hardware, format_args!("cannot find this program itself: {error}; is /proc mounted?"))
    })?;
    let text = config::small_text(&args.config).map_err(|error| {
        fail(
            Exit::CouldNotRun,
            format_args!(
                "cannot read configuration {}: {error}; give the path of a configuration",
                args.config.display()
            ),
        )
    })?;
    let mut plan = match config::parse(&text, &args.config.display().to_string()) {
        Ok((plan, _)) => plan,
        Err(mistakes) => {
            let told: Vec<String> = mistakes.iter().map(ToString::to_string).collect();
            return Err(fail(Exit::CouldNotRun, told.join("\n")));
        }
    };
    super::use_ports(&mut plan, &args.port)?;
    let mut setup = Setup::new(
        program,
        (&text, &args.config.display().to_string()),
        args.pace.as_deref(),
        args.record_dir.clone(),
    )
    .map_err(|error| fail(Exit::CouldNotRun, error))?;
    setup.use_ports(&plan);
    if !args.standin && !args.faster && setup.is_faster_than_slowest() {
        return Err(fail(
            Exit::CouldNotRun,
            format_args!(
                "pace '{}' is not the slowest: a real base is drilled at that one first; say --faster when its bay and the people round it bear more",
                setup.pace_name()
            ),
        ));
    }
    if let Some(file) = &args.html {
        // A report that cannot be written is better known before the drill than after it.
        std::fs::write(file, "").map_err(|error| {
            fail(
                Exit::CouldNotRun,
                format_args!("cannot write {}: {error}; give another file", file.display()),
            )
        })?;
    }
    Ok(setup)
}

fn on_standin(args: &Args, setup: &mut Setup, faults: &[&'static Fault]) -> Result<Vec<Row>, DrillError> {
    let mut rows = Vec::new();
    for (index, fault) in faults.iter().enumerate() {
        if !args.json {
            print(format_args!("{:2} of {}: {}, {}\n", index + 1, faults.len(), fault.name, fault.what));
        }
        let row = drill::on_standin(setup, fault)?;
        if !args.json {
            print(format_args!("{}\n", row.line()));
        }
        rows.push(row);
    }
    Ok(rows)
}

fn on_base(args: &Args, setup: &mut Setup, faults: &[&'static Fault]) -> Result<Vec<Row>, DrillError> {
    let mut arguments: Vec<String> = args.port.iter().flat_map(|it| ["--port".into(), it.clone()]).collect();
    if let Some(hands) = &args.hands {
        arguments.extend(["--hands".into(), hands.display().to_string()]);
    }
    if args.on_stands {
        arguments.push("--on-stands".into());
    }
    let with = OnBase { arguments };
    let mut people = Terminal { asks: args.hands.is_none() };
    let mut rows = Vec::new();
    for fault in faults {
        match drill::on_base(setup, fault, &with, &mut people)? {
            Some(row) => rows.push(row),
            None => break,
        }
    }
    Ok(rows)
}

/// The people at the terminal; everything goes to stderr, so that a report on stdout stays whole.
struct Terminal {
    asks: bool,
}

impl People for Terminal {
    fn tell(&mut self, what: &str) {
        let _ = writeln!(std::io::stderr(), "{what}");
    }

    fn ask(&mut self, what: &str) -> Answer {
        self.tell(&format!("\n{what}"));
        if !self.asks {
            return Answer::Go;
        }
        self.tell("Enter goes on, s leaves it out, q ends the drill");
        let mut line = String::new();
        match std::io::stdin().lock().read_line(&mut line) {
            Ok(0) | Err(_) => Answer::End,
            Ok(_) => match line.trim() {
                "" => Answer::Go,
                "s" => Answer::Skip,
                _ => Answer::End,
            },
        }
    }
}

fn show(args: &Args, report: &Report) -> Exit {
    let shown = if args.json {
        match serde_json::to_value(report) {
            Ok(mut value) => {
                if let Some(map) = value.as_object_mut() {
                    map.insert("ok".into(), report.ok().into());
                }
                print(format_args!("{value:#}\n"))
            }
            Err(error) => fail(Exit::Hardware, format_args!("cannot write the report: {error}")),
        }
    } else {
        print(format_args!("\n{}", report.table()))
    };
    if let Some(file) = &args.html
        && let Err(error) = std::fs::write(file, drill::page(report))
    {
        return fail(Exit::CouldNotRun, format_args!("cannot write {}: {error}", file.display()));
    }
    match (report.ok(), &report.too_late) {
        (_, Some(_)) => Exit::Hardware,
        (true, None) => shown,
        (false, None) => Exit::Failed,
    }
}
