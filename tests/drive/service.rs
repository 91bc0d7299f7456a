//! The drive under a service manager: what it is told, and when. The protocol is that of sd_notify(3).

use std::os::unix::net::UnixDatagram;
use std::time::Instant;

use crate::bench::{Bench, PATIENCE, Running};

fn told(manager: &UnixDatagram) -> String {
    let mut bytes = [0; 4096];
    let n = manager.recv(&mut bytes).unwrap();
    String::from_utf8_lossy(&bytes[..n]).into_owned()
}

fn manager(bench: &Bench) -> UnixDatagram {
    let manager = UnixDatagram::bind(bench.path("notify")).unwrap();
    manager.set_read_timeout(Some(PATIENCE)).unwrap();
    manager
}

fn service(bench: &Bench) -> Running {
    let mut command = bench.drive_command(&bench.hands("60,end,\n"));
    command
        .env("NOTIFY_SOCKET", bench.path("notify"))
        .env("WATCHDOG_USEC", "1000000")
        .env_remove("WATCHDOG_PID");
    Running::start(&mut command)
}

#[test]
fn it_is_ready_after_a_tick_then_feeds_the_watchdog_and_says_that_it_stops() {
    let bench = Bench::new();
    let _standin = bench.standin();
    let manager = manager(&bench);
    let mut drive = service(&bench);
    assert_eq!(told(&manager).trim(), "READY=1");
    assert!(bench.phase_is("Parked"), "ready means that ticks come");
    for _ in 0..3 {
        while !told(&manager).contains("WATCHDOG=1") {}
    }
    drive.signal("TERM");
    while !told(&manager).contains("STOPPING=1") {}
    assert_eq!(drive.ends().code(), Some(0));
}

#[test]
fn a_manager_that_reads_nothing_holds_nobody_up() {
    let bench = Bench::new();
    let _standin = bench.standin();
    let _deaf = manager(&bench);
    let mut command = bench.drive_command(&bench.hands("60,end,\n"));
    // Every two milliseconds: the manager's queue is full after a moment.
    command
        .env("NOTIFY_SOCKET", bench.path("notify"))
        .env("WATCHDOG_USEC", "4000")
        .env_remove("WATCHDOG_PID");
    let mut drive = Running::start(&mut command);
    drive.says("answers as configured");
    let until = Instant::now() + std::time::Duration::from_secs(2);
    while Instant::now() < until {
        let status = bench.status().unwrap();
        assert_eq!(status["phase"], "Parked");
        assert!(status.get("error").is_none(), "{status}");
    }
    drive.signal("TERM");
    assert_eq!(drive.ends().code(), Some(0));
}

#[test]
fn the_last_act_leaves_an_orderly_end_alone() {
    let bench = Bench::new();
    let out = bench.gripline("stop").arg("--last-act").env("SERVICE_RESULT", "success").output().unwrap();
    assert_eq!(out.status.code(), Some(0));
    // After a failure it goes to the ports; one that is not there can hold nothing that moves.
    let out = bench.gripline("stop").arg("--last-act").env("SERVICE_RESULT", "watchdog").output().unwrap();
    assert_eq!(out.status.code(), Some(0), "{}", String::from_utf8_lossy(&out.stderr));
    assert!(String::from_utf8_lossy(&out.stdout).contains("not reached"));
}
