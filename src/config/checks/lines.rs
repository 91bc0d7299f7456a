//! Links and what hangs on them: names, ports, channels, counts, load, times.

use super::super::reader::{Notes, Section};
use super::super::{GuardPlan, LinkPlan, TickPlan};
use super::{Links, Paces, Wheels, all, names, read};
use crate::base::Layout;
use crate::config::MAX_LINKS;
use crate::wire::size;

/// A count of speed may be at most this share of a wheel's speed at the slowest pace.
const COARSEST_SHARE: f64 = 0.01;
/// From this load on, a late frame makes the next one late too.
const HEAVY_LOAD: f64 = 0.6;

/// Names and ports, each once.
pub(in crate::config) fn links(notes: &Notes<'_>, links: &Links<'_>) {
    names(notes, "link", MAX_LINKS, links, |it| &it.name);
    for (i, (link, section)) in read(links).enumerate() {
        if let Some((before, _)) = read(links).take(i).find(|(before, _)| before.port == link.port) {
            notes.wrong(
                &section.at("port"),
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

/// Channels of wheels: within their link, each used once, no link unused.
pub(in crate::config) fn channels(notes: &Notes<'_>, wheels: &Wheels<'_>, links: &Links<'_>) {
    for (i, (wheel, section)) in read(wheels).enumerate() {
        let Some(link) = links.get(wheel.link).and_then(|it| it.plan.as_ref()) else { continue };
        if wheel.channel >= link.channels {
            notes.wrong(
                &section.at("channel"),
                format!(
                    "channel {} is not on link \"{}\", whose `channels` = {}: they are counted from 0 to {}",
                    wheel.channel,
                    link.name,
                    link.channels,
                    link.channels.saturating_sub(1)
                ),
            );
        }
        let same = |before: &&super::WheelPlan| before.link == wheel.link && before.channel == wheel.channel;
        if let Some(before) = read(wheels).take(i).map(|it| it.0).find(same) {
            notes.wrong(
                &section.at("channel"),
                format!(
                    "wheels \"{}\" and \"{}\" share channel {} of link \"{}\"; each needs one of its own",
                    before.name, wheel.name, wheel.channel, link.name
                ),
            );
        }
    }
    let Some(wheels) = all(wheels) else { return };
    for (at, entry) in links.iter().enumerate() {
        if let (Some(link), false) = (&entry.plan, wheels.iter().any(|it| it.link == at)) {
            notes.wrong(
                &entry.section.at("name"),
                format!("no wheel uses link \"{}\"; take it out, or name it in a [[wheel]]", link.name),
            );
        }
    }
}

/// Speeds and angles against the counts of the line: within their bits, and fine enough for the slowest pace.
pub(in crate::config) fn counts(
    notes: &Notes<'_>,
    wheels: &Wheels<'_>,
    links: &Links<'_>,
    paces: &Paces<'_>,
    layout: Option<&Layout>,
) {
    let slowest = paces.first().and_then(|it| it.plan.as_ref());
    let mut coarsest: Vec<Option<(f64, f64, &str)>> = vec![None; links.len()];
    for (index, entry) in wheels.iter().enumerate() {
        let (Some(wheel), section) = (&entry.plan, &entry.section) else { continue };
        let Some(Some(link)) = links.get(wheel.link).map(|it| it.plan.as_ref()) else { continue };
        let lsb_rad_s = f64::from(link.speed_lsb_urad_s) * 1e-6;
        let counts = wheel.max_rad_s * wheel.gear / lsb_rad_s;
        if counts > f64::from(i16::MAX) {
            let least = wheel.max_rad_s * wheel.gear / f64::from(i16::MAX) * 1e6;
            notes.wrong(
                &section.at("max_rad_s"),
                format!(
                    "wheel \"{}\" at {} rad/s and `gear` = {} is {counts:.0} counts on link \"{}\", and the line carries at most \
                     {}; raise `speed_lsb_urad_s` to {least:.0} or more, in the link and in the drivers",
                    wheel.name,
                    wheel.max_rad_s,
                    wheel.gear,
                    link.name,
                    i16::MAX
                ),
            );
        }
        if let (Some(pace), Some([_, x, y])) = (slowest, layout.and_then(|it| it.rows().get(index))) {
            let speed = libm::hypot(*x, *y) * pace.pace.travel_m_s * wheel.gear;
            let share = lsb_rad_s / speed;
            if let Some(worst) = coarsest.get_mut(wheel.link)
                && share > COARSEST_SHARE
                && worst.is_none_or(|it| share > it.0)
            {
                *worst = Some((share, speed, &wheel.name));
            }
        }
        // Angles are followed by wrapping differences, which must stay below half the range of 32 bits; a second at
        // full speed is longer than any silence that is borne.
        let half_range_rad = 2f64.powi(31) * f64::from(link.angle_lsb_urad) * 1e-6;
        if wheel.max_rad_s * wheel.gear > half_range_rad {
            notes.wrong(
                &section.at("max_rad_s"),
                format!(
                    "the angle of wheel \"{}\" would wrap within a second at `angle_lsb_urad` = {}; raise that",
                    wheel.name, link.angle_lsb_urad
                ),
            );
        }
    }
    for (entry, worst) in links.iter().zip(coarsest) {
        let (Some(link), Some((share, speed, wheel))) = (&entry.plan, worst) else { continue };
        notes.wrong(
            &entry.section.at("speed_lsb_urad_s"),
            format!(
                "a count of {} urad/s is {:.1} % of the speed of wheel \"{wheel}\" at the slowest pace, too coarse to creep \
                 smoothly; at most 1 %: {:.0} urad/s or less, in the link and in the drivers",
                link.speed_lsb_urad_s,
                100.0 * share,
                (speed * COARSEST_SHARE * 1e6).floor()
            ),
        );
    }
}

/// Bytes a second against the baud rate.
pub(in crate::config) fn load(notes: &Notes<'_>, tick: &TickPlan, links: &Links<'_>) {
    for (link, section) in read(links) {
        for (way, load) in ["to", "from"].into_iter().zip(link.load(tick)) {
            let what =
                format!("the line {way} the drivers of \"{}\" is loaded to {:.0} %", link.name, load * 100.0);
            if load > 1.0 {
                let least = f64::from(link.baud) * load / HEAVY_LOAD;
                notes.wrong(
                    &section.at("baud"),
                    format!(
                        "{what}: {} frames a second do not fit {} bit/s; raise `baud` to {least:.0} or more, or lower `rate_hz`",
                        tick.rate_hz, link.baud
                    ),
                );
            } else if load > HEAVY_LOAD {
                notes.warn(
                    &section.at("baud"),
                    format!("{what}: above 60 % a late frame makes the next ones late; raise `baud` or lower `rate_hz`"),
                );
            }
        }
    }
}

/// Validity and guards against the tick and the line.
pub(in crate::config) fn times(
    notes: &Notes<'_>,
    tick: &TickPlan,
    links: &Links<'_>,
    guard: &GuardPlan,
    guard_section: &Section<'_>,
) {
    let period_ms = tick.period_s() * 1e3;
    for (link, section) in read(links) {
        let valid_ms = f64::from(link.valid_ms);
        if valid_ms < 2.0 * period_ms {
            notes.wrong(
                &section.at("valid_ms"),
                format!(
                    "`valid_ms` = {} is shorter than two ticks of {period_ms:.1} ms: one lost frame would stop the base; it must \
                     be {:.0} or more",
                    link.valid_ms,
                    (2.0 * period_ms).ceil()
                ),
            );
        } else if valid_ms < guard.late_ms + period_ms {
            notes.warn(
                &section.at("valid_ms"),
                format!(
                    "`valid_ms` = {} runs out before the host sees that a tick is later than `late_ms` = {}: the drivers stop \
                     first, and what is told then is that they went silent",
                    link.valid_ms, guard.late_ms
                ),
            );
        }
    }
    for (name, value_ms, oldest_ms) in [
        ("feedback_quiet_ms", guard.feedback_quiet_ms, feedback_age_ms as fn(&LinkPlan, f64) -> f64),
        ("not_heard_ms", guard.not_heard_ms, heard_age_ms),
    ] {
        let oldest = read(links)
            .map(|(link, section)| (oldest_ms(link, period_ms), link, section))
            .max_by(|a, b| a.0.total_cmp(&b.0));
        let Some((least_ms, link, section)) = oldest.filter(|it| value_ms < it.0) else { continue };
        let (at, by) = if guard_section.given(name) {
            (guard_section.at(name), "")
        } else {
            (section.at("latency_ms"), " (the default)")
        };
        notes.wrong(
            &at,
            format!(
                "`{name}` = {value_ms}{by} would trip on a sound line: with one frame lost on link \"{}\" the newest answer can be \
                 {:.0} ms old (ticks of {period_ms:.1} ms, {} bit/s, `latency_ms` = {}); raise the one or lower the others",
                link.name,
                libm::ceil(least_ms),
                link.baud,
                link.latency_ms
            ),
        );
    }
}

/// Drivers send feedback at least so often by themselves.
const FEEDBACK_EVERY_MS: f64 = 20.0;

/// How old the newest feedback may be on a sound line: two intervals where one is lost, and what adaptor and line add.
fn feedback_age_ms(link: &LinkPlan, period_ms: f64) -> f64 {
    let frame_s = link.seconds(size::feedback(usize::from(link.channels)));
    2.0 * period_ms.min(FEEDBACK_EVERY_MS) + frame_s * 1e3 + link.latency_ms
}

/// How old the last acknowledged frame may be, seen from a tick: those that are still under way, and one lost.
fn heard_age_ms(link: &LinkPlan, period_ms: f64) -> f64 {
    let channels = usize::from(link.channels);
    let frames_s = link.seconds(size::drive(channels)) + link.seconds(size::feedback(channels));
    (1.0 + libm::ceil((frames_s * 1e3 + link.latency_ms) / period_ms)) * period_ms
}
