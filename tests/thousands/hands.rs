//! Random hands. Until something happens they drive; after it they play with everything but one thing that would have
//! to be done before the base may move again.

use gripline::config::Plan;
use gripline::core::Phase;
use gripline::core::io::{Buttons, ConsoleInput, PadInput};
use gripline::shaping::Sticks;
use gripline::units::{Mono, s_to_ns};

use crate::chance::Chance;

/// What the hands leave out after the first fault.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum LeftOut {
    /// The hold control stays pressed.
    Release,
    /// The reset button is never held long enough, or was held from before the trip on.
    Reset,
    /// Ready is never asked.
    Ready,
    /// No fresh press: none at all, or one that is made too early and kept.
    Press,
    /// The sticks are never let go.
    Centre,
    /// Nothing: the base is to move again.
    Nothing,
}

impl LeftOut {
    pub(crate) const ALL: [Self; 6] =
        [Self::Release, Self::Reset, Self::Ready, Self::Press, Self::Centre, Self::Nothing];
}

#[derive(Debug)]
pub(crate) struct Hands {
    chance: Chance,
    left_out: LeftOut,
    /// One of two ways to leave it out.
    other_way: bool,
    /// The first fault has come.
    disturbed: bool,
    pressed_value: f64,
    sticks: Sticks,
    sticks_until: Mono,
    hold: f64,
    /// Hold is let go until then, whatever else.
    let_go_until: Mono,
    dip: bool,
    squeeze: bool,
    stop: bool,
    down: Buttons,
    reset_since: Mono,
    next_tap: Mono,
    released_ticks: u32,
}

impl Hands {
    pub(crate) fn new(mut chance: Chance, plan: &Plan) -> Self {
        let left_out = chance.pick(&LeftOut::ALL);
        let other_way = chance.one_in(2);
        Self {
            chance,
            left_out,
            other_way,
            disturbed: false,
            pressed_value: if plan.pad.hold_squeeze.is_some() { 0.75 } else { 1.0 },
            sticks: Sticks::default(),
            sticks_until: Mono::default(),
            hold: 0.0,
            let_go_until: Mono::default(),
            dip: false,
            squeeze: false,
            stop: false,
            down: Buttons::default(),
            reset_since: Mono::default(),
            next_tap: Mono::default(),
            released_ticks: 0,
        }
    }

    pub(crate) fn left_out(&self) -> LeftOut {
        self.left_out
    }

    pub(crate) fn disturb(&mut self) {
        self.disturbed = true;
    }

    pub(crate) fn let_go(&mut self, until: Mono) {
        self.let_go_until = until;
    }

    /// Lets go and presses again between two ticks.
    pub(crate) fn dip(&mut self) {
        self.dip = true;
    }

    pub(crate) fn squeeze(&mut self) {
        self.squeeze = true;
    }

    pub(crate) fn press_stop(&mut self) {
        self.stop = true;
    }

    /// What the console and the pad show in this tick.
    pub(crate) fn play(
        &mut self,
        now: Mono,
        plan: &Plan,
        phase: Phase,
        wait: bool,
    ) -> (PadInput, ConsoleInput) {
        let before = self.down;
        self.down = Buttons::default();
        let mut console = ConsoleInput::default();
        match phase {
            Phase::Parked => self.parked(now, wait),
            Phase::Ready => self.ready(),
            Phase::Driving => self.driving(now),
            Phase::Stopping => self.stopping(now),
            Phase::Tripped => console.reset = self.tripped(now, plan),
        }
        if self.disturbed && self.left_out == LeftOut::Release {
            self.hold = self.pressed_value;
        }
        if self.disturbed && self.left_out == LeftOut::Centre && phase != Phase::Driving {
            self.sticks = Sticks { x: 0.8, y: -0.3, turn: 0.4 };
        }
        for (button, one_in) in [
            (Buttons::PACE_UP, 60),
            (Buttons::PACE_DOWN, 90),
            (Buttons::FRAME, 120),
            (Buttons::ZERO_HEADING, 150),
        ] {
            if self.chance.one_in(one_in) {
                self.down = self.down.with(button);
            }
        }
        if self.left_out == LeftOut::Reset && self.other_way {
            // Down since the start of the program: pressed, but not in Tripped.
            self.down = self.down.with(Buttons::RESET);
        }
        if core::mem::take(&mut self.stop) {
            self.down = self.down.with(Buttons::STOP);
        }
        let mut hold = if now < self.let_go_until { 0.0 } else { self.hold };
        if core::mem::take(&mut self.squeeze) {
            hold = 1.0;
        }
        self.released_ticks = if hold == 0.0 { self.released_ticks + 1 } else { 0 };
        let hold_least = if core::mem::take(&mut self.dip) { 0.0 } else { hold };
        // A hand is never quite still, so that a pad which only reports changes has some to report.
        let wobble = self.chance.within(-0.002, 0.002);
        let Sticks { x, y, turn } = self.sticks;
        let pad = PadInput {
            present: true,
            streams: false,
            last_sign: now,
            sticks: Sticks { x: x + wobble, y: y - wobble, turn: turn + wobble },
            hold,
            hold_least,
            down: self.down,
            pressed: Buttons(self.down.0 & !before.0),
        };
        (pad, console)
    }

    fn leaves_out(&self, it: LeftOut) -> bool {
        self.disturbed && self.left_out == it
    }

    fn parked(&mut self, now: Mono, wait: bool) {
        if self.leaves_out(LeftOut::Ready) {
            self.anything(now);
            return;
        }
        self.rest();
        // Before anything has happened they wait until nothing stands against it; afterwards they do not.
        if now >= self.next_tap && (self.disturbed || !wait) && self.released_ticks > 1 {
            self.down = self.down.with(Buttons::READY);
            self.next_tap = now.plus_ns(s_to_ns(self.chance.within(0.03, 0.15)));
        }
    }

    fn ready(&mut self) {
        if self.leaves_out(LeftOut::Press) {
            // Either never pressed, or still pressed from before.
            return;
        }
        self.sticks = Sticks::default();
        self.hold = if self.released_ticks > 2 { self.pressed_value } else { 0.0 };
    }

    fn driving(&mut self, now: Mono) {
        self.hold = self.pressed_value;
        if now >= self.sticks_until {
            self.sticks_until = now.plus_ns(s_to_ns(self.chance.within(0.1, 1.2)));
            let full = |chance: &mut Chance| match chance.below(4) {
                0 => 0.0,
                1 => 1.0 - 2.0 * chance.below(2) as f64,
                _ => chance.within(-1.0, 1.0),
            };
            let chance = &mut self.chance;
            self.sticks = Sticks { x: full(chance), y: full(chance), turn: full(chance) };
        }
        if !self.disturbed && self.chance.one_in(400) {
            self.let_go_until = now.plus_ns(s_to_ns(self.chance.within(0.02, 0.3)));
        }
    }

    fn stopping(&mut self, now: Mono) {
        if self.leaves_out(LeftOut::Press) && self.other_way {
            // Pressed again too early, and kept.
            let early = self.released_ticks > 2 || self.hold != 0.0;
            self.hold = if early { self.pressed_value } else { 0.0 };
            self.sticks = Sticks::default();
        } else if self.chance.one_in(3) {
            self.anything(now);
        } else {
            self.rest();
        }
    }

    /// Whether the console is asked to reset.
    fn tripped(&mut self, now: Mono, plan: &Plan) -> bool {
        let hold_ns = s_to_ns(plan.guard.reset_hold_s);
        if self.leaves_out(LeftOut::Reset) {
            self.anything(now);
            if self.other_way {
                // Down from before the trip on, see `play`.
            } else if now.since_ns(self.reset_since) < hold_ns * 3 / 4 {
                self.down = self.down.with(Buttons::RESET);
            } else if now.since_ns(self.reset_since) > hold_ns {
                self.reset_since = now;
            }
            return false;
        }
        self.rest();
        let held_ns = now.since_ns(self.reset_since);
        if held_ns > hold_ns + 300_000_000 {
            self.reset_since = now;
        } else if held_ns < hold_ns + 200_000_000 {
            self.down = self.down.with(Buttons::RESET);
        }
        self.chance.one_in(20)
    }

    fn rest(&mut self) {
        self.sticks = Sticks::default();
        self.hold = 0.0;
    }

    /// Whatever a hand may do that must not matter.
    fn anything(&mut self, now: Mono) {
        if now < self.next_tap {
            return;
        }
        self.next_tap = now.plus_ns(s_to_ns(self.chance.within(0.02, 0.2)));
        match self.chance.below(5) {
            0 => self.hold = self.pressed_value,
            1 => self.hold = 0.0,
            2 => self.sticks = Sticks::default(),
            3 => self.sticks = Sticks { x: self.chance.within(-1.0, 1.0), y: 0.5, turn: 0.5 },
            _ => {
                if !self.leaves_out(LeftOut::Ready) {
                    self.down = self.down.with(Buttons::READY);
                }
            }
        }
    }
}
