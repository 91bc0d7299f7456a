//! What no single key can tell: contradictions between keys, and what the base, the wheels or the line cannot do.

use std::ops::Range;

use super::reader::{Notes, Section};
use super::{GuardPlan, LinkPlan, PacePlan, TickPlan, WheelPlan};
use crate::base::reach::Reach;
use crate::base::{Layout, MAX_WHEELS, PerWheel, Wheel, analysis};
use crate::core::MAX_LINKS;
use crate::shaping::{Limits, MAX_SAMPLES};

/// A table as far as it could be read, and where it stands.
pub(super) type Links = Vec<(Option<LinkPlan>, Range<usize>)>;
/// The same for wheels.
pub(super) type Wheels = Vec<(Option<WheelPlan>, Range<usize>)>;
/// The same for paces.
pub(super) type Paces = Vec<(Option<PacePlan>, Range<usize>)>;

/// Where a key stands inside the table that begins at `table`, for carets; the table itself where it cannot be found.
fn key_in(notes: &Notes<'_>, table: &Range<usize>, key: &str) -> Range<usize> {
    let from = table.start.min(notes.text.len());
    let Some(rest) = notes.text.get(from..) else { return table.clone() };
    let mut at = from;
    for (index, line) in rest.split_inclusive('\n').enumerate() {
        let bare = line.trim_start();
        if index > 0 && bare.starts_with('[') {
            break;
        }
        if bare.strip_prefix(key).is_some_and(|it| it.trim_start().starts_with('=')) {
            let start = at + (line.len() - bare.len());
            return start..at + line.split('#').next().unwrap_or(line).trim_end().len();
        }
        at += line.len();
    }
    table.clone()
}

/// Names, ports and numbers of links.
pub(super) fn links(notes: &Notes<'_>, links: &Links) {
    if links.len() > MAX_LINKS {
        notes.wrong(
            &links[MAX_LINKS].1,
            format!("{} links are more than the {MAX_LINKS} that one base may have", links.len()),
        );
    }
    for (i, (link, span)) in links.iter().enumerate() {
        for (before, _) in &links[..i] {
            let (Some(link), Some(before)) = (link, before) else { continue };
            if link.name == before.name {
                notes.wrong(
                    &key_in(notes, span, "name"),
                    format!("there are two links \"{}\"; give each a name of its own", link.name),
                );
            }
            if link.port == before.port {
                notes.wrong(
                    &key_in(notes, span, "port"),
                    format!(
                        "links \"{}\" and \"{}\" share port {}; each needs one of its own",
                        before.name,
                        link.name,
                        link.port.display()
                    ),
                );
            }
        }
    }
}

/// Channels of wheels: within their link, each used once, no link unused.
pub(super) fn channels(notes: &Notes<'_>, wheels: &Wheels, links: &Links) {
    for (i, (wheel, span)) in wheels.iter().enumerate() {
        let Some(wheel) = wheel else { continue };
        let Some(Some(link)) = links.get(wheel.link).map(|it| it.0.as_ref()) else { continue };
        if wheel.channel >= link.channels {
            notes.wrong(
                &key_in(notes, span, "channel"),
                format!(
                    "channel {} is not on link \"{}\", whose channels are 0 to {}",
                    wheel.channel,
                    link.name,
                    link.channels - 1
                ),
            );
        }
        for before in wheels[..i].iter().filter_map(|it| it.0.as_ref()) {
            if before.link == wheel.link && before.channel == wheel.channel {
                notes.wrong(
                    &key_in(notes, span, "channel"),
                    format!(
                        "wheels \"{}\" and \"{}\" share channel {} of link \"{}\"; each needs one of its own",
                        before.name, wheel.name, wheel.channel, link.name
                    ),
                );
            }
            if before.name == wheel.name {
                notes.wrong(
                    &key_in(notes, span, "name"),
                    format!("there are two wheels \"{}\"; give each a name of its own", wheel.name),
                );
            }
        }
    }
    if wheels.iter().all(|it| it.0.is_some()) {
        for (i, (link, span)) in links.iter().enumerate() {
            let used = wheels.iter().any(|it| it.0.as_ref().is_some_and(|it| it.link == i));
            if let (Some(link), false) = (link, used) {
                notes.wrong(
                    &key_in(notes, span, "name"),
                    format!("no wheel uses link \"{}\"; take it out, or name it in a [[wheel]]", link.name),
                );
            }
        }
    }
}

/// Rank and condition of the wheels together.
pub(super) fn layout(notes: &Notes<'_>, wheels: &Wheels, sections: &[Section<'_>]) -> Option<Layout> {
    let geometry: Vec<Wheel> =
        wheels.iter().map(|it| it.0.as_ref().map(|it| it.geometry)).collect::<Option<_>>()?;
    let span = sections.first().map_or(0..0, |it| it.span.clone());
    if geometry.len() > MAX_WHEELS {
        notes.wrong(
            &span,
            format!("{} wheels are more than the {MAX_WHEELS} that one base may have", geometry.len()),
        );
        return None;
    }
    let condition = analysis::analyse(&geometry).condition;
    match Layout::new(&geometry) {
        Ok(layout) => {
            if condition > 10.0 {
                notes.warn(&span, format!("the layout's condition number is {condition:.1}, above 10: some motion needs far more wheel speed than others, and errors grow with it"));
            }
            Some(layout)
        }
        Err(problem) => {
            notes.wrong(&span, problem.to_string());
            None
        }
    }
}

/// Paces and limits against what the wheels can do.
pub(super) fn motion(
    notes: &Notes<'_>,
    layout: &Layout,
    wheels: &Wheels,
    paces: &Paces,
    limits: &Limits,
    limits_section: &Section<'_>,
) {
    let Some(plans) = wheels.iter().map(|it| it.0.as_ref()).collect::<Option<Vec<_>>>() else { return };
    let max: PerWheel<f64> = plans.iter().map(|it| it.max_rad_s).collect();
    let reach = Reach::new(layout, &max);
    // The polygon's edges are nearest where a wheel's strip is narrowest: the least over all directions.
    let (everywhere, turn) = (reach.room_travel_m_s(), reach.turn_rad_s());
    let mut before: Option<&PacePlan> = None;
    for (pace, span) in paces {
        let Some(plan) = pace else { continue };
        let pace = plan.pace;
        if pace.travel_m_s > everywhere {
            notes.wrong(&key_in(notes, span, "travel_m_s"), format!("pace \"{}\" is faster than the wheels can turn: {} m/s, and they reach {everywhere:.3} m/s in every direction", plan.name, pace.travel_m_s));
        }
        if pace.turn_rad_s > turn {
            notes.wrong(
                &key_in(notes, span, "turn_rad_s"),
                format!(
                    "pace \"{}\" turns faster than the wheels can: {} rad/s, and they reach {turn:.3} rad/s",
                    plan.name, pace.turn_rad_s
                ),
            );
        }
        let p = pace.travel_m_s * pace.turn_rad_s / limits.grip_m_s2;
        if p > 4.0 {
            notes.wrong(&key_in(notes, span, "turn_rad_s"), format!("pace \"{}\" asks for {:.2} m/s^2 in a curve at full travel and turn, more than four times `grip_m_s2` = {}; make it slower", plan.name, pace.travel_m_s * pace.turn_rad_s, limits.grip_m_s2));
        }
        if let Some(before) = before {
            if plan.name == before.name {
                notes.wrong(
                    &key_in(notes, span, "name"),
                    format!("there are two paces \"{}\"; give each a name of its own", plan.name),
                );
            }
            if pace.travel_m_s <= before.pace.travel_m_s {
                notes.wrong(
                    &key_in(notes, span, "travel_m_s"),
                    format!(
                        "pace \"{}\" must be faster than \"{}\" before it: {} m/s after {} m/s",
                        plan.name, before.name, pace.travel_m_s, before.pace.travel_m_s
                    ),
                );
            }
        }
        before = Some(plan);
        accelerations(notes, layout, wheels, plan, limits);
    }
    if paces.len() > 32 {
        notes.wrong(&paces[32].1, "more than 32 paces; take some out");
    }
    let fastest = |key: &str, value: f64, part: fn(&[f64; 3]) -> f64, unit: &str| {
        for (row, wheel) in layout.rows().iter().zip(&plans) {
            let most = wheel.max_rad_s2 / part(row);
            if value > most {
                notes.wrong(&key_in(notes, &limits_section.span, key), format!("`{key}` = {value} {unit} cannot be: wheel \"{}\" with `max_rad_s2` = {} gives at most {most:.3} {unit}", wheel.name, wheel.max_rad_s2));
                break;
            }
        }
    };
    let travel = |row: &[f64; 3]| libm::hypot(row[1], row[2]);
    fastest("speed_up_m_s2", limits.speed_up_m_s2, travel, "m/s^2");
    fastest("slow_down_m_s2", limits.slow_down_m_s2, travel, "m/s^2");
    fastest("stop_m_s2", limits.stop_m_s2, travel, "m/s^2");
    fastest("turn_rad_s2", limits.turn_rad_s2, |row| row[0].abs(), "rad/s^2");
}

/// In the room's frame the wheels must follow the turning of the travel direction even at constant speed.
fn accelerations(notes: &Notes<'_>, layout: &Layout, wheels: &Wheels, plan: &PacePlan, limits: &Limits) {
    let grip = limits.grip_m_s2.min(plan.pace.travel_m_s * plan.pace.turn_rad_s);
    for (row, (wheel, span)) in layout.rows().iter().zip(wheels) {
        let Some(wheel) = wheel else { continue };
        let needed = grip * libm::hypot(row[1], row[2]);
        if needed >= wheel.max_rad_s2 {
            notes.wrong(&key_in(notes, span, "max_rad_s2"), format!("wheel \"{}\" cannot follow the room's frame at pace \"{}\": turning at full travel alone needs {needed:.1} rad/s^2 of its {} rad/s^2; make the pace slower or `grip_m_s2` smaller", wheel.name, plan.name, wheel.max_rad_s2));
            return;
        }
    }
}

/// Validity and guards against the tick.
pub(super) fn times(
    notes: &Notes<'_>,
    tick: &TickPlan,
    links: &Links,
    guard: Option<&GuardPlan>,
    guard_section: &Section<'_>,
) {
    let period_ms = tick.period_s() * 1e3;
    for (link, span) in links {
        let Some(link) = link else { continue };
        if f64::from(link.valid_ms) < 2.0 * period_ms {
            notes.wrong(&key_in(notes, span, "valid_ms"), format!("`valid_ms` = {} is shorter than two ticks of {period_ms:.1} ms: one late tick would stop the base; it must be at least {:.0}", link.valid_ms, (2.0 * period_ms).ceil()));
        }
    }
    let Some(guard) = guard else { return };
    for (name, value) in
        [("feedback_quiet_ms", guard.feedback_quiet_ms), ("not_heard_ms", guard.not_heard_ms)]
    {
        // Drivers answer every frame, and every 20 ms by themselves.
        let least = (3.0 * period_ms).min(60.0);
        if value < least {
            notes.wrong(
                &key_in(notes, &guard_section.span, name),
                format!(
                    "`{name}` = {value} is less than three frames of feedback; it must be at least {least:.1}"
                ),
            );
        }
    }
}

/// Bytes a second against the baud rate, 10 bits a byte (8N1).
pub(super) fn load(notes: &Notes<'_>, tick: &TickPlan, links: &Links) {
    for (link, span) in links {
        let Some(link) = link else { continue };
        let [to_drivers, from_drivers] = link_load(link, tick);
        for (way, load) in [("to", to_drivers), ("from", from_drivers)] {
            let what =
                format!("the line {way} the drivers of \"{}\" is loaded to {:.0} %", link.name, load * 100.0);
            if load > 1.0 {
                notes.wrong(
                    &key_in(notes, span, "baud"),
                    format!(
                        "{what}: {} frames a second do not fit {} bit/s; raise `baud` or lower `rate_hz`",
                        tick.rate_hz, link.baud
                    ),
                );
            } else if load > 0.6 {
                notes.warn(
                    &key_in(notes, span, "baud"),
                    format!("{what}; above 60 % frames start to wait for each other"),
                );
            }
        }
    }
}

/// Share of a line that is used, to and from the drivers.
#[must_use]
pub fn link_load(link: &LinkPlan, tick: &TickPlan) -> [f64; 2] {
    let channels = usize::from(link.channels);
    let bytes = [2 + 6 + 2 * channels + 4 + 2, 2 + 18 + 6 * channels + 4 + 2];
    bytes.map(|it| it as f64 * 10.0 * tick.rate_hz / f64::from(link.baud))
}

/// The moving average must fit.
pub(super) fn smoothing(notes: &Notes<'_>, tick: &TickPlan, limits: &Limits, section: &Section<'_>) {
    let most = MAX_SAMPLES as f64 * tick.period_s();
    if limits.smoothing_s > most {
        notes.wrong(
            &key_in(notes, &section.span, "smoothing_s"),
            format!(
                "`smoothing_s` = {} is too long at {} ticks a second; at most {most:.3}",
                limits.smoothing_s, tick.rate_hz
            ),
        );
    }
}

/// Speeds against the counts of the line: within 16 bits, and fine enough for the slowest pace.
pub(super) fn counts(
    notes: &Notes<'_>,
    wheels: &Wheels,
    links: &Links,
    paces: &Paces,
    layout: Option<&Layout>,
) {
    let slowest = paces.first().and_then(|it| it.0.as_ref());
    for (index, (wheel, span)) in wheels.iter().enumerate() {
        let Some(wheel) = wheel else { continue };
        let Some((Some(link), link_span)) = links.get(wheel.link).map(|it| (it.0.as_ref(), &it.1)) else {
            continue;
        };
        let lsb_rad_s = f64::from(link.speed_lsb_urad_s) * 1e-6;
        let counts = wheel.max_rad_s * wheel.gear / lsb_rad_s;
        if counts > f64::from(i16::MAX) {
            notes.wrong(&key_in(notes, span, "max_rad_s"), format!("wheel \"{}\" at {} rad/s and gear {} is {counts:.0} counts of link \"{}\", and the line carries at most 32767; raise `speed_lsb_urad_s` in link and firmware", wheel.name, wheel.max_rad_s, wheel.gear, link.name));
        }
        if let (Some(pace), Some(row)) = (slowest, layout.and_then(|it| it.rows().get(index))) {
            let speed = libm::hypot(row[1], row[2]) * pace.pace.travel_m_s * wheel.gear;
            if lsb_rad_s > 0.01 * speed {
                notes.wrong(&key_in(notes, link_span, "speed_lsb_urad_s"), format!("a count of {} urad/s is {:.1} % of the speed of wheel \"{}\" at the slowest pace; at most 1 % gives a smooth creep: {:.0} urad/s or less", link.speed_lsb_urad_s, 100.0 * lsb_rad_s / speed, wheel.name, speed * 1e4));
            }
        }
        let fastest_angle = wheel.max_rad_s * wheel.gear / (f64::from(link.angle_lsb_urad) * 1e-6);
        if fastest_angle * 0.5 > f64::from(i32::MAX) / 2.0 {
            notes.wrong(
                &key_in(notes, link_span, "angle_lsb_urad"),
                format!(
                    "the angle of wheel \"{}\" would wrap within half a second; raise `angle_lsb_urad`",
                    wheel.name
                ),
            );
        }
    }
}
