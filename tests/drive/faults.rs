//! The tick breaks, on purpose: what stops the base then. Drivers that share no code with the program tell what reached
//! them.

use crate::bench::{Bench, PEER, Peer, READY_AND_DRIVE, Running, peer, wait_for};

/// The drivers latched because they were told to, not because they heard nothing more.
fn stopped_by_a_frame(peer: &mut Peer) {
    peer.running.says("\"event\": \"latched\", \"why\": \"stop\"");
    // The peer notes what it makes of a frame before the frame.
    peer.running.says("\"kind\": \"stop\"");
    let silent = peer.running.seen.iter().any(|it| it.contains("\"why\": \"silence\""));
    assert!(!silent, "the stop came only after the drivers had stopped by themselves");
    let seen = &peer.running.seen;
    assert!(seen.iter().any(|it| it.contains("\"mode\": \"run\"")), "it never drove");
    let stop = seen.iter().position(|it| it.contains("\"kind\": \"stop\"")).unwrap();
    assert!(!seen[stop..].iter().any(|it| it.contains("\"kind\": \"drive\"")), "motion after the stop");
}

/// Drives on the Python drivers until the fault strikes; gives the drive and what the drivers heard.
fn struck(fault: &str, bench: &Bench) -> (Running, Peer) {
    // Well before the drivers would stop by themselves.
    bench.change("late_ms = 500.0", "late_ms = 250.0");
    let peer = peer(&PEER);
    let mut command = bench.drive_on(&peer.port, &bench.hands(READY_AND_DRIVE), &["--on-stands"]);
    let mut drive = Running::start(command.env("GRIPLINE_TEST_FAULT", fault));
    drive.says("Ready -> Driving");
    (drive, peer)
}

fn tick_hangs(bench: &Bench) -> bool {
    bench.status().is_some_and(|it| it["error"].as_str().is_some_and(|it| it.starts_with("no tick for")))
}

#[test]
fn a_tick_that_hangs_or_spins_is_stopped_by_the_sentinel() {
    for fault in ["sleep:3", "spin:3"] {
        let bench = Bench::new();
        let (drive, mut peer) = struck(fault, &bench);
        stopped_by_a_frame(&mut peer);
        // It goes on saying so.
        (0..3).for_each(|_| stopped_by_a_frame(&mut peer));
        drive.signal("KILL");
    }
}

#[test]
fn stop_still_works_when_the_tick_hangs_and_ends_the_drive() {
    let bench = Bench::new();
    let (mut drive, mut peer) = struck("sleep:3", &bench);
    stopped_by_a_frame(&mut peer);
    wait_for("the status to say so", || tick_hangs(&bench));
    let port = peer.port.display().to_string();
    let stop = bench.gripline("stop").args(["--json", "--port", &port]).output().unwrap();
    let said: serde_json::Value = serde_json::from_slice(&stop.stdout).unwrap();
    assert_eq!(said["stopped_by"], "ports", "{said} {}", String::from_utf8_lossy(&stop.stderr));
    assert_eq!(said["links"][0]["latched"], true);
    assert!(!drive.ends().success());
}

#[test]
fn a_panic_stops_the_base_and_ends_the_program() {
    let bench = Bench::new();
    let (mut drive, mut peer) = struck("panic:3", &bench);
    stopped_by_a_frame(&mut peer);
    assert_eq!(drive.ends().code(), Some(1));
    assert!(drive.errors().contains("stop line was pulled"));
}

#[test]
fn a_hung_tick_starves_the_watchdog() {
    let bench = Bench::new();
    let manager = std::os::unix::net::UnixDatagram::bind(bench.path("notify")).unwrap();
    let peer = peer(&PEER);
    let mut command = bench.drive_on(&peer.port, &bench.hands("60,end,\n"), &["--on-stands"]);
    command
        .env("NOTIFY_SOCKET", bench.path("notify"))
        .env("WATCHDOG_USEC", "1000000")
        .env_remove("WATCHDOG_PID");
    let _drive = Running::start(command.env("GRIPLINE_TEST_FAULT", "sleep:1"));
    wait_for("the tick to hang", || tick_hangs(&bench));
    manager.set_nonblocking(true).unwrap();
    let mut bytes = [0; 4096];
    while manager.recv(&mut bytes).is_ok() {}
    manager.set_nonblocking(false).unwrap();
    manager.set_read_timeout(Some(std::time::Duration::from_millis(1500))).unwrap();
    // The last tick may still have been told; one that feeds on would come four times a second.
    let mut told = 0;
    while manager.recv(&mut bytes).is_ok() {
        told += 1;
        assert!(told <= 2, "a hung tick feeds the watchdog");
    }
}
