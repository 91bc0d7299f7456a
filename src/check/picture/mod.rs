//! The base from above as an SVG: its wheels with rolling and roller directions, the velocities that it can reach, and
//! how far it goes on in a stop. Forward is up and left is left, as one stands behind the base.

mod draw;

use draw::{Panel, label};

use super::Findings;
use crate::config::WheelPlan;
use crate::core::budget::{Guard, farthest};

/// Side of a panel in drawing units.
const SIDE: f64 = 420.0;
const GAP: f64 = 24.0;
const HEAD: f64 = 64.0;

const INK: &str = "#2d2d2d";
const PALE: &str = "#8a8a8a";
const BODY: &str = "#ece7da";
const TYRE: &str = "#4a4a4a";
const ROLLING: &str = "#1f6f9c";
const FREE: &str = "#c9731a";
const ALARM: &str = "#b3261e";
/// Paces, slowest first.
const PACES: [&str; 6] = ["#2f7d4f", "#7a4fa3", "#a83a5b", "#5c6b1f", "#8a6d1d", "#3b5b8c"];

/// Draws it.
#[must_use]
pub fn svg(it: &Findings<'_>) -> String {
    let panels = [
        ("Wheels, seen from above, forward is up", base(it)),
        ("Velocities without turning, m/s", velocities(it)),
        ("Stops from full travel and turn, m", stops(it)),
    ];
    let below = panels.iter().map(|it| it.1.words_height()).fold(0.0, f64::max);
    let (width, height) = (3.0 * SIDE + 4.0 * GAP, HEAD + SIDE + below + GAP);
    let mut out = format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{width}\" height=\"{height}\" viewBox=\"0 0 {width} {height}\" \
         font-family=\"sans-serif\" font-size=\"13\" fill=\"{INK}\">\n<rect width=\"{width}\" height=\"{height}\" fill=\"#fdfcf9\"/>\n"
    );
    out += &label(GAP, 32.0, 20.0, INK, &it.plan.name);
    for (at, (title, panel)) in panels.iter().enumerate() {
        let x = GAP + at as f64 * (SIDE + GAP);
        out += &label(x, HEAD - 10.0, 14.0, INK, title);
        out += &panel.placed(x, HEAD);
    }
    out + "</svg>\n"
}

/// The outline with its wheels, large.
fn base(it: &Findings<'_>) -> Panel {
    let plan = it.plan;
    let [length, width] = plan.outline_m;
    let reach_of = |wheel: &WheelPlan| {
        let g = &wheel.geometry;
        g.x_m.abs().max(g.y_m.abs()) + 2.0 * g.radius_m
    };
    let half_m = plan.wheels.iter().map(reach_of).fold(length.max(width) / 2.0, f64::max) * 1.2;
    let mut panel = Panel::new(SIDE, half_m);
    panel.rectangle((0.0, 0.0), (length, width), 0.0, &format!("fill=\"{BODY}\" stroke=\"{PALE}\""));
    panel.arrow((0.0, 0.0), (half_m * 0.22, 0.0), PALE, 1.5);
    panel.arrow((0.0, 0.0), (0.0, half_m * 0.22), PALE, 1.5);
    panel.text((half_m * 0.26, 0.0), "middle", 12.0, PALE, "x");
    panel.text((-half_m * 0.015, half_m * 0.26), "middle", 12.0, PALE, "y");
    for wheel in &plan.wheels {
        draw_wheel(&mut panel, wheel, half_m);
    }
    panel.below(ROLLING, "rolls forward this way");
    panel.below(FREE, "slides freely this way on the rollers that touch the floor");
    panel.below(PALE, &format!("outline {length} m long, {width} m wide"));
    panel
}

fn draw_wheel(panel: &mut Panel, wheel: &WheelPlan, half_m: f64) {
    let g = &wheel.geometry;
    let (along, free) = (g.drive_rad, g.drive_rad + g.roller_rad + core::f64::consts::FRAC_PI_2);
    let at = (g.x_m, g.y_m);
    let step = |angle: f64, by: f64| (at.0 + by * libm::cos(angle), at.1 + by * libm::sin(angle));
    let tread = g.radius_m * 0.7;
    panel.turned_rectangle(at, (2.0 * g.radius_m, tread), along, &format!("fill=\"{TYRE}\""));
    // Rollers as they touch the floor: their axles stand square to the way in which they slide.
    let axle = free - core::f64::consts::FRAC_PI_2;
    for share in [-0.6, -0.2, 0.2, 0.6] {
        let middle = step(along, share * g.radius_m);
        let half = tread * 0.42 / libm::cos(g.roller_rad).abs().max(0.7);
        let (dx, dy) = (half * libm::cos(axle), half * libm::sin(axle));
        // An omni wheel's rollers lie along its rolling direction: short, so that they do not run into each other.
        let short = if g.roller_rad.abs() < 0.1 { 0.35 } else { 0.75 };
        panel.line(
            (middle.0 - dx * short, middle.1 - dy * short),
            (middle.0 + dx * short, middle.1 + dy * short),
            "#f4efe2",
            3.0,
        );
    }
    panel.arrow(step(along, g.radius_m), step(along, g.radius_m + half_m * 0.17), ROLLING, 2.5);
    let slide = tread / 2.0 + half_m * 0.1;
    panel.arrow(at, step(free, slide), FREE, 1.8);
    panel.arrow(at, step(free, -slide), FREE, 1.8);
    // On the side that the rolling arrow does not take.
    let aside = (g.radius_m + half_m * 0.09) * if libm::cos(along) < -0.1 { 1.0 } else { -1.0 };
    panel.text((at.0 + aside, at.1), "middle", 12.0, INK, &wheel.name);
}

/// The polygon of the base frame, the circle of the room's frame, the paces.
fn velocities(it: &Findings<'_>) -> Panel {
    let corners = it.reach.corners();
    let most = corners.iter().map(|[x, y]| libm::hypot(*x, *y)).fold(0.0, f64::max);
    let (forward, left) = (it.reach.travel_m_s(0.0), it.reach.travel_m_s(core::f64::consts::FRAC_PI_2));
    let (room, turn) = (it.reach.room_travel_m_s(), it.reach.turn_rad_s());
    let mut panel = Panel::new(SIDE, most * 1.12);
    panel.rings();
    panel.polygon(
        corners,
        &format!("fill=\"{ROLLING}\" fill-opacity=\"0.14\" stroke=\"{ROLLING}\" stroke-width=\"2\""),
    );
    panel.circle(
        room,
        &format!("fill=\"none\" stroke=\"{FREE}\" stroke-width=\"2\" stroke-dasharray=\"7 4\""),
    );
    panel.below(ROLLING, &format!("base frame: {forward:.3} forward, {left:.3} left, {most:.3} at most"));
    panel.below(FREE, &format!("room frame: {room:.3} in every direction at every heading"));
    for (pace, colour) in it.plan.paces.iter().zip(PACES.iter().cycle()) {
        panel
            .circle(pace.pace.travel_m_s, &format!("fill=\"none\" stroke=\"{colour}\" stroke-width=\"1.5\""));
        panel.below(
            colour,
            &format!("pace {}: {} m/s, {} rad/s", pace.name, pace.pace.travel_m_s, pace.pace.turn_rad_s),
        );
    }
    panel.below(PALE, &format!("turn without travel: {turn:.3} rad/s at most"));
    panel
}

/// The outline grown by what each pace's stops take, against the bay.
fn stops(it: &Findings<'_>) -> Panel {
    let plan = it.plan;
    let [length, width] = plan.outline_m;
    let worst: Vec<_> = (0..plan.paces.len()).map(|at| farthest(&it.budget, at)).collect();
    let farthest_m = worst.iter().flatten().map(|it| it.1).chain(plan.bay.clear_m).fold(0.0, f64::max);
    let mut panel = Panel::new(SIDE, (length.max(width) / 2.0 + farthest_m) * 1.06);
    panel.rings();
    if let Some(clear) = plan.bay.clear_m {
        panel.grown(
            (length, width),
            clear,
            &format!("fill=\"none\" stroke=\"{INK}\" stroke-width=\"2\" stroke-dasharray=\"9 5\""),
        );
        panel.below(INK, &format!("clear in the bay: {clear} m"));
    }
    for (at, (pace, colour)) in plan.paces.iter().zip(PACES.iter().cycle()).enumerate() {
        let Some(Some((row, distance_m))) = worst.get(at) else { continue };
        let over = plan.bay.clear_m.is_some_and(|clear| *distance_m > clear);
        let colour = if over { ALARM } else { colour };
        panel.grown(
            (length, width),
            *distance_m,
            &format!("fill=\"{colour}\" fill-opacity=\"0.06\" stroke=\"{colour}\" stroke-width=\"2\""),
        );
        let mut words = format!("pace {}: {distance_m:.2} m at worst, {}", pace.name, row.guard.name());
        if over {
            words += ": too far";
        }
        panel.below(colour, &words);
        let asked = it.budget.iter().find(|it| it.pace == at && it.guard == Guard::StopAsked);
        if let Some(asked_m) = asked.and_then(|it| it.distance_m) {
            let style = format!("fill=\"none\" stroke=\"{colour}\" stroke-dasharray=\"2 3\"");
            panel.grown((length, width), asked_m, &style);
            panel.below("none", &format!("{asked_m:.2} m when a stop is asked (dotted)"));
        }
    }
    panel.grown((length, width), 0.0, &format!("fill=\"{BODY}\" stroke=\"{PALE}\""));
    panel.arrow((-length * 0.25, 0.0), (length * 0.35, 0.0), INK, 1.5);
    panel
}
