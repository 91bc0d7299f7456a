//! A gamepad's own device file: whether it still answers, and where its sticks and buttons truly are.

#![expect(unsafe_code, reason = "the EVIOCG ioctls; each call says what makes it sound")]

use std::fs::File;
use std::io::Read;
use std::os::fd::AsRawFd;
use std::os::unix::fs::OpenOptionsExt;
use std::path::{Path, PathBuf};

/// Position and range of one axis, as linux/input.h has it.
#[repr(C)]
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct AbsInfo {
    /// Where it is.
    pub value: i32,
    /// Least value.
    pub minimum: i32,
    /// Greatest value.
    pub maximum: i32,
    fuzz: i32,
    flat: i32,
    resolution: i32,
}

/// `_IOC(_IOC_READ, 'E', number, size)`.
const fn eviocg(number: u64, size: u64) -> libc::c_ulong {
    (2 << 30) | (size << 16) | (0x45 << 8) | number
}

const KEY_BYTES: usize = 96;

/// A device file that is only watched: its events are left to others.
#[derive(Debug)]
pub struct Watch {
    file: File,
}

impl Watch {
    /// Opens it for reading, never waiting.
    ///
    /// # Errors
    /// Without permission, or when it is gone.
    pub fn open(path: &Path) -> std::io::Result<Self> {
        let file = File::options().read(true).custom_flags(libc::O_NONBLOCK | libc::O_CLOEXEC).open(path)?;
        Ok(Self { file })
    }

    /// Whether the device has gone.
    #[must_use]
    pub fn is_gone(&self) -> bool {
        let mut poll = libc::pollfd { fd: self.file.as_raw_fd(), events: 0, revents: 0 };
        // SAFETY: one valid pollfd with its count; no waiting.
        let n = unsafe { libc::poll(&raw mut poll, 1, 0) };
        n > 0 && poll.revents & (libc::POLLHUP | libc::POLLERR | libc::POLLNVAL) != 0
    }

    /// Where an axis is now.
    #[must_use]
    pub fn axis(&self, code: u16) -> Option<AbsInfo> {
        let mut info = AbsInfo::default();
        let request = eviocg(0x40 + u64::from(code), size_of::<AbsInfo>() as u64);
        // SAFETY: the kernel writes exactly one input_absinfo, which AbsInfo is.
        let result = unsafe { libc::ioctl(self.file.as_raw_fd(), request, &raw mut info) };
        (result >= 0).then_some(info)
    }

    /// Whether a key or button is down now.
    #[must_use]
    pub fn key(&self, code: u16) -> Option<bool> {
        let mut bits = [0_u8; KEY_BYTES];
        // SAFETY: the kernel writes at most the size that the request names, which is that of `bits`.
        let result =
            unsafe { libc::ioctl(self.file.as_raw_fd(), eviocg(0x18, KEY_BYTES as u64), bits.as_mut_ptr()) };
        let byte = bits.get(usize::from(code / 8))?;
        (result >= 0).then_some(byte & (1 << (code % 8)) != 0)
    }

    /// What the device calls its serial number, or where it is plugged in.
    #[must_use]
    pub fn serial(&self) -> Option<String> {
        [0x08, 0x07].into_iter().find_map(|number| {
            let mut text = [0_u8; 128];
            // SAFETY: the kernel writes at most the size that the request names, which is that of `text`.
            let n = unsafe { libc::ioctl(self.file.as_raw_fd(), eviocg(number, 128), text.as_mut_ptr()) };
            let text = text.get(..usize::try_from(n).ok()?)?;
            let text = String::from_utf8_lossy(text).trim_matches('\0').to_owned();
            (!text.is_empty()).then_some(text)
        })
    }
}

/// The raw reports beside an event device: where there are any that may be read, their stream tells that a pad is alive.
#[derive(Debug)]
pub struct RawReports {
    file: File,
}

impl RawReports {
    /// Finds the hidraw node under the same parent as /dev/input/eventN, and opens it.
    #[must_use]
    pub fn beside(event: &Path) -> Option<Self> {
        let name = event.file_name()?;
        let parent = PathBuf::from("/sys/class/input").join(name).join("device/device/hidraw");
        let node = std::fs::read_dir(parent).ok()?.flatten().next()?.file_name();
        let path = Path::new("/dev").join(node);
        let file =
            File::options().read(true).custom_flags(libc::O_NONBLOCK | libc::O_CLOEXEC).open(path).ok()?;
        Some(Self { file })
    }

    /// How many reports have come since the last call.
    pub fn count(&mut self) -> u32 {
        let mut report = [0; 512];
        let mut count = 0;
        while count < 64 && matches!(self.file.read(&mut report), Ok(n) if n > 0) {
            count += 1;
        }
        count
    }
}
