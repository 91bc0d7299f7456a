//! The gamepad path with a real evdev device, which umockdev makes on a machine that has none: found, read, remapped,
//! unplugged, plugged again. `tests/run` installs what it needs; without it the test says that it was skipped.

use std::process::Command;

#[test]
fn a_real_device_file_is_found_read_unplugged_and_plugged_again() {
    let python = "/usr/bin/python3";
    let there = Command::new("umockdev-wrapper")
        .args([python, "-c", "import gi; gi.require_version('UMockdev', '1.0')"])
        .output();
    if !there.is_ok_and(|it| it.status.success()) {
        eprintln!(
            "SKIPPED: needs umockdev, gir1.2-umockdev-1.0 and python3-gi (tests/run installs them as root)"
        );
        return;
    }
    let out = Command::new("umockdev-wrapper")
        .arg(python)
        .arg(concat!(env!("CARGO_MANIFEST_DIR"), "/tests/pad/device.py"))
        .arg(env!("CARGO_BIN_EXE_gripline"))
        .output()
        .unwrap();
    let (said, errors) = (String::from_utf8_lossy(&out.stdout), String::from_utf8_lossy(&out.stderr));
    assert!(out.status.success() && said.contains("PASS"), "{said}{errors}");
}
