//! Requests and replies over a [`Transport`]: numbered, repeated until answered, each with a last moment.

use std::cell::Cell;
use std::hash::{BuildHasher, Hasher, RandomState};
use std::io::{self, ErrorKind};
use std::time::{Duration, Instant};

use donelight_core::chain::Digest;
use donelight_core::plan::Plan;
use donelight_core::record::Seq;
use donelight_core::wire::{
    self, FRAME_MAX, FrameError, FrameReader, Hello, RECORDS_MAX, Reply, Request, Status,
};

use super::{LinkError, Transport};

/// How long an answer is waited for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Patience {
    /// Then the request is sent once more.
    pub again_after: Duration,
    /// Then it is given up.
    pub give_up_after: Duration,
}

impl Patience {
    /// For the first word to a port that may be no station's.
    pub const FIRST: Self =
        Self { again_after: Duration::from_millis(1_000), give_up_after: Duration::from_secs(4) };
    /// For a station that has answered before. It may be erasing flash, which takes 0.4 s at worst on the Pico's chip
    /// (Winbond W25Q16JV data sheet, sector erase time, from memory).
    pub const LATER: Self =
        Self { again_after: Duration::from_millis(1_500), give_up_after: Duration::from_secs(10) };
}

/// As many bytes of records as fit a frame.
const WINDOW_MAX: u16 = RECORDS_MAX as u16;

/// A reading's record has about so many.
const WINDOW_MIN: u16 = 16;

/// A conversation with one station.
#[derive(Debug)]
pub struct Session<T> {
    transport: T,
    patience: Patience,
    /// It has said hello.
    met: bool,
    number: u32,
    reader: FrameReader,
    /// The frame to send.
    frame: Box<[u8; FRAME_MAX]>,
    /// So many bytes of records are asked for at once: fewer where longer answers did not arrive.
    window: u16,
    /// The answer, once its check sum and its number fit.
    answer: Vec<u8>,
}

impl<T: Transport> Session<T> {
    /// Says hello.
    ///
    /// # Errors
    /// See [`LinkError`].
    pub fn open(transport: T) -> Result<(Self, Hello), LinkError> {
        Self::open_with(transport, Patience::FIRST, Patience::LATER)
    }

    /// [`Session::open`] with other patience for the first word and for those after it.
    ///
    /// # Errors
    /// See [`LinkError`].
    pub fn open_with(transport: T, first: Patience, later: Patience) -> Result<(Self, Hello), LinkError> {
        // The token of this session, and a first number: answers to other programs may be on their way, and no other
        // session hardly ever uses these.
        let [n0, n1, n2, n3, ..] = RandomState::new().build_hasher().finish().to_le_bytes();
        Self::open_numbered(transport, first, later, u32::from_le_bytes([n0, n1, n2, n3]))
    }

    /// [`Session::open_with`] for a test that is to send the same bytes again: this is the number before the first.
    ///
    /// # Errors
    /// See [`LinkError`].
    pub fn open_numbered(
        transport: T,
        first: Patience,
        later: Patience,
        number: u32,
    ) -> Result<(Self, Hello), LinkError> {
        let mut session = Self {
            transport,
            patience: first,
            met: false,
            number,
            reader: FrameReader::default(),
            frame: Box::new([0; FRAME_MAX]),
            window: WINDOW_MAX,
            answer: Vec::new(),
        };
        let hello = session.hello()?;
        session.patience = later;
        session.met = true;
        Ok((session, hello))
    }

    /// Who is it, and which records does it have?
    ///
    /// # Errors
    /// See [`LinkError`], here and below.
    pub fn hello(&mut self) -> Result<Hello, LinkError> {
        match self.ask(|| Request::Hello)? {
            Reply::Hello(hello) => Ok(hello),
            other => Err(unexpected(&other)),
        }
    }

    /// How does it stand?
    ///
    /// # Errors
    /// See [`LinkError`].
    pub fn status(&mut self) -> Result<Status, LinkError> {
        match self.ask(|| Request::Status)? {
            Reply::Status(status) => Ok(status),
            other => Err(unexpected(&other)),
        }
    }

    /// Begins a study, and gives the record that began it. `replace` gives up one that is not done.
    ///
    /// # Errors
    /// See [`LinkError`].
    pub fn load(&mut self, plan: &Plan, replace: bool) -> Result<Seq, LinkError> {
        match self.ask(|| Request::Load { plan: plan.clone(), replace })? {
            Reply::Recorded(seq) => Ok(seq),
            other => Err(unexpected(&other)),
        }
    }

    /// The bytes of whole records from number `from` on, as many as fit a frame, with the chain's digest before the first
    /// of them; empty if there is none. On a line on which so long an answer does not arrive whole, a shorter one is asked for.
    ///
    /// # Errors
    /// See [`LinkError`].
    pub fn records(&mut self, from: Seq) -> Result<(Digest, &[u8]), LinkError> {
        let next = Cell::new(self.window);
        let asked = Cell::new(self.window);
        let answered = self.ask(|| {
            asked.set(next.get());
            next.set((next.get() / 2).max(WINDOW_MIN));
            match asked.get() {
                WINDOW_MAX => Request::Records { from },
                bytes => Request::RecordsWithin { from, bytes },
            }
        });
        let answered = answered.map(|_| ());
        self.window = match asked.get() {
            // It arrived at once: the line may be better by now.
            bytes if answered.is_ok() && bytes == self.window => bytes.saturating_mul(2).min(WINDOW_MAX),
            bytes => bytes,
        };
        answered?;
        match wire::decode(&self.answer) {
            Ok((_, Reply::Records { before, records })) => Ok((before, records)),
            Ok((_, other)) => Err(unexpected(&other)),
            Err(_) => Err(LinkError::UnknownReply),
        }
    }

    /// Tells the station that all records up to this one are committed, so that it may release them.
    ///
    /// # Errors
    /// See [`LinkError`].
    pub fn received(&mut self, through: Seq) -> Result<(), LinkError> {
        match self.ask(|| Request::Received { through })? {
            Reply::Done => Ok(()),
            other => Err(unexpected(&other)),
        }
    }

    /// Sets the station's clock. `unix_ms` is called at every attempt, so that a repeated one is not late.
    ///
    /// # Errors
    /// See [`LinkError`].
    pub fn set_clock(&mut self, unix_ms: impl Fn() -> u64) -> Result<Seq, LinkError> {
        match self.ask(|| Request::SetClock { unix_ms: unix_ms() })? {
            Reply::Recorded(seq) => Ok(seq),
            other => Err(unexpected(&other)),
        }
    }

    /// Lets the station's lamps blink.
    ///
    /// # Errors
    /// See [`LinkError`].
    pub fn blink(&mut self) -> Result<(), LinkError> {
        match self.ask(|| Request::Blink)? {
            Reply::Done => Ok(()),
            other => Err(unexpected(&other)),
        }
    }

    /// The transport, to look at or to close.
    pub fn transport(&mut self) -> &mut T {
        &mut self.transport
    }

    /// Sends the request until its answer comes or patience ends. `request` is called at every attempt.
    fn ask(&mut self, request: impl Fn() -> Request) -> Result<Reply<'_>, LinkError> {
        let (token, count) = (self.number & !0xffff, self.number.wrapping_add(1) & 0xffff);
        self.number = token | count;
        let began = self.transport.now();
        let end = began + self.patience.give_up_after;
        let mut heard = 0;
        loop {
            let again = (self.transport.now() + self.patience.again_after).min(end);
            let request = request();
            if self.send(&request, again)? && self.listen(&request, again, &mut heard)? {
                return match wire::decode(&self.answer) {
                    Ok((_, Reply::Refused(reason))) => Err(LinkError::Refused(reason)),
                    Ok((_, reply)) => Ok(reply),
                    Err(FrameError::Version { theirs, .. }) => Err(LinkError::Version { theirs }),
                    Err(_) => Err(LinkError::UnknownReply),
                };
            }
            if self.transport.now() >= end {
                let waited = self.patience.give_up_after;
                return Err(match heard {
                    _ if self.met => LinkError::Silent { waited },
                    0 => LinkError::NoAnswer { waited },
                    bytes => LinkError::Garbage { bytes, waited },
                });
            }
        }
    }

    /// Whether all of the request was taken before `end`. A part that was taken is harmless: the next frame begins with
    /// a zero.
    fn send(&mut self, request: &Request, end: Instant) -> Result<bool, LinkError> {
        let mut rest = match wire::encode(self.number, request, &mut self.frame) {
            Ok(frame) => frame,
            Err(_) => return Err(LinkError::TooLong),
        };
        while !rest.is_empty() {
            match self.transport.write(rest) {
                Ok(0) => return Err(LinkError::Gone(ErrorKind::WriteZero.into())),
                Ok(taken) => rest = rest.get(taken..).unwrap_or_default(),
                Err(error) if is_wait(&error) && self.transport.now() < end => {}
                Err(error) if is_wait(&error) => return Ok(false),
                Err(error) => return Err(LinkError::Gone(error)),
            }
        }
        Ok(true)
    }

    /// Whether the answer came before `end`; it is in `self.answer` then. Rubbish, answers to earlier requests and the
    /// request itself, from a port that echoes, are passed over.
    fn listen(&mut self, request: &Request, end: Instant, heard: &mut u64) -> Result<bool, LinkError> {
        let mut bytes = [0; 512];
        let mut found = false;
        while !found {
            let got = match self.transport.read(&mut bytes) {
                Ok(0) => return Err(LinkError::Gone(ErrorKind::UnexpectedEof.into())),
                Ok(got) => got,
                Err(error) if is_wait(&error) => 0,
                Err(error) => return Err(LinkError::Gone(error)),
            };
            *heard += got as u64;
            for byte in bytes.iter().take(got) {
                let Some(frame) = self.reader.push(*byte) else { continue };
                let echo = wire::decode::<Request>(frame).is_ok_and(|(_, echo)| echo == *request);
                if !found && !echo && answers(frame, self.number) {
                    found = true;
                    self.answer.clear();
                    self.answer.extend_from_slice(frame);
                }
            }
            if !found && self.transport.now() >= end {
                return Ok(false);
            }
        }
        Ok(true)
    }
}

/// Whether the frame is whole and is the answer to this request; another version may number otherwise.
fn answers(frame: &[u8], request: u32) -> bool {
    match wire::decode::<Reply<'_>>(frame) {
        Ok((number, _)) | Err(FrameError::Unknown { number }) => number == request,
        Err(FrameError::Version { .. }) => true,
        Err(FrameError::Damaged | FrameError::TooLong) => false,
    }
}

fn is_wait(error: &io::Error) -> bool {
    matches!(error.kind(), ErrorKind::TimedOut | ErrorKind::WouldBlock | ErrorKind::Interrupted)
}

fn unexpected(_: &Reply<'_>) -> LinkError {
    LinkError::UnknownReply
}
