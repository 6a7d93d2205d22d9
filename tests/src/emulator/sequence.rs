//! Random sequences on the board: see [`crate::sequences`].

use std::time::Duration;

use donelight::link::{LinkError, Session};
use donelight_core::plan::LineSettings;
use donelight_core::record::{Sealed, Seq};
use donelight_core::station;

use donelight_core::wire::{Request, Status};
use donelight_twin::Step;

use super::{Board, Button, What};
use crate::sequences::Happening;

/// Longer pauses show nothing more, and take the emulator's time.
const PAUSE_MAX: Duration = Duration::from_millis(600);
/// A line that comes in the first moment is refused as cut.
const SETTLING: Duration = Duration::from_millis(100);

/// A board, and a gauge beside it that sends as the present plan says.
#[derive(Debug)]
pub struct Station {
    /// The board.
    pub board: Board,
    line: LineSettings,
}

impl Station {
    /// Switches a new one on.
    #[must_use]
    #[track_caller]
    pub fn start() -> Self {
        let mut board = Board::start();
        board.run(SETTLING);
        Self { board, line: LineSettings::default() }
    }

    /// Lets this happen, in the way of a gauge, a host, an operator and a power switch. What only the bench can do (bytes that get
    /// lost inside the chip, records confirmed before they are pulled, lamps that blink for ten seconds) is left out.
    ///
    /// # Panics
    /// If the station does not answer.
    #[track_caller]
    pub fn happen(&mut self, happening: &Happening) {
        match happening {
            Happening::Lines(bytes) if bytes.is_empty() => {}
            Happening::Lines(bytes) => {
                self.board.gauge(bytes);
                self.board.run_until(&["gauge-quiet"], Duration::from_secs(120), |event| {
                    event.what == What::GaugeQuiet
                });
                self.board.run(Duration::from_millis(20));
            }
            Happening::Asks(request) => self.ask(request),
            Happening::Rubbish(bytes) => {
                self.board.send(bytes);
                self.board.run(Duration::from_millis(5));
            }
            Happening::Plain(Step::TakeBack) => self.board.press(Button::TakeBack),
            Happening::Plain(Step::Seen) => self.board.press(Button::Seen),
            Happening::Plain(Step::Pass(milliseconds)) => {
                self.board.run(Duration::from_millis((*milliseconds).into()).min(PAUSE_MAX));
            }
            Happening::Plain(Step::Reboot) => self.restart(),
            Happening::Plain(_) => {}
        }
    }

    /// Switches it off and on.
    #[track_caller]
    pub fn restart(&mut self) {
        self.board.power_off();
        self.board.power_on();
        self.board.connected();
        self.board.set_gauge(self.line);
        self.board.run(SETTLING);
    }

    #[track_caller]
    fn ask(&mut self, request: &Request) {
        let answer = match request {
            Request::Load { plan, replace } => {
                let (mut session, _) = Session::open(&mut self.board).expect("the station answers");
                let loaded = session.load(plan, *replace).map(|_| ());
                if loaded.is_ok() {
                    self.line = plan.gauge;
                    self.board.set_gauge(self.line);
                }
                loaded
            }
            Request::SetClock { unix_ms } => {
                let (mut session, _) = Session::open(&mut self.board).expect("the station answers");
                session.set_clock(|| *unix_ms).map(|_| ())
            }
            Request::Hello | Request::Status => Session::open(&mut self.board).map(|_| ()),
            _ => Ok(()),
        };
        match answer {
            Ok(()) | Err(LinkError::Refused(_)) => {}
            Err(error) => panic!("{request:?}: {error}"),
        }
    }

    /// Applies all records that the station has and `host` has not.
    ///
    /// # Panics
    /// If one is missing or does not decode.
    #[track_caller]
    pub fn replay_into(&mut self, host: &mut station::Station) -> Status {
        let (mut session, _) = Session::open(&mut self.board).expect("the station answers");
        loop {
            let from = host.through().map_or(Seq::FIRST, Seq::next);
            let (_, mut records) = session.records(from).expect("the station answers");
            if records.is_empty() {
                return session.status().expect("the station answers");
            }
            while !records.is_empty() {
                let (sealed, rest) = Sealed::split(records).expect("whole records");
                let record = sealed.record().expect("a record of this version");
                assert_eq!(record.seq, host.through().map_or(Seq::FIRST, Seq::next), "a gap");
                host.apply(record.seq, &record.event);
                records = rest;
            }
        }
    }
}
