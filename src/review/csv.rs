//! A run as three CSV files: ticks, events, frames.

use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::{Path, PathBuf};

use crate::config::{Plan, parse};
use crate::core::words;
use crate::record::Item;
use crate::record::reader::Run;
use crate::shaping::Frame;
use crate::wire::{Deframer, Direction};

/// Why the tables cannot be written.
#[derive(Debug, thiserror::Error)]
pub enum CsvError {
    /// A file cannot be written.
    #[error("cannot write {path}: {source}; give a folder with room")]
    Write {
        /// The file.
        path: PathBuf,
        /// Why.
        source: io::Error,
    },
    /// The configuration inside the run is not understood any more.
    #[error("the configuration inside the run is refused by this program: {0}")]
    Config(String),
}

/// Writes ticks.csv, events.csv and frames.csv into a folder. Times are seconds since the start of the run.
///
/// # Errors
/// When a file cannot be written, or the run's configuration is not understood.
pub fn write_csv(run: &mut Run, dir: &Path) -> Result<(), CsvError> {
    let (plan, _) = parse(&run.config, "configuration of the run")
        .map_err(|it| CsvError::Config(it.first().map_or_else(String::new, ToString::to_string)))?;
    std::fs::create_dir_all(dir).map_err(|source| CsvError::Write { path: dir.into(), source })?;
    let open = |name: &str| {
        let path = dir.join(name);
        match File::create(&path) {
            Ok(file) => Ok((BufWriter::new(file), path)),
            Err(source) => Err(CsvError::Write { path, source }),
        }
    };
    let (mut ticks, ticks_path) = open("ticks.csv")?;
    let (mut events, events_path) = open("events.csv")?;
    let (mut frames, frames_path) = open("frames.csv")?;
    let told = |path: &PathBuf, source| CsvError::Write { path: path.clone(), source };
    tick_header(&mut ticks, &plan).map_err(|it| told(&ticks_path, it))?;
    writeln!(events, "t_s,code,words").map_err(|it| told(&events_path, it))?;
    writeln!(frames, "t_s,link,direction,kind,sequence,body").map_err(|it| told(&frames_path, it))?;
    let origin = run.origin;
    while let Some(item) = run.next() {
        match item {
            Item::Tick(tick) => tick_row(&mut ticks, &plan, &tick, tick.inputs.now.since_s(origin))
                .map_err(|it| told(&ticks_path, it))?,
            Item::Event(at, event) => {
                let words = words::event(&event, &plan).replace('"', "\"\"");
                writeln!(events, "{:.6},{},\"{words}\"", at.since_s(origin), event.code())
                    .map_err(|it| told(&events_path, it))?;
            }
            Item::Lost(at, count) => {
                writeln!(
                    events,
                    "{:.6},lost,\"{count} packets found no room before here\"",
                    at.since_s(origin)
                )
                .map_err(|it| told(&events_path, it))?;
            }
            Item::Frame { at, link, direction, bytes } => {
                let name = plan.links.get(usize::from(link)).map_or("", |it| it.name.as_str());
                frame_row(&mut frames, at.since_s(origin), name, direction, &bytes)
                    .map_err(|it| told(&frames_path, it))?;
            }
            Item::Pad(..) | Item::Snapshot(..) => {}
        }
    }
    ticks.flush().map_err(|it| told(&ticks_path, it))?;
    events.flush().map_err(|it| told(&events_path, it))?;
    frames.flush().map_err(|it| told(&frames_path, it))
}

fn tick_header(out: &mut impl Write, plan: &Plan) -> io::Result<()> {
    write!(
        out,
        "t_s,phase,cause,frame,demand_turn_rad_s,demand_x_m_s,demand_y_m_s,turn_rad_s,x_m_s,y_m_s,heading_rad,pose_x_m,pose_y_m"
    )?;
    for i in 0..plan.wheels.len() {
        write!(out, ",sent_{i}_rad_s,measured_{i}_rad_s,sent_{i}_counts")?;
    }
    writeln!(out)
}

fn tick_row(out: &mut impl Write, plan: &Plan, tick: &crate::record::Tick, t_s: f64) -> io::Result<()> {
    let frame = match tick.frame {
        Frame::Base => "base",
        Frame::Room => "room",
    };
    let cause = tick.cause.as_ref().map_or("", crate::core::Cause::code);
    let [demand_turn, demand_x, demand_y] = tick.demand;
    let [turn, x, y] = tick.sent;
    let [pose_x, pose_y, heading] = tick.pose;
    write!(
        out,
        "{t_s:.6},{},{cause},{frame},{demand_turn},{demand_x},{demand_y},{turn},{x},{y},{heading},{pose_x},{pose_y}",
        tick.phase.name()
    )?;
    for (index, wheel) in plan.wheels.iter().enumerate() {
        let counts = tick.sent_counts.get(index).copied().unwrap_or(0);
        let lsb = plan.links.get(wheel.link).map_or(0.0, |it| f64::from(it.speed_lsb_urad_s) * 1e-6);
        let sign = if wheel.reversed { -1.0 } else { 1.0 };
        // Adding zero turns a negative zero into a plain one.
        let sent = f64::from(counts) * lsb / (sign * wheel.gear) + 0.0;
        let measured = tick.measured_rad_s.get(index).copied().unwrap_or(0.0) + 0.0;
        write!(out, ",{sent},{measured},{counts}")?;
    }
    writeln!(out)
}

/// A frame that cannot be read has its bytes as they came, and no kind.
fn frame_row(
    out: &mut impl Write,
    t_s: f64,
    link: &str,
    direction: Direction,
    bytes: &[u8],
) -> io::Result<()> {
    let way = match direction {
        Direction::ToDrivers => "to",
        Direction::FromDrivers => "from",
    };
    let mut deframer = Deframer::new();
    let plain = bytes.iter().find_map(|byte| match deframer.push(*byte) {
        Some(Ok(plain)) => Some(plain.to_vec()),
        Some(Err(_)) | None => None,
    });
    match plain.as_deref() {
        Some([kind, sequence, rest @ ..]) if rest.len() >= 4 => {
            let body = rest.get(..rest.len() - 4).unwrap_or(&[]);
            writeln!(out, "{t_s:.6},{link},{way},0x{kind:02x},{sequence},{}", hex(body))
        }
        Some(_) | None => writeln!(out, "{t_s:.6},{link},{way},,,{}", hex(bytes)),
    }
}

fn hex(bytes: &[u8]) -> String {
    bytes.iter().map(|it| format!("{it:02x}")).collect()
}
