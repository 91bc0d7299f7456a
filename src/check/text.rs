//! The findings as tables for people.

use super::Findings;
use crate::base::analysis::Analysis;
use crate::core::budget::{WALKING_M_S, farthest};
use crate::units::{deg, rad};

/// All tables.
#[must_use]
pub fn tables(it: &Findings<'_>) -> String {
    let plan = it.plan;
    let count = |n: usize, what: &str| format!("{n} {what}{}", if n == 1 { "" } else { "s" });
    let names: Vec<&str> = plan.wheels.iter().map(|it| it.name.as_str()).collect();
    let mut text = format!(
        "{}: {}, {}, {}\n",
        plan.name,
        count(plan.wheels.len(), "wheel"),
        count(plan.links.len(), "link"),
        count(plan.paces.len(), "pace")
    );
    text += &wheels(&names, &it.analysis);
    text += &reach(it);
    text += &lines(it);
    text += &stops(it);
    text += "\nNotes\n";
    for note in &it.warnings {
        text += &format!("  {note}\n");
    }
    if it.warnings.is_empty() {
        text += "  nothing is odd\n";
    }
    text
}

/// Layout, rank, forward map and skid of any set of wheels.
#[must_use]
pub fn wheels(names: &[&str], it: &Analysis) -> String {
    let mut text = String::from("\nLayout matrix: what a motion of the base asks of each wheel, in rad/s\n");
    let mut rows = vec![row(["wheel", "1 rad/s turn", "1 m/s forward", "1 m/s left"])];
    for (name, h) in names.iter().zip(&it.h) {
        rows.push(named(name, h.iter().map(|it| fixed(*it, 4))));
    }
    text += &table(&rows);
    let values: Vec<String> = it.singular_values.iter().map(|it| fixed(*it, 4)).collect();
    text += &format!(
        "  rank {} of 3, condition {} (singular values {}; turn scaled by {} m)\n",
        it.rank,
        if it.condition.is_finite() { fixed(it.condition, 3) } else { "infinite".into() },
        values.join(", "),
        fixed(it.characteristic_m, 4)
    );
    for impossible in &it.impossible {
        text += &format!("  impossible: {impossible}\n");
    }
    if it.rank < 3 {
        return text;
    }
    text += "\nForward map: what 1 rad/s of each wheel adds to the motion of the base\n";
    rows = vec![row(["wheel", "turn rad/s", "forward m/s", "left m/s"])];
    for (index, name) in names.iter().enumerate() {
        let parts =
            it.forward.iter().map(|part| part.get(index).map_or_else(String::new, |it| fixed(*it, 6)));
        rows.push(named(name, parts));
    }
    text += &table(&rows);
    let over = names.len().saturating_sub(3);
    if over == 0 {
        return text + "\nSkid: three wheels cannot contradict each other, so nothing tells when one skids\n";
    }
    text += &format!(
        "\nSkid: {over} of {} ways in which the wheels can turn make no motion of the base, they only skid; each column is one\n",
        names.len()
    );
    let mut rows = vec![named("wheel", (1..=over).map(|it| it.to_string()))];
    for (name, part) in names.iter().zip(&it.skid_basis) {
        rows.push(named(name, part.iter().map(|it| fixed(*it, 4))));
    }
    text += &table(&rows);
    text += if over == 1 {
        "  one way only: it tells that a wheel skids, but not which\n"
    } else {
        "  enough to tell which wheel skids\n"
    };
    text
}

fn reach(it: &Findings<'_>) -> String {
    let corners = it.corners();
    let (room, turn) = (it.reach.room_travel_m_s(), it.reach.turn_rad_s());
    let along = |direction_deg: f64| fixed(it.reach.travel_m_s(rad(direction_deg)), 3);
    let mut text = String::from("\nReach: the greatest speeds that the wheels can make\n");
    text += &format!("  turn without travel, both frames      {} rad/s\n", fixed(turn, 3));
    text += &format!(
        "  travel without turning, base frame    {} m/s forward, {} m/s left, {} m/s at least, {} m/s at most\n",
        along(0.0),
        along(90.0),
        fixed(room, 3),
        fixed(corners.iter().map(|it| it.1).fold(0.0, f64::max), 3)
    );
    text += &format!("  travel without turning, room frame    {} m/s in every direction\n", fixed(room, 3));
    let corners: Vec<String> = corners
        .iter()
        .map(|(direction, speed)| format!("{}° {}", fixed(*direction, 1), fixed(*speed, 3)))
        .collect();
    text += "  corners of the polygon, direction from forward and m/s:\n";
    for line in corners.chunks(6) {
        text += &format!("    {}\n", line.join(", "));
    }
    let mut rows = vec![row(["pace", "travel m/s", "of reach", "turn rad/s", "of reach", "outermost m/s"])];
    for (pace, motion) in it.plan.paces.iter().zip(&it.motions) {
        let (travel, turns) = (pace.pace.travel_m_s, pace.pace.turn_rad_s);
        rows.push(named(
            &pace.name,
            [
                travel.to_string(),
                percent(travel / room),
                turns.to_string(),
                percent(turns / turn),
                fixed(motion.outermost_m_s, 3),
            ]
            .into_iter(),
        ));
    }
    text + &table(&rows)
}

fn lines(it: &Findings<'_>) -> String {
    let mut rows = vec![row(["link", "bit/s", "to drivers", "from drivers"])];
    for link in &it.plan.links {
        let [to, from] = link.load(&it.plan.tick);
        rows.push(named(&link.name, [link.baud.to_string(), percent(to), percent(from)].into_iter()));
    }
    format!(
        "\nLoad of the lines at {} ticks a second, a frame each way in each\n{}",
        it.plan.tick.rate_hz,
        table(&rows)
    )
}

fn stops(it: &Findings<'_>) -> String {
    let plan = it.plan;
    let clear = plan.bay.clear_m;
    let mut text = String::from(
        "\nStop budget: time and way of the outermost point, from full travel and turn together, in s and m\n",
    );
    for (at, (pace, motion)) in plan.paces.iter().zip(&it.motions).enumerate() {
        let worst = farthest(&it.budget, at);
        let fits = match (clear, worst) {
            (None, _) => "no `clear_m` to compare with".to_owned(),
            (Some(clear), Some((_, distance_m))) if distance_m > clear => {
                format!("the {clear} m of the bay are NOT enough: drive does not offer this pace")
            }
            (Some(clear), _) => format!("the {clear} m of the bay are enough"),
        };
        text += &format!(
            "\n  pace {}: {} m/s and {} rad/s, outermost {} m/s; {fits}\n",
            pace.name,
            pace.pace.travel_m_s,
            pace.pace.turn_rad_s,
            fixed(motion.outermost_m_s, 3)
        );
        let mut rows = vec![row([
            "guard",
            "category",
            "detect",
            "tick",
            "smoothing",
            "wire",
            "driver",
            "ramp",
            "total",
            "way",
            "person",
        ])];
        for row in it.budget.iter().filter(|it| it.pace == at) {
            let known = |it: Option<f64>| it.map_or_else(|| "unknown".to_owned(), |it| fixed(it, 3));
            let over = row.distance_m.zip(clear).is_some_and(|(distance_m, clear)| distance_m > clear);
            let [detect, tick, smoothing, wire, driver] =
                [row.detect_s, row.tick_s, row.smoothing_s, row.wire_s, row.driver_s].map(|it| fixed(it, 3));
            let way = known(row.distance_m) + if over { " !" } else { "" };
            rows.push(named(
                row.guard.name(),
                [
                    row.category.to_string(),
                    detect,
                    tick,
                    smoothing,
                    wire,
                    driver,
                    known(row.ramp_s),
                    known(row.total_s),
                    way,
                    known(row.person_m),
                ]
                .into_iter(),
            ));
        }
        text += &table(&rows);
        text += &format!(
            "  stopped by the drivers while turning in the room's frame, the path bends by up to {}° and ends {} m aside\n",
            fixed(deg(motion.bend_rad), 1),
            fixed(motion.bend_m, 3)
        );
        if motion.apart_s > 0.0 {
            text += &format!(
                "  the ramps of the links may start {} ms apart, which turns the base by up to {}°\n",
                fixed(motion.apart_s * 1e3, 1),
                fixed(deg(motion.apart_yaw_rad), 1)
            );
        }
    }
    let driver = match plan.guard.driver_ms {
        Some(_) => String::new(),
        None => "  The drivers' delay is assumed; measure it and set `driver_ms` in [guard].\n".to_owned(),
    };
    text + &driver
        + &format!(
            "  Category (IEC 60204-1): 0 torque off at once, 1 ramp and torque off, 2 ramp and hold. \"!\": more than `clear_m`.\n  \
             \"person\" is how far a person walks meanwhile (ISO 13855, K T with {WALKING_M_S} m/s; the standard's additions come on \
             top).\n  \"host silent\" counts from the last frame that the drivers took, \"not slowing\" from the start of a ramp. The \
             pad's own delay is not in it.\n  These are planning figures, not proof: remotely driven bases are outside the scope of \
             the standards for driverless trucks.\n"
        )
}

fn row<const N: usize>(cells: [&str; N]) -> Vec<String> {
    cells.map(str::to_owned).to_vec()
}

fn named(name: &str, cells: impl Iterator<Item = String>) -> Vec<String> {
    std::iter::once(name.to_owned()).chain(cells).collect()
}

/// With so many decimals, and never as minus zero.
fn fixed(value: f64, decimals: usize) -> String {
    let text = format!("{value:.decimals$}");
    match text.strip_prefix('-') {
        Some(digits) if digits.chars().all(|it| it == '0' || it == '.') => digits.to_owned(),
        Some(_) | None => text,
    }
}

fn percent(share: f64) -> String {
    format!("{:.1} %", share * 100.0)
}

/// Columns as wide as they must be: the first to the left, the others to the right.
fn table(rows: &[Vec<String>]) -> String {
    let columns = rows.iter().map(Vec::len).max().unwrap_or(0);
    let widths: Vec<usize> = (0..columns)
        .map(|column| {
            rows.iter().filter_map(|row| row.get(column)).map(|it| it.chars().count()).max().unwrap_or(0)
        })
        .collect();
    let mut text = String::new();
    for row in rows {
        let mut line = String::from(" ");
        for (column, (cell, width)) in row.iter().zip(&widths).enumerate() {
            line += &if column == 0 { format!(" {cell:<width$}") } else { format!("  {cell:>width$}") };
        }
        text += line.trim_end();
        text += "\n";
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn columns_line_up_and_zero_has_no_sign() {
        let rows = [row(["wheel", "turn"]), named("front", [fixed(-0.00001, 3)].into_iter())];
        assert_eq!(table(&rows), "  wheel   turn\n  front  0.000\n");
        assert_eq!(fixed(-1.5, 1), "-1.5");
    }
}
