//! `gripline standin`: simulated drivers and base alone, for whoever opens the ports.

use std::io::{BufRead, Write};
use std::path::PathBuf;

use crossbeam_channel::{Receiver, Sender};
use gripline::config::{self, Plan};
use gripline::standin::fault::{self, Asked};
use gripline::standin::serve::{self, PortNews, ServeError, ServeNews, ServeSettings, Served};
use gripline::standin::sim::SimSettings;
use gripline::units::deg;

use super::{Exit, fail, warn};

/// Simulated drivers and base, on pseudo-terminals or given ports, until a signal comes.
///
/// Faults are asked for at standard input, one a line; `help` there lists them.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// The base's configuration
    config: PathBuf,
    /// Serve this port instead of a pseudo-terminal; LINK=PATH where there are several links, once for each
    #[arg(long, value_name = "[LINK=]PATH")]
    port: Vec<String>,
    /// Make a symbolic link to each pseudo-terminal in this folder, by the link's name
    #[arg(long, value_name = "DIR")]
    link_dir: Option<PathBuf>,
    /// Write the true pose, twist and wheel speeds over time
    #[arg(long, value_name = "FILE.csv")]
    trace: Option<PathBuf>,
    /// What chance (noise, losses, boot numbers) starts from
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Say nothing but errors; the ports are printed all the same
    #[arg(long)]
    quiet: bool,
    /// End when standard input is closed
    #[arg(long)]
    until_eof: bool,
}

/// What wakes the main thread.
enum Wake {
    Line(String),
    Eof,
    Signal,
    News(ServeNews),
}

pub(crate) fn run(args: Args) -> Exit {
    let plan = match config::load(&args.config) {
        Ok((plan, _)) => plan,
        Err(why) => return fail(Exit::CouldNotRun, why),
    };
    let ports = match args.port.iter().map(|port| given_port(port, &plan)).collect::<Result<Vec<_>, _>>() {
        Ok(ports) => ports,
        Err(why) => return fail(Exit::CouldNotRun, why),
    };
    if let Some(twice) =
        plan.links.iter().enumerate().find(|(i, _)| ports.iter().filter(|(l, _)| l == i).count() > 1)
    {
        return fail(
            Exit::CouldNotRun,
            format_args!("link `{}` is given two ports; give it one --port", twice.1.name),
        );
    }
    let (wake, woken) = crossbeam_channel::unbounded();
    let on_signal = wake.clone();
    if let Err(why) = ctrlc::set_handler(move || drop(on_signal.send(Wake::Signal))) {
        return fail(Exit::Hardware, format_args!("cannot listen for signals: {why}"));
    }
    let settings = ServeSettings {
        ports,
        link_dir: args.link_dir,
        trace: args.trace,
        seed: args.seed,
        sim: SimSettings::default(),
    };
    let on_news = wake.clone();
    let served = match serve::start(&plan, &settings, move |news| drop(on_news.send(Wake::News(news)))) {
        Ok(served) => served,
        Err(why) => return fail(exit_of(&why), why),
    };
    if let Err(why) = say_ports(&plan, &settings, &served) {
        return fail(Exit::Hardware, format_args!("cannot write to the standard output: {why}"));
    }
    read_lines(wake);
    serve_until_told(&plan, &served, &woken, args.quiet, args.until_eof)
}

/// A port given on the command line: the index of its link, and its path.
fn given_port(text: &str, plan: &Plan) -> Result<(usize, PathBuf), String> {
    if let Some((name, path)) = text.split_once('=')
        && let Some(link) = plan.links.iter().position(|link| link.name == name)
    {
        return Ok((link, PathBuf::from(path)));
    }
    if plan.links.len() == 1 {
        return Ok((0, PathBuf::from(text)));
    }
    let names: Vec<&str> = plan.links.iter().map(|link| link.name.as_str()).collect();
    Err(format!("--port {text} names no link; write LINK=PATH with one of {}", names.join(", ")))
}

fn exit_of(why: &ServeError) -> Exit {
    match why {
        ServeError::Pty(_) | ServeError::Port { .. } | ServeError::Thread(_) => Exit::Hardware,
        ServeError::Link { .. } | ServeError::LinkName(_) | ServeError::Trace { .. } => Exit::CouldNotRun,
    }
}

fn say_ports(plan: &Plan, settings: &ServeSettings, served: &Served) -> std::io::Result<()> {
    let mut out = std::io::stdout().lock();
    for (link, port) in plan.links.iter().zip(served.ports()) {
        write!(out, "{}: {}", link.name, port.display())?;
        if let Some(dir) = &settings.link_dir {
            write!(out, " ({})", dir.join(&link.name).display())?;
        }
        writeln!(out)?;
    }
    out.flush()
}

/// A thread of its own, since nothing else can wait for standard input and signals at once.
fn read_lines(wake: Sender<Wake>) {
    let reader = move || {
        for line in std::io::stdin().lock().lines() {
            let Ok(line) = line else { break };
            if wake.send(Wake::Line(line)).is_err() {
                return;
            }
        }
        drop(wake.send(Wake::Eof));
    };
    if let Err(why) = std::thread::Builder::new().name("faults".to_owned()).spawn(reader) {
        warn(format_args!("cannot read standard input, faults cannot be asked for: {why}"));
    }
}

fn serve_until_told(
    plan: &Plan,
    served: &Served,
    woken: &Receiver<Wake>,
    quiet: bool,
    until_eof: bool,
) -> Exit {
    while let Ok(wake) = woken.recv() {
        let said = match wake {
            Wake::Signal => return Exit::Done,
            Wake::Eof if until_eof => return Exit::Done,
            Wake::Eof => continue,
            Wake::Line(line) => match answer(&line, plan, served) {
                Ok(said) => said,
                Err(why) => {
                    warn(why);
                    continue;
                }
            },
            Wake::News(news) => match in_words(&news, plan) {
                Ok(said) => said,
                Err(trouble) => {
                    warn(trouble);
                    continue;
                }
            },
        };
        if !quiet && !said.is_empty() {
            // Nobody may be reading any more: the base goes on all the same.
            let mut out = std::io::stdout().lock();
            let _ = writeln!(out, "{said}").and_then(|()| out.flush());
        }
    }
    Exit::Done
}

fn answer(line: &str, plan: &Plan, served: &Served) -> Result<String, fault::FaultMistake> {
    Ok(match fault::parse(line, plan)? {
        Asked::Nothing => String::new(),
        Asked::Help => fault::HELP.trim_end().to_owned(),
        Asked::Where => {
            let truth = served.truth();
            format!(
                "x {:.3} m, y {:.3} m, heading {:.1} deg; {:.3} m/s, {:.3} rad/s",
                truth.pose.x_m,
                truth.pose.y_m,
                deg(truth.pose.heading_rad),
                truth.twist.travel_m_s(),
                truth.twist.turn_rad_s
            )
        }
        Asked::Fault(fault) => {
            served.fault(fault);
            format!("done: {}", line.trim())
        }
    })
}

/// What happened, or what went wrong.
fn in_words(news: &ServeNews, plan: &Plan) -> Result<String, String> {
    let name = |link: &usize| plan.links.get(*link).map_or("?", |link| link.name.as_str());
    match news {
        ServeNews::Port { link, news: PortNews::Read } => Ok(format!("{}: somebody has come", name(link))),
        ServeNews::Port { link, news: PortNews::Unread } => {
            Ok(format!("{}: nobody reads any more", name(link)))
        }
        ServeNews::Port { link, news: PortNews::Back } => Ok(format!("{}: the port is back", name(link))),
        ServeNews::Port { link, news: PortNews::Lost(why) } => {
            Err(format!("link `{}`: the port is gone ({why}); it is tried again twice a second", name(link)))
        }
        ServeNews::TraceEnded(why) => Err(format!("the trace ends here: {why}; make room and start again")),
    }
}
