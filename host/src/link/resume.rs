//! A pull that outlasts a cable: when the port is gone, the station is looked for by its unchangeable number, under
//! whatever port name it comes back, and the pull goes on where it broke off.

use std::time::{Duration, Instant};

use donelight_core::wire::StationId;

use super::pull::{Cause, Progress, PullError, Pulled, pull};
use super::{LinkError, Session, Transport, discover, serial};
use crate::ledger::Ledger;

/// How long a station that has gone is waited for. A Pico that was unplugged and plugged in again is there after some
/// seconds.
pub const RETURN_WITHIN: Duration = Duration::from_secs(15);

/// How long between two looks at the ports.
const LOOK_EVERY: Duration = Duration::from_millis(250);

/// So many breaks one after the other that bring no new record end the pull.
const BREAKS_IN_VAIN: u32 = 3;

/// A pull that came to its end.
#[derive(Debug)]
pub struct Resumed {
    /// All of it together.
    pub pulled: Pulled,
    /// How often the station had gone and was found again.
    pub breaks: u32,
}

/// [`pull`], and when the station has gone or is silent, again with what `find` gives, until it is done. `find` looks once
/// and gives a session with the station of this number, if it is there; it is asked for `patience`.
///
/// # Errors
/// See [`PullError`]: the last break's, with what is kept of all.
pub fn pull_resumed<T: Transport>(
    mut session: Session<T>,
    station: StationId,
    ledger: &mut Ledger,
    progress: &mut dyn FnMut(Progress),
    find: &mut dyn FnMut(StationId) -> Option<Session<T>>,
    patience: Duration,
) -> Result<Resumed, PullError> {
    let mut sum: Option<Pulled> = None;
    let (mut breaks, mut in_vain) = (0, 0);
    loop {
        let (part, cause) = match pull(&mut session, ledger, progress) {
            Ok(pulled) => (pulled, None),
            Err(error) => (error.kept, Some(error.cause)),
        };
        in_vain = if part.new == 0 { in_vain + 1 } else { 0 };
        let kept = add(sum.take(), part);
        let Some(cause) = cause else { return Ok(Resumed { pulled: kept, breaks }) };
        let comes_back = matches!(cause, Cause::Link(LinkError::Gone(_) | LinkError::Silent { .. }));
        if !comes_back || in_vain >= BREAKS_IN_VAIN {
            return Err(PullError { cause, kept });
        }
        // Its port must be free before it can be opened again.
        drop(session);
        match wait_for(station, find, patience) {
            Some(found) => session = found,
            None => return Err(PullError { cause, kept }),
        }
        breaks += 1;
        sum = Some(kept);
    }
}

fn add(sum: Option<Pulled>, part: Pulled) -> Pulled {
    match sum {
        None => part,
        Some(mut sum) => {
            sum.new += part.new;
            sum.through = sum.through.max(part.through);
            sum.gaps.extend(part.gaps);
            sum.clock_refused = part.clock_refused;
            sum
        }
    }
}

fn wait_for<T>(
    station: StationId,
    find: &mut dyn FnMut(StationId) -> Option<Session<T>>,
    patience: Duration,
) -> Option<Session<T>> {
    let end = Instant::now() + patience;
    loop {
        if let Some(session) = find(station) {
            return Some(session);
        }
        if Instant::now() >= end {
            return None;
        }
        std::thread::sleep(LOOK_EVERY);
    }
}

/// Looks once for this station: at the ports whose USB serial number is its number, and at the port where it was.
#[must_use]
pub fn find_again(station: StationId, was_at: &str) -> Option<Session<Box<dyn Transport>>> {
    let number = station.to_string();
    let mut ports: Vec<String> = discover::attached()
        .unwrap_or_default()
        .into_iter()
        .filter(|attached| attached.serial.as_deref() == Some(number.as_str()))
        .map(|attached| attached.port)
        .collect();
    ports.push(was_at.to_owned());
    ports.iter().find_map(|port| at(station, port))
}

/// A session with this station if it is at this port; another one that has taken its place is let go again.
#[must_use]
pub fn at(station: StationId, port: &str) -> Option<Session<Box<dyn Transport>>> {
    let (session, hello) = Session::open(serial::open(port).ok()?).ok()?;
    (hello.station == station).then_some(session)
}
