//! The console: a local socket for status, stop and reset. One line of JSON each way:
//! `{"ask":"status"}`, `{"ask":"stop"}`, `{"ask":"reset","in_sight":true}`.
//!
//! One thread serves all clients and waits for none of them. A client that floods gets its turn and no more; one that
//! never reads or sends half a line is dropped; when there are too many, the one that has been silent longest goes, so
//! that a stop is always heard. None of it reaches the tick.

use std::io::{self, Read, Write};
use std::os::fd::AsFd;
use std::os::unix::net::UnixStream;
use std::sync::Arc;

use serde_json::Value;

use super::answers::{Answer, Pending, Shared};
use super::request::{Heard, LONGEST, Line};
use super::socket::Socket;
use crate::sys::{clock, socket};
use crate::units::Mono;

/// As many clients at a time.
const CLIENTS: usize = 16;
/// So many are let in at one turn, so that each is heard before a flood of newcomers can push it out.
const NEW_AT_A_TURN: usize = 4;
/// Half a line, or an answer that is not read, is waited for so long.
const PATIENCE_NS: u64 = 2_000_000_000;
/// So often an answer that waits for the tick is looked after.
const PENDING_MS: i32 = 10;
/// So often clients are looked after.
const LOOK_MS: i32 = 500;

/// Serves until the program ends.
///
/// # Errors
/// When there can be no thread.
pub(super) fn start(socket: Socket, shared: Shared) -> io::Result<()> {
    let thread = std::thread::Builder::new().name("console".into()).stack_size(256 * 1024);
    thread.spawn(move || Server { socket, shared: Arc::new(shared), clients: Vec::new() }.run())?;
    Ok(())
}

struct Server {
    socket: Socket,
    shared: Arc<Shared>,
    clients: Vec<Client>,
}

impl Server {
    fn run(&mut self) {
        loop {
            let (newcomers, ready) = self.wait();
            let now = clock::now();
            for (client, ready) in self.clients.iter_mut().zip(ready) {
                if ready {
                    client.turn(now, &self.shared);
                }
            }
            self.clients.retain(|it| !it.is_done(now));
            if newcomers {
                self.let_in(now);
            }
        }
    }

    /// Whether somebody is at the door, and which clients can go on. Those whose answer waits for the tick are looked
    /// after at every turn: what they send meanwhile must not wake this thread again and again.
    fn wait(&self) -> (bool, Vec<bool>) {
        let wanted = |fd, write| socket::Wanted { fd, write };
        let mut all = vec![wanted(self.socket.listener.as_fd(), false)];
        let open = self.clients.iter().filter(|it| it.pending.is_none());
        all.extend(open.map(|it| wanted(it.stream.as_fd(), !it.out.is_empty())));
        let timeout_ms = match self.clients.as_slice() {
            [] => -1,
            some if some.iter().any(|it| it.pending.is_some()) => PENDING_MS,
            _ => LOOK_MS,
        };
        let mut ready = socket::wait(&all, timeout_ms).into_iter();
        let newcomers = ready.next().unwrap_or(false);
        let clients =
            self.clients.iter().map(|it| it.pending.is_some() || ready.next().unwrap_or(false)).collect();
        (newcomers, clients)
    }

    fn let_in(&mut self, now: Mono) {
        for _ in 0..NEW_AT_A_TURN {
            let stream = match self.socket.listener.accept() {
                Ok((stream, _)) => stream,
                Err(error) if error.kind() == io::ErrorKind::WouldBlock => return,
                Err(_) => {
                    // Out of descriptors, perhaps: a client less may help, and this must not spin.
                    drop_longest_silent(&mut self.clients);
                    clock::sleep_ms(20);
                    return;
                }
            };
            if stream.set_nonblocking(true).is_err() {
                continue;
            }
            if self.clients.len() >= CLIENTS {
                drop_longest_silent(&mut self.clients);
            }
            let mut client = Client {
                stream,
                line: Line::default(),
                out: Vec::new(),
                last: now,
                pending: None,
                gone: false,
            };
            client.turn(now, &self.shared);
            self.clients.push(client);
        }
    }
}

fn drop_longest_silent(clients: &mut Vec<Client>) {
    if let Some((index, _)) = clients.iter().enumerate().min_by_key(|(_, it)| it.last) {
        clients.swap_remove(index);
    }
}

struct Client {
    stream: UnixStream,
    /// What has come of a line that is not whole yet.
    line: Line,
    /// What the client has still to read. Nothing more is answered before it has.
    out: Vec<u8>,
    /// When it last said a whole line, or came, or read.
    last: Mono,
    /// An answer that waits for the tick.
    pending: Option<Pending>,
    gone: bool,
}

impl Client {
    /// One turn: write what is left, then read a little and answer.
    fn turn(&mut self, now: Mono, shared: &Shared) {
        if let Some(pending) = &self.pending {
            let Some(answer) = pending.look(now, shared) else { return };
            self.pending = None;
            self.say(&answer);
        }
        self.write(now);
        if !self.out.is_empty() || self.gone {
            return;
        }
        let mut bytes = [0; LONGEST];
        match self.stream.read(&mut bytes) {
            Ok(0) => self.gone = true,
            Ok(n) => self.hear(bytes.get(..n).unwrap_or(&[]), now, shared),
            Err(error) => self.gone = !may_go_on(&error),
        }
    }

    fn hear(&mut self, bytes: &[u8], now: Mono, shared: &Shared) {
        for &byte in bytes {
            let line = match self.line.push(byte) {
                Heard::Part => continue,
                Heard::Whole(line) => line,
                Heard::TooLong => {
                    self.gone = true;
                    return;
                }
            };
            self.last = now;
            match shared.answer(&line, now) {
                Answer::Now(answer) => self.say(&answer),
                // What follows in the same breath is dropped: a client asks one thing at a time.
                Answer::Later(pending) => {
                    self.pending = Some(pending);
                    return;
                }
            }
            if self.out.len() > 64 * LONGEST {
                return;
            }
        }
        self.write(now);
    }

    fn say(&mut self, answer: &Value) {
        self.out.extend_from_slice(format!("{answer}\n").as_bytes());
    }

    fn write(&mut self, now: Mono) {
        while !self.out.is_empty() {
            match self.stream.write(&self.out) {
                Ok(n) => {
                    self.out.drain(..n);
                    self.last = now;
                }
                Err(error) => {
                    self.gone = !may_go_on(&error);
                    return;
                }
            }
        }
    }

    fn is_done(&self, now: Mono) -> bool {
        let owes = !self.line.is_empty() || !self.out.is_empty();
        self.gone || (owes && now.since_ns(self.last) > PATIENCE_NS)
    }
}

fn may_go_on(error: &io::Error) -> bool {
    matches!(error.kind(), io::ErrorKind::WouldBlock | io::ErrorKind::Interrupted)
}
