//! Bytes from a line, cut into frames: any bytes, in any chunking.

use super::MAX_PLAIN;
use super::frame::WireError;

/// The most coded bytes before the end mark: COBS adds one to at most 253.
const MAX_CODED: usize = MAX_PLAIN + 1;

/// Collects the bytes of one frame up to its end mark.
#[derive(Clone, Debug)]
pub struct Deframer {
    /// Coded bytes of the frame being received; after its end mark the decoded ones.
    buffer: [u8; MAX_CODED],
    /// How many are there; never above `MAX_CODED`.
    len: usize,
    /// The frame was longer than any can be: what still comes up to the end mark belongs to it.
    overlong: bool,
}

impl Default for Deframer {
    fn default() -> Self {
        Self::new()
    }
}

impl Deframer {
    /// At the beginning of a frame.
    #[must_use]
    pub const fn new() -> Self {
        Self { buffer: [0; MAX_CODED], len: 0, overlong: false }
    }

    /// Takes one byte. `None`: no frame is complete yet (or an empty one was ignored). `Some(Ok)`: the bytes of one
    /// frame before COBS, its CRC not yet looked at. `Some(Err)`: one frame is lost, carry on.
    pub fn push(&mut self, byte: u8) -> Option<Result<&[u8], WireError>> {
        if byte != 0 {
            match self.buffer.get_mut(self.len) {
                Some(place) => {
                    *place = byte;
                    self.len += 1;
                }
                None => self.overlong = true,
            }
            return None;
        }
        let len = core::mem::take(&mut self.len);
        if core::mem::take(&mut self.overlong) {
            return Some(Err(WireError::Overlong));
        }
        if len == 0 {
            return None;
        }
        let coded = self.buffer.get_mut(..len)?;
        match cobs::decode_in_place(coded) {
            Ok(plain) => self.buffer.get(..plain).map(Ok),
            Err(_) => Some(Err(WireError::NotCobs)),
        }
    }

    /// Forgets a frame that has begun, as after a line was opened anew.
    pub fn restart(&mut self) {
        *self = Self::new();
    }
}
