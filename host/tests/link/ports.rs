//! Serial ports that are missing, busy, silent, noisy, deaf, or gone in the middle of a pull.

use std::io::{ErrorKind, Write};
use std::os::unix::net::UnixListener;
use std::time::{Duration, Instant};

use donelight::link::pull::{Cause, pull};
use donelight::link::serial::{self, SerialLink};
use donelight::link::{LinkError, Patience, PortError, Session};
use donelight::virtual_station::pseudo_terminal::PseudoTerminal;

use crate::faulty::{Fault, Faulty};
use crate::support::*;
use crate::terminal::OnTerminal;

fn open_error(port: &str) -> PortError {
    serial::open(port).err().expect("it does not open")
}

#[test]
fn a_port_that_is_none_is_told_apart() {
    let (folder, path) = folder();
    std::fs::write(&path, "").unwrap();
    let text = |path: &std::path::Path| path.to_str().unwrap().to_owned();
    assert!(matches!(open_error("/dev/no-such-port"), PortError::Missing { .. }));
    assert!(matches!(open_error(&text(&path)), PortError::NotAPort { .. }));
    assert!(matches!(open_error(&text(folder.path())), PortError::NotAPort { .. }));
    assert!(matches!(open_error("/dev/null"), PortError::NotAPort { .. }));
}

#[test]
fn a_port_is_one_programs_at_a_time() {
    let station = OnTerminal::serve(station_with_readings(3));
    let first = serial::open(station.port()).unwrap();
    assert!(matches!(open_error(station.port()), PortError::Busy { .. }));
    drop(first);
    assert!(Session::open(serial::open(station.port()).unwrap()).is_ok());
    station.stop();
}

#[test]
fn a_pull_over_a_terminal_is_the_journal() {
    let (_folder, path) = folder();
    let station = OnTerminal::serve(station_with_readings(500));
    let (mut session, _) = Session::open(serial::open(station.port()).unwrap()).unwrap();
    pull(&mut session, &mut open(&path), &mut |_| {}).unwrap();
    drop(session);
    assert_eq!(rows(&path), journal(&mut station.stop()));
}

#[test]
fn a_socket_is_a_port_too() {
    let (folder, path) = folder();
    let socket = folder.path().join("port");
    let listener = UnixListener::bind(&socket).unwrap();
    let station = std::thread::spawn(move || {
        use std::io::Read;
        let (mut host, _) = listener.accept().unwrap();
        let mut station = station_with_readings(40);
        let mut bytes = [0; 1_024];
        while let Ok(got @ 1..) = host.read(&mut bytes) {
            station.write_all(&bytes[..got]).unwrap();
            while let Ok(answered) = station.read(&mut bytes) {
                host.write_all(&bytes[..answered]).unwrap();
            }
        }
        station
    });
    let (mut session, _) = Session::open(serial::open(socket.to_str().unwrap()).unwrap()).unwrap();
    pull(&mut session, &mut open(&path), &mut |_| {}).unwrap();
    drop(session);
    assert_eq!(rows(&path), journal(&mut station.join().unwrap()));
}

#[test]
fn a_station_unplugged_in_mid_pull_is_said_to_be_gone_and_the_next_pull_completes_it() {
    for bytes in [1, 60, 300, 1_500, 4_000, 5_500] {
        let (_folder, path) = folder();
        let station = OnTerminal::serve_until(station_with_readings(500), bytes);
        let mut ledger = open(&path);
        let error = match Session::open(serial::open(station.port()).unwrap()) {
            Ok((mut session, _)) => match pull(&mut session, &mut ledger, &mut |_| {}).unwrap_err().cause {
                Cause::Link(error) => error,
                other => panic!("{other}"),
            },
            Err(error) => error,
        };
        assert!(matches!(error, LinkError::Gone(_)), "after {bytes}: {error}");
        let mut station = station.stop();
        let kept = rows(&path);
        assert_eq!(kept[..], journal(&mut station)[..kept.len()]);
        let station = OnTerminal::serve(station);
        let (mut session, _) = Session::open(serial::open(station.port()).unwrap()).unwrap();
        pull(&mut session, &mut ledger, &mut |_| {}).unwrap();
        drop(session);
        assert_eq!(rows(&path), journal(&mut station.stop()));
    }
}

#[test]
fn a_station_that_falls_silent_is_given_up() {
    // Time is the station's own, so this takes none of ours.
    let mut station = station_with_readings(100);
    let silent = Faulty::new(
        &mut station,
        Vec::new(),
        (90..20_000).step_by(200).map(|at| (at, Fault::Lose(255))).collect(),
    );
    let (mut session, _) = Session::open(silent).unwrap();
    let error = loop {
        if let Err(error) = session.status() {
            break error;
        }
    };
    assert!(matches!(error, LinkError::Silent { .. }), "{error}");
    assert!(error.to_string().contains("no longer answers"), "{error}");
}

#[test]
fn a_port_that_does_not_answer_is_given_up() {
    let terminal = PseudoTerminal::open().unwrap();
    let begin = Instant::now();
    let error = Session::open(serial::open(terminal.path().to_str().unwrap()).unwrap()).err().unwrap();
    assert!(matches!(error, LinkError::NoAnswer { .. }), "{error}");
    assert!(begin.elapsed() >= Patience::FIRST.give_up_after);
    assert!(begin.elapsed() < Patience::FIRST.give_up_after + Duration::from_secs(3));
}

/// Opens a session on a port that sends what `noise` makes of what it got, again and again.
fn garbage_from(mut noise: impl FnMut(&[u8]) -> Vec<u8>) {
    let terminal = PseudoTerminal::open().unwrap();
    let port = terminal.path().to_str().unwrap().to_owned();
    let host = std::thread::spawn(move || Session::open(serial::open(&port).unwrap()).map(|_| ()));
    let mut bytes = [0; 64];
    while !host.is_finished() {
        let got = terminal.receive(&mut bytes).unwrap();
        terminal.send(&noise(&bytes[..got])).unwrap();
        std::thread::sleep(Duration::from_millis(1));
    }
    let error = host.join().unwrap().unwrap_err();
    assert!(matches!(error, LinkError::Garbage { .. }), "{error}");
}

#[test]
fn a_port_that_sends_rubbish_is_given_up() {
    let mut noise = 1u32;
    garbage_from(|_| {
        noise = noise.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
        noise.to_le_bytes().to_vec()
    });
}

#[test]
fn a_port_that_echoes_is_given_up() {
    garbage_from(<[u8]>::to_vec);
}

#[test]
fn rubbish_and_half_frames_before_the_first_answer_do_no_harm() {
    let mut station = station_with_readings(3);
    // What a modem manager leaves behind, half a frame, and an answer to a program that has gone.
    station.write_all(b"AT+GMI\r\n\x00\x05\x01\x01").unwrap();
    let mut frame = [0; donelight_core::wire::FRAME_MAX];
    let request = donelight_core::wire::Request::Status;
    let stale = donelight_core::wire::encode(7, &request, &mut frame).unwrap();
    station.write_all(stale).unwrap();
    assert!(Session::open(&mut station).is_ok());
}

#[test]
fn a_port_whose_other_end_never_reads_does_not_hold_the_host_for_ever() {
    let terminal = PseudoTerminal::open().unwrap();
    let mut link = SerialLink::open(terminal.path().to_str().unwrap()).unwrap();
    let begin = Instant::now();
    let mut taken = 0;
    let error = loop {
        match link.write(&[0x55; 64]) {
            Ok(n) => taken += n,
            Err(error) => break error,
        }
        assert!(taken < 1 << 20, "it never fills");
    };
    assert_eq!(error.kind(), ErrorKind::TimedOut, "{error}");
    drop(link);
    assert!(begin.elapsed() < Duration::from_secs(5), "{:?}", begin.elapsed());
}
