//! What is drilled: the base, its pace, and the budget that everything is held against.

use std::path::PathBuf;

use crate::config::{Plan, StopCategory, parse};
use crate::core::budget::{BudgetRow, budget, paces_that_fit};
use crate::measure::child::ChildError;
use crate::record::reader::RunError;

use super::fault::{Act, Fault, How};
use super::report::{Report, Row};

/// Why nothing could be drilled.
#[derive(Debug, thiserror::Error)]
pub enum DrillError {
    /// The configuration is wrong, or does not go with what was asked.
    #[error("{0}")]
    Config(String),
    /// A part of it could not be run.
    #[error(transparent)]
    Child(#[from] ChildError),
    /// A run file cannot be read back.
    #[error(transparent)]
    Run(#[from] RunError),
}

/// A drill that can be begun.
#[derive(Debug)]
pub struct Setup {
    /// This program, to be started again.
    pub(super) program: PathBuf,
    /// The configuration, as text and checked.
    pub(super) text: String,
    pub(super) plan: Plan,
    /// Index of the pace.
    pub(super) pace: usize,
    /// Where run files go.
    pub(super) record_dir: PathBuf,
    /// What is measured is held against this.
    budget: Vec<BudgetRow>,
    /// The same for stops of category 0.
    budget_of_category_0: Vec<BudgetRow>,
    /// Measured deceleration without torque.
    pub(super) coast_m_s2: Option<f64>,
}

impl Setup {
    /// Checks that this can be drilled. `pace` is a name; the slowest where none is given.
    ///
    /// # Errors
    /// When the configuration is refused, or has no such pace, or its bay does not bear it.
    pub fn new(
        program: PathBuf,
        (text, name): (&str, &str),
        pace: Option<&str>,
        record_dir: PathBuf,
    ) -> Result<Self, DrillError> {
        let (plan, _) = parse(text, name).map_err(|all| {
            DrillError::Config(all.iter().map(ToString::to_string).collect::<Vec<_>>().join("\n"))
        })?;
        let pace = match pace {
            None => 0,
            Some(name) => plan.paces.iter().position(|it| it.name == name).ok_or_else(|| {
                let names: Vec<&str> = plan.paces.iter().map(|it| it.name.as_str()).collect();
                DrillError::Config(format!("--pace {name}: no such pace; there are {}", names.join(", ")))
            })?,
        };
        if !paces_that_fit(&plan).get(..=pace).is_some_and(|it| it.iter().all(|fits| *fits)) {
            return Err(DrillError::Config(
                "the bay does not bear that pace; see `gripline check`, and take a slower one".into(),
            ));
        }
        let mut setup = Self {
            program,
            text: text.into(),
            plan,
            pace,
            record_dir,
            budget: Vec::new(),
            budget_of_category_0: Vec::new(),
            coast_m_s2: None,
        };
        setup.count(setup.plan.bay.coast_m_s2);
        Ok(setup)
    }

    /// The base.
    #[must_use]
    pub fn plan(&self) -> &Plan {
        &self.plan
    }

    /// Uses another device for a link.
    pub fn use_ports(&mut self, of: &Plan) {
        for (link, other) in self.plan.links.iter_mut().zip(&of.links) {
            link.port.clone_from(&other.port);
        }
    }

    /// Name of the pace.
    #[must_use]
    pub fn pace_name(&self) -> &str {
        self.plan.paces.get(self.pace).map_or("", |it| it.name.as_str())
    }

    /// Whether the pace is another than the first.
    #[must_use]
    pub fn is_faster_than_slowest(&self) -> bool {
        self.pace > 0
    }

    /// Everything that came of it.
    #[must_use]
    pub fn report(&self, standin: bool, drills: Vec<Row>) -> Report {
        let late = drills.iter().find(|it| it.too_late);
        let too_late = late.map(|it| format!("{}: {}", it.fault, it.note));
        Report { base: self.plan.name.clone(), standin, drills, coast_m_s2: self.coast_m_s2, too_late }
    }

    /// Full travel of the pace.
    pub(super) fn pace_m_s(&self) -> f64 {
        self.plan.paces.get(self.pace).map_or(0.0, |it| it.pace.travel_m_s)
    }

    /// Takes a measured deceleration without torque; where the configuration has none, the budget now counts with it.
    pub(super) fn rolls_out_at(&mut self, coast_m_s2: f64) {
        self.coast_m_s2 = Some(coast_m_s2);
        self.count(self.plan.bay.coast_m_s2.or(Some(coast_m_s2)));
    }

    fn count(&mut self, coast_m_s2: Option<f64>) {
        let mut plan = self.plan.clone();
        plan.bay.coast_m_s2 = coast_m_s2;
        self.budget = budget(&plan);
        plan.guard.stop_category = StopCategory::Zero;
        self.budget_of_category_0 = budget(&plan);
    }

    /// The slowest of the guards that may see the fault: seconds and metres; `None` where one is not known.
    pub(super) fn bound(&self, fault: &Fault) -> Option<(f64, f64)> {
        let torque_off = fault.how == How::Act(Act::TakeTorqueOff);
        let budget = if torque_off { &self.budget_of_category_0 } else { &self.budget };
        let rows = || budget.iter().filter(|it| it.pace == self.pace && fault.guards.contains(&it.guard));
        let slowest = |of: fn(&BudgetRow) -> Option<f64>| {
            rows().map(of).try_fold(0.0, |most: f64, it| it.map(|it| most.max(it)))
        };
        slowest(|it| it.total_s).zip(slowest(|it| it.distance_m)).filter(|it| it.0 > 0.0)
    }

    /// The configuration with stops of category 0, for the measurement of how the base rolls out.
    pub(super) fn text_of_category_0(&self) -> Result<String, DrillError> {
        let refused = |why: String| DrillError::Config(format!("the configuration cannot be changed: {why}"));
        let mut table: toml::Table =
            self.text.parse().map_err(|it: toml::de::Error| refused(it.to_string()))?;
        let guard = table.entry("guard").or_insert_with(|| toml::Value::Table(toml::Table::new()));
        if let Some(guard) = guard.as_table_mut() {
            guard.insert("stop_category".into(), toml::Value::Integer(0));
        }
        toml::to_string(&table).map_err(|it| refused(it.to_string()))
    }
}
