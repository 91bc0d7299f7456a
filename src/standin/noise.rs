//! What a line does to the bytes on it: frames that go missing, bits that flip, answers that come late.

use std::collections::VecDeque;

use super::chance::Chance;
use crate::units::Mono;

/// One direction of one line.
#[derive(Clone, Debug)]
pub(super) struct Way {
    chance: Chance,
    /// Nothing comes through.
    pub(super) cut: bool,
    lossy: f64,
    noisy: f64,
    late_ns: u64,
    /// The frame that is passing is lost.
    losing: bool,
    /// The next byte begins a frame.
    at_start: bool,
    /// Bits that pass before the next one flips.
    sound_bits: u64,
    /// Bytes under way, and when they arrive.
    under_way: VecDeque<(Mono, Vec<u8>)>,
}

impl Way {
    pub(super) fn new(chance: Chance) -> Self {
        Self {
            chance,
            cut: false,
            lossy: 0.0,
            noisy: 0.0,
            late_ns: 0,
            losing: false,
            at_start: true,
            sound_bits: u64::MAX,
            under_way: VecDeque::new(),
        }
    }

    /// Each frame is lost with this probability.
    pub(super) fn set_lossy(&mut self, probability: f64) {
        self.lossy = probability;
        self.losing = false;
    }

    /// Each bit flips with this probability.
    pub(super) fn set_noisy(&mut self, probability: f64) {
        self.noisy = probability;
        self.sound_bits = self.chance.until_failure(probability);
    }

    /// Everything comes this much later.
    pub(super) fn set_late(&mut self, late_ns: u64) {
        self.late_ns = late_ns;
    }

    /// Takes bytes in at `now`.
    pub(super) fn put(&mut self, bytes: &[u8], now: Mono) {
        if self.cut || bytes.is_empty() {
            return;
        }
        if self.lossy <= 0.0 && self.sound_bits == u64::MAX && !self.losing {
            self.at_start = bytes.last() == Some(&0);
            self.under_way.push_back((now.plus_ns(self.late_ns), bytes.to_vec()));
            return;
        }
        let mut passing = Vec::with_capacity(bytes.len());
        for &byte in bytes {
            if self.at_start {
                self.losing = self.lossy > 0.0 && self.chance.even() < self.lossy;
            }
            self.at_start = byte == 0;
            let byte = self.flip(byte);
            if !self.losing {
                passing.push(byte);
            }
        }
        self.under_way.push_back((now.plus_ns(self.late_ns), passing));
    }

    /// Appends to `out` what has come through by `now`, in the order in which it was put in.
    pub(super) fn take(&mut self, now: Mono, out: &mut Vec<u8>) {
        while self.under_way.front().is_some_and(|(due, _)| *due <= now) {
            if let Some((_, bytes)) = self.under_way.pop_front() {
                out.extend_from_slice(&bytes);
            }
        }
    }

    fn flip(&mut self, byte: u8) -> u8 {
        let mut flipped = byte;
        let mut left = 8;
        while self.sound_bits < left {
            left -= self.sound_bits + 1;
            flipped ^= 1 << left;
            self.sound_bits = self.chance.until_failure(self.noisy);
        }
        if self.sound_bits != u64::MAX {
            self.sound_bits -= left;
        }
        flipped
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn through(way: &mut Way, bytes: &[u8]) -> Vec<u8> {
        let mut out = Vec::new();
        way.put(bytes, Mono::from_ns(5));
        way.take(Mono::from_ns(5), &mut out);
        out
    }

    #[test]
    fn a_sound_line_passes_everything_in_order() {
        let mut way = Way::new(Chance::new(1, 1));
        assert_eq!(through(&mut way, &[1, 2, 0, 3, 0]), [1, 2, 0, 3, 0]);
        way.cut = true;
        assert!(through(&mut way, &[1, 2, 0]).is_empty());
    }

    #[test]
    fn loss_takes_whole_frames_at_its_rate_however_the_bytes_are_chunked() {
        let mut way = Way::new(Chance::new(3, 1));
        way.set_lossy(0.25);
        let mut kept = Vec::new();
        let stream: Vec<u8> = std::iter::repeat_n([9, 8, 7, 0], 20_000).flatten().collect();
        for chunk in stream.chunks(7) {
            kept.extend(through(&mut way, chunk));
        }
        assert!(kept.chunks(4).all(|frame| frame == [9, 8, 7, 0]), "a frame was torn");
        let share = kept.len() as f64 / stream.len() as f64;
        // Five standard errors of a binomial share of 20,000.
        assert!((share - 0.75).abs() < 5.0 * (0.25 * 0.75 / 20_000.0_f64).sqrt(), "{share}");
    }

    #[test]
    fn noise_flips_bits_at_its_rate_and_never_the_length() {
        let mut way = Way::new(Chance::new(4, 1));
        way.set_noisy(0.01);
        let stream = vec![0x5a_u8; 50_000];
        let heard = through(&mut way, &stream);
        assert_eq!(heard.len(), stream.len());
        let flipped: u32 = heard.iter().map(|b| (b ^ 0x5a).count_ones()).sum();
        let n = 400_000.0_f64;
        assert!((f64::from(flipped) / n - 0.01).abs() < 5.0 * (0.01 * 0.99 / n).sqrt(), "{flipped}");
        way.set_noisy(1.0);
        assert_eq!(through(&mut way, &[0x0f]), [0xf0]);
        way.set_noisy(0.0);
        assert_eq!(through(&mut way, &[0x0f]), [0x0f]);
    }

    #[test]
    fn late_bytes_wait_their_time_and_keep_their_order() {
        let mut way = Way::new(Chance::new(5, 1));
        way.set_late(100);
        way.put(&[1], Mono::from_ns(10));
        way.set_late(0);
        way.put(&[2], Mono::from_ns(20));
        let mut out = Vec::new();
        way.take(Mono::from_ns(109), &mut out);
        assert!(out.is_empty());
        way.take(Mono::from_ns(110), &mut out);
        assert_eq!(out, [1, 2]);
    }
}
