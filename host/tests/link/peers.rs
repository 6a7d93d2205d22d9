//! Stations of other versions.

use std::io::{self, ErrorKind, Read, Write};
use std::time::{Duration, Instant};

use donelight::link::{LinkError, Session, Transport};
use donelight_core::wire::{FrameReader, Reason, VERSION};

/// Answers every request with this version and message.
struct Peer {
    version: u8,
    message: Vec<u8>,
    frames: FrameReader,
    outbox: Vec<u8>,
    waited: Duration,
    began: Instant,
}

impl Peer {
    fn new(version: u8, message: &[u8]) -> Self {
        Self {
            version,
            message: message.to_vec(),
            frames: FrameReader::default(),
            outbox: Vec::new(),
            waited: Duration::ZERO,
            began: Instant::now(),
        }
    }

    /// The frame of `wire`'s description, made without its code.
    fn answer(&self, number: [u8; 4]) -> Vec<u8> {
        let mut message = vec![self.version];
        message.extend(number);
        message.extend(&self.message);
        let sum = crc::Crc::<u32>::new(&crc::CRC_32_ISCSI).checksum(&message);
        message.extend(sum.to_le_bytes());
        message.push(0);
        let mut frame = vec![0];
        for block in message.split_inclusive(|byte| *byte == 0) {
            assert!(block.len() < 254, "short messages only");
            frame.push(block.len() as u8);
            frame.extend(&block[..block.len() - 1]);
        }
        frame.push(0);
        frame
    }
}

impl Read for Peer {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        if self.outbox.is_empty() {
            self.waited += Duration::from_millis(50);
            return Err(ErrorKind::TimedOut.into());
        }
        let got = self.outbox.len().min(buffer.len());
        buffer[..got].copy_from_slice(&self.outbox[..got]);
        self.outbox.drain(..got);
        Ok(got)
    }
}

impl Write for Peer {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        for byte in bytes {
            if let Some(frame) = self.frames.push(*byte) {
                let number = [frame[1], frame[2], frame[3], frame[4]];
                self.outbox = self.answer(number);
            }
        }
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl Transport for Peer {
    fn now(&self) -> Instant {
        self.began + self.waited
    }
}

fn hello(version: u8, message: &[u8]) -> LinkError {
    Session::open(Peer::new(version, message)).map(|_| ()).unwrap_err()
}

#[test]
fn a_station_of_another_version_says_which_side_is_to_be_updated() {
    use donelight::output::Explain;
    let newer = hello(VERSION + 1, &[1, 2, 3]);
    assert!(matches!(newer, LinkError::Version { theirs } if theirs == VERSION + 1), "{newer}");
    assert_eq!(newer.help(), "Update this command.");
    let older = hello(VERSION - 1, &[]);
    assert_eq!(older.help(), "Update the station.");
    // Refused with `Reason::Version`, by a station that understood so much.
    let refused = hello(VERSION, &[5, 1, 9]);
    assert!(matches!(refused, LinkError::Refused(Reason::Version { station: 9 })), "{refused}");
}

#[test]
fn an_answer_of_an_unknown_or_another_kind_is_no_answer() {
    assert!(matches!(hello(VERSION, &[77]), LinkError::UnknownReply));
    assert!(matches!(hello(VERSION, &[4]), LinkError::UnknownReply), "done, to a hello");
}

#[test]
fn an_answer_to_another_request_is_passed_over() {
    struct Stale(Peer);
    impl Read for Stale {
        fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
            self.0.read(buffer)
        }
    }
    impl Write for Stale {
        fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
            for byte in bytes {
                if let Some(frame) = self.0.frames.push(*byte) {
                    let number = u32::from_le_bytes([frame[1], frame[2], frame[3], frame[4]]).wrapping_sub(1);
                    self.0.outbox = self.0.answer(number.to_le_bytes());
                }
            }
            Ok(bytes.len())
        }
        fn flush(&mut self) -> io::Result<()> {
            Ok(())
        }
    }
    impl Transport for Stale {
        fn now(&self) -> Instant {
            self.0.now()
        }
    }
    let error = Session::open(Stale(Peer::new(VERSION, &[4]))).map(|_| ()).unwrap_err();
    assert!(matches!(error, LinkError::Garbage { .. }), "{error}");
}
