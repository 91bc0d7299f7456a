//! Which drive a console command is for.

use std::os::unix::net::UnixStream;
use std::path::PathBuf;
use std::time::Duration;

use gripline::config::Plan;
use gripline::daemon;
use serde_json::Value;

use super::{Exit, fail};

/// A drive, by its configuration, its socket, or as the only one there is.
#[derive(clap::Args)]
pub(crate) struct Target {
    /// The base's configuration; may be left out where one drive is running
    pub(crate) config: Option<PathBuf>,
    /// The drive's console socket, where it is not the configuration's
    #[arg(long, value_name = "PATH")]
    pub(crate) socket: Option<PathBuf>,
}

impl Target {
    /// The configuration, if one is given, with the socket that is meant.
    pub(crate) fn plan(&self) -> Result<Option<Plan>, Exit> {
        let Some(path) = &self.config else { return Ok(None) };
        let mut plan = super::read_plan(path)?;
        if self.socket.is_some() {
            plan.console.socket.clone_from(&self.socket);
        }
        Ok(Some(plan))
    }

    /// Every drive that can be meant and listens: one with a configuration or a socket, all without.
    pub(crate) fn listening(&self, plan: Option<&Plan>) -> std::io::Result<Vec<UnixStream>> {
        match (plan, &self.socket) {
            (Some(plan), _) => daemon::connect(plan).map(|it| vec![it]),
            (None, Some(path)) => UnixStream::connect(path).map(|it| vec![it]),
            (None, None) => Ok(daemon::connect_any()),
        }
    }

    /// Asks the one drive that is meant.
    pub(crate) fn ask(&self, request: &Value, within: Duration) -> Result<Value, Exit> {
        let plan = self.plan()?;
        let mut found = match self.listening(plan.as_ref()) {
            Ok(found) => found,
            Err(error) if error.kind() == std::io::ErrorKind::PermissionDenied => {
                return Err(fail(
                    Exit::Hardware,
                    "no permission for the console of this drive; join the group `gripline`, or be the user that started it",
                ));
            }
            Err(_) => Vec::new(),
        };
        match found.as_mut_slice() {
            [one] => daemon::ask(one, request, within).map_err(|error| {
                fail(
                    Exit::Failed,
                    format_args!(
                        "the drive does not answer: {error}; `gripline stop CONFIG` reaches the drivers all the same"
                    ),
                )
            }),
            [] => Err(fail(
                Exit::Failed,
                "no such drive is running here; start it by `gripline drive CONFIG`, or give the CONFIG that it runs",
            )),
            _ => Err(fail(
                Exit::CouldNotRun,
                "several drives are running here; give the CONFIG of the one that is meant",
            )),
        }
    }
}
