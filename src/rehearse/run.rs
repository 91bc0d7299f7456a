//! Starts the processes, cuts the line when it is time, and judges what came of it.

use std::path::{Path, PathBuf};
use std::time::Duration;

use super::path::Ideal;
use super::report::Report;
use super::script::{self, whole_drive};
use crate::config::{Plan, parse};
use crate::core::Event;
use crate::core::budget::budget;
use crate::measure::child::{ChildError, Driving, Folder, PAD_THERE, Said, Standin, failed};
use crate::measure::{Summary, summary, truth};
use crate::record::Item;
use crate::record::reader::{Run, RunError};
use crate::sys::clock;
use crate::units::Mono;

/// What is to be rehearsed.
#[derive(Clone, Debug)]
pub struct Wanted {
    /// This program, to be started again for stand-in and drive.
    pub program: PathBuf,
    /// Text of the configuration, and what to call it.
    pub config: (String, String),
    /// Play this in place of the whole drive.
    pub hands: Option<PathBuf>,
    /// How long the whole drive takes, about.
    pub seconds: f64,
    /// Where the run file goes.
    pub record_dir: PathBuf,
}

/// Why nothing could be rehearsed.
#[derive(Debug, thiserror::Error)]
pub enum RehearseError {
    /// The configuration is wrong.
    #[error("{0}")]
    Config(String),
    /// A part of it could not be run.
    #[error(transparent)]
    Child(#[from] ChildError),
    /// The run file cannot be read back.
    #[error(transparent)]
    Run(#[from] RunError),
}

fn part(part: &'static str, what: impl Into<String>) -> RehearseError {
    ChildError::Part { part, what: what.into() }.into()
}

/// Rehearses; `progress` hears a line for each thing that happens.
///
/// # Errors
/// When it could not be run. What was run and missed its bounds is in the report.
pub fn rehearse(wanted: &Wanted, progress: &mut dyn FnMut(&str)) -> Result<Report, RehearseError> {
    let (text, name) = &wanted.config;
    let (plan, _) = parse(text, name).map_err(|all| {
        RehearseError::Config(all.iter().map(ToString::to_string).collect::<Vec<_>>().join("\n"))
    })?;
    let folder = Folder::new("rehearsal")?;
    let config = folder.write("base.toml", text)?;
    let drive = wanted.hands.is_none().then(|| whole_drive(&plan, wanted.seconds));
    let hands = match (&wanted.hands, &drive) {
        (Some(path), _) => path.clone(),
        (None, Some(drive)) => folder.write("hands.csv", &drive.hands)?,
        (None, None) => return Err(part("the script", "is missing")),
    };
    let mut standin = Standin::start(&wanted.program, &config, &folder, &plan)?;
    let mut arguments = Driving::ports(&folder, &plan);
    arguments.extend(["--hands".into(), hands.display().to_string()]);
    let mut driving = Driving::start(&wanted.program, &config, &folder, &wanted.record_dir, arguments)?;
    let cut_at = follow(&mut driving, &mut standin, drive.as_ref(), wanted.seconds, progress)?;
    let status = driving.wait()?;
    standin.end();
    let run_path = driving
        .run
        .take()
        .ok_or_else(|| part("the drive", format!("ended without a run file ({status})")))?;
    let mut report = judge(&plan, &run_path, &folder.trace(), drive.as_ref(), cut_at)?;
    report.row(
        "end of the drive",
        if status.success() { "in order".into() } else { format!("{status}") },
        "in order".into(),
        status.success(),
    );
    Ok(report)
}

/// Listens to the drive to its end, and cuts and joins the line meanwhile. Gives when the line was cut.
fn follow(
    driving: &mut Driving,
    standin: &mut Standin,
    drive: Option<&script::Drive>,
    seconds: f64,
    progress: &mut dyn FnMut(&str),
) -> Result<Option<Mono>, RehearseError> {
    let mut began: Option<Mono> = None;
    let (mut cut, mut joined): (Option<Mono>, bool) = (None, false);
    let started = clock::now();
    let most_s = drive.map_or(seconds.max(3600.0), |it| it.end_s + 15.0);
    loop {
        let now = clock::now();
        if let (Some(began), Some(drive)) = (began, drive) {
            let at_s = now.since_s(began);
            if cut.is_none() && at_s >= drive.line_cut_s.0 {
                progress("          the line is cut");
                cut = Some(clock::now());
                standin.say("cut");
            }
            if !joined && at_s >= drive.line_cut_s.1 {
                progress("          the line is joined again");
                standin.say("clear");
                joined = true;
            }
        }
        if now.since_s(started) > most_s {
            return Err(part("the drive", format!("did not end within {most_s:.0} s")));
        }
        match driving.said(Duration::from_millis(5)) {
            Said::Line(line) => {
                if began.is_none() && line.contains(PAD_THERE) {
                    began = Some(clock::now());
                }
                progress(&line);
            }
            Said::Nothing => {}
            Said::Ended => return Ok(cut),
        }
    }
}

/// Holds the run against the truth, the budget and the script.
fn judge(
    plan: &Plan,
    run_path: &Path,
    trace: &Path,
    drive: Option<&script::Drive>,
    cut_at: Option<Mono>,
) -> Result<Report, RehearseError> {
    let truth = truth::read(trace).map_err(failed("read the stand-in's trace"))?;
    let refused = |why: String| part("the run file", format!("has a configuration that is refused: {why}"));
    let (it, _) = summary(&mut Run::open(run_path)?).map_err(refused)?;
    let (ideal, origin) = ideal(plan, run_path, drive)?;
    let mut report = Report {
        base: plan.name.clone(),
        rows: Vec::new(),
        run: run_path.into(),
        too_late: too_late(plan, &it),
    };
    match ideal.errors_m(&truth) {
        Some((worst, end)) if ideal.length_m() > 0.2 => {
            let what = format!("path error over {:.2} m in the room's frame", ideal.length_m());
            report.row(what, format!("{:.1} mm", worst * 1e3), "20 mm".into(), worst <= 0.02);
            report.row("its end", format!("{:.1} mm off", end * 1e3), "20 mm".into(), end <= 0.02);
        }
        Some(_) | None => report.figure("path error", "not judged: no travel in the room's frame".into()),
    }
    stops(plan, &it, &truth, origin, drive.is_some(), cut_at, &mut report);
    let most =
        plan.wheels.iter().map(|it| it.max_rad_s).fold(f64::INFINITY, f64::min) * plan.guard.skid_share;
    report.row(
        "skid residual",
        format!("{:.2} rad/s", it.skid_rad_s),
        format!("{most:.2} rad/s"),
        it.skid_rad_s <= most,
    );
    report.figure("frames", format!("{} sent, {} heard", it.frames_sent, it.frames_heard));
    report.row(
        "frames damaged, refused",
        format!("{}, {}", it.frames_damaged, it.frames_refused),
        "0, 0".into(),
        it.frames_damaged + it.frames_refused == 0,
    );
    report.figure("frames lost (the line was cut)", format!("{}", it.frames_lost));
    report.row(
        "packets lost by the recorder",
        format!("{}", it.packets_lost),
        "0".into(),
        it.packets_lost == 0,
    );
    let [median, p99, most] = it.late_s.map(|it| it * 1e3);
    if !report.ok() && report.too_late.is_none() {
        report.too_late = truth::held_up(&truth, 0.0, f64::INFINITY);
    }
    report.figure("ticks late", format!("median {median:.2} ms, 99 % {p99:.2} ms, most {most:.2} ms"));
    Ok(report)
}

/// The ideal path of the first stretch in the room's frame, and the run's origin on the clock.
fn ideal(
    plan: &Plan,
    run_path: &Path,
    drive: Option<&script::Drive>,
) -> Result<(Ideal, Mono), RehearseError> {
    let mut run = Run::open(run_path)?;
    let origin = run.origin;
    let (mut ideal, mut hands_began) = (Ideal::default(), None);
    while let Some(item) = run.next() {
        match item {
            Item::Event(at, Event::Pad { present: true }) => {
                hands_began.get_or_insert(at);
            }
            Item::Tick(tick) => {
                let within = match (drive, hands_began) {
                    (Some(drive), Some(began)) => tick.inputs.now.since_s(began) <= drive.square_s.1,
                    (Some(_), None) => false,
                    (None, _) => true,
                };
                if within {
                    ideal.take(&tick, plan.tick.period_s());
                } else if ideal.began_s.is_some() {
                    break;
                }
            }
            Item::Event(..) | Item::Frame { .. } | Item::Pad(..) | Item::Snapshot(..) | Item::Lost(..) => {}
        }
    }
    Ok((ideal, origin))
}

/// The stops of the whole drive, in order, by their codes; a cut line is seen by whichever guard is first.
const EXPECTED: [(&str, &[&str]); 5] = [
    ("hold released", &["release"]),
    ("stop button in full travel", &["stop-pad"]),
    ("gamepad pulled out", &["pad-gone"]),
    ("line cut", &["feedback-quiet", "not-heard", "write-fails"]),
    ("hold released at home", &["release"]),
];

fn stops(
    plan: &Plan,
    it: &Summary,
    truth: &[truth::Moment],
    origin: Mono,
    whole: bool,
    cut_at: Option<Mono>,
    report: &mut Report,
) {
    let rows = budget(plan);
    for (index, stop) in it.stops.iter().enumerate() {
        let expected = EXPECTED.get(index).filter(|(_, codes)| codes.contains(&stop.code.as_str()));
        let fits = !whole || expected.is_some();
        let name = expected.filter(|_| whole).map_or_else(|| stop.words.clone(), |it| it.0.to_owned());
        let decided_s = origin.ns() as f64 * 1e-9 + stop.t_s;
        // A line that goes quiet was cut before the guard could see it.
        let began_s = match cut_at {
            Some(cut) if whole && index == 3 => cut.ns() as f64 * 1e-9,
            Some(_) | None => decided_s,
        };
        let row = stop.row(&rows);
        let measured = truth::stop(truth, began_s, plan);
        match (measured, row.and_then(|it| it.total_s.zip(it.distance_m))) {
            (Some((seconds, metres)), Some((total_s, distance_m))) => report.row(
                name,
                format!("{seconds:.3} s, {:.0} mm", metres.abs() * 1e3),
                format!("{total_s:.3} s, {:.0} mm", distance_m * 1e3),
                fits && seconds <= total_s && metres <= distance_m,
            ),
            (Some((seconds, metres)), None) => report.row(
                name,
                format!("{seconds:.3} s, {:.0} mm", metres.abs() * 1e3),
                "no budget".into(),
                fits,
            ),
            (None, _) => report.row(name, "standstill not seen".into(), String::new(), false),
        }
    }
    if whole && it.stops.len() != EXPECTED.len() {
        report.row("stops", format!("{}", it.stops.len()), format!("{}", EXPECTED.len()), false);
    }
}

/// A machine on which ticks come too late says nothing about the program.
fn too_late(plan: &Plan, it: &Summary) -> Option<String> {
    let [_, p99, most] = it.late_s;
    let late = it.stops.iter().find(|stop| stop.code == "late-tick" || stop.code == "no-tick");
    if let Some(stop) = late {
        return Some(format!("{} at {:.1} s", stop.words, stop.t_s));
    }
    let period_s = plan.tick.period_s();
    (p99 > period_s).then(|| {
        format!("one tick in a hundred was more than {:.1} ms late (most {:.1} ms)", p99 * 1e3, most * 1e3)
    })
}
