//! The set of twists that one frame and one pace allow, in the stick frame: pace, grip and wheel speeds. Convex and
//! round its middle, so that everything between two allowed twists, and every average of them, is allowed too.

use serde::{Deserialize, Serialize};

use super::{Frame, Pace, Saturation, ShaperSettings};
use crate::base::Twist;

/// A frame and a pace; with the settings, a convex set of twists.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Region {
    /// The stick frame.
    pub frame: Frame,
    /// What a full stick means.
    pub pace: Pace,
    /// By how much the chord of a room-frame step is shorter than its arc, at most: (a/2) / sin(a/2) with a the
    /// greatest turn of one tick.
    arc_by_chord: f64,
}

impl Region {
    /// The set of a frame and a pace.
    #[must_use]
    pub fn new(frame: Frame, pace: Pace, period_s: f64) -> Self {
        let half = (pace.turn_rad_s * period_s / 2.0).min(1.5);
        let arc_by_chord = if half > 0.0 { half / libm::sin(half) } else { 1.0 };
        Self { frame, pace, arc_by_chord }
    }

    /// Greatest centripetal acceleration inside the set.
    pub(super) fn grip_m_s2(&self, settings: &ShaperSettings) -> f64 {
        settings.limits.grip_m_s2.min(self.pace.travel_m_s * self.pace.turn_rad_s)
    }

    /// How far outside a twist is: at most 1 inside, 2 when it is twice too large.
    pub(super) fn gauge(&self, twist: Twist, settings: &ShaperSettings) -> f64 {
        let (travel, turn) = (twist.travel_m_s(), twist.turn_rad_s.abs());
        let floor = self.pace_and_grip(travel, turn, settings);
        let rows = settings.layout.rows().iter().zip(&settings.max_rad_s);
        match self.frame {
            Frame::Base => rows.fold(floor, |greatest, ([h_turn, h_x, h_y], max)| {
                let speed = h_turn * twist.turn_rad_s + h_x * twist.x_m_s + h_y * twist.y_m_s;
                greatest.max(speed.abs() / max)
            }),
            Frame::Room => {
                rows.zip(&settings.travel_gain).fold(floor, |greatest, (([h_turn, ..], max), gain)| {
                    greatest.max((h_turn.abs() * turn + gain * travel * self.arc_by_chord) / max)
                })
            }
        }
    }

    fn pace_and_grip(&self, travel: f64, turn: f64, settings: &ShaperSettings) -> f64 {
        let (travel, turn) = (travel / self.pace.travel_m_s, turn / self.pace.turn_rad_s);
        travel.max(turn).max((travel + turn) * self.grip_weight(settings))
    }

    /// sqrt(p) / 2 with p = v_pace omega_pace / grip, where p > 1; else nothing.
    fn grip_weight(&self, settings: &ShaperSettings) -> f64 {
        let p = self.pace.travel_m_s * self.pace.turn_rad_s / settings.limits.grip_m_s2;
        if p > 1.0 { libm::sqrt(p) / 2.0 } else { 0.0 }
    }

    /// Steps 2 and 3 of shaping: pace and grip by one factor, then the wheels' speeds by the rule in force.
    pub(super) fn limited(&self, asked: Twist, settings: &ShaperSettings) -> Twist {
        let floor = self.pace_and_grip(asked.travel_m_s(), asked.turn_rad_s.abs(), settings);
        let asked = if floor > 1.0 { asked.scaled(1.0 / floor) } else { asked };
        let kept = match settings.limits.saturation {
            Saturation::Together => asked,
            Saturation::KeepTurn => {
                self.kept(Twist::new(asked.turn_rad_s, 0.0, 0.0), Part::Travel, asked, settings)
            }
            Saturation::KeepTravel => {
                self.kept(Twist::new(0.0, asked.x_m_s, asked.y_m_s), Part::Turn, asked, settings)
            }
        };
        let outside = self.gauge(kept, settings);
        if outside > 1.0 { kept.scaled(1.0 / outside) } else { kept }
    }

    /// Keeps one part of a twist as far as the wheels go by themselves, and adds as much of the other as still fits.
    fn kept(&self, first: Twist, other: Part, asked: Twist, settings: &ShaperSettings) -> Twist {
        let outside = self.gauge(first, settings);
        let first = if outside > 1.0 { first.scaled(1.0 / outside) } else { first };
        let second = match other {
            Part::Travel => Twist::new(0.0, asked.x_m_s, asked.y_m_s),
            Part::Turn => Twist::new(asked.turn_rad_s, 0.0, 0.0),
        };
        let mut share: f64 = 1.0;
        let rows = settings.layout.rows().iter().zip(&settings.max_rad_s).zip(&settings.travel_gain);
        for (([h_turn, h_x, h_y], max), gain) in rows {
            let of = |twist: Twist| match self.frame {
                Frame::Base => h_turn * twist.turn_rad_s + h_x * twist.x_m_s + h_y * twist.y_m_s,
                Frame::Room => {
                    h_turn.abs() * twist.turn_rad_s.abs() + gain * twist.travel_m_s() * self.arc_by_chord
                }
            };
            let (has, adds) = (of(first), of(second));
            if adds > 0.0 {
                share = share.min((max - has) / adds);
            } else if adds < 0.0 {
                share = share.min((max + has) / -adds);
            }
        }
        let second = second.scaled(share.max(0.0));
        Twist::new(
            first.turn_rad_s + second.turn_rad_s,
            first.x_m_s + second.x_m_s,
            first.y_m_s + second.y_m_s,
        )
    }

    /// Arc by chord of the greatest turn, see the field.
    pub(super) fn arc_by_chord(&self) -> f64 {
        self.arc_by_chord
    }
}

/// What gives way.
#[derive(Clone, Copy)]
enum Part {
    Travel,
    Turn,
}
