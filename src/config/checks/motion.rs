//! The base and its wheels against what is asked of them: rank, paces, accelerations, ramps.

use super::super::reader::{Notes, Section};
use super::super::{PacePlan, TickPlan};
use super::{Entry, Paces, Wheels, all, names, read};
use crate::base::reach::Reach;
use crate::base::{Layout, MAX_WHEELS, Wheel, analysis};
use crate::config::MAX_PACES;
use crate::shaping::{Limits, MAX_SAMPLES};

/// Above it some motion needs so much more wheel speed than another that errors are felt.
const GREAT_CONDITION: f64 = 10.0;
/// Longest ramp that the line can carry (u16).
const LONGEST_RAMP_S: f64 = 65.535;
/// Beyond it no twist at full travel and turn is left inside the grip (step 2 of shaping).
const GREATEST_GRIP_SHARE: f64 = 4.0;

/// Rank and condition of the wheels together.
pub(in crate::config) fn layout(
    notes: &Notes<'_>,
    wheels: &Wheels<'_>,
    outline_m: Option<[f64; 2]>,
) -> Option<Layout> {
    names(notes, "wheel", MAX_WHEELS, wheels, |it| &it.name);
    for (wheel, section) in read(wheels) {
        let Wheel { x_m, y_m, .. } = wheel.geometry;
        if outline_m.is_some_and(|[length, width]| x_m.abs() > length / 2.0 || y_m.abs() > width / 2.0) {
            notes.warn(
                &section.at("at_m"),
                format!(
                    "wheel \"{}\" stands outside `outline_m`; stopping distances are those of the outline, so widen it to all that moves",
                    wheel.name
                ),
            );
        }
    }
    let geometry: Vec<Wheel> = all(wheels)?.into_iter().map(|it| it.geometry).collect();
    let first = &wheels.first()?.section;
    if geometry.len() > MAX_WHEELS {
        return None;
    }
    match Layout::new(&geometry) {
        Ok(layout) => {
            let condition = analysis::analyse(&geometry).condition;
            if condition > GREAT_CONDITION {
                notes.warn(
                    &first.span,
                    format!(
                        "the layout's condition number is {condition:.1}, above 10: some motion needs far more wheel speed than another, \
                         and errors grow with it; place the wheels further apart, or turn one"
                    ),
                );
            }
            Some(layout)
        }
        Err(problem) => {
            notes.wrong(&first.span, problem.to_string());
            None
        }
    }
}

/// Paces and limits against what the wheels can do.
pub(in crate::config) fn motion(
    notes: &Notes<'_>,
    layout: &Layout,
    wheels: &Wheels<'_>,
    paces: &Paces<'_>,
    limits: &Limits,
    limits_section: &Section<'_>,
) {
    names(notes, "pace", MAX_PACES, paces, |it| &it.name);
    let Some(plans) = all(wheels) else { return };
    let reach = Reach::new(layout, &plans.iter().map(|it| it.max_rad_s).collect());
    let mut before: Option<&PacePlan> = None;
    for (plan, section) in read(paces) {
        pace(notes, plan, section, &reach, limits);
        if let Some(before) = before
            && plan.pace.travel_m_s <= before.pace.travel_m_s
        {
            notes.wrong(
                &section.at("travel_m_s"),
                format!(
                    "pace \"{}\" with {} m/s is not faster than \"{}\" before it with {} m/s; put the slowest first",
                    plan.name, plan.pace.travel_m_s, before.name, before.pace.travel_m_s
                ),
            );
        }
        before = Some(plan);
        following(notes, layout, wheels, plan, limits);
        ramp(notes, layout, wheels, (plan, section), limits, limits_section);
    }
    for (name, value, unit) in [
        ("speed_up_m_s2", limits.speed_up_m_s2, "m/s^2"),
        ("slow_down_m_s2", limits.slow_down_m_s2, "m/s^2"),
        ("stop_m_s2", limits.stop_m_s2, "m/s^2"),
        ("turn_rad_s2", limits.turn_rad_s2, "rad/s^2"),
    ] {
        acceleration(notes, layout, wheels, limits_section, (name, value, unit));
    }
}

/// One pace against the wheels' speeds and the grip.
fn pace(notes: &Notes<'_>, plan: &PacePlan, section: &Section<'_>, reach: &Reach, limits: &Limits) {
    let pace = plan.pace;
    // The polygon of travel is nearest where a wheel's strip is narrowest: what every direction has, in both frames.
    let (travel, turn) = (reach.room_travel_m_s(), reach.turn_rad_s());
    if pace.travel_m_s > travel {
        notes.wrong(
            &section.at("travel_m_s"),
            format!(
                "pace \"{}\" is faster than the wheels can turn: {} m/s, and {:.3} m/s is the most that they reach in every \
                 direction; make it slower, or raise `max_rad_s` if the motors give it",
                plan.name,
                pace.travel_m_s,
                floored(travel)
            ),
        );
    }
    if pace.turn_rad_s > turn {
        notes.wrong(
            &section.at("turn_rad_s"),
            format!(
                "pace \"{}\" turns faster than the wheels can: {} rad/s, and {:.3} rad/s is the most that they reach; make it slower, \
                 or raise `max_rad_s` if the motors give it",
                plan.name,
                pace.turn_rad_s,
                floored(turn)
            ),
        );
    }
    let across = pace.travel_m_s * pace.turn_rad_s;
    if across > GREATEST_GRIP_SHARE * limits.grip_m_s2 {
        notes.wrong(
            &section.at("turn_rad_s"),
            format!(
                "pace \"{}\" asks for {across:.2} m/s^2 across at full travel and turn, more than four times `grip_m_s2` = {}; at most \
                 {:.3} rad/s go with {} m/s",
                plan.name,
                limits.grip_m_s2,
                floored(GREATEST_GRIP_SHARE * limits.grip_m_s2 / pace.travel_m_s),
                pace.travel_m_s
            ),
        );
    }
}

/// In the room's frame the wheels must follow the turning of the travel direction even at constant speed.
fn following(notes: &Notes<'_>, layout: &Layout, wheels: &Wheels<'_>, plan: &PacePlan, limits: &Limits) {
    let grip = limits.grip_m_s2.min(plan.pace.travel_m_s * plan.pace.turn_rad_s);
    for ([_, x, y], Entry { plan: wheel, section }) in layout.rows().iter().zip(wheels) {
        let Some(wheel) = wheel else { continue };
        let needed = grip * libm::hypot(*x, *y);
        if needed >= wheel.max_rad_s2 {
            notes.wrong(
                &section.at("max_rad_s2"),
                format!(
                    "wheel \"{}\" cannot follow the room's frame at pace \"{}\": turning at full travel alone takes {needed:.1} rad/s^2, \
                     and it has {}; make the pace slower or `grip_m_s2` smaller, or raise `max_rad_s2` if the motors give it",
                    wheel.name, plan.name, wheel.max_rad_s2
                ),
            );
            return;
        }
    }
}

/// The ramp of the drivers out of full pace must fit its field on the line.
fn ramp(
    notes: &Notes<'_>,
    layout: &Layout,
    wheels: &Wheels<'_>,
    (plan, section): (&PacePlan, &Section<'_>),
    limits: &Limits,
    limits_section: &Section<'_>,
) {
    let pace = plan.pace;
    let mut longest = (pace.travel_m_s / limits.stop_m_s2, limits_section.at("stop_m_s2"), "`stop_m_s2`");
    if !limits_section.given("stop_m_s2") {
        longest.1 = section.at("travel_m_s");
    }
    if pace.turn_rad_s / limits.turn_rad_s2 > longest.0 {
        let at = if limits_section.given("turn_rad_s2") {
            limits_section.at("turn_rad_s2")
        } else {
            section.at("turn_rad_s")
        };
        longest = (pace.turn_rad_s / limits.turn_rad_s2, at, "`turn_rad_s2`");
    }
    for ([turn, x, y], Entry { plan: wheel, section }) in layout.rows().iter().zip(wheels) {
        let Some(wheel) = wheel else { continue };
        let speed = turn.abs() * pace.turn_rad_s + libm::hypot(*x, *y) * pace.travel_m_s;
        let takes_s = speed.min(wheel.max_rad_s) / wheel.max_rad_s2;
        if takes_s > longest.0 {
            longest = (takes_s, section.at("max_rad_s2"), "`max_rad_s2`");
        }
    }
    let (takes_s, at, what) = longest;
    if takes_s > LONGEST_RAMP_S {
        notes.wrong(
            &at,
            format!(
                "a stop out of pace \"{}\" would take {takes_s:.1} s, and the line carries ramps of at most {LONGEST_RAMP_S} s; raise \
                 {what} or make the pace slower",
                plan.name
            ),
        );
    }
}

/// An acceleration of the base that some wheel cannot give, in the direction that is worst for it.
fn acceleration(
    notes: &Notes<'_>,
    layout: &Layout,
    wheels: &Wheels<'_>,
    limits_section: &Section<'_>,
    (name, value, unit): (&str, f64, &str),
) {
    let weakest = layout
        .rows()
        .iter()
        .zip(wheels)
        .filter_map(|([turn, x, y], it)| {
            let part = if unit == "rad/s^2" { turn.abs() } else { libm::hypot(*x, *y) };
            it.plan.as_ref().map(|wheel| (wheel.max_rad_s2 / part, wheel, &it.section))
        })
        .min_by(|a, b| a.0.total_cmp(&b.0));
    let Some((most, wheel, section)) = weakest.filter(|it| value > it.0) else { return };
    // A default cannot be wrong where it stands: then the wheel is what was written.
    let (at, by) = if limits_section.given(name) {
        (limits_section.at(name), "")
    } else {
        (section.at("max_rad_s2"), " (the default)")
    };
    notes.wrong(
        &at,
        format!(
            "`{name}` = {value} {unit}{by} is more than the wheels can give: \"{}\" with `max_rad_s2` = {} gives {:.3} {unit}; set \
             `{name}` in [limits] to that or less, or raise `max_rad_s2` if the motors give it",
            wheel.name,
            wheel.max_rad_s2,
            floored(most)
        ),
    );
}

/// The moving average must fit.
pub(in crate::config) fn smoothing(
    notes: &Notes<'_>,
    tick: &TickPlan,
    limits: &Limits,
    section: &Section<'_>,
) {
    let most_s = MAX_SAMPLES as f64 * tick.period_s();
    if limits.smoothing_s > most_s {
        notes.wrong(
            &section.at("smoothing_s"),
            format!(
                "`smoothing_s` = {} is more than {MAX_SAMPLES} ticks of {:.2} ms; at most {:.3}, or lower `rate_hz`",
                limits.smoothing_s,
                tick.period_s() * 1e3,
                floored(most_s)
            ),
        );
    }
}

/// Cut to the three decimals that are shown, so that what is named would do.
fn floored(value: f64) -> f64 {
    libm::floor(value * 1e3) / 1e3
}
