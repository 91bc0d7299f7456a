//! One serial link to drivers: opening, reading, writing, and the stop line over all of them.

mod holder;
mod line;
mod open;
mod reader;
mod slot;
mod stop_line;

pub use holder::{Holder, holder, is_gripline};
pub use line::{Line, Sent};
pub use open::{LinkError, open};
pub use reader::{LinkNews, Links, ending, start};
pub use stop_line::StopLine;

use std::sync::Arc;

use crate::units::Mono;
use crate::wire::Direction;

/// Sees every frame on the line, whole with its end mark: link, way, bytes, when. Called on tick, reader and stop path:
/// it must neither wait nor allocate.
pub type Tap = Arc<dyn Fn(u8, Direction, &[u8], Mono) + Send + Sync>;
