//! The base from above: outline, wheels with rolling and roller directions, reachable velocities, stopping distances.

use std::fmt::Write as _;

use gripline::base::reach::Reach;
use gripline::config::Plan;
use gripline::core::budget::BudgetRow;

/// One metre, in units of the drawing.
const SCALE: f64 = 200.0;

/// Draws it; x forward is up, y left is left, as one stands behind the base.
pub(super) fn svg(plan: &Plan, reach: &Reach, budget: &[BudgetRow]) -> String {
    let stops: Vec<(&str, f64)> = plan
        .paces
        .iter()
        .filter_map(|pace| {
            let rows = budget.iter().filter(|it| it.pace == pace.name && it.guard == "stop asked");
            rows.filter_map(|it| it.distance_m).next().map(|it| (pace.name.as_str(), it))
        })
        .collect();
    let [length, width] = plan.outline_m;
    let farthest = stops.iter().map(|it| it.1).chain(plan.bay.clear_m).fold(0.3, f64::max);
    let (half_w, half_h) = ((width / 2.0 + farthest + 0.1) * SCALE, (length / 2.0 + farthest + 0.1) * SCALE);
    let side = 420.0;
    let mut out = String::new();
    let (w, h) = (2.0 * half_w + side, (2.0 * half_h).max(420.0));
    let _ = writeln!(
        out,
        "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"{:.1} {:.1} {w:.1} {h:.1}\" font-family=\"sans-serif\" font-size=\"13\">",
        -half_w,
        -h / 2.0
    );
    let _ = writeln!(
        out,
        "<rect x=\"{:.1}\" y=\"{:.1}\" width=\"{w:.1}\" height=\"{h:.1}\" fill=\"#fbfaf7\"/>",
        -half_w,
        -h / 2.0
    );
    if let Some(clear) = plan.bay.clear_m {
        ring(&mut out, (length, width), clear, "#8a8a8a", "8 5", &format!("clear {clear} m"));
    }
    for ((name, distance), colour) in
        stops.iter().zip(["#2a7f9e", "#c77d1e", "#a83a3a", "#6a4c93", "#3f7d4e"].iter().cycle())
    {
        ring(&mut out, (length, width), *distance, colour, "", &format!("stop at {name}: {distance:.2} m"));
    }
    let _ = writeln!(
        out,
        "<rect x=\"{:.1}\" y=\"{:.1}\" width=\"{:.1}\" height=\"{:.1}\" rx=\"6\" fill=\"#e7e2d6\" stroke=\"#555\"/>",
        -width / 2.0 * SCALE,
        -length / 2.0 * SCALE,
        width * SCALE,
        length * SCALE
    );
    let _ = writeln!(out, "<path d=\"M0,{:.1} l-7,13 h14 z\" fill=\"#555\"/>", -length / 2.0 * SCALE + 4.0);
    for wheel in &plan.wheels {
        draw_wheel(&mut out, wheel);
    }
    draw_reach(&mut out, plan, reach, half_w + side / 2.0);
    out += "</svg>\n";
    out
}

/// The outline, grown by a distance on every side.
fn ring(
    out: &mut String,
    (length, width): (f64, f64),
    distance: f64,
    colour: &str,
    dashes: &str,
    label: &str,
) {
    let (w, h, r) = ((width + 2.0 * distance) * SCALE, (length + 2.0 * distance) * SCALE, distance * SCALE);
    let _ = writeln!(
        out,
        "<rect x=\"{:.1}\" y=\"{:.1}\" width=\"{w:.1}\" height=\"{h:.1}\" rx=\"{r:.1}\" fill=\"none\" stroke=\"{colour}\" stroke-dasharray=\"{dashes}\"/>",
        -w / 2.0,
        -h / 2.0
    );
    let _ = writeln!(
        out,
        "<text x=\"0\" y=\"{:.1}\" fill=\"{colour}\" text-anchor=\"middle\">{}</text>",
        -h / 2.0 + 15.0,
        escaped(label)
    );
}

fn draw_wheel(out: &mut String, wheel: &gripline::config::WheelPlan) {
    let geometry = &wheel.geometry;
    let (x, y) = (-geometry.y_m * SCALE, -geometry.x_m * SCALE);
    let (long, wide) = (geometry.radius_m * 2.0 * SCALE, geometry.radius_m * SCALE);
    // Angles are anticlockwise from forward, which points up; the drawing's are clockwise.
    let turn = -gripline::units::deg(geometry.drive_rad);
    let _ = writeln!(out, "<g transform=\"translate({x:.1},{y:.1})\"><g transform=\"rotate({turn:.2})\">");
    let _ = writeln!(
        out,
        "<rect x=\"{:.1}\" y=\"{:.1}\" width=\"{wide:.1}\" height=\"{long:.1}\" rx=\"2\" fill=\"#4a4a4a\"/>",
        -wide / 2.0,
        -long / 2.0
    );
    let _ = writeln!(
        out,
        "<path d=\"M0,{:.1} v-14 m-4,5 l4,-6 l4,6\" stroke=\"#2a7f9e\" stroke-width=\"2\" fill=\"none\"/>",
        -long / 2.0
    );
    // The roller slides freely along its angle from the perpendicular of the rolling direction.
    let roller = -gripline::units::deg(geometry.roller_rad);
    let _ = writeln!(
        out,
        "<g transform=\"rotate({roller:.2})\"><line x1=\"{:.1}\" x2=\"{:.1}\" y1=\"0\" y2=\"0\" stroke=\"#f0b64a\" stroke-width=\"3\"/></g></g>",
        -wide * 0.8,
        wide * 0.8
    );
    let side = if geometry.y_m >= 0.0 { -1.0 } else { 1.0 };
    let anchor = if side < 0.0 { "end" } else { "start" };
    let _ = writeln!(
        out,
        "<text x=\"{:.1}\" y=\"4\" text-anchor=\"{anchor}\" fill=\"#333\">{}</text></g>",
        side * (long / 2.0 + 6.0),
        escaped(&wheel.name)
    );
}

/// Reachable velocities beside the base, with the paces.
fn draw_reach(out: &mut String, plan: &Plan, reach: &Reach, x: f64) {
    let most = reach.corners().iter().map(|[x, y]| x.hypot(*y)).fold(0.1, f64::max);
    let scale = 150.0 / most;
    let _ = writeln!(
        out,
        "<g transform=\"translate({x:.1},0)\"><text x=\"0\" y=\"-175\" text-anchor=\"middle\" fill=\"#333\">travel without turning, m/s</text>"
    );
    let points: Vec<String> =
        reach.corners().iter().map(|[x, y]| format!("{:.1},{:.1}", -y * scale, -x * scale)).collect();
    let _ = writeln!(out, "<polygon points=\"{}\" fill=\"#d9e9ee\" stroke=\"#2a7f9e\"/>", points.join(" "));
    circle(
        out,
        reach.room_travel_m_s() * scale,
        "#2a7f9e",
        &format!("room frame {:.2}", reach.room_travel_m_s()),
    );
    for pace in &plan.paces {
        circle(
            out,
            pace.pace.travel_m_s * scale,
            "#c77d1e",
            &format!("{} {}", pace.name, pace.pace.travel_m_s),
        );
    }
    let _ = writeln!(
        out,
        "<text x=\"0\" y=\"185\" text-anchor=\"middle\" fill=\"#333\">forward {:.2}, left {:.2}, turn {:.2} rad/s</text></g>",
        reach.travel_m_s(0.0),
        reach.travel_m_s(std::f64::consts::FRAC_PI_2),
        reach.turn_rad_s()
    );
}

fn circle(out: &mut String, r: f64, colour: &str, label: &str) {
    let _ = writeln!(
        out,
        "<circle r=\"{r:.1}\" fill=\"none\" stroke=\"{colour}\" stroke-dasharray=\"4 3\"/><text x=\"0\" y=\"{:.1}\" text-anchor=\"middle\" font-size=\"11\" fill=\"{colour}\">{}</text>",
        -r - 2.0,
        escaped(label)
    );
}

fn escaped(text: &str) -> String {
    text.replace('&', "&amp;").replace('<', "&lt;").replace('>', "&gt;")
}
