//! `gripline check`: a configuration on paper: layout, reach, load of the lines, stop budget, and a picture.

mod picture;

use std::path::PathBuf;

use gripline::base::PerWheel;
use gripline::base::analysis::{Analysis, analyse};
use gripline::base::reach::Reach;
use gripline::config::{Mistake, Plan, keys, link_load};
use gripline::core::budget::{self, BudgetRow};
use gripline::units::{deg, rad};
use serde_json::{Value, json};

use super::{Exit, fail, print};

/// Check a configuration: layout, reach, load of the lines, stop budget. Moves nothing.
#[derive(clap::Args)]
pub(crate) struct Args {
    /// The base's configuration
    #[arg(required_unless_present = "keys")]
    config: Option<PathBuf>,
    /// As JSON
    #[arg(long)]
    json: bool,
    /// Draw the base from above
    #[arg(long, value_name = "FILE.svg")]
    picture: Option<PathBuf>,
    /// Print every key of a configuration instead
    #[arg(long)]
    keys: bool,
}

/// All that check finds.
struct Findings<'a> {
    plan: &'a Plan,
    analysis: Analysis,
    reach: Reach,
    budget: Vec<BudgetRow>,
    warnings: Vec<String>,
}

pub(crate) fn run(args: Args) -> Exit {
    if args.keys {
        return print(keys::reference());
    }
    let Some(config) = &args.config else { return Exit::CouldNotRun };
    let (plan, odd) = match gripline::config::load(config) {
        Ok(loaded) => loaded,
        Err(error) => return fail(Exit::CouldNotRun, error),
    };
    let findings = find(&plan, &odd);
    if let Some(path) = &args.picture
        && let Err(error) = std::fs::write(path, picture::svg(&plan, &findings.reach, &findings.budget))
    {
        return fail(
            Exit::CouldNotRun,
            format_args!("cannot write the picture {}: {error}; give another path", path.display()),
        );
    }
    if args.json { print(format_args!("{:#}\n", as_json(&findings))) } else { print(as_text(&findings)) }
}

fn find<'a>(plan: &'a Plan, odd: &[Mistake]) -> Findings<'a> {
    let geometry: Vec<_> = plan.wheels.iter().map(|it| it.geometry).collect();
    let max: PerWheel<f64> = plan.wheels.iter().map(|it| it.max_rad_s).collect();
    let budget = budget::budget(plan);
    let mut warnings: Vec<String> = odd.iter().map(|it| it.what.clone()).collect();
    for (pace, fits) in plan.paces.iter().zip(budget::paces_that_fit(plan)) {
        if !fits {
            warnings.push(format!(
                "pace \"{}\" is not offered by `drive`: some stop needs more than the {} m that are clear",
                pace.name,
                plan.bay.clear_m.unwrap_or(f64::NAN)
            ));
        }
    }
    if plan.bay.clear_m.is_none() {
        warnings.push("`clear_m` of [bay] is not given: stopping distances are compared with nothing".into());
    }
    if plan.bay.coast_m_s2.is_none() {
        warnings.push("`coast_m_s2` of [bay] is not known: stops of category 0 have no budget".into());
    }
    Findings { plan, analysis: analyse(&geometry), reach: Reach::new(&plan.layout, &max), budget, warnings }
}

/// The polygon's corners and every five degrees, in order of direction.
fn directions(reach: &Reach) -> Vec<(f64, f64)> {
    let corners = reach.corners().iter().map(|[x, y]| (deg(y.atan2(*x)).rem_euclid(360.0), x.hypot(*y)));
    let even = (0..72).map(|it| f64::from(it) * 5.0).map(|it| (it, reach.travel_m_s(rad(it))));
    let mut all: Vec<(f64, f64)> = corners.chain(even).collect();
    all.sort_by(|a, b| a.0.total_cmp(&b.0));
    all.dedup_by(|a, b| (a.0 - b.0).abs() < 1e-9);
    all
}

fn as_json(it: &Findings<'_>) -> Value {
    let plan = it.plan;
    let wheels: Vec<Value> = plan
        .wheels
        .iter()
        .zip(&it.analysis.h)
        .map(|(wheel, row)| json!({ "name": wheel.name, "row": row, "max_rad_s": wheel.max_rad_s, "max_rad_s2": wheel.max_rad_s2 }))
        .collect();
    let reach: Vec<Value> = directions(&it.reach)
        .into_iter()
        .map(
            |(direction_deg, travel_m_s)| json!({ "direction_deg": direction_deg, "travel_m_s": travel_m_s }),
        )
        .collect();
    let links: Vec<Value> = plan
        .links
        .iter()
        .map(|link| {
            let [to, from] = link_load(link, &plan.tick);
            json!({ "name": link.name, "to_drivers_load": to, "from_drivers_load": from })
        })
        .collect();
    let budget: Vec<Value> = it
        .budget
        .iter()
        .map(|row| {
            json!({
                "guard": row.guard, "pace": row.pace, "category": row.category, "detect_s": row.detect_s,
                "tick_s": row.tick_s, "smoothing_s": row.smoothing_s, "wire_s": row.wire_s, "driver_s": row.driver_s,
                "ramp_s": row.ramp_s, "total_s": row.total_s, "distance_m": row.distance_m, "person_m": row.person_m,
            })
        })
        .collect();
    json!({
        "base": plan.name,
        "wheels": wheels,
        "layout": it.analysis.h,
        "rank": it.analysis.rank,
        "singular_values": it.analysis.singular_values,
        "characteristic_m": it.analysis.characteristic_m,
        "condition": it.analysis.condition,
        "impossible": it.analysis.impossible,
        "forward": it.analysis.forward,
        "skid_basis": it.analysis.skid_basis,
        "reach": reach,
        "turn_rad_s": it.reach.turn_rad_s(),
        "room_travel_m_s": it.reach.room_travel_m_s(),
        "links": links,
        "clear_m": plan.bay.clear_m,
        "paces_that_fit": budget::paces_that_fit(plan),
        "stop_budget": budget,
        "warnings": it.warnings,
    })
}

fn as_text(it: &Findings<'_>) -> String {
    let plan = it.plan;
    let mut text = format!(
        "{}: {} wheels, {} links, {} paces\n",
        plan.name,
        plan.wheels.len(),
        plan.links.len(),
        plan.paces.len()
    );
    text += "\nlayout: rad/s of each wheel per rad/s of turn, per m/s forward, per m/s left\n";
    for (wheel, [turn, x, y]) in plan.wheels.iter().zip(&it.analysis.h) {
        text += &format!("  {:<16} {turn:10.4} {x:10.4} {y:10.4}\n", wheel.name);
    }
    text += &format!(
        "  rank {}, condition {:.3} (turn scaled by {:.3} m)\n",
        it.analysis.rank, it.analysis.condition, it.analysis.characteristic_m
    );
    text += "forward map: what one rad/s of each wheel adds to turn (rad/s), forward and left (m/s)\n";
    for (name, row) in ["turn", "forward", "left"].iter().zip(&it.analysis.forward) {
        let row: Vec<String> = row.iter().map(|it| format!("{it:9.5}")).collect();
        text += &format!("  {name:<16} {}\n", row.join(" "));
    }
    match plan.wheels.len() {
        3 => text += "three wheels cannot skid against each other, so skidding is not seen\n",
        n => {
            text += &format!(
                "{} of {n} wheel speeds are bound: skidding is seen{}\n",
                n - 3,
                if n == 4 { ", but not of which wheel" } else { "" }
            )
        }
    }
    let least = it.reach.room_travel_m_s();
    let most = it.reach.corners().iter().map(|[x, y]| x.hypot(*y)).fold(0.0, f64::max);
    text += &format!(
        "\nreach without turning: forward {:.3} m/s, left {:.3} m/s, fastest {most:.3} m/s (base frame); {least:.3} m/s in every direction (room frame)\n",
        it.reach.travel_m_s(0.0),
        it.reach.travel_m_s(rad(90.0))
    );
    text += &format!("reach without travel: {:.3} rad/s\n", it.reach.turn_rad_s());
    text += "\nload of the lines\n";
    for link in &plan.links {
        let [to, from] = link_load(link, &plan.tick);
        text += &format!(
            "  {:<16} {:3.0} % to the drivers, {:3.0} % from them\n",
            link.name,
            to * 100.0,
            from * 100.0
        );
    }
    text += "\nstop budget: a planning figure, no proof; measure it on the base itself\n";
    text += "  guard           pace       cat  detect    tick  smooth    wire  driver    ramp   total  distance  person walks\n";
    let clear = plan.bay.clear_m.unwrap_or(f64::INFINITY);
    for row in &it.budget {
        let s = |it: Option<f64>| it.map_or_else(|| format!("{:>7}", "unknown"), |it| format!("{it:7.3}"));
        let mark = if row.distance_m.is_some_and(|it| it > clear) { "  more than is clear" } else { "" };
        text += &format!(
            "  {:<15} {:<10} {:>3} {:7.3} {:7.3} {:7.3} {:7.3} {:7.3} {} {} s {} m {} m{mark}\n",
            row.guard,
            row.pace,
            row.category,
            row.detect_s,
            row.tick_s,
            row.smoothing_s,
            row.wire_s,
            row.driver_s,
            s(row.ramp_s),
            s(row.total_s),
            s(row.distance_m),
            s(row.person_m)
        );
    }
    for pace in &plan.paces {
        let yaw = budget::yaw_of_links_rad(plan, pace.pace);
        if yaw > 0.0 {
            text += &format!(
                "  at pace {} the ramps of the links may start apart: the base then yaws up to {:.1} degrees\n",
                pace.name,
                deg(yaw)
            );
        }
    }
    text += "  distances are of the outermost point at full travel and turn; the last column is ISO 13855's K T (1.6 m/s),\n  \
             without its C. Remotely driven bases are outside the scope of the standards for driverless trucks.\n";
    for warning in &it.warnings {
        text += &format!("note: {warning}\n");
    }
    text
}
