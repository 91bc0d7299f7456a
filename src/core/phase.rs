//! The phases and what leads from one to another. This function is the only place that says so.
//!
//! ```text
//!            ready            press
//!  Parked ─────────> Ready ─────────> Driving
//!    ^ ^   idle, quit  │ ^                │ release, pad quiet, quit
//!    │ └───────────────┘ │ stood          v
//!    │                   └──────────── Stopping ──(quit, stood)──> Parked
//!    │ cleared                            │
//!    └───────── Tripped <─────────────────┴── any fault or stop, from every phase
//! ```

use super::io::Phase;

/// What can lead to another phase, after all checks have been made.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Happening {
    /// A guard tripped, or a stop was asked.
    Fault,
    /// The hold control was released, the pad went quiet, or the orderly end was asked while driving.
    Release,
    /// Standstill was reached, with the hold control's stop behind it.
    Stood,
    /// Standstill was reached, with the orderly end behind it.
    StoodToQuit,
    /// The orderly end was asked, or Ready was left alone too long.
    Park,
    /// Every link has unlatched after a reset.
    Cleared,
    /// Ready was asked and nothing stands against it.
    Ready,
    /// A fresh press of the hold control with centred sticks.
    Press,
}

impl Phase {
    /// The phase after something happened.
    #[must_use]
    pub const fn after(self, happening: Happening) -> Self {
        match self {
            Self::Parked => match happening {
                Happening::Fault => Self::Tripped,
                Happening::Ready => Self::Ready,
                Happening::Release
                | Happening::Stood
                | Happening::StoodToQuit
                | Happening::Park
                | Happening::Cleared
                | Happening::Press => Self::Parked,
            },
            Self::Ready => match happening {
                Happening::Fault => Self::Tripped,
                Happening::Park => Self::Parked,
                Happening::Press => Self::Driving,
                Happening::Release
                | Happening::Stood
                | Happening::StoodToQuit
                | Happening::Cleared
                | Happening::Ready => Self::Ready,
            },
            Self::Driving => match happening {
                Happening::Fault => Self::Tripped,
                Happening::Release | Happening::Park => Self::Stopping,
                Happening::Stood
                | Happening::StoodToQuit
                | Happening::Cleared
                | Happening::Ready
                | Happening::Press => Self::Driving,
            },
            Self::Stopping => match happening {
                Happening::Fault => Self::Tripped,
                Happening::Stood => Self::Ready,
                Happening::StoodToQuit => Self::Parked,
                Happening::Release
                | Happening::Park
                | Happening::Cleared
                | Happening::Ready
                | Happening::Press => Self::Stopping,
            },
            Self::Tripped => match happening {
                Happening::Cleared => Self::Parked,
                Happening::Fault
                | Happening::Release
                | Happening::Stood
                | Happening::StoodToQuit
                | Happening::Park
                | Happening::Ready
                | Happening::Press => Self::Tripped,
            },
        }
    }

    /// Whether the wheels may be told to turn.
    #[must_use]
    pub const fn may_turn(self) -> bool {
        match self {
            Self::Driving | Self::Stopping => true,
            Self::Parked | Self::Ready | Self::Tripped => false,
        }
    }

    /// Whether the drivers are told to give torque.
    #[must_use]
    pub const fn has_torque(self) -> bool {
        match self {
            Self::Ready | Self::Driving | Self::Stopping => true,
            Self::Parked | Self::Tripped => false,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const PHASES: [Phase; 5] = [Phase::Parked, Phase::Ready, Phase::Driving, Phase::Stopping, Phase::Tripped];
    const HAPPENINGS: [Happening; 8] = [
        Happening::Fault,
        Happening::Release,
        Happening::Stood,
        Happening::StoodToQuit,
        Happening::Park,
        Happening::Cleared,
        Happening::Ready,
        Happening::Press,
    ];

    #[test]
    fn every_phase_goes_where_the_table_says() {
        use Phase::{Driving as D, Parked as P, Ready as R, Stopping as S, Tripped as T};
        // Columns in the order of HAPPENINGS.
        let table = [
            (P, [T, P, P, P, P, P, R, P]),
            (R, [T, R, R, R, P, R, R, D]),
            (D, [T, S, D, D, S, D, D, D]),
            (S, [T, S, R, P, S, S, S, S]),
            (T, [T, T, T, T, T, P, T, T]),
        ];
        for (from, row) in table {
            for (happening, to) in HAPPENINGS.into_iter().zip(row) {
                assert_eq!(from.after(happening), to, "{from:?} after {happening:?}");
            }
        }
    }

    #[test]
    fn a_fault_trips_from_everywhere_and_a_trip_is_left_only_by_a_reset() {
        for phase in PHASES {
            assert_eq!(phase.after(Happening::Fault), Phase::Tripped);
        }
        for happening in HAPPENINGS {
            let to = Phase::Tripped.after(happening);
            assert_eq!(to != Phase::Tripped, happening == Happening::Cleared);
        }
    }

    #[test]
    fn motion_is_entered_only_by_a_press_in_ready() {
        for phase in PHASES.into_iter().filter(|it| !it.may_turn()) {
            for happening in HAPPENINGS {
                let moves = phase.after(happening).may_turn();
                assert_eq!(moves, phase == Phase::Ready && happening == Happening::Press);
            }
        }
    }
}
