//! The stand-in in real time: one thread that moves bytes and time between ports and a [`Sim`].

use std::fs::File;
use std::io::{self, BufWriter};
use std::os::unix::fs::symlink;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};
use std::thread::JoinHandle;

use super::fault::Fault;
use super::port::Port;
pub use super::port::PortNews;
use super::sim::{Sim, SimSettings, Truth};
use super::trace::Trace;
use crate::config::Plan;
use crate::sys::clock;
use crate::sys::serial::wait_any;
use crate::units::Mono;

/// The longest wait between two looks at the clock; bytes wake it sooner.
const WAIT_MS: u16 = 2;
/// How often the trace is put where others can read it.
const FLUSH_NS: u64 = 500_000_000;

/// How to serve a plan.
#[derive(Clone, Debug, Default)]
pub struct ServeSettings {
    /// Ports that are there already: index of the link, path. Links not named get a pseudo-terminal.
    pub ports: Vec<(usize, PathBuf)>,
    /// Folder in which each link gets a symbolic link to its pseudo-terminal, by its name.
    pub link_dir: Option<PathBuf>,
    /// Where to write the true path.
    pub trace: Option<PathBuf>,
    /// What chance starts from.
    pub seed: u64,
    /// What the base is like.
    pub sim: SimSettings,
}

/// Why the stand-in cannot serve.
#[derive(Debug, thiserror::Error)]
pub enum ServeError {
    /// No pseudo-terminal.
    #[error("cannot open a pseudo-terminal: {0}; is /dev/pts mounted?")]
    Pty(#[source] io::Error),
    /// A port that was given cannot be opened.
    #[error("cannot open port {}: {source}; check the path, and that you may read and write it", path.display())]
    Port {
        /// Its path.
        path: PathBuf,
        /// Why not.
        source: io::Error,
    },
    /// A symbolic link cannot be made.
    #[error("cannot make the symbolic link {}: {source}; choose another --link-dir", path.display())]
    Link {
        /// Where.
        path: PathBuf,
        /// Why not.
        source: io::Error,
    },
    /// The name of a link makes no file name.
    #[error("the link name `{0}` makes no file name; rename the link or leave out --link-dir")]
    LinkName(String),
    /// The trace cannot be written.
    #[error("cannot write the trace {}: {source}; choose another file", path.display())]
    Trace {
        /// Where.
        path: PathBuf,
        /// Why not.
        source: io::Error,
    },
    /// No thread.
    #[error("cannot start a thread: {0}")]
    Thread(#[source] io::Error),
}

/// What a running stand-in has to say.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum ServeNews {
    /// A port changed.
    Port {
        /// Index of the link in the plan.
        link: usize,
        /// What changed.
        news: PortNews,
    },
    /// The trace could not be written on; it ends here.
    TraceEnded(String),
}

/// A running stand-in; ends when dropped, and takes its symbolic links with it.
#[derive(Debug)]
pub struct Served {
    sim: Arc<Mutex<Sim>>,
    ports: Vec<PathBuf>,
    links: Vec<(PathBuf, PathBuf)>,
    stop: Arc<AtomicBool>,
    thread: Option<JoinHandle<()>>,
}

/// Opens the ports and starts the thread. `on_news` is called on that thread and should not take long.
///
/// # Errors
/// When a port, a symbolic link or the trace cannot be opened.
pub fn start(
    plan: &Plan,
    settings: &ServeSettings,
    on_news: impl FnMut(ServeNews) + Send + 'static,
) -> Result<Served, ServeError> {
    let ports = open_ports(plan, &settings.ports)?;
    let trace = match &settings.trace {
        Some(path) => Some(open_trace(path, plan.wheels.len())?),
        None => None,
    };
    let sim = Arc::new(Mutex::new(Sim::new(plan, settings.seed, settings.sim.clone())));
    let stop = Arc::new(AtomicBool::new(false));
    let mut served = Served {
        sim: Arc::clone(&sim),
        ports: ports.iter().map(|port| port.path().to_owned()).collect(),
        links: Vec::new(),
        stop: Arc::clone(&stop),
        thread: None,
    };
    if let Some(dir) = &settings.link_dir {
        served.make_links(plan, dir, &ports)?;
    }
    let blocked = vec![false; ports.len()];
    let server = Server { sim, ports, blocked, trace, stop, on_news };
    let thread = std::thread::Builder::new().name("stand-in".to_owned()).spawn(move || server.run());
    served.thread = Some(thread.map_err(ServeError::Thread)?);
    Ok(served)
}

impl Served {
    /// The path of each link's port, in the order of the plan.
    #[must_use]
    pub fn ports(&self) -> &[PathBuf] {
        &self.ports
    }

    /// Makes something go wrong, or right again, now.
    pub fn fault(&self, fault: Fault) {
        lock(&self.sim).fault(fault);
    }

    /// How things truly are, at most two milliseconds ago.
    #[must_use]
    pub fn truth(&self) -> Truth {
        lock(&self.sim).truth()
    }

    /// Whether the thread still serves.
    #[must_use]
    pub fn runs(&self) -> bool {
        self.thread.as_ref().is_some_and(|thread| !thread.is_finished())
    }

    fn make_links(&mut self, plan: &Plan, dir: &Path, ports: &[Port]) -> Result<(), ServeError> {
        std::fs::create_dir_all(dir).map_err(|source| ServeError::Link { path: dir.to_owned(), source })?;
        for (link, port) in plan.links.iter().zip(ports) {
            if link.name.contains(['/', '\0']) || [".", "..", ""].contains(&link.name.as_str()) {
                return Err(ServeError::LinkName(link.name.clone()));
            }
            let at = dir.join(&link.name);
            // One left over from a run that was killed is replaced; anything else that stands there is not ours.
            if std::fs::symlink_metadata(&at).is_ok_and(|there| there.file_type().is_symlink()) {
                let _ = std::fs::remove_file(&at);
            }
            symlink(port.path(), &at).map_err(|source| ServeError::Link { path: at.clone(), source })?;
            self.links.push((at, port.path().to_owned()));
        }
        Ok(())
    }
}

impl Drop for Served {
    fn drop(&mut self) {
        self.stop.store(true, Ordering::Relaxed);
        if let Some(thread) = self.thread.take() {
            let _ = thread.join();
        }
        for (at, to) in &self.links {
            if std::fs::read_link(at).is_ok_and(|there| there == *to) {
                let _ = std::fs::remove_file(at);
            }
        }
    }
}

fn open_ports(plan: &Plan, given: &[(usize, PathBuf)]) -> Result<Vec<Port>, ServeError> {
    let port = |(index, link): (usize, &crate::config::LinkPlan)| match given
        .iter()
        .find(|(link, _)| *link == index)
    {
        Some((_, path)) => Port::given(path, link.baud),
        None => Port::pty(),
    };
    plan.links.iter().enumerate().map(port).collect()
}

fn open_trace(path: &Path, wheels: usize) -> Result<Trace<BufWriter<File>>, ServeError> {
    File::create(path)
        .and_then(|file| Trace::new(BufWriter::new(file), wheels))
        .map_err(|source| ServeError::Trace { path: path.to_owned(), source })
}

/// A panic of another thread leaves the simulation as it was: there is nothing in it that could be half done for long.
fn lock(sim: &Mutex<Sim>) -> MutexGuard<'_, Sim> {
    sim.lock().unwrap_or_else(PoisonError::into_inner)
}

struct Server<F> {
    sim: Arc<Mutex<Sim>>,
    ports: Vec<Port>,
    /// Which of them are left unread.
    blocked: Vec<bool>,
    trace: Option<Trace<BufWriter<File>>>,
    stop: Arc<AtomicBool>,
    on_news: F,
}

impl<F: FnMut(ServeNews)> Server<F> {
    fn run(mut self) {
        let mut flush_at = Mono::default();
        while !self.stop.load(Ordering::Relaxed) {
            let open = self.ports.iter().zip(&self.blocked).filter(|(_, blocked)| !**blocked);
            wait_any(open.filter_map(|(port, _)| port.descriptor()), WAIT_MS);
            let now = clock::now();
            self.turn(now);
            if now >= flush_at {
                flush_at = now.plus_ns(FLUSH_NS);
                self.write_trace(Trace::flush);
            }
        }
        self.write_trace(Trace::flush);
    }

    /// Bytes and time in, bytes and a row of the trace out.
    fn turn(&mut self, now: Mono) {
        let mut news = Vec::new();
        let mut said = vec![Vec::new(); self.ports.len()];
        let truth = {
            let mut sim = lock(&self.sim);
            sim.step(now);
            for (link, (port, said)) in self.ports.iter_mut().zip(&mut said).enumerate() {
                let mut heard = Vec::new();
                if !sim.is_blocked(link) {
                    news.extend(port.read(now, &mut heard).map(|news| (link, news)));
                }
                sim.bytes_in(link, &heard);
                sim.bytes_out(link, said);
            }
            self.blocked = (0..self.ports.len()).map(|link| sim.is_blocked(link)).collect();
            sim.truth()
        };
        for (link, (port, said)) in self.ports.iter_mut().zip(&said).enumerate() {
            if !said.is_empty() {
                news.extend(port.write(said, now).map(|news| (link, news)));
            }
        }
        self.write_trace(|trace| trace.row(&truth));
        for (link, news) in news {
            (self.on_news)(ServeNews::Port { link, news });
        }
    }

    fn write_trace(&mut self, write: impl FnOnce(&mut Trace<BufWriter<File>>) -> io::Result<()>) {
        if let Some(Err(why)) = self.trace.as_mut().map(write) {
            self.trace = None;
            (self.on_news)(ServeNews::TraceEnded(why.to_string()));
        }
    }
}

#[cfg(test)]
mod tests;
