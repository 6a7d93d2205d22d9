//! `donelight virtual`: a station without hardware on a pseudo-terminal.

use crate::cli::Virtual;
use crate::output::{Answer, Console, Failure};

#[cfg(not(unix))]
/// Answers `donelight virtual` where there are no pseudo-terminals.
///
/// # Errors
/// Always.
pub(super) fn run(_options: &Virtual, _console: &mut Console) -> Result<Answer, Failure> {
    Err(Failure {
        kind: "no-pseudo-terminal",
        message: "this system has no pseudo-terminals, which a virtual station needs for its port".to_owned(),
        help:
            "Use `donelight demo`, which links to its station in memory, or a system such as Linux or macOS."
                .to_owned(),
        exit: crate::output::Exit::Refused,
        details: None,
    })
}

#[cfg(unix)]
pub(super) use bench::run;

#[cfg(unix)]
mod bench {
    use std::collections::VecDeque;
    use std::io;
    use std::os::fd::AsFd;
    use std::sync::Arc;
    use std::sync::atomic::{AtomicBool, Ordering};
    use std::time::{Duration, Instant};

    use donelight_core::record::Millis;
    use donelight_core::wire::FRAME_MAX;
    use rustix::event::{PollFd, PollFlags, Timespec};
    use serde_json::{Value, json};

    use super::{Answer, Console, Failure, Virtual};
    use crate::output::Exit;
    use crate::virtual_station::feed::Feed;
    use crate::virtual_station::flash::FlashFile;
    use crate::virtual_station::keyboard::{Key, Keyboard};
    use crate::virtual_station::narrator::Narrator;
    use crate::virtual_station::operator::{Gauge, Operator};
    use crate::virtual_station::process::Process;
    use crate::virtual_station::pseudo_terminal::PseudoTerminal;
    use crate::virtual_station::store::Store;
    use crate::virtual_station::{Incident, VirtualStation};

    /// Incidents that wait to be told at most; more of them, told late, would help nobody.
    const NEWS_MAX: usize = 32;

    /// Pieces a second that a simulated process gives unless another pace is asked for.
    const PROCESS_RATE: f64 = 10.0;

    /// Runs a virtual station until it is told to stop.
    ///
    /// # Errors
    /// The store, the feed or the pseudo-terminal cannot be had, or fails later.
    pub(crate) fn run(options: &Virtual, console: &mut Console) -> Result<Answer, Failure> {
        let stop = stop_on_signal()?;
        let (store, flash) = Store::open(&options.store)?;
        let operator = operator(options)?;
        let terminal = PseudoTerminal::open()?;
        let started = Instant::now();
        let mut station = VirtualStation::start(flash, store.id(), operator)?;
        introduce(&mut station, &store, &terminal, console);
        let narrator = station.narrator();
        let mut bench = Bench {
            started,
            station,
            terminal,
            keyboard: Some(Keyboard::default()),
            narrator,
            news: VecDeque::new(),
            listener_gone: false,
            incoming: Vec::new(),
            outgoing: Vec::new(),
            console,
        };
        while !stop.load(Ordering::Relaxed) && !bench.listener_gone {
            bench.turn().map_err(port_failed)?;
        }
        let folder = store.folder().display();
        Ok(Answer::done(
            format!("stopped; its journal is kept in {folder}"),
            json!({ "event": "stopped", "store": store.folder().to_string_lossy() }),
        ))
    }

    fn stop_on_signal() -> Result<Arc<AtomicBool>, Failure> {
        let stop = Arc::new(AtomicBool::new(false));
        let handler = Arc::clone(&stop);
        ctrlc::set_handler(move || handler.store(true, Ordering::Relaxed)).map_err(|error| Failure {
            kind: "signals",
            message: format!("Ctrl-C cannot be caught: {error}"),
            help: "Please report this.".to_owned(),
            exit: Exit::Refused,
            details: None,
        })?;
        Ok(stop)
    }

    fn port_failed(error: io::Error) -> Failure {
        Failure {
            kind: "pseudo-terminal",
            message: format!("the pseudo-terminal failed: {error}"),
            help: "Start the station again on the same --store: all that was recorded is there.".to_owned(),
            exit: Exit::Refused,
            details: None,
        }
    }

    fn operator(options: &Virtual) -> Result<Operator, Failure> {
        let (gauge, rate) = match (&options.process, &options.feed) {
            (Some(normal), _) => {
                let process = Process {
                    mean: normal.mean,
                    sd: normal.sd,
                    drift: options.drift.unwrap_or(0.0),
                    outlier_every: options.outlier_every,
                    stuck_from: options.stuck_from,
                    seed: options.seed,
                };
                (Gauge::Process(process), Some(options.rate.unwrap_or(PROCESS_RATE)))
            }
            (None, Some(file)) => (Gauge::Feed(Feed::open(file)?), options.rate),
            (None, None) => (Gauge::Absent, None),
        };
        Ok(Operator::new(gauge, rate, options.keep_measuring))
    }

    fn introduce(
        station: &mut VirtualStation<FlashFile>,
        store: &Store,
        terminal: &PseudoTerminal,
        console: &mut Console,
    ) {
        let port = terminal.path().display();
        let boots = station.recorder().station().boots();
        let study = station.recorder().station().study();
        let (name, n) =
            study.map(|study| (study.plan().name.as_str(), study.progress().n.get())).unwrap_or_default();
        let stands = match study {
            None => format!("no plan yet: donelight station load PLAN --port {port}"),
            Some(_) => format!("study {name:?} with {n} pieces"),
        };
        let id = store.id();
        console.say(
            &format!("{port}\nvirtual station {id}, start {boots}; {stands}"),
            &json!({
                "port": terminal.path().to_string_lossy(),
                "station": id.to_string(),
                "store": store.folder().to_string_lossy(),
                "boots": boots,
                "study": study.map(|_| json!({ "name": name, "n": n })),
            }),
        );
    }

    /// The station with all that is around it.
    struct Bench<'c> {
        started: Instant,
        station: VirtualStation<FlashFile>,
        terminal: PseudoTerminal,
        /// `None` from its end on.
        keyboard: Option<Keyboard>,
        narrator: Narrator,
        /// What is to be said, in words and as JSON.
        news: VecDeque<(String, Value)>,
        /// Nobody reads standard output any more.
        listener_gone: bool,
        /// Bytes from the host that wait until the reply before them is sent.
        incoming: Vec<u8>,
        /// What is left of a reply.
        outgoing: Vec<u8>,
        console: &'c mut Console,
    }

    /// What a wait found.
    struct Ready {
        host: bool,
        keyboard: bool,
        listener: bool,
    }

    impl Bench<'_> {
        /// Everything once, then a wait for what comes next.
        fn turn(&mut self) -> io::Result<()> {
            let now = self.now();
            if let Some(incident) = self.station.step(now) {
                self.tell(incident_news(&incident));
            }
            if self.news.is_empty() {
                let news = self.narrator.next(self.station.recorder(), now);
                self.news.extend(news.map(|news| (news.to_string(), news.json())));
            }
            let ready = self.wait()?;
            if ready.host {
                self.exchange()?;
            }
            if ready.keyboard {
                self.keys();
            }
            if ready.listener
                && let Some((text, json)) = self.news.pop_front()
            {
                self.console.say(&text, &json);
                self.listener_gone |= self.console.closed();
            }
            Ok(())
        }

        /// The station's time.
        fn now(&self) -> Millis {
            Millis(u64::try_from(self.started.elapsed().as_millis()).unwrap_or(u64::MAX))
        }

        fn tell(&mut self, news: (String, Value)) {
            if self.news.len() < NEWS_MAX {
                self.news.push_back(news);
            }
        }

        /// Waits for the host, the keyboard, room for the news, or until the station wants its next step. A listener
        /// that does not read holds up the news only.
        fn wait(&mut self) -> io::Result<Ready> {
            let keyboard = self.keyboard.as_ref().filter(|keyboard| keyboard.is_ours());
            let host = if self.outgoing.is_empty() { PollFlags::IN } else { PollFlags::OUT };
            let listener = if self.news.is_empty() { PollFlags::empty() } else { PollFlags::OUT };
            let stdout = io::stdout();
            let mut fds = vec![
                PollFd::from_borrowed_fd(self.terminal.as_fd(), host),
                PollFd::from_borrowed_fd(stdout.as_fd(), listener),
            ];
            fds.extend(keyboard.map(|keyboard| PollFd::from_borrowed_fd(keyboard.as_fd(), PollFlags::IN)));
            let request_waits = self.outgoing.is_empty() && !self.incoming.is_empty();
            let wait = if request_waits { 0 } else { self.station.idle_ms(self.now()) };
            let wait = Timespec::try_from(Duration::from_millis(wait)).unwrap_or_default();
            match rustix::event::poll(&mut fds, Some(&wait)) {
                Ok(_) | Err(rustix::io::Errno::INTR) => {}
                Err(error) => return Err(error.into()),
            }
            let found = |at: usize| fds.get(at).map_or(PollFlags::empty(), PollFd::revents);
            let ready = Ready {
                host: !found(0).is_empty() || request_waits,
                keyboard: !found(2).is_empty(),
                listener: found(1).contains(PollFlags::OUT),
            };
            self.listener_gone |= found(1).intersects(PollFlags::ERR | PollFlags::HUP);
            Ok(ready)
        }

        /// Sends what is left of a reply; takes the host's bytes up to the end of its next request.
        fn exchange(&mut self) -> io::Result<()> {
            if self.outgoing.is_empty() && self.incoming.is_empty() {
                let mut bytes = [0; FRAME_MAX];
                let received = self.terminal.receive(&mut bytes)?;
                self.incoming.extend_from_slice(bytes.get(..received).unwrap_or_default());
            }
            let now = self.now();
            let mut taken = 0;
            for byte in &self.incoming {
                if !self.outgoing.is_empty() {
                    break;
                }
                taken += 1;
                if let Some(reply) = self.station.host_byte(now, *byte) {
                    self.outgoing.extend_from_slice(reply);
                }
            }
            self.incoming.drain(..taken);
            let sent = self.terminal.send(&self.outgoing)?;
            self.outgoing.drain(..sent);
            Ok(())
        }

        fn keys(&mut self) {
            let Some(keys) = self.keyboard.as_mut().and_then(Keyboard::read) else {
                self.keyboard = None;
                return;
            };
            for key in keys {
                match key {
                    Key::Button(button) => self.station.press(self.now(), button),
                    Key::Unknown(line) => {
                        let text = format!("no such button: {line:?}; there are: take back, seen");
                        let json = json!({ "event": "no-such-button", "line": line });
                        self.tell((text, json));
                    }
                }
            }
        }
    }

    fn incident_news(incident: &Incident) -> (String, Value) {
        match incident {
            Incident::FeedEnded => {
                ("the feed is at its end; the gauge is silent".to_owned(), json!({ "event": "feed-ended" }))
            }
            Incident::FeedBroken(error) => {
                (format!("the gauge is silent: {error}"), fault_json("feed-broken", error))
            }
            Incident::Flash(error) => (error.to_string(), fault_json("flash-fault", error)),
        }
    }

    fn fault_json(event: &str, error: &dyn std::error::Error) -> Value {
        json!({ "event": event, "message": error.to_string() })
    }
}
