//! From the gauge's bytes to its lines: a line ends with CR, LF or both; empty lines mean nothing.
//!
//! A piece of a line can look like a reading (the `2.34` of `12.34`), so a line counts only if its beginning and its
//! end were seen: what arrives right after listening began is cut until the next line end, and a line that does not
//! end in time is dropped.

use crate::record::{Millis, Refusal};

/// The longest line that can be a reading: padding, sign, 13 digits, point, unit. Longer ones are refused whole.
pub const LINE_MAX: usize = 64;

/// A line whose next byte does not come within this time is unfinished. Ten characters at 300 baud take 333 ms.
pub const SILENCE_MS: u64 = 500;

/// A byte this soon after listening began may belong to a line that had begun before.
pub const SETTLING_MS: u64 = 50;

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Mode {
    /// Between lines, or within one.
    Taking,
    /// The rest of the line is passed over; its refusal is already told.
    Skipping,
}

/// Collects one line at a time.
#[derive(Debug)]
pub struct LineAssembler {
    line: heapless::Vec<u8, LINE_MAX>,
    mode: Mode,
    /// The line was handed out in place and is cleared before the next byte.
    complete: bool,
    listening_since: Millis,
    heard: bool,
    last_byte: Millis,
    /// Nobody could listen for a while: the next look at the clock counts as hearing a byte.
    deaf: bool,
}

impl LineAssembler {
    /// Begins to listen at `now`.
    #[must_use]
    pub fn new(now: Millis) -> Self {
        Self {
            line: heapless::Vec::new(),
            mode: Mode::Taking,
            complete: false,
            listening_since: now,
            heard: false,
            last_byte: now,
            deaf: false,
        }
    }

    /// Takes a byte. Gives a line when this byte ends one, or the reason why a line is refused.
    pub fn push(&mut self, now: Millis, byte: u8) -> Option<Result<&[u8], Refusal>> {
        if self.complete {
            self.complete = false;
            self.line.clear();
        }
        if !self.heard {
            self.heard = true;
            if now.since(self.listening_since) < SETTLING_MS && !is_end(byte) {
                self.mode = Mode::Skipping;
                self.last_byte = now;
                return Some(Err(Refusal::LineCut));
            }
        }
        if let Some(refusal) = self.silence(now) {
            // The pause came first; the byte begins a new line. It ends none, so nothing is lost by telling now.
            self.begin(now, byte);
            return Some(Err(refusal));
        }
        self.last_byte = now;
        if is_end(byte) {
            let skipped = self.mode == Mode::Skipping;
            self.mode = Mode::Taking;
            if skipped {
                self.line.clear();
                return None;
            }
            return self.take();
        }
        if self.mode == Mode::Taking && self.line.push(byte).is_err() {
            self.skip();
            return Some(Err(Refusal::LineTooLong));
        }
        None
    }

    /// Looks whether a line was left unfinished; call it every few milliseconds.
    pub fn tick(&mut self, now: Millis) -> Option<Refusal> {
        self.silence(now)
    }

    /// Bytes were lost: the line under way is spoilt, up to its end.
    pub fn spoil(&mut self, now: Millis) {
        self.skip();
        self.heard = true;
        self.last_byte = now;
    }

    /// The caller could not take bytes for a while (flash was erased) and they wait for it: that was no silence.
    pub fn was_deaf(&mut self) {
        self.deaf = true;
    }

    fn skip(&mut self) {
        self.line.clear();
        self.mode = Mode::Skipping;
    }

    fn begin(&mut self, now: Millis, byte: u8) {
        self.last_byte = now;
        if !is_end(byte) {
            // The line was just cleared, so there is room.
            let _ = self.line.push(byte);
        }
    }

    fn silence(&mut self, now: Millis) -> Option<Refusal> {
        // Bytes taken together with those before the pause still carry the old time.
        if self.deaf && now > self.last_byte {
            self.deaf = false;
            self.last_byte = now;
        }
        if now.since(self.last_byte) < SILENCE_MS {
            return None;
        }
        let unfinished = self.mode == Mode::Taking && !self.complete && !self.line.is_empty();
        self.mode = Mode::Taking;
        self.complete = false;
        self.line.clear();
        unfinished.then_some(Refusal::LineUnfinished)
    }

    fn take(&mut self) -> Option<Result<&[u8], Refusal>> {
        self.complete = true;
        let blank = self.line.iter().all(|byte| matches!(byte, b' ' | b'\t'));
        (!blank).then_some(Ok(&self.line))
    }
}

fn is_end(byte: u8) -> bool {
    matches!(byte, b'\r' | b'\n')
}

#[cfg(test)]
mod tests {
    use std::{string::String, vec::Vec};

    use super::*;

    /// All that comes of `bytes`, 1 ms apart, beginning at `start`.
    fn feed(assembler: &mut LineAssembler, start: u64, bytes: &[u8]) -> Vec<Result<String, Refusal>> {
        let mut out = Vec::new();
        for (i, byte) in bytes.iter().enumerate() {
            let now = Millis(start + i as u64);
            if let Some(line) = assembler.push(now, *byte) {
                out.push(line.map(|l| String::from_utf8_lossy(l).into_owned()));
            }
        }
        out
    }

    fn settled() -> LineAssembler {
        LineAssembler::new(Millis(0))
    }

    #[test]
    fn any_mix_of_line_ends_parts_lines_and_empty_lines_mean_nothing() {
        let lines = feed(&mut settled(), 100, b"\r\n1.0\r\n2.0\n\n3.0\r  \r4.0\n");
        let expected: Vec<_> = ["1.0", "2.0", "3.0", "4.0"].map(|s| Ok(String::from(s))).into();
        assert_eq!(lines, expected);
    }

    #[test]
    fn a_line_longer_than_the_buffer_is_refused_once_and_whole() {
        let mut long = std::vec![b'1'; 200];
        long.extend(b"\n7.5\n");
        let lines = feed(&mut settled(), 100, &long);
        assert_eq!(lines, [Err(Refusal::LineTooLong), Ok("7.5".into())]);
    }

    #[test]
    fn a_line_as_long_as_the_buffer_is_taken() {
        let mut line = std::vec![b'1'; LINE_MAX];
        line.push(b'\n');
        assert_eq!(feed(&mut settled(), 100, &line), [Ok("1".repeat(LINE_MAX))]);
    }

    #[test]
    fn a_line_under_way_when_listening_began_is_cut_and_the_next_one_taken() {
        let lines = feed(&mut settled(), 10, b"2.34\n12.34\n");
        assert_eq!(lines, [Err(Refusal::LineCut), Ok("12.34".into())]);
    }

    #[test]
    fn half_a_line_followed_by_silence_does_not_join_the_next_one() {
        let mut assembler = settled();
        assert_eq!(feed(&mut assembler, 100, b"12."), []);
        assert_eq!(
            feed(&mut assembler, 100 + 2 + SILENCE_MS, b"34\n5\n"),
            [Err(Refusal::LineUnfinished), Ok("34".into()), Ok("5".into())]
        );
    }

    #[test]
    fn silence_is_told_by_the_tick_too_and_only_once() {
        let mut assembler = settled();
        feed(&mut assembler, 100, b"12.");
        assert_eq!(assembler.tick(Millis(300)), None);
        assert_eq!(assembler.tick(Millis(1000)), Some(Refusal::LineUnfinished));
        assert_eq!(assembler.tick(Millis(2000)), None);
    }

    #[test]
    fn a_line_that_waited_while_flash_was_erased_is_whole() {
        let mut assembler = settled();
        feed(&mut assembler, 100, b"1");
        assembler.was_deaf();
        assert_eq!(assembler.push(Millis(100), b'2'), None);
        assert_eq!(assembler.push(Millis(100), b'.'), None);
        assert_eq!(feed(&mut assembler, 1_000, b"34\n"), [Ok("12.34".into())]);
        feed(&mut assembler, 1_100, b"5.");
        assert_eq!(
            assembler.tick(Millis(2_000)),
            Some(Refusal::LineUnfinished),
            "but real silence still counts"
        );
    }

    #[test]
    fn a_complete_line_is_no_unfinished_one() {
        let mut assembler = settled();
        feed(&mut assembler, 100, b"12.0\n");
        assert_eq!(assembler.tick(Millis(5000)), None);
    }

    #[test]
    fn lost_bytes_spoil_the_line_they_belong_to_and_no_other() {
        let mut assembler = settled();
        feed(&mut assembler, 100, b"12.");
        assembler.spoil(Millis(104));
        assert_eq!(feed(&mut assembler, 105, b"4\n5.0\n"), [Ok("5.0".into())]);
    }
}
