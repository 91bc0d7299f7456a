//! What a client of the console says: bytes to lines, lines to requests. Pure, so that strangers' bytes can be tried on it
//! by the million.

use serde_json::Value;

/// The longest line of a client.
pub const LONGEST: usize = 1024;

/// A line that is not whole yet; never longer than [`LONGEST`].
#[derive(Clone, Debug, Default)]
pub struct Line {
    bytes: Vec<u8>,
}

/// What a byte came to.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Heard {
    /// The line goes on.
    Part,
    /// It is whole.
    Whole(Vec<u8>),
    /// It is longer than any request: the client is not to be listened to any more.
    TooLong,
}

impl Line {
    /// Takes a byte.
    pub fn push(&mut self, byte: u8) -> Heard {
        if byte == b'\n' {
            return Heard::Whole(std::mem::take(&mut self.bytes));
        }
        if self.bytes.len() + 1 >= LONGEST {
            return Heard::TooLong;
        }
        self.bytes.push(byte);
        Heard::Part
    }

    /// Nothing has come of the next line.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.bytes.is_empty()
    }
}

/// What a client asks.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Request {
    /// How the drive stands.
    Status,
    /// Stop.
    Stop,
    /// Reset, and whether the base is in the client's sight.
    Reset {
        /// It is.
        in_sight: bool,
    },
}

/// Reads a line.
///
/// # Errors
/// In one line, what is wrong with it.
pub fn request(line: &[u8]) -> Result<Request, String> {
    let request =
        serde_json::from_slice::<Value>(line).map_err(|error| format!("not a line of JSON: {error}"))?;
    match request.get("ask").and_then(Value::as_str) {
        Some("status") => Ok(Request::Status),
        Some("stop") => Ok(Request::Stop),
        Some("reset") => Ok(Request::Reset { in_sight: request.get("in_sight") == Some(&Value::Bool(true)) }),
        Some(_) | None => Err("unknown request; ask for \"status\", \"stop\" or \"reset\"".into()),
    }
}
