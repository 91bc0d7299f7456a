//! The tick's thread: wait for the grid, gather, step, act, hand on. Nothing here waits for anybody, allocates or logs
//! once it runs.

use std::sync::Arc;
use std::sync::atomic::Ordering;

use crossbeam_channel::Sender;
use rtrb::Consumer;

use super::board::Board;
use super::gather::{Asked, Gather, PadSource};
use super::run::{DriveError, Ended};
use super::sentinel::Pulse;
use super::tick::next_deadline;
use super::warn;
use crate::config::Plan;
use crate::core::io::{Outputs, Phase, Puller};
use crate::core::{Core, Event};
use crate::link::{Line, LinkNews, Sent, StopLine};
use crate::record::Recorder;
use crate::sys::{clock, sched};
use crate::units::Mono;
use crate::wire::{MAX_ON_LINE, Mode, ToDrivers, emit_to_drivers};

/// Without `--wait`, a gamepad must be there by then.
const PAD_WITHIN_NS: u64 = 2_000_000_000;
/// Drivers that never latch do not keep the program for ever once the end was asked.
const LATCH_WITHIN_NS: u64 = 2_000_000_000;
/// Nor longer than this when it was asked twice.
const LATCH_WITHIN_IN_HASTE_NS: u64 = 200_000_000;

/// What the tick owns, and its handles on the other threads.
pub(super) struct Ticker {
    pub(super) plan: Arc<Plan>,
    pub(super) pad: PadSource,
    pub(super) lines: Vec<Line>,
    pub(super) news: Vec<Consumer<LinkNews>>,
    pub(super) stop: StopLine,
    pub(super) asked: Arc<Asked>,
    pub(super) recorder: Recorder,
    pub(super) print: Sender<(Mono, Event)>,
    pub(super) board: Arc<Board>,
    pub(super) pulse: Arc<Pulse>,
    /// A gamepad that is not there yet is waited for.
    pub(super) wait: bool,
}

impl Ticker {
    /// Ticks until the end, which has been asked or cannot be helped.
    pub(super) fn run(self) -> Result<Ended, DriveError> {
        make_punctual(&self.plan);
        let period_ns = self.plan.tick.period_ns();
        let began = clock::now();
        let mut ticks = Ticks {
            core: Core::new(&self.plan),
            gather: Gather::new(self.plan.links.iter().map(|it| it.channels)),
            out: Outputs::default(),
            count: 0,
            snapshot_every: (1_000_000_000 / period_ns.max(1)).max(1),
            began,
            pad_seen: false,
            quit_since: None,
            own: self,
        };
        let mut due = began.plus_ns(1_000_000);
        loop {
            clock::sleep_until(due);
            let now = clock::now();
            #[cfg(feature = "test-faults")]
            super::test_faults::strike(began, now);
            ticks.tick(now, due);
            if let Some(ended) = ticks.ended(now) {
                return ended;
            }
            due = next_deadline(due, clock::now(), period_ns);
        }
    }
}

struct Ticks {
    core: Core,
    gather: Gather,
    out: Outputs,
    count: u64,
    /// Ticks in a second: so often the record gets the core's state.
    snapshot_every: u64,
    began: Mono,
    pad_seen: bool,
    quit_since: Option<Mono>,
    own: Ticker,
}

impl Ticks {
    fn tick(&mut self, now: Mono, due: Mono) {
        let own = &mut self.own;
        self.gather.gather((now, due), &mut own.pad, &mut own.lines, &mut own.news, &own.stop, &own.asked);
        self.pad_seen |= self.gather.inputs.pad.present;
        if self.count.is_multiple_of(self.snapshot_every) {
            own.recorder.snapshot(now, &self.core.state());
        }
        self.out = self.core.step(&self.gather.inputs);
        self.act();
        let own = &mut self.own;
        own.recorder.tick(&self.gather.inputs, &self.out);
        for event in &self.out.events {
            own.recorder.event(now, event);
            let _ = own.print.try_send((now, *event));
        }
        own.board.write(now, &self.out);
        self.count += 1;
        own.pulse.beat(clock::now());
    }

    /// Does what was decided: the stop line first, then frames.
    fn act(&mut self) {
        let stop = &self.own.stop;
        for (index, sequence) in self.out.stop_sequence.iter().enumerate() {
            stop.arm(index, *sequence, self.out.stop_ramp_ms);
        }
        if self.out.pull_stop {
            if stop.standing().is_some() {
                stop.repeat();
            } else {
                stop.pull(Puller::Core);
            }
        }
        if let Some(number) = self.out.release_stop_line {
            stop.release(number);
        }
        for link in &mut self.gather.inputs.links {
            link.write_blocked = false;
        }
        for frame in &self.out.frames {
            let index = usize::from(frame.link);
            let Some(line) = self.own.lines.get_mut(index) else { continue };
            let mut bytes = [0; MAX_ON_LINE];
            let len = emit_to_drivers(frame.sequence, &frame.message, &mut bytes);
            let sent = line.send(bytes.get(..len).unwrap_or(&[]), is_motion(&frame.message));
            if matches!(sent, Sent::Blocked | Sent::Partly | Sent::Gone)
                && let Some(link) = self.gather.inputs.links.get_mut(index)
            {
                link.write_blocked = true;
            }
        }
    }

    /// Whether that was the last tick, and how it ended.
    fn ended(&mut self, now: Mono) -> Option<Result<Ended, DriveError>> {
        let refused = match &self.own.pad {
            PadSource::Feed(_) => {
                if !self.pad_seen && !self.own.wait && now.since_ns(self.began) > PAD_WITHIN_NS {
                    return Some(Err(DriveError::NoPad(self.own.plan.pad.name.clone())));
                }
                None
            }
            PadSource::Hands(script) => {
                if script.ended(now) || script.refused.is_some() {
                    self.own.asked.quit.store(true, Ordering::Relaxed);
                }
                script.refused.and_then(|link| self.own.plan.links.get(link))
            }
        };
        if let Some(link) = refused
            && (self.out.finished || self.out.phase == Phase::Parked)
        {
            return Some(Err(DriveError::HandsOnRealDrivers(link.name.clone())));
        }
        if self.out.finished {
            return Some(Ok(if self.out.phase == Phase::Tripped { Ended::Tripped } else { Ended::Parked }));
        }
        if self.gather.inputs.quit && self.out.phase == Phase::Tripped {
            let since = *self.quit_since.get_or_insert(now);
            let haste = self.own.asked.hasty.load(Ordering::Relaxed);
            let limit_ns = if haste { LATCH_WITHIN_IN_HASTE_NS } else { LATCH_WITHIN_NS };
            if now.since_ns(since) > limit_ns {
                return Some(Ok(Ended::Forced));
            }
        }
        None
    }
}

/// Frames that put torque on or turn wheels: the stop line holds them back.
fn is_motion(message: &ToDrivers) -> bool {
    match message {
        ToDrivers::Drive(drive) => drive.mode != Mode::Park,
        ToDrivers::Ask | ToDrivers::Stop { .. } | ToDrivers::Clear { .. } => false,
    }
}

/// Priority, core and stack of the tick's thread; what is refused is said once.
fn make_punctual(plan: &Plan) {
    sched::no_timer_slack();
    if plan.tick.realtime > 0
        && let Err(error) = sched::set_realtime(plan.tick.realtime)
    {
        warn(&format!(
            "no real-time priority ({error}): ticks may come late on a busy machine; run as a service or raise `ulimit -r`"
        ));
    }
    if let Some(cpu) = plan.tick.cpu
        && let Err(error) = sched::pin_to(cpu)
    {
        warn(&format!("cannot stay on core {cpu} ({error}); correct `cpu` of [loop]"));
    }
    sched::touch_stack();
}
