//! Real threads and real pseudo-terminals. Nothing here depends on how fast the machine is: what must come is waited for
//! up to `PATIENCE_S`.

use std::fs::OpenOptions;
use std::io::{Read, Write};
use std::os::unix::fs::OpenOptionsExt;

use super::*;
use crate::standin::fault::{LinkFault, Which};
use crate::standin::testing::plan;
use crate::wire::{
    Deframer, FromDrivers, MAX_ON_LINE, ToDrivers, emit_to_drivers, parse_from_drivers, status,
};

const PATIENCE_S: f64 = 20.0;

/// The host's end of a line.
struct Host {
    file: File,
    deframer: Deframer,
}

impl Host {
    fn open(path: &Path) -> Self {
        let flags = libc::O_NOCTTY | libc::O_NONBLOCK;
        let file = OpenOptions::new().read(true).write(true).custom_flags(flags).open(path).unwrap();
        Self { file, deframer: Deframer::new() }
    }

    fn say(&mut self, message: &ToDrivers) {
        let mut frame = [0; MAX_ON_LINE];
        let length = emit_to_drivers(0, message, &mut frame);
        self.file.write_all(&frame[..length]).unwrap();
    }

    fn hear(&mut self) -> Vec<FromDrivers> {
        let mut buffer = [0; 4096];
        let length = self.file.read(&mut buffer).unwrap_or(0);
        let frames = buffer[..length].iter().filter_map(|byte| {
            self.deframer.push(*byte).map(|plain| parse_from_drivers(plain.unwrap()).unwrap().1)
        });
        frames.collect()
    }

    /// Waits for a frame that is looked for.
    fn wait<T>(&mut self, mut wanted: impl FnMut(FromDrivers) -> Option<T>) -> T {
        wait_for(|| self.hear().into_iter().find_map(&mut wanted))
    }

    fn wait_feedback(&mut self) -> crate::wire::Feedback {
        self.wait(|message| match message {
            FromDrivers::Feedback(feedback) => Some(feedback),
            FromDrivers::Identity(_) => None,
        })
    }
}

fn wait_for<T>(mut look: impl FnMut() -> Option<T>) -> T {
    let begin = clock::now();
    loop {
        if let Some(found) = look() {
            return found;
        }
        assert!(clock::now().since_s(begin) < PATIENCE_S, "it did not come");
        clock::sleep_ms(1);
    }
}

fn serve(settings: &ServeSettings) -> (Served, std::sync::mpsc::Receiver<ServeNews>) {
    let (tell, told) = std::sync::mpsc::channel();
    (start(&plan(), settings, move |news| drop(tell.send(news))).unwrap(), told)
}

#[test]
fn each_link_answers_on_a_pseudo_terminal_of_its_own() {
    let (served, _told) = serve(&ServeSettings::default());
    assert_eq!(served.ports().len(), 2);
    for (port, link) in served.ports().iter().zip(&plan().links) {
        let mut host = Host::open(port);
        host.say(&ToDrivers::Ask);
        let name = host.wait(|message| match message {
            FromDrivers::Identity(identity) => Some(identity.name.to_string()),
            FromDrivers::Feedback(_) => None,
        });
        assert_eq!(name, link.expect);
    }
}

#[test]
fn a_port_outlives_its_host_and_the_next_one_finds_nothing_stale() {
    let (served, told) = serve(&ServeSettings::default());
    let mut host = Host::open(&served.ports()[0]);
    let answers = |host: &mut Host| {
        host.say(&ToDrivers::Ask);
        host.wait(|message| matches!(message, FromDrivers::Identity(_)).then_some(()));
    };
    answers(&mut host);
    let last = host.wait_feedback().clock_us;
    drop(host);
    let news = |news| Ok(ServeNews::Port { link: 0, news });
    assert_eq!(told.recv(), news(PortNews::Read));
    assert_eq!(told.recv(), news(PortNews::Unread));
    clock::sleep_ms(500);
    let mut host = Host::open(&served.ports()[0]);
    let first = host.wait_feedback();
    // At least what was waiting half a second ago has been thrown away.
    assert!(first.clock_us - last > 400_000, "{} {last}", first.clock_us);
    answers(&mut host);
    assert_eq!(told.recv(), news(PortNews::Read));
}

#[test]
fn a_fault_reaches_a_running_base() {
    let (served, _told) = serve(&ServeSettings::default());
    let mut host = Host::open(&served.ports()[1]);
    host.wait_feedback();
    served.fault(Fault::Link(Which::One(1), LinkFault::StopInput { open: true }));
    host.wait(|message| match message {
        FromDrivers::Feedback(feedback) if feedback.status & status::STOP_INPUT_OPEN != 0 => Some(()),
        FromDrivers::Feedback(_) | FromDrivers::Identity(_) => None,
    });
    assert!(served.runs());
}

#[test]
fn symbolic_links_stand_while_it_serves_and_replace_those_left_over() {
    let dir = tempfile::tempdir().unwrap();
    let dir = dir.path().join("ports");
    std::fs::create_dir(&dir).unwrap();
    symlink("/nowhere", dir.join("front")).unwrap();
    let settings = ServeSettings { link_dir: Some(dir.clone()), ..ServeSettings::default() };
    let (served, _told) = serve(&settings);
    assert_eq!(std::fs::read_link(dir.join("front")).unwrap(), served.ports()[0]);
    assert_eq!(std::fs::read_link(dir.join("rear")).unwrap(), served.ports()[1]);
    Host::open(&dir.join("rear")).wait_feedback();
    drop(served);
    assert!(std::fs::symlink_metadata(dir.join("front")).is_err());
    assert!(std::fs::symlink_metadata(dir.join("rear")).is_err());

    std::fs::write(dir.join("rear"), "not ours").unwrap();
    let why = start(&plan(), &settings, |_| {}).unwrap_err().to_string();
    assert!(why.starts_with("cannot make the symbolic link") && why.contains("rear"), "{why}");
    assert_eq!(std::fs::read_to_string(dir.join("rear")).unwrap(), "not ours");
    assert!(std::fs::symlink_metadata(dir.join("front")).is_err(), "taken back after the failure");
}

#[test]
fn the_trace_is_on_the_clock_of_the_machine() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("trace.csv");
    let begin = clock::now();
    let (served, _told) = serve(&ServeSettings { trace: Some(path.clone()), ..ServeSettings::default() });
    wait_for(|| (served.truth().at.since_s(begin) > 0.1).then_some(()));
    drop(served);
    let end = clock::now();
    let text = std::fs::read_to_string(path).unwrap();
    let times: Vec<f64> =
        text.lines().skip(1).map(|row| row.split(',').next().unwrap().parse().unwrap()).collect();
    assert!(times.len() > 2);
    assert!(times.is_sorted());
    let span = (begin.ns() as f64 * 1e-9 - 1e-5)..(end.ns() as f64 * 1e-9 + 1e-5);
    assert!(times.iter().all(|t| span.contains(t)), "{times:?}");
    assert_eq!(text.lines().last().unwrap().split(',').count(), 8 + 4);

    let nowhere = ServeSettings { trace: Some(dir.path().join("no/such.csv")), ..ServeSettings::default() };
    let why = start(&plan(), &nowhere, |_| {}).unwrap_err().to_string();
    assert!(why.starts_with("cannot write the trace"), "{why}");
}

#[test]
fn a_given_port_is_served_and_an_absent_one_is_an_error() {
    let line = crate::sys::serial::open_kept_pty().unwrap();
    let settings = ServeSettings { ports: vec![(1, line.path.clone())], ..ServeSettings::default() };
    let (served, _told) = serve(&settings);
    assert_eq!(served.ports()[1], line.path);
    let mut host = Host { file: line.master, deframer: Deframer::new() };
    host.say(&ToDrivers::Ask);
    let name = host.wait(|message| match message {
        FromDrivers::Identity(identity) => Some(identity.name.to_string()),
        FromDrivers::Feedback(_) => None,
    });
    assert_eq!(name, plan().links[1].expect);

    for absent in ["/dev/no-such-port", "/dev/null"] {
        let settings = ServeSettings { ports: vec![(0, absent.into())], ..ServeSettings::default() };
        let why = start(&plan(), &settings, |_| {}).unwrap_err().to_string();
        assert!(why.starts_with(&format!("cannot open port {absent}: ")), "{why}");
    }
}

/// The thread sleeps until bytes come or two milliseconds are over: that is what keeps it cheap.
#[test]
fn an_idle_base_sleeps() {
    let mut server = Server {
        sim: Arc::new(Mutex::new(Sim::new(&plan(), 1, SimSettings::default()))),
        ports: open_ports(&plan(), &[]).unwrap(),
        trace: None,
        blocked: vec![false; 2],
        stop: Arc::default(),
        on_news: |_| {},
    };
    let mut host = Host::open(server.ports[0].path());
    let begin = clock::now();
    let mut turns = 0;
    while clock::now().since_s(begin) < 1.0 {
        wait_any(server.ports.iter().filter_map(Port::descriptor), WAIT_MS);
        server.turn(clock::now());
        turns += 1;
    }
    assert!(turns < 600, "{turns} turns in a second");
    assert!(!host.hear().is_empty());
}
