//! Reading a run back, one packet at a time, as far as it is sound.

use std::fs::File;
use std::io::{self, BufReader, Read};
use std::path::{Path, PathBuf};

use pcap_file::pcapng::blocks::enhanced_packet::EnhancedPacketOption;
use pcap_file::pcapng::blocks::section_header::SectionHeaderOption;
use pcap_file::pcapng::{Block, PcapNgReader};

use super::item::{FORMAT, Item};
use super::queue::lane;
use super::writer::{CONFIG_MARK, CRC, FORMAT_MARK, ORIGIN_MARK, WALL_MARK};
use crate::units::Mono;
use crate::wire::Direction;

/// Why a run cannot be read.
#[derive(Debug, thiserror::Error)]
pub enum RunError {
    /// The file cannot be read.
    #[error("cannot read run file {path}: {source}; give the path of a run file")]
    Read {
        /// The file.
        path: PathBuf,
        /// Why.
        source: std::io::Error,
    },
    /// It is something else.
    #[error("{path} is no run file of this program: {why}; give the path of a run file")]
    NotARun {
        /// The file.
        path: PathBuf,
        /// Why.
        why: String,
    },
    /// It was written by a newer program.
    #[error("run file {path} has format {found}, and this program reads up to {FORMAT}; use a newer one")]
    Newer {
        /// The file.
        path: PathBuf,
        /// Its format.
        found: u32,
    },
}

/// A run, open for reading.
pub struct Run {
    reader: PcapNgReader<BufReader<Box<dyn Read>>>,
    /// Text of the configuration that it was driven with.
    pub config: String,
    /// The program that wrote it.
    pub program: String,
    /// The monotonic clock at its start.
    pub origin: Mono,
    wall_ns: u64,
    /// What was found damaged: nothing, or one line.
    pub damage: Option<String>,
    packets: u64,
}

impl Run {
    /// Opens a run.
    ///
    /// # Errors
    /// When it cannot be read, or is no run file of this program or an older one.
    pub fn open(path: &Path) -> Result<Self, RunError> {
        let file = File::open(path).map_err(|source| RunError::Read { path: path.into(), source })?;
        Self::read(path, Box::new(file))
    }

    /// Reads a run from wherever it comes; `path` is what to call it.
    ///
    /// # Errors
    /// When it is no run of this program or an older one.
    pub fn read(path: &Path, mut from: Box<dyn Read>) -> Result<Self, RunError> {
        let not = |why: String| RunError::NotARun { path: path.into(), why };
        let mut magic = [0; 4];
        from.read_exact(&mut magic).map_err(|_| not("it is too short".into()))?;
        if magic != [0x0a, 0x0d, 0x0d, 0x0a] {
            return Err(not("it is no capture file".into()));
        }
        let whole: Box<dyn Read> = Box::new(io::Cursor::new(magic).chain(from));
        let reader = PcapNgReader::new(BufReader::with_capacity(256 * 1024, whole))
            .map_err(|it| not(it.to_string()))?;
        let (mut config, mut program) = (String::new(), String::new());
        let (mut format, mut origin, mut wall_ns) = (None, Mono::default(), 0);
        for option in &reader.section().options {
            match option {
                SectionHeaderOption::Comment(text) => {
                    if let Some(piece) = text.strip_prefix(CONFIG_MARK) {
                        config += piece;
                    } else if let Some(number) = text.strip_prefix(FORMAT_MARK) {
                        format = number.parse().ok();
                    } else if let Some(number) = text.strip_prefix(ORIGIN_MARK) {
                        origin = Mono::from_ns(number.parse().unwrap_or(0));
                    } else if let Some(number) = text.strip_prefix(WALL_MARK) {
                        wall_ns = number.parse().unwrap_or(0);
                    }
                }
                SectionHeaderOption::UserApplication(text) => program = text.to_string(),
                SectionHeaderOption::Hardware(_)
                | SectionHeaderOption::OS(_)
                | SectionHeaderOption::CustomBinary(_)
                | SectionHeaderOption::CustomUtf8(_)
                | SectionHeaderOption::Unknown(_) => {}
            }
        }
        match format {
            None => Err(not("its header lacks the format's number".into())),
            Some(found) if found > FORMAT => Err(RunError::Newer { path: path.into(), found }),
            Some(_) => Ok(Self { reader, config, program, origin, wall_ns, damage: None, packets: 0 }),
        }
    }

    /// The next packet that is sound; `None` at the end, or where the file breaks off.
    #[expect(clippy::should_implement_trait, reason = "the run tells about damage beside it")]
    pub fn next(&mut self) -> Option<Item> {
        loop {
            let (at_ns, lane, data, sound) = match self.reader.next_block()? {
                Ok(Block::EnhancedPacket(block)) => {
                    let hash = CRC.checksum(&block.data).to_le_bytes();
                    let sound = block.options.iter().any(|it| match it {
                        EnhancedPacketOption::Hash(told) => told.get(1..) == Some(&hash[..]),
                        EnhancedPacketOption::Comment(_)
                        | EnhancedPacketOption::Flags(_)
                        | EnhancedPacketOption::DropCount(_)
                        | EnhancedPacketOption::CustomBinary(_)
                        | EnhancedPacketOption::CustomUtf8(_)
                        | EnhancedPacketOption::Unknown(_) => false,
                    });
                    let at_ns = u64::try_from(block.timestamp.as_nanos()).unwrap_or(u64::MAX);
                    (at_ns, block.interface_id, block.data.into_owned(), sound)
                }
                Ok(_) => continue,
                Err(error) => {
                    self.damage = Some(format!("the file breaks off after packet {}: {error}", self.packets));
                    return None;
                }
            };
            self.packets += 1;
            // Stamps were made from the monotonic clock and the wall clock at the start, so this is exact.
            let at = self.origin.plus_ns(at_ns.saturating_sub(self.wall_ns));
            let item = if sound { item(lane, at, &data) } else { None };
            match item {
                Some(item) => return Some(item),
                None => {
                    self.damage.get_or_insert_with(|| {
                        format!("packet {} is damaged and was left out", self.packets)
                    });
                }
            }
        }
    }
}

fn item(lane: u32, at: Mono, data: &[u8]) -> Option<Item> {
    match u8::try_from(lane).ok()? {
        lane::FRAMES => {
            let [link, way, bytes @ ..] = data else { return None };
            let direction = if *way == 0 { Direction::ToDrivers } else { Direction::FromDrivers };
            Some(Item::Frame { at, link: *link, direction, bytes: bytes.to_vec() })
        }
        lane::PAD => Some(Item::Pad(at, postcard::from_bytes(data).ok()?)),
        lane::TICKS => Some(Item::Tick(Box::new(postcard::from_bytes(data).ok()?))),
        lane::EVENTS => {
            let (kind, data) = data.split_first()?;
            match kind {
                0 => Some(Item::Event(at, postcard::from_bytes(data).ok()?)),
                1 => Some(Item::Snapshot(at, Box::new(postcard::from_bytes(data).ok()?))),
                2 => Some(Item::Lost(at, u32::from_le_bytes(data.try_into().ok()?))),
                _ => None,
            }
        }
        _ => None,
    }
}
