//! Whole frames: values to bytes on the line, and the bytes of one frame back to a value.
//!
//! ```text
//! Ask       01 ss                                                          crc32
//! Drive     02 ss mode:u8 valid_ms:u16 ramp_ms:u16 n:u8 n*{speed:i16}      crc32
//! Stop      03 ss ramp_ms:u16                                              crc32
//! Clear     04 ss token:u16                                                crc32
//! Identity  81 ss version:u8 flags:u8 channels:u8 speed_lsb:u32 angle_lsb:u32
//!                 silence_ms:u16 ramp_max_ms:u16 boot:u16 name:0..24 bytes crc32
//! Feedback  82 ss ack:u8 status:u16 token:u16 boot:u16 clock_us:u32 supply_mv:u16
//!                 yaw_rate:i16 refused:u16 n:u8 n*{angle:i32 speed:i16}    crc32
//! ```
//! `ss` is the sequence; numbers are little-endian; the CRC is CRC-32/ISCSI over everything before it.

use arrayvec::{ArrayString, ArrayVec};
use crc::{CRC_32_ISCSI, Crc, Table};

use super::{
    ChannelState, Drive, Feedback, FromDrivers, Identity, MAX_ON_LINE, MAX_PLAIN, Mode, PerChannel, ToDrivers,
};

/// Kind numbers. Zero is never one; a number once used is never used for something else.
pub mod kind {
    /// [`super::ToDrivers::Ask`]
    pub const ASK: u8 = 0x01;
    /// [`super::ToDrivers::Drive`]
    pub const DRIVE: u8 = 0x02;
    /// [`super::ToDrivers::Stop`]
    pub const STOP: u8 = 0x03;
    /// [`super::ToDrivers::Clear`]
    pub const CLEAR: u8 = 0x04;
    /// [`super::FromDrivers::Identity`]
    pub const IDENTITY: u8 = 0x81;
    /// [`super::FromDrivers::Feedback`]
    pub const FEEDBACK: u8 = 0x82;
}

/// Why bytes are no frame. The receiver drops them and counts; none of these is ever answered.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum WireError {
    /// More bytes than any frame has before the end mark came.
    #[error("frame longer than {MAX_PLAIN} bytes")]
    Overlong,
    /// The bytes are no COBS coding.
    #[error("not COBS coded")]
    NotCobs,
    /// Too few bytes to hold kind, sequence and CRC.
    #[error("frame of {0} bytes is too short")]
    TooShort(usize),
    /// The CRC does not fit.
    #[error("CRC does not fit")]
    Crc,
    /// A kind that is not of this version, or of the other direction.
    #[error("unknown kind 0x{0:02x}")]
    UnknownKind(u8),
    /// The CRC fits but the body has another length than its kind has.
    #[error("body of {len} bytes does not fit kind 0x{kind:02x}")]
    BodyLength {
        /// The kind.
        kind: u8,
        /// Length of the body.
        len: usize,
    },
    /// The CRC fits but a value is not one of those defined.
    #[error("kind 0x{kind:02x} has an undefined value in {field}")]
    Value {
        /// The kind.
        kind: u8,
        /// The field.
        field: &'static str,
    },
}

/// CRC-32/ISCSI (Castagnoli), eight bytes a step: 16 tables of 1 KiB, built at compile time.
pub(super) static CRC: Crc<u32, Table<16>> = Crc::<u32, Table<16>>::new(&CRC_32_ISCSI);

/// A frame before COBS, being written. Everything that is defined fits, so running over is only dropped.
struct Plain {
    bytes: ArrayVec<u8, MAX_PLAIN>,
}

impl Plain {
    fn new(kind: u8, sequence: u8) -> Self {
        let mut plain = Self { bytes: ArrayVec::new() };
        plain.put(&[kind, sequence]);
        plain
    }

    fn put(&mut self, bytes: &[u8]) {
        let fits = self.bytes.try_extend_from_slice(bytes).is_ok();
        debug_assert!(fits, "every frame of the format fits {MAX_PLAIN} bytes");
    }

    /// Adds the CRC, codes it with COBS into `out` and adds the end mark; gives the number of bytes.
    fn finish(mut self, out: &mut [u8; MAX_ON_LINE]) -> usize {
        let crc = CRC.checksum(&self.bytes);
        self.put(&crc.to_le_bytes());
        let coded = cobs::try_encode(&self.bytes, out).unwrap_or(0);
        if let Some(end) = out.get_mut(coded) {
            *end = 0;
        }
        coded + 1
    }
}

/// Writes a frame for the drivers into `out`, whole with its end mark; gives the number of bytes.
pub fn emit_to_drivers(sequence: u8, message: &ToDrivers, out: &mut [u8; MAX_ON_LINE]) -> usize {
    let plain = match message {
        ToDrivers::Ask => Plain::new(kind::ASK, sequence),
        ToDrivers::Drive(drive) => {
            let mut plain = Plain::new(kind::DRIVE, sequence);
            plain.put(&[drive.mode as u8]);
            plain.put(&drive.valid_ms.to_le_bytes());
            plain.put(&drive.ramp_ms.to_le_bytes());
            plain.put(&[count(drive.speeds.len())]);
            for speed in &drive.speeds {
                plain.put(&speed.to_le_bytes());
            }
            plain
        }
        ToDrivers::Stop { ramp_ms } => {
            let mut plain = Plain::new(kind::STOP, sequence);
            plain.put(&ramp_ms.to_le_bytes());
            plain
        }
        ToDrivers::Clear { token } => {
            let mut plain = Plain::new(kind::CLEAR, sequence);
            plain.put(&token.to_le_bytes());
            plain
        }
    };
    plain.finish(out)
}

/// Writes a frame from the drivers into `out`, whole with its end mark; gives the number of bytes.
pub fn emit_from_drivers(sequence: u8, message: &FromDrivers, out: &mut [u8; MAX_ON_LINE]) -> usize {
    let plain = match message {
        FromDrivers::Identity(it) => {
            let mut plain = Plain::new(kind::IDENTITY, sequence);
            plain.put(&[it.version, it.flags, it.channels]);
            plain.put(&it.speed_lsb_urad_s.to_le_bytes());
            plain.put(&it.angle_lsb_urad.to_le_bytes());
            plain.put(&it.silence_ms.to_le_bytes());
            plain.put(&it.ramp_max_ms.to_le_bytes());
            plain.put(&it.boot.to_le_bytes());
            plain.put(it.name.as_bytes());
            plain
        }
        FromDrivers::Feedback(it) => {
            let mut plain = Plain::new(kind::FEEDBACK, sequence);
            plain.put(&[it.ack]);
            plain.put(&it.status.to_le_bytes());
            plain.put(&it.token.to_le_bytes());
            plain.put(&it.boot.to_le_bytes());
            plain.put(&it.clock_us.to_le_bytes());
            plain.put(&it.supply_mv.to_le_bytes());
            plain.put(&it.yaw_rate.to_le_bytes());
            plain.put(&it.refused.to_le_bytes());
            plain.put(&[count(it.channels.len())]);
            for channel in &it.channels {
                plain.put(&channel.angle.to_le_bytes());
                plain.put(&channel.speed.to_le_bytes());
            }
            plain
        }
    };
    plain.finish(out)
}

/// A number of channels as its byte; [`super::MAX_CHANNELS`] is far below 256.
fn count(channels: usize) -> u8 {
    u8::try_from(channels).unwrap_or(u8::MAX)
}

/// Reads a frame for the drivers from its bytes before COBS.
///
/// # Errors
/// Says what keeps the bytes from being such a frame.
pub fn parse_to_drivers(plain: &[u8]) -> Result<(u8, ToDrivers), WireError> {
    let (kind, sequence, mut body) = opened(plain)?;
    let message = match kind {
        kind::ASK => ToDrivers::Ask,
        kind::DRIVE => ToDrivers::Drive(drive(&mut body)?),
        kind::STOP => ToDrivers::Stop { ramp_ms: body.u16()? },
        kind::CLEAR => ToDrivers::Clear { token: body.u16()? },
        other => return Err(WireError::UnknownKind(other)),
    };
    body.end()?;
    Ok((sequence, message))
}

/// Reads a frame from the drivers from its bytes before COBS.
///
/// # Errors
/// Says what keeps the bytes from being such a frame.
pub fn parse_from_drivers(plain: &[u8]) -> Result<(u8, FromDrivers), WireError> {
    let (kind, sequence, mut body) = opened(plain)?;
    let message = match kind {
        kind::IDENTITY => FromDrivers::Identity(identity(&mut body)?),
        kind::FEEDBACK => FromDrivers::Feedback(feedback(&mut body)?),
        other => return Err(WireError::UnknownKind(other)),
    };
    body.end()?;
    Ok((sequence, message))
}

fn drive(body: &mut Body<'_>) -> Result<Drive, WireError> {
    let mode = match body.u8()? {
        0 => Mode::Park,
        1 => Mode::Hold,
        2 => Mode::Run,
        _ => return Err(body.undefined("mode")),
    };
    let (valid_ms, ramp_ms) = (body.u16()?, body.u16()?);
    let n = body.u8()?;
    let mut speeds = PerChannel::new();
    for _ in 0..n {
        let speed = body.i16()?;
        speeds.try_push(speed).map_err(|_| body.undefined("n"))?;
    }
    if mode != Mode::Run && speeds.iter().any(|&speed| speed != 0) {
        return Err(body.undefined("speed: not zero, but mode is not run"));
    }
    Ok(Drive { mode, valid_ms, ramp_ms, speeds })
}

fn identity(body: &mut Body<'_>) -> Result<Identity, WireError> {
    Ok(Identity {
        version: body.u8()?,
        flags: body.u8()?,
        channels: body.u8()?,
        speed_lsb_urad_s: body.u32()?,
        angle_lsb_urad: body.u32()?,
        silence_ms: body.u16()?,
        ramp_max_ms: body.u16()?,
        boot: body.u16()?,
        name: {
            let bytes = body.rest();
            core::str::from_utf8(bytes)
                .ok()
                .and_then(|name| ArrayString::from(name).ok())
                .ok_or_else(|| body.undefined("name"))?
        },
    })
}

fn feedback(body: &mut Body<'_>) -> Result<Feedback, WireError> {
    let mut it = Feedback {
        ack: body.u8()?,
        status: body.u16()?,
        token: body.u16()?,
        boot: body.u16()?,
        clock_us: body.u32()?,
        supply_mv: body.u16()?,
        yaw_rate: body.i16()?,
        refused: body.u16()?,
        channels: PerChannel::new(),
    };
    for _ in 0..body.u8()? {
        let channel = ChannelState { angle: body.i32()?, speed: body.i16()? };
        it.channels.try_push(channel).map_err(|_| body.undefined("n"))?;
    }
    Ok(it)
}

/// Checks the CRC and takes kind and sequence off.
fn opened(plain: &[u8]) -> Result<(u8, u8, Body<'_>), WireError> {
    if plain.len() > MAX_PLAIN {
        return Err(WireError::Overlong);
    }
    let short = WireError::TooShort(plain.len());
    let (checked, crc) = plain.split_last_chunk::<4>().ok_or(short)?;
    let [kind, sequence, bytes @ ..] = checked else { return Err(short) };
    if CRC.checksum(checked) != u32::from_le_bytes(*crc) {
        return Err(WireError::Crc);
    }
    Ok((*kind, *sequence, Body { kind: *kind, len: bytes.len(), bytes }))
}

/// What is still unread of a body.
struct Body<'a> {
    kind: u8,
    len: usize,
    bytes: &'a [u8],
}

impl<'a> Body<'a> {
    fn take<const N: usize>(&mut self) -> Result<[u8; N], WireError> {
        let (taken, rest) = self.bytes.split_first_chunk::<N>().ok_or_else(|| self.wrong_length())?;
        self.bytes = rest;
        Ok(*taken)
    }

    fn u8(&mut self) -> Result<u8, WireError> {
        self.take().map(u8::from_le_bytes)
    }

    fn u16(&mut self) -> Result<u16, WireError> {
        self.take().map(u16::from_le_bytes)
    }

    fn i16(&mut self) -> Result<i16, WireError> {
        self.take().map(i16::from_le_bytes)
    }

    fn u32(&mut self) -> Result<u32, WireError> {
        self.take().map(u32::from_le_bytes)
    }

    fn i32(&mut self) -> Result<i32, WireError> {
        self.take().map(i32::from_le_bytes)
    }

    fn rest(&mut self) -> &'a [u8] {
        core::mem::take(&mut self.bytes)
    }

    fn end(&self) -> Result<(), WireError> {
        if self.bytes.is_empty() { Ok(()) } else { Err(self.wrong_length()) }
    }

    fn wrong_length(&self) -> WireError {
        WireError::BodyLength { kind: self.kind, len: self.len }
    }

    fn undefined(&self, field: &'static str) -> WireError {
        WireError::Value { kind: self.kind, field }
    }
}

/// The bytes of a Stop before COBS: eight, so that one fits an atomic word ahead of time.
#[must_use]
pub fn stop_plain(sequence: u8, ramp_ms: u16) -> [u8; 8] {
    let [low, high] = ramp_ms.to_le_bytes();
    let [a, b, c, d] = CRC.checksum(&[kind::STOP, sequence, low, high]).to_le_bytes();
    [kind::STOP, sequence, low, high, a, b, c, d]
}

/// An empty frame, which ends whatever was cut off before it, and that Stop: what one write puts on the line.
#[must_use]
pub fn stop_on_line(plain: [u8; 8]) -> [u8; 11] {
    let mut out = [0; 11];
    if let Some(coded) = out.get_mut(1..10) {
        // Eight bytes take nine: there is room.
        let _ = cobs::try_encode(&plain, coded);
    }
    out
}
