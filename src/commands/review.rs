//! `gripline review`: what a recorded run shows.

use std::path::PathBuf;

use gripline::measure::{Summary, summary};
use gripline::record::reader::Run;
use gripline::review::write_csv;
use serde_json::{Value, json};

use super::{Exit, fail, print, warn};

/// Tell what a recorded run shows; write it as tables.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// The run file
    run: PathBuf,
    /// Write ticks.csv, events.csv and frames.csv into this folder
    #[arg(long, value_name = "DIR")]
    csv: Option<PathBuf>,
    /// As JSON
    #[arg(long)]
    json: bool,
}

pub(crate) fn run(args: Args) -> Exit {
    let mut run = match Run::open(&args.run) {
        Ok(run) => run,
        Err(error) => return fail(Exit::CouldNotRun, error),
    };
    if let Some(dir) = &args.csv {
        if let Err(error) = write_csv(&mut run, dir) {
            return fail(Exit::CouldNotRun, error);
        }
        if let Some(damage) = &run.damage {
            warn(format_args!("{}: {damage}; what came before it was written", args.run.display()));
        }
        run = match Run::open(&args.run) {
            Ok(run) => run,
            Err(error) => return fail(Exit::CouldNotRun, error),
        };
    }
    let it = match summary(&mut run) {
        Ok((it, _)) => it,
        Err(mistake) => {
            return fail(
                Exit::CouldNotRun,
                format_args!("the configuration inside the run is refused by this program: {mistake}"),
            );
        }
    };
    if args.json { print(format_args!("{:#}\n", as_json(&it))) } else { print(as_text(&it)) }
}

fn as_json(it: &Summary) -> Value {
    let stops: Vec<Value> = it
        .stops
        .iter()
        .map(|stop| {
            json!({
                "t_s": stop.t_s, "code": stop.code, "words": stop.words, "from": stop.from.name(),
                "first_stop_s": stop.first_stop_s, "standstill_s": stop.standstill_s, "distance_m": stop.distance_m,
                "from_m_s": stop.from_m_s, "from_rad_s": stop.from_rad_s, "pace": stop.pace,
            })
        })
        .collect();
    json!({
        "base": it.base, "seconds": it.seconds, "ticks": it.ticks, "path_m": it.path_m, "stops": stops,
        "frames": { "sent": it.frames_sent, "heard": it.frames_heard, "damaged": it.frames_damaged, "refused": it.frames_refused, "lost": it.frames_lost },
        "late_s": { "median": it.late_s[0], "p99": it.late_s[1], "max": it.late_s[2] },
        "skid_rad_s": it.skid_rad_s, "packets_lost": it.packets_lost, "damage": it.damage,
    })
}

fn as_text(it: &Summary) -> String {
    let mut text = format!(
        "{}: {:.1} s, {} ticks, {:.2} m of way, {} stops\n",
        it.base,
        it.seconds,
        it.ticks,
        it.path_m,
        it.stops.len()
    );
    for stop in &it.stops {
        let first = stop
            .first_stop_s
            .map_or_else(String::new, |it| format!(", first stop frame after {:.1} ms", it * 1e3));
        let stood = stop
            .standstill_s
            .map_or_else(|| "standstill not seen".into(), |it| format!("standing after {it:.3} s"));
        text += &format!("  {:9.3} s  {}: {stood}, {:.3} m{first}\n", stop.t_s, stop.words, stop.distance_m);
    }
    text += &format!(
        "frames: {} sent, {} heard, {} lost, {} damaged, {} refused by the drivers\n",
        it.frames_sent, it.frames_heard, it.frames_lost, it.frames_damaged, it.frames_refused
    );
    text += &format!(
        "ticks late: median {:.3} ms, 99 % {:.3} ms, most {:.3} ms\n",
        it.late_s[0] * 1e3,
        it.late_s[1] * 1e3,
        it.late_s[2] * 1e3
    );
    text += &format!("greatest skid residual while driving: {:.3} rad/s\n", it.skid_rad_s);
    if it.packets_lost > 0 {
        text += &format!("{} packets found no room in the recorder\n", it.packets_lost);
    }
    if let Some(damage) = &it.damage {
        text += &format!("damage: {damage}\n");
    }
    text
}
