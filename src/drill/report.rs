//! What a drill shows: one row a fault, as a table and for JSON.

use std::path::PathBuf;

use serde::Serialize;

use super::seen::Moment;

/// One fault, provoked and measured.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Row {
    /// Its name.
    pub fault: &'static str,
    /// What was done, in words.
    pub what: &'static str,
    /// Name of the pace.
    pub pace: String,
    /// From the fault to the first stop frame; none where the host made the stop, or nobody could.
    pub first_stop_s: Option<f64>,
    /// From the fault to every wheel's standing; none where it was not seen.
    pub standstill_s: Option<f64>,
    /// Way of the outermost point meanwhile.
    pub distance_m: Option<f64>,
    /// What the stop budget allows.
    pub budget_s: Option<f64>,
    /// See `budget_s`.
    pub budget_m: Option<f64>,
    /// Why the drive stopped, by the code of its cause.
    pub cause: Option<String>,
    /// Whether all was as it must be; none where it was not tried or could not be judged.
    pub ok: Option<bool>,
    /// What else there is to say, in words.
    pub note: String,
    /// Where the run file lies.
    pub run: Option<PathBuf>,
    /// It could not be judged since this machine was too late.
    #[serde(skip)]
    pub too_late: bool,
    /// Speed of travel that was sent, over time.
    #[serde(skip)]
    pub sent: Vec<Moment>,
    /// Speed of travel as the wheels tell it.
    #[serde(skip)]
    pub measured: Vec<Moment>,
}

/// The whole drill.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Report {
    /// The base.
    pub base: String,
    /// On the stand-in, or on the base itself.
    pub standin: bool,
    /// In order.
    pub drills: Vec<Row>,
    /// Measured deceleration without torque: worth writing under `[bay]`.
    pub coast_m_s2: Option<f64>,
    /// This machine was too late to judge by.
    pub too_late: Option<String>,
}

impl Report {
    /// Nothing missed what it must do.
    #[must_use]
    pub fn ok(&self) -> bool {
        self.drills.iter().all(|it| it.ok != Some(false))
    }

    /// The table.
    #[must_use]
    pub fn table(&self) -> String {
        let place = if self.standin { "on the stand-in" } else { "on the base" };
        let mut text = format!("{}, drilled {place}\n", self.base);
        text += &format!(
            "  {:<22} {:<8} {:>10} {:>20} {:>20}  {:<15} {}\n",
            "fault", "pace", "first stop", "standstill", "way", "cause", ""
        );
        for row in &self.drills {
            text += row.line().trim_end();
            text.push('\n');
        }
        if let Some(coast) = self.coast_m_s2 {
            text += &format!(
                "rolls out at {coast:.2} m/s2 without torque: write coast_m_s2 = {coast:.2} under [bay]\n"
            );
        }
        text += match (&self.too_late, self.ok()) {
            (Some(why), _) => return text + &format!("this machine was too late to judge by: {why}\n"),
            (None, true) if self.drills.iter().all(|it| it.ok.is_none()) => "nothing was judged\n",
            (None, true) => "every fault that was tried did what it must\n",
            (None, false) => "something MISSED what it must do\n",
        };
        text
    }
}

impl Row {
    /// Its line in the table.
    #[must_use]
    pub fn line(&self) -> String {
        let of = |measured: Option<f64>, most: Option<f64>, unit: &str, scale: f64, digits: usize| {
            let say = |it: f64| format!("{:.digits$}", it * scale);
            match (measured, most) {
                (Some(measured), Some(most)) => format!("{} of {} {unit}", say(measured), say(most)),
                (Some(measured), None) => format!("{} {unit}", say(measured)),
                (None, Some(most)) => format!("- of {} {unit}", say(most)),
                (None, None) => "-".into(),
            }
        };
        let verdict = match self.ok {
            Some(true) => "ok",
            Some(false) => "MISSED",
            None => "not judged",
        };
        let note = if self.note.is_empty() { String::new() } else { format!(": {}", self.note) };
        format!(
            "  {:<22} {:<8} {:>10} {:>20} {:>20}  {:<15} {verdict}{note}",
            self.fault,
            self.pace,
            of(self.first_stop_s, None, "ms", 1e3, 1),
            of(self.standstill_s, self.budget_s, "s", 1.0, 3),
            of(self.distance_m, self.budget_m, "mm", 1e3, 0),
            self.cause.as_deref().unwrap_or("-"),
        )
    }
}
