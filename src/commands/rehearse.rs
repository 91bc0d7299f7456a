//! `gripline rehearse`
use super::Exit;
/// Rehearse.
#[derive(clap::Args)]
pub(crate) struct Args {}
pub(crate) fn run(_args: Args) -> Exit {
    Exit::Done
}
