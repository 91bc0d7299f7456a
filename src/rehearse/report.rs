//! What the rehearsal shows, as a table.

use std::path::PathBuf;

use serde::Serialize;

/// One figure against its bound.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Row {
    /// What.
    pub what: String,
    /// Measured, in words with its unit.
    pub measured: String,
    /// The bound, in words with its unit; empty where there is none.
    pub bound: String,
    /// Whether it is met.
    pub ok: bool,
}

/// The whole.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Report {
    /// The base.
    pub base: String,
    /// In order.
    pub rows: Vec<Row>,
    /// Where the run file lies.
    pub run: PathBuf,
    /// This machine was too late to judge by.
    pub too_late: Option<String>,
}

impl Report {
    /// Every bound is met.
    #[must_use]
    pub fn ok(&self) -> bool {
        self.rows.iter().all(|it| it.ok)
    }

    pub(super) fn row(&mut self, what: impl Into<String>, measured: String, bound: String, ok: bool) {
        self.rows.push(Row { what: what.into(), measured, bound, ok });
    }

    pub(super) fn figure(&mut self, what: impl Into<String>, measured: String) {
        self.row(what, measured, String::new(), true);
    }

    /// The table.
    #[must_use]
    pub fn table(&self) -> String {
        let widest =
            |of: fn(&Row) -> &str| self.rows.iter().map(|it| of(it).chars().count()).max().unwrap_or(0);
        let (what, measured) = (widest(|it| &it.what), widest(|it| &it.measured));
        let mut text = format!("{}, rehearsed on a simulated base\n", self.base);
        for row in &self.rows {
            let verdict = if row.ok { "" } else { "  MISSED" };
            let line = format!("  {:<what$}  {:<measured$}  {}{verdict}", row.what, row.measured, row.bound);
            text += line.trim_end();
            text.push('\n');
        }
        text += &format!("run file: {}\n", self.run.display());
        match (&self.too_late, self.ok()) {
            (Some(why), _) => text += &format!("this machine was too late to judge by: {why}\n"),
            (None, true) => text += "everything within its bounds\n",
            (None, false) => text += "something missed its bound\n",
        }
        text
    }
}
