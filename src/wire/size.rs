//! How many bytes a frame takes on the line, for planning its load: kind, sequence, body and CRC, one byte of COBS (two
//! from 254 on, which no frame reaches) and the end mark.

/// Kind, sequence and CRC before COBS, one byte of COBS and the end mark.
const AROUND_BODY: usize = 2 + 4 + 1 + 1;

/// A Stop.
pub const STOP: usize = AROUND_BODY + 2;

/// A Drive for so many channels.
#[must_use]
pub const fn drive(channels: usize) -> usize {
    AROUND_BODY + 6 + 2 * channels
}

/// A Feedback of so many channels.
#[must_use]
pub const fn feedback(channels: usize) -> usize {
    AROUND_BODY + 18 + 6 * channels
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::wire::{
        ChannelState, Drive, Feedback, FromDrivers, MAX_CHANNELS, MAX_ON_LINE, Mode, ToDrivers,
        emit_from_drivers, emit_to_drivers,
    };

    #[test]
    fn sizes_are_those_that_are_emitted() {
        let mut out = [0; MAX_ON_LINE];
        assert_eq!(emit_to_drivers(1, &ToDrivers::Stop { ramp_ms: 300 }, &mut out), STOP);
        for channels in 1..=MAX_CHANNELS {
            let message = ToDrivers::Drive(Drive {
                mode: Mode::Run,
                valid_ms: 100,
                ramp_ms: 400,
                speeds: (0..channels).map(|_| -7).collect(),
            });
            assert_eq!(emit_to_drivers(1, &message, &mut out), drive(channels));
            let message = FromDrivers::Feedback(Feedback {
                ack: 1,
                status: 0,
                token: 2,
                boot: 3,
                clock_us: 4,
                supply_mv: 24_000,
                yaw_rate: 0,
                refused: 0,
                channels: (0..channels).map(|_| ChannelState { angle: -1, speed: 5 }).collect(),
            });
            assert_eq!(emit_from_drivers(1, &message, &mut out), feedback(channels));
        }
    }
}
