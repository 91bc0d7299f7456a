//! A run in figures: how long, which stops, how late, how much was lost.

use crate::config::{Plan, parse};
use crate::core::budget::{BudgetRow, Guard};
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
    /// The guard whose budget it is held against, where it has one.
    pub guard: Option<Guard>,
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

impl Stop {
    /// Its row of the budget.
    #[must_use]
    pub fn row<'a>(&self, rows: &'a [BudgetRow]) -> Option<&'a BudgetRow> {
        rows.iter().find(|it| Some(it.guard) == self.guard && it.pace == usize::from(self.pace))
    }
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
    /// The stop that is going on: its index and when it was decided.
    open: Option<(usize, Mono)>,
    /// The first stop frame since the last tick that was not tripped: written, and so recorded, before its tick.
    stop_frame: Option<Mono>,
    /// The last tick that had feedback from every link.
    fed: Option<Mono>,
    /// Feedback was cut while the present stop went on: when the base came to stand was not seen.
    blind: bool,
    /// The pad's reports keep coming while it is still.
    streams: bool,
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
            stop_frame: None,
            fed: None,
            blind: false,
            streams: false,
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
            stop.guard = Some(if self.streams { Guard::PadQuietStream } else { Guard::PadQuietChange });
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
        if tick.phase != Phase::Tripped {
            self.stop_frame = None;
        }
        if tick.inputs.pad.present {
            self.streams = tick.inputs.pad.streams;
        }
        self.last = Some((tick.phase, tick.pose));
    }

    /// A stop begins with Stopping, or with a trip of a base under torque.
    fn stops(&mut self, tick: &Tick, before: Phase) {
        let began = match (before, tick.phase) {
            (Phase::Driving, Phase::Stopping) => {
                let quit = tick.inputs.quit;
                let code = if quit { "quit" } else { "release" };
                let words = if quit { "the end was asked" } else { "hold released" };
                Some((code.to_owned(), words.to_owned(), Some(Guard::Release)))
            }
            (Phase::Ready | Phase::Driving | Phase::Stopping, Phase::Tripped) => tick
                .cause
                .as_ref()
                .map(|it: &Cause| (it.code().to_owned(), words::cause(it, self.plan), Guard::of(it))),
            _ => None,
        };
        let Some((code, words, guard)) = began else { return };
        let [turn, x, y] = tick.sent;
        let first_stop_s = self.stop_frame.map(|at| at.since_s(tick.inputs.now));
        self.summary.stops.push(Stop {
            t_s: tick.inputs.now.since_s(self.origin),
            code,
            words,
            guard,
            from: before,
            first_stop_s,
            standstill_s: None,
            distance_m: 0.0,
            from_m_s: libm::hypot(x, y),
            from_rad_s: turn.abs(),
            pace: tick.pace,
        });
        self.open = Some((self.summary.stops.len() - 1, tick.inputs.now));
        self.blind = false;
    }

    /// A stop is over when fresh feedback shows every wheel standing.
    fn standstill(&mut self, tick: &Tick) {
        let now = tick.inputs.now;
        let fresh = tick.inputs.links.iter().all(|it| it.feedback.is_some());
        if fresh {
            let quiet_ns = crate::units::s_to_ns(self.plan.guard.feedback_quiet_ms * 1e-3);
            let gap = self.fed.replace(now).is_some_and(|last| now.since_ns(last) > quiet_ns);
            self.blind |= gap;
        }
        let Some((index, began)) = self.open else { return };
        let share = self.plan.guard.standstill_share;
        let stands = tick
            .measured_rad_s
            .iter()
            .zip(&self.plan.wheels)
            .all(|(it, wheel)| f64::from(it.abs()) <= share * wheel.max_rad_s);
        if tick.phase == Phase::Driving {
            self.open = None;
        } else if stands && fresh {
            if let Some(stop) = self.summary.stops.get_mut(index) {
                stop.standstill_s = (!self.blind).then(|| now.since_s(began));
            }
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
                if plain.as_deref().and_then(<[u8]>::first) == Some(&kind::STOP) {
                    self.stop_frame.get_or_insert(at);
                    if let Some((index, began)) = self.open
                        && let Some(stop) = self.summary.stops.get_mut(index)
                    {
                        stop.first_stop_s.get_or_insert(at.since_s(began));
                    }
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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::core::Outputs;
    use crate::core::cause::StopBy;
    use crate::core::io::{Heard, Inputs, LinkInput};
    use crate::wire::{Feedback, MAX_ON_LINE, ToDrivers, emit_to_drivers};

    const MS: u64 = 1_000_000;

    fn tick(at_ms: u64, phase: Phase, rad_s: f64, feedback: bool) -> Item {
        let now = Mono::from_ns(at_ms * MS);
        let heard = feedback.then(|| Heard { at: now, feedback: Feedback::default() });
        let mut inputs = Inputs { now, due: now, ..Inputs::default() };
        inputs.links.push(LinkInput { open: true, feedback: heard, ..LinkInput::default() });
        let cause = (phase == Phase::Tripped).then_some(Cause::StopAsked(StopBy::PadButton));
        let mut out = Outputs { phase, cause, ..Outputs::default() };
        out.view.measured_rad_s = (0..4).map(|_| rad_s).collect();
        Item::Tick(Box::new(Tick::new(&inputs, &out, 0)))
    }

    fn stop_frame(at_ns: u64) -> Item {
        let mut bytes = [0; MAX_ON_LINE];
        let len = emit_to_drivers(1, &ToDrivers::Stop { ramp_ms: 300 }, &mut bytes);
        let bytes = bytes[..len].to_vec();
        Item::Frame { at: Mono::from_ns(at_ns), link: 0, direction: Direction::ToDrivers, bytes }
    }

    fn read(items: &[Item]) -> Vec<Stop> {
        let (plan, _) = parse(crate::config::EXAMPLE, "example").unwrap();
        let mut reading = Reading::new(&plan, Mono::default());
        items.iter().for_each(|it| reading.take(it));
        reading.summary.stops
    }

    /// The tick writes the stop before it hands itself to the recorder, so in the file the frame stands first.
    #[test]
    fn the_first_stop_frame_is_the_one_recorded_before_its_tick() {
        let stops = read(&[
            tick(1000, Phase::Driving, 5.0, true),
            stop_frame(1_005 * MS + 50_000),
            tick(1005, Phase::Tripped, 5.0, true),
            stop_frame(1_010 * MS),
            tick(1010, Phase::Tripped, 0.0, true),
        ]);
        assert_eq!(stops.len(), 1);
        assert!((stops[0].first_stop_s.unwrap() - 50e-6).abs() < 1e-9, "{:?}", stops[0].first_stop_s);
        assert!((stops[0].standstill_s.unwrap() - 0.005).abs() < 1e-9);
    }

    #[test]
    fn a_standstill_behind_cut_feedback_was_not_seen() {
        let mut items = vec![tick(1000, Phase::Driving, 5.0, true)];
        items.extend((1..100).map(|it| tick(1000 + 5 * it, Phase::Tripped, 5.0, false)));
        items.push(tick(1500, Phase::Tripped, 0.0, true));
        items.push(tick(1505, Phase::Tripped, 0.0, true));
        assert_eq!(read(&items)[0].standstill_s, None);
    }

    #[test]
    fn a_stop_frame_of_an_earlier_trip_does_not_count_for_the_next() {
        let stops = read(&[
            tick(1000, Phase::Driving, 5.0, true),
            stop_frame(1_005 * MS),
            tick(1005, Phase::Tripped, 0.0, true),
            tick(2000, Phase::Ready, 0.0, true),
            tick(2005, Phase::Driving, 5.0, true),
            tick(2010, Phase::Tripped, 5.0, true),
            stop_frame(2_013 * MS),
            tick(2015, Phase::Tripped, 0.0, true),
        ]);
        assert!((stops[1].first_stop_s.unwrap() - 0.003).abs() < 1e-9, "{:?}", stops[1].first_stop_s);
    }
}
