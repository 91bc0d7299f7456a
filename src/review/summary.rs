//! A run in figures: how long, which stops, how late, how much was lost.

use crate::config::{Plan, parse};
use crate::core::io::Phase;
use crate::core::{Cause, Event, words};
use crate::record::reader::Run;
use crate::record::{Item, Tick};
use crate::units::Mono;
use crate::wire::{Deframer, Direction, FromDrivers, kind, parse_from_drivers};

/// One stop of a moving or ready base.
#[derive(Clone, Debug, PartialEq)]
pub struct Stop {
    /// When the deciding tick was, seconds since the start of the run.
    pub t_s: f64,
    /// `release`, `pad-quiet`, `quit`, or the code of the cause.
    pub code: String,
    /// In words.
    pub words: String,
    /// The phase it came in.
    pub from: Phase,
    /// Until the first stop frame was written; `None` for stops by the host.
    pub first_stop_s: Option<f64>,
    /// Until every wheel was measured to stand; `None` where the feedback did not show it.
    pub standstill_s: Option<f64>,
    /// Way of the base's middle from the deciding tick to standstill (or to the last feedback).
    pub distance_m: f64,
    /// Speed that was sent when it began: travel and turn.
    pub from_m_s: f64,
    /// Turn rate that was sent when it began.
    pub from_rad_s: f64,
    /// Index of the pace.
    pub pace: u8,
}

/// The figures of a run.
#[derive(Clone, Debug, PartialEq)]
pub struct Summary {
    /// The base.
    pub base: String,
    /// From the first tick to the last.
    pub seconds: f64,
    /// How many ticks.
    pub ticks: u64,
    /// Way of the base's middle.
    pub path_m: f64,
    /// In order.
    pub stops: Vec<Stop>,
    /// Frames to the drivers.
    pub frames_sent: u64,
    /// Frames from the drivers.
    pub frames_heard: u64,
    /// Frames from the drivers that could not be read.
    pub frames_damaged: u64,
    /// Frames that the drivers refused or lost.
    pub frames_refused: u64,
    /// Gaps in the sequences of the drivers' frames.
    pub frames_lost: u64,
    /// How late ticks woke, seconds: median, 99 %, greatest.
    pub late_s: [f64; 3],
    /// Greatest skid residual while driving, rad/s.
    pub skid_rad_s: f64,
    /// Packets that the recorder had no room for.
    pub packets_lost: u64,
    /// Damage of the file.
    pub damage: Option<String>,
}

/// Reads a run to its end.
///
/// # Errors
/// When the configuration inside it is not understood any more: its first mistake.
pub fn summary(run: &mut Run) -> Result<(Summary, Plan), String> {
    let (plan, _) = parse(&run.config, "configuration of the run")
        .map_err(|it| it.first().map_or_else(String::new, ToString::to_string))?;
    let mut reading = Reading::new(&plan, run.origin);
    while let Some(item) = run.next() {
        reading.take(&item);
    }
    let mut it = reading.summary;
    it.damage.clone_from(&run.damage);
    let mut late = reading.late_s;
    late.sort_by(f64::total_cmp);
    let share = |share: f64| {
        late.get(((late.len().saturating_sub(1)) as f64 * share) as usize).copied().unwrap_or(0.0)
    };
    it.late_s = [share(0.5), share(0.99), share(1.0)];
    Ok((it, plan))
}

struct Reading<'a> {
    plan: &'a Plan,
    origin: Mono,
    summary: Summary,
    late_s: Vec<f64>,
    last: Option<(Phase, [f64; 3])>,
    first: Option<Mono>,
    /// The stop that is going on: index and since when every wheel stands.
    open: Option<(usize, Mono)>,
    sequence: [Option<u8>; 8],
}

impl<'a> Reading<'a> {
    fn new(plan: &'a Plan, origin: Mono) -> Self {
        let summary = Summary {
            base: plan.name.clone(),
            seconds: 0.0,
            ticks: 0,
            path_m: 0.0,
            stops: Vec::new(),
            frames_sent: 0,
            frames_heard: 0,
            frames_damaged: 0,
            frames_refused: 0,
            frames_lost: 0,
            late_s: [0.0; 3],
            skid_rad_s: 0.0,
            packets_lost: 0,
            damage: None,
        };
        Self {
            plan,
            origin,
            summary,
            late_s: Vec::new(),
            last: None,
            first: None,
            open: None,
            sequence: [None; 8],
        }
    }

    fn take(&mut self, item: &Item) {
        match item {
            Item::Tick(tick) => self.tick(tick),
            Item::Event(_, event) => self.event(event),
            Item::Frame { at, link, direction, bytes } => self.frame(*at, *link, *direction, bytes),
            Item::Lost(_, count) => self.summary.packets_lost += u64::from(*count),
            Item::Pad(..) | Item::Snapshot(..) => {}
        }
    }

    fn event(&mut self, event: &Event) {
        if let Event::PadQuiet { .. } = event
            && let Some(stop) = self.summary.stops.last_mut()
        {
            stop.code = "pad-quiet".into();
            stop.words = words::event(event, self.plan);
        }
        if let Event::FramesRefused { count, .. } = event {
            self.summary.frames_refused += u64::from(*count);
        }
    }

    fn tick(&mut self, tick: &Tick) {
        let now = tick.inputs.now;
        self.summary.ticks += 1;
        let first = *self.first.get_or_insert(now);
        self.summary.seconds = now.since_s(first);
        self.late_s.push(now.since_s(tick.inputs.due));
        if let Some((before, pose)) = self.last {
            let [x, y, _] = pose;
            let step = libm::hypot(tick.pose[0] - x, tick.pose[1] - y);
            self.summary.path_m += step;
            if let Some((index, _)) = self.open
                && let Some(stop) = self.summary.stops.get_mut(index)
            {
                stop.distance_m += step;
            }
            self.stops(tick, before);
        }
        if tick.phase.may_turn() {
            self.summary.skid_rad_s = self.summary.skid_rad_s.max(f64::from(tick.skid_rad_s));
        }
        self.standstill(tick);
        self.last = Some((tick.phase, tick.pose));
    }

    /// A stop begins with Stopping, or with a trip of a base under torque.
    fn stops(&mut self, tick: &Tick, before: Phase) {
        let began = match (before, tick.phase) {
            (Phase::Driving, Phase::Stopping) => {
                let quit = tick.inputs.quit;
                let code = if quit { "quit" } else { "release" };
                let words = if quit { "the end was asked" } else { "hold released" };
                Some((code.to_owned(), words.to_owned()))
            }
            (Phase::Ready | Phase::Driving | Phase::Stopping, Phase::Tripped) => tick
                .cause
                .as_ref()
                .map(|cause: &Cause| (cause.code().to_owned(), words::cause(cause, self.plan))),
            _ => None,
        };
        let Some((code, words)) = began else { return };
        let [turn, x, y] = tick.sent;
        let first_stop_s = tick.stop_ramp_ms.map(|_| 0.0);
        self.summary.stops.push(Stop {
            t_s: tick.inputs.now.since_s(self.origin),
            code,
            words,
            from: before,
            first_stop_s,
            standstill_s: None,
            distance_m: 0.0,
            from_m_s: libm::hypot(x, y),
            from_rad_s: turn.abs(),
            pace: tick.pace,
        });
        self.open = Some((self.summary.stops.len() - 1, tick.inputs.now));
    }

    /// A stop is over when fresh feedback shows every wheel standing.
    fn standstill(&mut self, tick: &Tick) {
        let Some((index, began)) = self.open else { return };
        let share = self.plan.guard.standstill_share;
        let stands = tick
            .measured_rad_s
            .iter()
            .zip(&self.plan.wheels)
            .all(|(it, wheel)| f64::from(it.abs()) <= share * wheel.max_rad_s);
        let fresh = tick.inputs.links.iter().all(|it| it.feedback.is_some());
        if stands && fresh && !(tick.phase == Phase::Driving) {
            if let Some(stop) = self.summary.stops.get_mut(index) {
                stop.standstill_s = Some(tick.inputs.now.since_s(began));
            }
            self.open = None;
        } else if tick.phase == Phase::Driving {
            self.open = None;
        }
    }

    fn frame(&mut self, at: Mono, link: u8, direction: Direction, bytes: &[u8]) {
        let mut deframer = Deframer::new();
        let plain = bytes.iter().find_map(|byte| match deframer.push(*byte) {
            Some(Ok(plain)) => Some(plain.to_vec()),
            Some(Err(_)) | None => None,
        });
        match direction {
            Direction::ToDrivers => {
                self.summary.frames_sent += 1;
                let is_stop = plain.as_deref().and_then(<[u8]>::first) == Some(&kind::STOP);
                if is_stop
                    && let Some((index, began)) = self.open
                    && let Some(stop) = self.summary.stops.get_mut(index)
                    && stop.first_stop_s.is_none_or(|it| it <= 0.0)
                {
                    stop.first_stop_s = Some(at.since_s(began));
                }
            }
            Direction::FromDrivers => {
                self.summary.frames_heard += 1;
                match plain.as_deref().map(parse_from_drivers) {
                    Some(Ok((sequence, FromDrivers::Feedback(_) | FromDrivers::Identity(_)))) => {
                        if let Some(last) = self.sequence.get_mut(usize::from(link)) {
                            let gap = last.map_or(0, |last| sequence.wrapping_sub(last).wrapping_sub(1));
                            // A driver that starts anew begins at zero: no loss.
                            if sequence != 0 {
                                self.summary.frames_lost += u64::from(gap);
                            }
                            *last = Some(sequence);
                        }
                    }
                    Some(Err(_)) | None => self.summary.frames_damaged += 1,
                }
            }
        }
    }
}
