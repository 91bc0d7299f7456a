//! From text to a checked [`Plan`], or to everything that is wrong with it.

use std::io::{self, Read};
use std::path::{Path, PathBuf};

use toml::de::DeTable;

use super::checks::{self, Entry, Links};
use super::reader::{At, Notes, Section, refuse_unknown_tables};
use super::{
    BayPlan, ConsolePlan, GuardPlan, HeadingSource, LinkPlan, Mistake, PacePlan, PadAxis, PadButton, PadPlan,
    Plan, RecordPlan, RoomPlan, SignedAxis, StopCategory, TickPlan, WheelPlan,
};
use crate::base::Wheel;
use crate::shaping::{Limits, Pace, Response, Saturation};
use crate::units::rad;

/// Why there is no plan.
#[derive(Debug, thiserror::Error)]
pub enum ConfigError {
    /// The file cannot be read.
    #[error(
        "cannot read configuration {path}: {source}; give the path of a configuration, or see config/ for examples"
    )]
    Read {
        /// Its path.
        path: PathBuf,
        /// Why.
        source: std::io::Error,
    },
    /// What is wrong with it, at least one.
    #[error("{}", many(.0))]
    Wrong(Vec<Mistake>),
}

fn many(mistakes: &[Mistake]) -> String {
    let file = mistakes.first().map_or("the configuration", |it| &it.file);
    let all: Vec<String> = mistakes.iter().map(ToString::to_string).collect();
    let mistakes = if all.len() == 1 { "mistake" } else { "mistakes" };
    format!("{} {mistakes} in {file}; nothing was started\n{}", all.len(), all.join("\n"))
}

/// Files that people write are small; what is larger is something else, or has no end.
const LARGEST: u64 = 1 << 20;

/// Reads a file that a person has written, at most 1 MiB of it.
///
/// # Errors
/// When it cannot be read, is larger, or is no text.
pub fn small_text(path: &Path) -> io::Result<String> {
    let mut text = String::new();
    let read = std::fs::File::open(path)?.take(LARGEST + 1).read_to_string(&mut text)?;
    if read as u64 > LARGEST {
        return Err(io::Error::other("it is larger than 1 MiB, so it is something else"));
    }
    Ok(text)
}

/// Reads and checks a file.
///
/// # Errors
/// When it cannot be read, or with everything that is wrong with it.
pub fn load(path: &Path) -> Result<(Plan, Vec<Mistake>), ConfigError> {
    let text = small_text(path).map_err(|source| ConfigError::Read { path: path.into(), source })?;
    parse(&text, &path.display().to_string()).map_err(ConfigError::Wrong)
}

/// Checks a text; gives the plan and what is odd about it.
///
/// # Errors
/// Everything that is wrong, in the order of the file.
pub fn parse(text: &str, file: &str) -> Result<(Plan, Vec<Mistake>), Vec<Mistake>> {
    let notes = Notes::new(file, text);
    let (root, broken) = DeTable::parse_recoverable(text);
    for error in &broken {
        notes.wrong(
            &error.span().unwrap_or(0..0),
            format!("broken TOML: {}", error.message().replace('\n', ", ")),
        );
    }
    // With broken syntax what was read of the tree may be anything: what follows from it would mislead.
    let plan = if broken.is_empty() { plan(&notes, &root) } else { None };
    let mistakes = notes.in_order();
    match plan {
        Some(plan) if mistakes.is_empty() => Ok((plan, notes.warnings.into_inner())),
        Some(_) | None => Err(mistakes),
    }
}

/// The wheels' names and geometry alone, where they can be read, whatever else is wrong with a text.
#[must_use]
pub fn wheels(text: &str) -> Option<Vec<(String, Wheel)>> {
    let notes = Notes::new("", text);
    let (root, _) = DeTable::parse_recoverable(text);
    let sections = Section::several(&notes, &root, "wheel");
    let all: Option<Vec<_>> =
        sections.iter().map(|it| Some((it.text("name")?.value, geometry(it)?))).collect();
    all.filter(|it| !it.is_empty())
}

/// Reads every table before it gives up, so that all mistakes come out at once.
fn plan(notes: &Notes<'_>, root: &toml::Spanned<DeTable<'_>>) -> Option<Plan> {
    refuse_unknown_tables(notes, root);
    let single = |name| Section::single(notes, root, name);
    let base = single("base");
    let (name, outline) = (base.text("name"), base.pair("outline_m"));
    let several = |name| Section::several(notes, root, name);
    let links: Vec<_> = entries(several("link"), link);
    let wheels: Vec<_> = entries(several("wheel"), |it| wheel(it, &links, notes));
    let paces: Vec<_> = entries(several("pace"), pace);
    let limits_section = single("limits");
    let limits = limits(&limits_section);
    let pad = pad(&single("pad"), notes);
    let room = room(&single("room"));
    let guard_section = single("guard");
    let guard = guard(&guard_section);
    let tick = tick(&single("loop"));
    let bay = single("bay");
    let bay = BayPlan {
        clear_m: bay.number("clear_m").map(|it| it.value),
        coast_m_s2: bay.number("coast_m_s2").map(|it| it.value),
    };
    let record = record(&single("record"));
    let console = console(&single("console"));
    let _no_keys_yet = single("bench");

    checks::links(notes, &links);
    checks::channels(notes, &wheels, &links);
    let layout = checks::layout(notes, &wheels, outline.as_ref().map(|it| it.value));
    if let (Some(limits), Some(layout)) = (&limits, &layout) {
        checks::motion(notes, layout, &wheels, &paces, limits, &limits_section);
    }
    if let Some(tick) = &tick {
        checks::load(notes, tick, &links);
        if let Some(guard) = &guard {
            checks::times(notes, tick, &links, guard, &guard_section);
        }
        if let Some(limits) = &limits {
            checks::smoothing(notes, tick, limits, &limits_section);
        }
    }
    checks::counts(notes, &wheels, &links, &paces, layout.as_ref());
    Some(Plan {
        text: notes.text.to_owned(),
        name: name?.value,
        outline_m: outline?.value,
        wheels: plans(wheels)?,
        layout: layout?,
        links: plans(links)?,
        paces: plans(paces)?,
        limits: limits?,
        pad: pad?,
        room: room?,
        guard: guard?,
        bay,
        tick: tick?,
        record: record?,
        console: console?,
    })
}

fn entries<'a, T>(sections: Vec<Section<'a>>, read: impl Fn(&Section<'a>) -> Option<T>) -> Vec<Entry<'a, T>> {
    sections.into_iter().map(|section| Entry { plan: read(&section), section }).collect()
}

fn plans<T>(entries: Vec<Entry<'_, T>>) -> Option<Vec<T>> {
    entries.into_iter().map(|it| it.plan).collect()
}

fn link(section: &Section<'_>) -> Option<LinkPlan> {
    let (name, port, baud, valid) =
        (section.text("name"), section.text("port"), section.whole("baud"), section.whole("valid_ms"));
    let (expect, channels) = (section.text("expect"), section.whole("channels"));
    let (speed, angle) = (section.whole("speed_lsb_urad_s"), section.whole("angle_lsb_urad"));
    let (fifo, latency) = (section.whole("fifo_bytes"), section.number("latency_ms"));
    Some(LinkPlan {
        name: name?.value,
        port: PathBuf::from(port?.value),
        baud: u32::try_from(baud?.value).ok()?,
        valid_ms: u16::try_from(valid?.value).ok()?,
        expect: expect?.value,
        channels: u8::try_from(channels?.value).ok()?,
        speed_lsb_urad_s: u32::try_from(speed?.value).ok()?,
        angle_lsb_urad: u32::try_from(angle?.value).ok()?,
        fifo_bytes: u32::try_from(fifo?.value).ok()?,
        latency_ms: latency?.value,
    })
}

fn wheel(section: &Section<'_>, links: &Links<'_>, notes: &Notes<'_>) -> Option<WheelPlan> {
    let (name, geometry) = (section.text("name"), geometry(section));
    let (speed, acceleration) = (section.number("max_rad_s"), section.number("max_rad_s2"));
    let (link_name, channel) = (section.text("link"), section.whole("channel"));
    let (reversed, gear) = (section.flag("reversed"), section.number("gear"));
    let link = link_name.and_then(|name| named(&name, links, notes));
    Some(WheelPlan {
        name: name?.value,
        geometry: geometry?,
        max_rad_s: speed?.value,
        max_rad_s2: acceleration?.value,
        link: link?,
        channel: u8::try_from(channel?.value).ok()?,
        reversed: reversed?.value,
        gear: gear?.value,
    })
}

fn geometry(section: &Section<'_>) -> Option<Wheel> {
    let (at, radius) = (section.pair("at_m"), section.number("radius_m"));
    let (drive, roller) = (section.number("drive_deg"), section.number("roller_deg"));
    let [x_m, y_m] = at?.value;
    Some(Wheel {
        x_m,
        y_m,
        drive_rad: rad(drive?.value),
        roller_rad: rad(roller?.value),
        radius_m: radius?.value,
    })
}

/// The index of the link of that name.
fn named(name: &At<String>, links: &Links<'_>, notes: &Notes<'_>) -> Option<usize> {
    let found = links.iter().position(|it| it.plan.as_ref().is_some_and(|it| it.name == name.value));
    // A link that could not be read may be the one that is meant.
    if found.is_none() && links.iter().all(|it| it.plan.is_some()) {
        let known: Vec<String> =
            links.iter().filter_map(|it| it.plan.as_ref()).map(|it| format!("\"{}\"", it.name)).collect();
        notes.wrong(
            &name.span,
            format!(
                "there is no link \"{}\"; it must be the `name` of a [[link]]: {}",
                name.value,
                known.join(", ")
            ),
        );
    }
    found
}

fn pace(section: &Section<'_>) -> Option<PacePlan> {
    let (name, travel, turn) =
        (section.text("name"), section.number("travel_m_s"), section.number("turn_rad_s"));
    Some(PacePlan { name: name?.value, pace: Pace { travel_m_s: travel?.value, turn_rad_s: turn?.value } })
}

fn limits(section: &Section<'_>) -> Option<Limits> {
    let (up, down, stop) =
        (section.number("speed_up_m_s2"), section.number("slow_down_m_s2"), section.number("stop_m_s2"));
    let (turn, grip, smoothing) =
        (section.number("turn_rad_s2"), section.number("grip_m_s2"), section.number("smoothing_s"));
    let saturation = section.word("saturation");
    Some(Limits {
        speed_up_m_s2: up?.value,
        slow_down_m_s2: down?.value,
        stop_m_s2: stop?.value,
        turn_rad_s2: turn?.value,
        grip_m_s2: grip?.value,
        smoothing_s: smoothing?.value,
        saturation: *[Saturation::Together, Saturation::KeepTurn, Saturation::KeepTravel]
            .get(saturation?.value)?,
    })
}

const AXIS_KEYS: [&str; 3] = ["forward", "left", "turn_left"];

fn pad(section: &Section<'_>, notes: &Notes<'_>) -> Option<PadPlan> {
    let (name, id, wired) = (section.text("name"), section.text("id"), section.flag("wired"));
    let axis = |name| {
        section.axis(name).and_then(|At { value: (at, inverted), span }| {
            PadAxis::ALL.get(at).map(|axis| At { value: SignedAxis { axis: *axis, inverted }, span })
        })
    };
    let axes = AXIS_KEYS.map(axis);
    let names = ["hold", "ready", "reset", "stop", "pace_up", "pace_down", "frame", "zero_heading"];
    let buttons = names.map(|name| {
        section
            .word(name)
            .and_then(|At { value, span }| PadButton::ALL.get(value).map(|it| At { value: *it, span }))
    });
    let (deadband, curve) = (section.number("deadband"), section.number("curve"));
    let (on, off, squeeze) =
        (section.number("hold_on"), section.number("hold_off"), section.number("hold_squeeze"));
    for (i, one) in buttons.iter().enumerate() {
        for (j, other) in buttons.iter().enumerate().skip(i + 1) {
            if let (Some(one), Some(other)) = (one, other)
                && one.value == other.value
            {
                // Where one of them goes by its default, what was written is the other.
                let at = if section.given(names[j]) { &other.span } else { &one.span };
                notes.wrong(
                    at,
                    format!(
                        "`{}` and `{}` are both {:?}; each needs a button of its own",
                        names[i], names[j], one.value
                    ),
                );
            }
        }
    }
    for (i, one) in axes.iter().enumerate() {
        for (j, other) in axes.iter().enumerate().skip(i + 1) {
            if let (Some(one), Some(other)) = (one, other)
                && one.value.axis == other.value.axis
            {
                let at = if section.given(AXIS_KEYS[j]) { &other.span } else { &one.span };
                notes.wrong(
                    at,
                    format!("{:?} is used twice; travel and turn need three axes", one.value.axis),
                );
            }
        }
    }
    if let (Some(on), Some(off)) = (&on, &off)
        && off.value >= on.value
    {
        notes.wrong(&off.span, format!("`hold_off` {} must be below `hold_on` {}", off.value, on.value));
    }
    if let (Some(on), Some(squeeze)) = (&on, &squeeze)
        && squeeze.value <= on.value
    {
        notes.wrong(
            &squeeze.span,
            format!("`hold_squeeze` {} must be above `hold_on` {}", squeeze.value, on.value),
        );
    }
    let [forward, left, turn_left] = axes;
    let [hold, ready, reset, stop, pace_up, pace_down, frame, zero_heading] = buttons;
    let id = id.filter(|it| {
        let fits = it.value.is_empty() || is_id(&it.value);
        if !fits {
            notes.wrong(&it.span, format!("`id` cannot be \"{}\"; it must be vvvv:pppp in hexadecimal, or that and :serial, as `gripline pads` prints it", it.value));
        }
        fits
    });
    Some(PadPlan {
        name: name?.value,
        id: id?.value,
        wired: wired?.value,
        forward: forward?.value,
        left: left?.value,
        turn_left: turn_left?.value,
        response: Response { deadband: deadband?.value, curve: curve?.value },
        hold: hold?.value,
        hold_on: on?.value,
        hold_off: off?.value,
        hold_squeeze: squeeze.map(|it| it.value),
        ready: ready?.value,
        reset: reset?.value,
        stop: stop?.value,
        pace_up: pace_up?.value,
        pace_down: pace_down?.value,
        frame: frame?.value,
        zero_heading: zero_heading?.value,
    })
}

/// vvvv:pppp, with anything behind a further colon.
fn is_id(text: &str) -> bool {
    let mut parts = text.splitn(3, ':');
    let hex = |part: Option<&str>| {
        part.is_some_and(|it| it.len() == 4 && it.chars().all(|it| it.is_ascii_hexdigit()))
    };
    hex(parts.next()) && hex(parts.next())
}

fn room(section: &Section<'_>) -> Option<RoomPlan> {
    let (heading, lead) = (section.word("heading"), section.number("lead_ms"));
    Some(RoomPlan {
        heading: if heading?.value == 0 { HeadingSource::Wheels } else { HeadingSource::Gyro },
        lead_ms: lead?.value,
    })
}

fn guard(section: &Section<'_>) -> Option<GuardPlan> {
    let category = section.whole("stop_category");
    let number = |name| section.number(name).map(|it| it.value);
    let all = [
        "pad_quiet_stream_ms",
        "pad_quiet_change_ms",
        "feedback_quiet_ms",
        "not_heard_ms",
        "late_ms",
        "follow_share",
        "follow_lag_s",
        "follow_s",
        "slowing_s",
        "runaway_share",
        "runaway_s",
        "runaway_rad",
        "skid_share",
        "skid_s",
        "standstill_share",
        "standstill_s",
        "stop_margin_s",
        "ready_idle_s",
        "reset_hold_s",
    ]
    .map(number);
    let driver_ms = number("driver_ms");
    let [
        pad_quiet_stream_ms,
        pad_quiet_change_ms,
        feedback_quiet_ms,
        not_heard_ms,
        late_ms,
        follow_share,
        follow_lag_s,
        follow_s,
        slowing_s,
        runaway_share,
        runaway_s,
        runaway_rad,
        skid_share,
        skid_s,
        standstill_share,
        standstill_s,
        stop_margin_s,
        ready_idle_s,
        reset_hold_s,
    ] = all;
    Some(GuardPlan {
        stop_category: if category?.value == 0 { StopCategory::Zero } else { StopCategory::One },
        pad_quiet_stream_ms: pad_quiet_stream_ms?,
        pad_quiet_change_ms: pad_quiet_change_ms?,
        feedback_quiet_ms: feedback_quiet_ms?,
        not_heard_ms: not_heard_ms?,
        late_ms: late_ms?,
        driver_ms,
        follow_share: follow_share?,
        follow_lag_s: follow_lag_s?,
        follow_s: follow_s?,
        slowing_s: slowing_s?,
        runaway_share: runaway_share?,
        runaway_s: runaway_s?,
        runaway_rad: runaway_rad?,
        skid_share: skid_share?,
        skid_s: skid_s?,
        standstill_share: standstill_share?,
        standstill_s: standstill_s?,
        stop_margin_s: stop_margin_s?,
        ready_idle_s: ready_idle_s?,
        reset_hold_s: reset_hold_s?,
    })
}

fn tick(section: &Section<'_>) -> Option<TickPlan> {
    let (rate, realtime, cpu, lock) = (
        section.number("rate_hz"),
        section.whole("realtime"),
        section.whole("cpu"),
        section.flag("lock_memory"),
    );
    Some(TickPlan {
        rate_hz: rate?.value,
        realtime: u8::try_from(realtime?.value).ok()?,
        cpu: cpu.and_then(|it| usize::try_from(it.value).ok()),
        lock_memory: lock?.value,
    })
}

fn record(section: &Section<'_>) -> Option<RecordPlan> {
    let (dir, keep) = (section.text("dir"), section.number("keep_gb"));
    Some(RecordPlan { dir: dir.and_then(|it| path(&it.value)), keep_gb: keep?.value })
}

fn console(section: &Section<'_>) -> Option<ConsolePlan> {
    let (socket, reset) = (section.text("socket"), section.flag("reset"));
    Some(ConsolePlan { socket: socket.and_then(|it| path(&it.value)), reset: reset?.value })
}

fn path(text: &str) -> Option<PathBuf> {
    (!text.is_empty()).then(|| PathBuf::from(text))
}
