//! The producers' side: chunks of fixed size through a bounded queue.

use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicU32, Ordering};

use crossbeam_channel::{Receiver, Sender, TryRecvError, bounded};
use serde::Serialize;

use super::item::{Pad, Tick};
use super::writer::{Writer, next_path};
use crate::config::Plan;
use crate::core::io::{Inputs, Outputs, PadInput};
use crate::core::{CoreState, Event};
use crate::sys::clock;
use crate::units::Mono;
use crate::wire::Direction;

/// Bytes of one chunk: a tick of a base with a dozen wheels fits.
pub(super) const CHUNK: usize = 1000;
/// Chunks in the queue: about a megabyte, a second of ticks and frames at 200 Hz.
const QUEUE: usize = 1024;
/// So often the queue is looked into. A receiver that waits would make whoever sends take a lock to wake it.
const LOOK_MS: u64 = 10;
/// The largest packet: a snapshot with the longest moving average.
pub(super) const LARGEST: usize = 64 * 1024;

/// Why nothing can be recorded.
#[derive(Debug, thiserror::Error)]
pub enum RecordError {
    /// The folder cannot be made.
    #[error("cannot make the folder {path} for run files: {source}; correct `dir` of [record]")]
    Folder {
        /// The folder.
        path: PathBuf,
        /// Why.
        source: std::io::Error,
    },
    /// The file cannot be made.
    #[error("cannot write the run file {path}: {source}; free some space or correct `dir` of [record]")]
    File {
        /// The file.
        path: PathBuf,
        /// Why.
        source: std::io::Error,
    },
}

/// The interfaces, by number.
pub(super) mod lane {
    pub(crate) const FRAMES: u8 = 0;
    pub(crate) const PAD: u8 = 1;
    pub(crate) const TICKS: u8 = 2;
    pub(crate) const EVENTS: u8 = 3;
}

/// One piece of one packet.
#[derive(Clone)]
pub(super) struct Chunk {
    pub(super) at: Mono,
    pub(super) lane: u8,
    /// Which piece this is, and whether it is the last.
    pub(super) part: u8,
    pub(super) last: bool,
    pub(super) len: u16,
    pub(super) bytes: [u8; CHUNK],
}

pub(super) enum Message {
    Chunk(Chunk),
    Close(Sender<()>),
}

/// A handle for producers; clones write to the same run.
#[derive(Clone)]
pub struct Recorder {
    queue: Sender<Message>,
    lost: Arc<AtomicU32>,
    trouble: Arc<AtomicU32>,
    path: Arc<PathBuf>,
    /// Where the tick puts its larger packets together; only the tick's own clone fills it.
    scratch: Box<[u8]>,
}

/// Starts the recorder's thread and the run's file.
///
/// # Errors
/// When folder or file cannot be made.
pub fn start(dir: &Path, plan: &Plan) -> Result<Recorder, RecordError> {
    std::fs::create_dir_all(dir).map_err(|source| RecordError::Folder { path: dir.into(), source })?;
    let path = next_path(dir, &plan.name, clock::wall_ns());
    let writer = Writer::create(path.clone(), plan, clock::wall_ns(), clock::now())
        .map_err(|source| RecordError::File { path: path.clone(), source })?;
    let (queue, take) = bounded(QUEUE);
    let (lost, trouble) = (Arc::new(AtomicU32::new(0)), Arc::new(AtomicU32::new(0)));
    let (thread_lost, thread_trouble) = (Arc::clone(&lost), Arc::clone(&trouble));
    let keep_bytes = plan.record.keep_gb * 1e9;
    let dir = dir.to_owned();
    std::thread::Builder::new()
        .name("recorder".into())
        .stack_size(256 * 1024)
        .spawn(move || {
            super::writer::remove_oldest(&dir, keep_bytes);
            write_all(writer, &take, &thread_lost, &thread_trouble);
        })
        .map_err(|source| RecordError::File { path: path.clone(), source })?;
    let scratch = vec![0; LARGEST].into_boxed_slice();
    Ok(Recorder { queue, lost, trouble, path: Arc::new(path), scratch })
}

/// The recorder's thread: writes what comes, at most 100 ms behind.
fn write_all(mut writer: Writer, take: &Receiver<Message>, lost: &AtomicU32, trouble: &AtomicU32) {
    let mut flushed = clock::now();
    loop {
        match take.try_recv() {
            Ok(Message::Chunk(chunk)) => {
                let count = lost.swap(0, Ordering::Relaxed);
                if count > 0 {
                    writer.lost(chunk.at, count);
                }
                writer.take(&chunk);
            }
            Ok(Message::Close(done)) => {
                writer.flush();
                let _ = done.send(());
                return;
            }
            Err(TryRecvError::Empty) => clock::sleep_ms(LOOK_MS),
            Err(TryRecvError::Disconnected) => {
                writer.flush();
                return;
            }
        }
        let now = clock::now();
        if now.since_ns(flushed) >= 50_000_000 {
            writer.flush();
            flushed = now;
        }
        trouble.store(writer.failures(), Ordering::Relaxed);
    }
}

impl Recorder {
    /// Where the run is written.
    #[must_use]
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// How many packets the disk has refused; they are lost, the drive goes on.
    #[must_use]
    pub fn failures(&self) -> u32 {
        self.trouble.load(Ordering::Relaxed)
    }

    /// A frame on a line. From any thread.
    pub fn frame(&self, link: u8, direction: Direction, at: Mono, bytes: &[u8]) {
        let way = match direction {
            Direction::ToDrivers => 0,
            Direction::FromDrivers => 1,
        };
        let mut chunk = chunk(at, lane::FRAMES);
        let len = (2 + bytes.len()).min(CHUNK);
        chunk.len = len as u16;
        for (place, byte) in chunk.bytes.iter_mut().zip([link, way].iter().chain(bytes)) {
            *place = *byte;
        }
        self.put(chunk);
    }

    /// A change at the pad.
    pub fn pad(&mut self, at: Mono, pad: &PadInput) {
        self.encode(at, lane::PAD, None, &Pad(*pad));
    }

    /// A tick's inputs and decisions.
    pub fn tick(&mut self, inputs: &Inputs, out: &Outputs) {
        let crc = outputs_crc(out, &mut self.scratch);
        self.encode(inputs.now, lane::TICKS, None, &Tick::new(inputs, out, crc));
    }

    /// An event.
    pub fn event(&mut self, at: Mono, event: &Event) {
        self.encode(at, lane::EVENTS, Some(0), event);
    }

    /// The core's state before the tick that follows.
    pub fn snapshot(&mut self, at: Mono, state: &CoreState) {
        self.encode(at, lane::EVENTS, Some(1), state);
    }

    /// Writes out what is queued, at most for two seconds, and ends the run.
    pub fn close(&self) {
        let (done, wait) = bounded(1);
        if self.queue.send_timeout(Message::Close(done), std::time::Duration::from_secs(1)).is_ok() {
            let _ = wait.recv_timeout(std::time::Duration::from_secs(1));
        }
    }

    fn encode<T: Serialize>(&mut self, at: Mono, lane: u8, kind: Option<u8>, value: &T) {
        let mut scratch = std::mem::take(&mut self.scratch);
        let head = usize::from(kind.is_some());
        if let (Some(kind), Some(first)) = (kind, scratch.first_mut()) {
            *first = kind;
        }
        let used =
            scratch.get_mut(head..).and_then(|room| postcard::to_slice(value, room).ok().map(|it| it.len()));
        match used.and_then(|len| scratch.get(..head + len)) {
            Some(bytes) => {
                let parts = bytes.chunks(CHUNK);
                let last = parts.len().saturating_sub(1);
                for (part, bytes) in parts.enumerate() {
                    let mut chunk = chunk(at, lane);
                    chunk.part = part as u8;
                    chunk.last = part == last;
                    chunk.len = bytes.len() as u16;
                    chunk.bytes.iter_mut().zip(bytes).for_each(|(place, byte)| *place = *byte);
                    self.put(chunk);
                }
            }
            None => {
                self.lost.fetch_add(1, Ordering::Relaxed);
            }
        }
        self.scratch = scratch;
    }

    fn put(&self, chunk: Chunk) {
        if self.queue.try_send(Message::Chunk(chunk)).is_err() {
            self.lost.fetch_add(1, Ordering::Relaxed);
        }
    }
}

fn chunk(at: Mono, lane: u8) -> Chunk {
    Chunk { at, lane, part: 0, last: true, len: 0, bytes: [0; CHUNK] }
}

/// What replay compares of a tick: a checksum over all that was decided.
#[must_use]
pub fn outputs_crc(out: &Outputs, scratch: &mut [u8]) -> u32 {
    static CRC: crc::Crc<u32> = crc::Crc::<u32>::new(&crc::CRC_32_ISCSI);
    postcard::to_slice(out, scratch).map_or(0, |bytes| CRC.checksum(bytes))
}
