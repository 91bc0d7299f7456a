//! The drill as a page.

use super::report::{Report, Row};
use super::seen::Moment;
use crate::page::{Page, Plot, PlotLine};

const BLUE: (u8, u8, u8) = (9, 105, 218);
const ORANGE: (u8, u8, u8) = (191, 95, 0);
const RED: (u8, u8, u8) = (207, 34, 46);
const GREEN: (u8, u8, u8) = (26, 127, 55);
const GREY: (u8, u8, u8) = (110, 110, 110);
/// What comes long after is of no interest in the plot.
const AFTER_S: f64 = 2.5;

/// One file, readable offline.
#[must_use]
pub fn page(report: &Report) -> String {
    let place = if report.standin { "on the stand-in" } else { "on the base" };
    let mut page = Page::new(&format!("{}: drilled {place}", report.base));
    let count = |ok| report.drills.iter().filter(|it| it.ok == ok).count();
    page.paragraph(&format!(
        "{} faults did what they must, {} missed, {} were not tried or could not be judged.",
        count(Some(true)),
        count(Some(false)),
        count(None)
    ));
    if let Some(why) = &report.too_late {
        page.paragraph(&format!("This machine was too late to judge by: {why}."));
    }
    if let Some(coast) = report.coast_m_s2 {
        page.paragraph(&format!(
            "Without torque the base rolls out at {coast:.2} m/s²: write coast_m_s2 = {coast:.2} under [bay]."
        ));
    }
    let rows: Vec<_> = report.drills.iter().map(cells).collect();
    page.table(
        &[
            "fault",
            "pace",
            "first stop, ms",
            "standstill, s",
            "budget, s",
            "way, mm",
            "budget, mm",
            "cause",
            "verdict",
        ],
        &rows,
    );
    page.small(
        "Times count from the fault. Measured from recorded frames and wheel feedback; the way is that of the outermost \
         point. A planning figure, not a safety function: a hard-wired emergency stop, local rules and a competent person \
         decide.",
    );
    for row in report.drills.iter().filter(|it| it.measured.len() > 1) {
        page.heading(&format!("{}: {}", row.fault, row.what));
        page.plot(&plot(row));
    }
    page.finish()
}

fn cells(row: &Row) -> Vec<(String, &'static str)> {
    let number = |it: Option<f64>, scale: f64, digits: usize| {
        (it.map_or_else(|| "–".to_owned(), |it| format!("{:.digits$}", it * scale)), "n")
    };
    let (verdict, class) = match row.ok {
        Some(true) => ("ok", "ok"),
        Some(false) => ("missed", "miss"),
        None => ("not judged", "none"),
    };
    let verdict = if row.note.is_empty() { verdict.into() } else { format!("{verdict}: {}", row.note) };
    vec![
        (format!("{}: {}", row.fault, row.what), ""),
        (row.pace.clone(), ""),
        number(row.first_stop_s, 1e3, 1),
        number(row.standstill_s, 1.0, 3),
        number(row.budget_s, 1.0, 3),
        number(row.distance_m, 1e3, 0),
        number(row.budget_m, 1e3, 0),
        (row.cause.clone().unwrap_or_else(|| "–".into()), ""),
        (verdict, class),
    ]
}

fn plot(row: &Row) -> Plot<'static> {
    let shown =
        |all: &[Moment]| all.iter().filter(|it| it.t_s <= AFTER_S).map(|it| (it.t_s, it.m_s)).collect();
    let mut marks = vec![(0.0, "fault", RED)];
    marks.extend(row.first_stop_s.map(|at| (at, "first stop frame", BLUE)));
    marks.extend(row.standstill_s.map(|at| (at, "standstill", GREEN)));
    marks.extend(row.budget_s.filter(|it| *it <= AFTER_S).map(|at| (at, "budget", GREY)));
    Plot {
        x: "seconds since the fault",
        y: "m/s",
        lines: vec![
            PlotLine { name: "sent", colour: BLUE, points: shown(&row.sent) },
            PlotLine { name: "measured", colour: ORANGE, points: shown(&row.measured) },
        ],
        marks,
    }
}
