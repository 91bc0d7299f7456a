//! What the tests of the running program stand on: a folder with a configuration, started processes, other drivers.

use std::io::{BufRead, BufReader, Read, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::mpsc::{Receiver, channel};
use std::time::{Duration, Instant};

pub(crate) const GRIPLINE: &str = env!("CARGO_BIN_EXE_gripline");
pub(crate) const EXAMPLE: &str = concat!(env!("CARGO_MANIFEST_DIR"), "/config/four-mecanum.toml");
pub(crate) const PATIENCE: Duration = Duration::from_secs(20);

/// A folder with a configuration whose guards bear a busy test machine, and what runs on it.
pub(crate) struct Bench {
    pub(crate) dir: tempfile::TempDir,
}

impl Bench {
    pub(crate) fn new() -> Self {
        let dir = tempfile::tempdir().unwrap();
        let text = std::fs::read_to_string(EXAMPLE).unwrap();
        let relaxed = text.replace("valid_ms = 100 ", "valid_ms = 600 ").replace(
            "[guard]\n",
            "[guard]\nlate_ms = 500.0\nfeedback_quiet_ms = 600.0\nnot_heard_ms = 600.0\nfollow_s = 3.0\nskid_s = 5.0\nstop_margin_s = 3.0\n",
        );
        let relaxed = relaxed.replace("clear_m = 3.0 ", "clear_m = 9.0 ") + "\n[console]\nreset = true\n";
        std::fs::write(dir.path().join("cart.toml"), relaxed).unwrap();
        Self { dir }
    }

    pub(crate) fn path(&self, name: &str) -> PathBuf {
        self.dir.path().join(name)
    }

    pub(crate) fn hands(&self, lines: &str) -> PathBuf {
        let path = self.path("hands.csv");
        std::fs::write(&path, lines).unwrap();
        path
    }

    pub(crate) fn gripline(&self, command: &str) -> Command {
        let mut it = self.bare(command);
        it.arg(self.path("cart.toml"));
        it
    }

    pub(crate) fn standin(&self) -> Running {
        let mut command = self.gripline("standin");
        command.arg("--link-dir").arg(self.path("links")).args(["--quiet", "--until-eof"]);
        let it = Running::start(&mut command);
        wait_for("the stand-in's port", || self.path("links/base").exists());
        it
    }

    /// A command without the configuration.
    pub(crate) fn bare(&self, command: &str) -> Command {
        let mut it = Command::new(GRIPLINE);
        it.arg(command).env("XDG_RUNTIME_DIR", self.dir.path()).env("TMPDIR", self.dir.path());
        it.env_remove("RUNTIME_DIRECTORY").env_remove("NOTIFY_SOCKET").env_remove("SERVICE_RESULT");
        it
    }

    /// Changes a line of the configuration.
    pub(crate) fn change(&self, from: &str, to: &str) {
        let text = std::fs::read_to_string(self.path("cart.toml")).unwrap();
        assert!(text.contains(from), "no {from:?} in the configuration");
        std::fs::write(self.path("cart.toml"), text.replace(from, to)).unwrap();
    }

    pub(crate) fn drive_on(&self, port: &Path, hands: &Path, extra: &[&str]) -> Command {
        let mut command = self.gripline("drive");
        command.arg("--port").arg(port).arg("--hands").arg(hands).args(extra);
        command.arg("--record-dir").arg(self.path("runs"));
        command
    }

    /// On the stand-in.
    pub(crate) fn drive_command(&self, hands: &Path) -> Command {
        self.drive_on(&self.path("links/base"), hands, &[])
    }

    pub(crate) fn drive(&self, hands: &Path) -> Running {
        Running::start(&mut self.drive_command(hands))
    }

    pub(crate) fn status(&self) -> Option<serde_json::Value> {
        let out = self.gripline("status").arg("--json").output().unwrap();
        serde_json::from_slice(&out.stdout).ok()
    }

    pub(crate) fn phase_is(&self, phase: &str) -> bool {
        self.status().is_some_and(|it| it["phase"] == phase)
    }

    pub(crate) fn run_file(&self) -> PathBuf {
        std::fs::read_dir(self.path("runs")).unwrap().next().unwrap().unwrap().path()
    }

    /// The rows of ticks.csv, as maps by column.
    pub(crate) fn ticks(&self) -> Vec<std::collections::HashMap<String, String>> {
        let out = Command::new(GRIPLINE)
            .arg("review")
            .arg(self.run_file())
            .arg("--csv")
            .arg(self.path("csv"))
            .output()
            .unwrap();
        assert!(out.status.success(), "{}", String::from_utf8_lossy(&out.stderr));
        let text = std::fs::read_to_string(self.path("csv/ticks.csv")).unwrap();
        let mut lines = text.lines();
        let names: Vec<&str> = lines.next().unwrap().split(',').collect();
        lines
            .map(|line| {
                names.iter().map(|it| (*it).to_owned()).zip(line.split(',').map(str::to_owned)).collect()
            })
            .collect()
    }
}

/// A started process: its lines are collected, and it is ended with the test.
pub(crate) struct Running {
    pub(crate) child: Child,
    pub(crate) lines: Receiver<String>,
    pub(crate) seen: Vec<String>,
    pub(crate) errors: Receiver<String>,
}

impl Running {
    pub(crate) fn start(command: &mut Command) -> Self {
        let mut child =
            command.stdin(Stdio::piped()).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
        let lines = collect(child.stdout.take().unwrap());
        let errors = collect(child.stderr.take().unwrap());
        Self { child, lines, seen: Vec::new(), errors }
    }

    /// Waits until a line contains these words.
    pub(crate) fn says(&mut self, words: &str) {
        let until = Instant::now() + PATIENCE;
        while Instant::now() < until {
            let Ok(line) = self.lines.recv_timeout(Duration::from_millis(50)) else { continue };
            let found = line.contains(words);
            self.seen.push(line);
            if found {
                return;
            }
        }
        let last = &self.seen[self.seen.len().saturating_sub(40)..];
        panic!("never said {words:?}; last said {last:#?}");
    }

    pub(crate) fn signal(&self, name: &str) {
        let pid = self.child.id().to_string();
        assert!(Command::new("kill").args([&format!("-{name}"), &pid]).status().unwrap().success());
    }

    pub(crate) fn ends(&mut self) -> ExitStatus {
        let until = Instant::now() + PATIENCE;
        loop {
            if let Some(status) = self.child.try_wait().unwrap() {
                return status;
            }
            if Instant::now() > until {
                let said: Vec<String> = self.lines.try_iter().collect();
                panic!("did not end; said {:#?} {said:#?}", self.seen);
            }
            std::thread::sleep(Duration::from_millis(10));
        }
    }

    pub(crate) fn errors(&mut self) -> String {
        let _ = self.ends();
        self.errors.iter().collect::<Vec<_>>().join("\n")
    }
}

impl Drop for Running {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

pub(crate) fn collect(from: impl Read + Send + 'static) -> Receiver<String> {
    let (tell, lines) = channel();
    std::thread::spawn(move || {
        for line in BufReader::new(from).lines().map_while(Result::ok) {
            if tell.send(line).is_err() {
                return;
            }
        }
    });
    lines
}

pub(crate) fn wait_for(what: &str, mut is_so: impl FnMut() -> bool) {
    let until = Instant::now() + PATIENCE;
    while !is_so() {
        assert!(Instant::now() < until, "waited in vain for {what}");
        std::thread::sleep(Duration::from_millis(20));
    }
}

/// Ready, press, and full forward from one second on.
pub(crate) const READY_AND_DRIVE: &str = "0.3,Start,1\n0.5,Start,0\n0.8,RightTrigger2,1\n1.0,LeftStickY,1\n";

/// Drivers in Python that share no code with this program, on a pseudo-terminal of their own.
pub(crate) struct Peer {
    pub(crate) running: Running,
    pub(crate) port: PathBuf,
}

pub(crate) fn peer(arguments: &[&str]) -> Peer {
    let mut command = Command::new("python3");
    command
        .arg("-u")
        .arg(concat!(env!("CARGO_MANIFEST_DIR"), "/tests/peer/peer.py"))
        .arg("--pty")
        .args(arguments);
    let running = Running::start(&mut command);
    let mut port = None;
    wait_for("the peer's port", || {
        let line = running.lines.recv_timeout(Duration::from_millis(50)).unwrap_or_default();
        if let Some(at) = line.find("/dev/pts/") {
            let end = line[at..].find(['"', ' ', ',']).map_or(line.len(), |it| at + it);
            port = Some(PathBuf::from(&line[at..end]));
        }
        port.is_some()
    });
    Peer { running, port: port.unwrap() }
}

impl Peer {
    pub(crate) fn drive(&self, bench: &Bench, hands: &Path, extra: &[&str]) -> Running {
        Running::start(&mut bench.drive_on(&self.port, hands, extra))
    }

    pub(crate) fn told(&mut self, line: &str) {
        let input = self.running.child.stdin.as_mut().unwrap();
        writeln!(input, "{line}").unwrap();
        input.flush().unwrap();
    }
}

pub(crate) const PEER: [&str; 8] =
    ["--name", "tray cart drivers", "--channels", "4", "--speed-lsb", "1000", "--angle-lsb", "500"];
