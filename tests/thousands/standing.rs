//! After a stop the base stands: within its time and distance, and until it is allowed to move again.

use gripline::units::{Mono, s_to_ns};

use crate::faults::Allowed;
use crate::law;
use crate::permission::Permission;

/// A stop and what it is held against.
#[derive(Clone, Debug)]
struct Stop {
    why: &'static str,
    /// Index of the fault behind it; `None` for what the core or the drivers began.
    fault: Option<usize>,
    since: Mono,
    command_by: Mono,
    rest_by: Mono,
    /// Path of the outermost point at its beginning, and how far it may go.
    path_m: f64,
    distance_m: f64,
    /// How often the base had been allowed to move by then.
    grants: u32,
    needs_reset: bool,
}

/// What the base does at a moment.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Motion {
    /// The drivers make some wheel turn.
    pub(crate) commanded: bool,
    /// Some wheel turns.
    pub(crate) turns: bool,
    /// All wheels and encoders are sound, so that what is commanded is what happens.
    pub(crate) sound: bool,
    /// Nothing but one fault has happened: the distance is its own.
    pub(crate) alone: bool,
    /// Path of the outermost point so far.
    pub(crate) path_m: f64,
}

#[derive(Debug, Default)]
pub(crate) struct Standing {
    stops: Vec<Stop>,
}

impl Standing {
    /// From now on the base must come to stand.
    pub(crate) fn begin(
        &mut self,
        (why, fault): (&'static str, Option<usize>),
        now: Mono,
        allowed: Allowed,
        (path_m, grants, needs_reset): (f64, u32, bool),
    ) {
        // One that must stand already, and has had its time, need not be told again.
        if self.stops.iter().any(|it| it.grants == grants && it.rest_by <= now) {
            return;
        }
        self.stops.push(Stop {
            why,
            fault,
            since: now,
            command_by: now.plus_ns(s_to_ns(allowed.command_s)),
            rest_by: now.plus_ns(s_to_ns(allowed.rest_s)),
            path_m,
            distance_m: allowed.distance_m,
            grants,
            needs_reset,
        });
    }

    /// A faster pace was taken after a fault and before it was seen: the row of that pace holds.
    pub(crate) fn faster(&mut self, now: Mono, fault: usize, allowed: Allowed) {
        for stop in self.stops.iter_mut().filter(|it| it.fault == Some(fault) && it.command_by > now) {
            stop.command_by = stop.command_by.max(stop.since.plus_ns(s_to_ns(allowed.command_s)));
            stop.rest_by = stop.rest_by.max(stop.since.plus_ns(s_to_ns(allowed.rest_s)));
            stop.distance_m = stop.distance_m.max(allowed.distance_m);
        }
    }

    /// Another fault: what has still to come to stand may take as long as the slowest of them, counted from now.
    pub(crate) fn put_off(&mut self, now: Mono, allowed: Allowed) {
        let (command_by, rest_by) =
            (now.plus_ns(s_to_ns(allowed.command_s)), now.plus_ns(s_to_ns(allowed.rest_s)));
        for stop in self.stops.iter_mut().filter(|it| it.rest_by > now) {
            stop.command_by = stop.command_by.max(command_by);
            stop.rest_by = stop.rest_by.max(rest_by);
            stop.distance_m = f64::INFINITY;
        }
    }

    /// Some stop is under way, or over and not yet followed by a permission to move.
    pub(crate) fn expects(&self) -> bool {
        !self.stops.is_empty()
    }

    /// Looks at a moment.
    pub(crate) fn look(
        &mut self,
        now: Mono,
        motion: Motion,
        permission: &mut Permission,
    ) -> Result<(), String> {
        self.stops.retain(|it| it.grants == permission.grants);
        for stop in &mut self.stops {
            let after_s = now.since_s(stop.since);
            if now > stop.command_by {
                law!(!motion.commanded, "{}: {after_s:.3} s after it wheels are told to turn", stop.why);
                permission.revoke(stop.needs_reset);
            }
            if now > stop.rest_by && motion.sound {
                law!(!motion.turns, "{}: {after_s:.3} s after it a wheel turns", stop.why);
                if motion.alone {
                    let went_m = motion.path_m - stop.path_m;
                    law!(
                        went_m <= stop.distance_m,
                        "{}: the base went {went_m:.3} m, {:.3} allowed",
                        stop.why,
                        stop.distance_m
                    );
                }
            }
        }
        Ok(())
    }
}
