//! What no single key can tell: contradictions between keys, and what the base, the wheels or the line cannot do.
//!
//! Each check passes over what could not be read: that is a mistake already, and what follows from it would mislead.

mod lines;
mod motion;

pub(super) use lines::{channels, counts, links, load, times};
pub(super) use motion::{layout, motion, smoothing};

use super::reader::{Notes, Section};
use super::{LinkPlan, PacePlan, WheelPlan};

/// A table of several as far as it could be read, and where it stands.
pub(super) struct Entry<'a, T> {
    pub(super) plan: Option<T>,
    pub(super) section: Section<'a>,
}

pub(super) type Links<'a> = [Entry<'a, LinkPlan>];
pub(super) type Wheels<'a> = [Entry<'a, WheelPlan>];
pub(super) type Paces<'a> = [Entry<'a, PacePlan>];

/// Those that could be read.
fn read<'b, 'a, T>(entries: &'b [Entry<'a, T>]) -> impl Iterator<Item = (&'b T, &'b Section<'a>)> {
    entries.iter().filter_map(|it| it.plan.as_ref().map(|plan| (plan, &it.section)))
}

/// All of them, or none where one could not be read.
fn all<'b, T>(entries: &'b [Entry<'_, T>]) -> Option<Vec<&'b T>> {
    entries.iter().map(|it| it.plan.as_ref()).collect()
}

/// Every name once, and no more entries than may be.
fn names<T>(notes: &Notes<'_>, what: &str, most: usize, entries: &[Entry<'_, T>], name: impl Fn(&T) -> &str) {
    if let Some(entry) = entries.get(most) {
        notes.wrong(
            &entry.section.span,
            format!(
                "{} {what}s are more than the {most} that one base may have; take some out",
                entries.len()
            ),
        );
    }
    for (i, (plan, section)) in read(entries).enumerate() {
        if read(entries).take(i).any(|(before, _)| name(before) == name(plan)) {
            notes.wrong(
                &section.at("name"),
                format!("there are two {what}s \"{}\"; give each a name of its own", name(plan)),
            );
        }
    }
}
