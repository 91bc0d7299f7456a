//! Who has a port open: found through /proc, which needs no cooperation of the other program.

use std::path::Path;

/// A process that has a device open.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Holder {
    /// Its number.
    pub pid: u32,
    /// It is this program.
    pub is_gripline: bool,
}

/// The first other process that has `path` open, a Gripline before others; only processes of the same user (or any,
/// for root) can be seen.
#[must_use]
pub fn holder(path: &Path) -> Option<Holder> {
    let device = std::fs::canonicalize(path).ok()?;
    let own = std::process::id();
    let mut found: Option<Holder> = None;
    for entry in std::fs::read_dir("/proc").ok()?.flatten() {
        let Some(pid) = entry.file_name().to_str().and_then(|it| it.parse::<u32>().ok()) else { continue };
        if pid == own || found.as_ref().is_some_and(|it| it.is_gripline) {
            continue;
        }
        let Ok(open) = std::fs::read_dir(entry.path().join("fd")) else { continue };
        if open.flatten().any(|fd| std::fs::read_link(fd.path()).is_ok_and(|it| it == device)) {
            found = Some(Holder { pid, is_gripline: is_gripline(pid) });
        }
    }
    found
}

/// Whether a process runs `gripline drive`: the program's name and its first argument.
#[must_use]
pub fn is_gripline(pid: u32) -> bool {
    let Ok(line) = std::fs::read(format!("/proc/{pid}/cmdline")) else { return false };
    let mut words = line.split(|it| *it == 0);
    let name = words.next().and_then(|it| it.rsplit(|it| *it == b'/').next());
    name == Some(b"gripline") && words.any(|it| it == b"drive")
}
