//! The file's side: packets put together from chunks and written as pcapng blocks, by the capture format's own crate.

use std::borrow::Cow;
use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::{Path, PathBuf};
use std::time::Duration;

use pcap_file::DataLink;
use pcap_file::pcapng::PcapNgWriter;
use pcap_file::pcapng::blocks::enhanced_packet::{EnhancedPacketBlock, EnhancedPacketOption};
use pcap_file::pcapng::blocks::interface_description::{
    InterfaceDescriptionBlock, InterfaceDescriptionOption,
};
use pcap_file::pcapng::blocks::section_header::{SectionHeaderBlock, SectionHeaderOption};

use super::item::FORMAT;
use super::queue::{Chunk, LARGEST, lane};
use crate::config::Plan;
use crate::units::Mono;

/// Hash algorithm 2 of the capture format's hash option: CRC-32.
const HASH_CRC32: u8 = 2;
pub(super) static CRC: crc::Crc<u32> = crc::Crc::<u32>::new(&crc::CRC_32_ISO_HDLC);

/// Comments of the section header begin with these words.
pub(super) const CONFIG_MARK: &str = "configuration:\n";
pub(super) const FORMAT_MARK: &str = "gripline run format ";
pub(super) const WALL_MARK: &str = "wall clock at start, ns: ";
pub(super) const ORIGIN_MARK: &str = "monotonic clock at start, ns: ";

/// An option of the capture format holds at most 65,535 bytes; a longer configuration goes in pieces.
const PIECE: usize = 60_000;

pub(super) struct Writer {
    path: PathBuf,
    file: PcapNgWriter<BufWriter<File>>,
    wall_ns: u64,
    origin: Mono,
    /// The packet being put together, one a lane.
    parts: [Vec<u8>; 4],
    next_part: [u8; 4],
    failures: u32,
}

impl Writer {
    pub(super) fn create(path: PathBuf, plan: &Plan, wall_ns: u64, origin: Mono) -> io::Result<Self> {
        let file = File::options().write(true).create_new(true).open(&path)?;
        let mut options = vec![
            SectionHeaderOption::UserApplication(Cow::Owned(format!(
                "gripline {}",
                env!("CARGO_PKG_VERSION")
            ))),
            SectionHeaderOption::Comment(Cow::Owned(format!("{FORMAT_MARK}{FORMAT}"))),
            SectionHeaderOption::Comment(Cow::Owned(format!("{ORIGIN_MARK}{}", origin.ns()))),
            SectionHeaderOption::Comment(Cow::Owned(format!("{WALL_MARK}{wall_ns}"))),
        ];
        let mut rest = plan.text.as_str();
        while !rest.is_empty() {
            let end =
                (0..=PIECE.min(rest.len())).rev().find(|&it| rest.is_char_boundary(it)).unwrap_or(rest.len());
            let (piece, after) = rest.split_at(end);
            options.push(SectionHeaderOption::Comment(Cow::Owned(format!("{CONFIG_MARK}{piece}"))));
            rest = after;
        }
        let section = SectionHeaderBlock { options, ..SectionHeaderBlock::default() };
        let mut file = PcapNgWriter::with_section_header(BufWriter::with_capacity(64 * 1024, file), section)
            .map_err(other)?;
        let names = ["frames", "pad", "ticks", "events"];
        let types = [DataLink::USER0, DataLink::USER1, DataLink::USER2, DataLink::USER3];
        for (name, linktype) in names.into_iter().zip(types) {
            let options = vec![
                InterfaceDescriptionOption::IfName(Cow::Borrowed(name)),
                // The crate writes nanoseconds without saying so; readers must be told.
                InterfaceDescriptionOption::IfTsResol(9),
            ];
            let block = InterfaceDescriptionBlock { linktype, snaplen: LARGEST as u32, options };
            file.write_pcapng_block(block).map_err(other)?;
        }
        file.get_mut().flush()?;
        let parts = [const { Vec::new() }; 4];
        Ok(Self { path, file, wall_ns, origin, parts, next_part: [0; 4], failures: 0 })
    }

    /// Takes a chunk; a packet is written when its last one has come. One with a hole is dropped.
    pub(super) fn take(&mut self, chunk: &Chunk) {
        let at = usize::from(chunk.lane);
        let (Some(parts), Some(next)) = (self.parts.get_mut(at), self.next_part.get_mut(at)) else { return };
        if chunk.part == 0 {
            parts.clear();
            *next = 0;
        }
        if chunk.part != *next {
            *next = u8::MAX;
            return;
        }
        *next = next.wrapping_add(1);
        parts.extend_from_slice(chunk.bytes.get(..usize::from(chunk.len)).unwrap_or(&[]));
        if chunk.last {
            let packet = std::mem::take(parts);
            self.write(chunk.at, chunk.lane, &packet);
            if let Some(place) = self.parts.get_mut(at) {
                *place = packet;
            }
        }
    }

    /// Tells that chunks found no room.
    pub(super) fn lost(&mut self, at: Mono, count: u32) {
        let mut packet = vec![2];
        packet.extend_from_slice(&count.to_le_bytes());
        self.write(at, lane::EVENTS, &packet);
    }

    fn write(&mut self, at: Mono, lane: u8, packet: &[u8]) {
        let mut hash = vec![HASH_CRC32];
        hash.extend_from_slice(&CRC.checksum(packet).to_le_bytes());
        let block = EnhancedPacketBlock {
            interface_id: u32::from(lane),
            timestamp: Duration::from_nanos(self.wall_ns + at.since_ns(self.origin)),
            original_len: packet.len() as u32,
            data: Cow::Borrowed(packet),
            options: vec![EnhancedPacketOption::Hash(Cow::Owned(hash))],
        };
        if self.file.write_pcapng_block(block).is_err() {
            self.failures = self.failures.saturating_add(1);
        }
    }

    /// Hands everything to the system.
    pub(super) fn flush(&mut self) {
        if self.file.get_mut().flush().is_err() || !self.path.exists() {
            self.failures = self.failures.saturating_add(1);
        }
    }

    pub(super) fn failures(&self) -> u32 {
        self.failures
    }
}

fn other(error: pcap_file::PcapError) -> io::Error {
    match error {
        pcap_file::PcapError::IoError(error) => error,
        pcap_file::PcapError::IncompleteBuffer
        | pcap_file::PcapError::InvalidField(_)
        | pcap_file::PcapError::Utf8Error(_)
        | pcap_file::PcapError::FromUtf8Error(_)
        | pcap_file::PcapError::InvalidInterfaceId(_) => io::Error::other(error.to_string()),
    }
}

/// A new name in a folder: the base's name and the time in UTC, with a number behind it where that is taken.
pub(super) fn next_path(dir: &Path, base: &str, wall_ns: u64) -> PathBuf {
    let base: String = base.chars().map(|it| if it.is_ascii_alphanumeric() { it } else { '-' }).collect();
    let stem = format!("{}-{}", base.trim_matches('-'), stamp(wall_ns / 1_000_000_000));
    let first = dir.join(format!("{stem}.pcapng"));
    if !first.exists() {
        return first;
    }
    (2..).map(|n| dir.join(format!("{stem}-{n}.pcapng"))).find(|it| !it.exists()).unwrap_or(first)
}

/// Seconds since 1970 as YYYYMMDD-HHMMSS in UTC (days to date by Howard Hinnant's published civil-from-days).
fn stamp(seconds: u64) -> String {
    let (days, of_day) = (seconds / 86_400 + 719_468, seconds % 86_400);
    let (era, of_era) = (days / 146_097, days % 146_097);
    let year_of_era = (of_era - of_era / 1460 + of_era / 36_524 - of_era / 146_096) / 365;
    let of_year = of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
    let shifted = (5 * of_year + 2) / 153;
    let day = of_year - (153 * shifted + 2) / 5 + 1;
    let month = if shifted < 10 { shifted + 3 } else { shifted - 9 };
    let year = year_of_era + era * 400 + u64::from(month <= 2);
    format!("{year:04}{month:02}{day:02}-{:02}{:02}{:02}", of_day / 3600, of_day / 60 % 60, of_day % 60)
}

/// Deletes the oldest run files of a folder beyond a size; files that are not named as ours are left alone.
pub(super) fn remove_oldest(dir: &Path, keep_bytes: f64) {
    let Ok(entries) = std::fs::read_dir(dir) else { return };
    let mut runs: Vec<(std::time::SystemTime, u64, PathBuf)> = entries
        .flatten()
        .filter(|it| is_run_name(&it.file_name().to_string_lossy()))
        .filter_map(|it| {
            let meta = it.metadata().ok()?;
            Some((meta.modified().ok()?, meta.len(), it.path()))
        })
        .collect();
    runs.sort();
    let mut total: f64 = runs.iter().map(|it| it.1 as f64).sum();
    // The newest is the one being written.
    runs.pop();
    for (_, size, path) in runs {
        if total <= keep_bytes {
            return;
        }
        if std::fs::remove_file(&path).is_ok() {
            total -= size as f64;
        }
    }
}

/// name-YYYYMMDD-HHMMSS.pcapng, perhaps with a number before the ending.
fn is_run_name(name: &str) -> bool {
    let Some(stem) = name.strip_suffix(".pcapng") else { return false };
    let digits = |part: Option<&str>, n: usize| {
        part.is_some_and(|it| it.len() == n && it.bytes().all(|b| b.is_ascii_digit()))
    };
    let parts: Vec<&str> = stem.split('-').collect();
    (1..parts.len()).any(|at| digits(parts.get(at).copied(), 8) && digits(parts.get(at + 1).copied(), 6))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_are_written_as_the_calendar_has_them() {
        // Known dates: the epoch, and 2000-02-29 12:34:56 UTC = 951827696 (common practice: `date -u -d @951827696`).
        assert_eq!(stamp(0), "19700101-000000");
        assert_eq!(stamp(951_827_696), "20000229-123456");
        assert_eq!(stamp(1_798_761_599), "20261231-235959");
    }

    #[test]
    fn only_our_own_names_are_ever_deleted() {
        assert!(is_run_name("tray-cart-20260301-142233.pcapng"));
        assert!(is_run_name("tray-cart-20260301-142233-2.pcapng"));
        for other in
            ["notes.txt", "capture.pcapng", "2026.pcapng", "a-20260301.pcapng", "20260301-142233.pcapng.bak"]
        {
            assert!(!is_run_name(other), "{other}");
        }
    }
}
