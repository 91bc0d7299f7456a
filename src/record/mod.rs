//! The run file: what went over the lines, what the pad did, what each tick saw and decided, what happened.
//!
//! One pcapng file a run (the open capture format): interfaces of link types USER0 (a link's raw frames, both ways),
//! USER1 (pad), USER2 (ticks), USER3 (events and snapshots), nanosecond time stamps, every packet with its CRC-32 as
//! hash option. The section header carries the configuration's text and the program's version. Layouts: [`item`].
//!
//! Producers never wait and never allocate: they put chunks into a bounded queue, or count what found no room.

pub mod item;
mod queue;
pub mod reader;
mod writer;

pub use item::{Item, Pad, Tick};
pub use queue::{RecordError, Recorder, outputs_crc, start};
