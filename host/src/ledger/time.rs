//! Wall time of records: a record holds the time since its station's boot, and `Clock` records tie that to the world.

use std::fmt;
use std::time::{SystemTime, UNIX_EPOCH};

use donelight_core::record::{Millis, Seq};

/// Milliseconds since 1970-01-01 00:00 UTC.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct UnixMillis(pub i64);

impl UnixMillis {
    /// By this computer's clock; 0 if that stands before 1970.
    #[must_use]
    pub fn now() -> Self {
        let since = SystemTime::now().duration_since(UNIX_EPOCH).unwrap_or_default();
        Self(i64::try_from(since.as_millis()).unwrap_or(i64::MAX))
    }

    /// As a station's clock takes it.
    #[must_use]
    pub fn to_wire(self) -> u64 {
        u64::try_from(self.0).unwrap_or(0)
    }
}

/// RFC 3339 in UTC, such as `2026-12-01T13:57:19.250Z`; the plain number beyond the calendar's range.
impl fmt::Display for UnixMillis {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match jiff::Timestamp::from_millisecond(self.0) {
            Ok(time) => write!(f, "{time:.3}"),
            Err(_) => write!(f, "{} ms since 1970", self.0),
        }
    }
}

/// The clocks that one station was told, boot by boot, in the order of its records.
#[derive(Clone, Debug, Default)]
pub struct WallTime {
    boots: Vec<Boot>,
}

#[derive(Clone, Debug)]
struct Boot {
    /// Its first record.
    from: Seq,
    clocks: Vec<Clock>,
}

#[derive(Clone, Copy, Debug)]
struct Clock {
    seq: Seq,
    at: Millis,
    unix_ms: u64,
}

impl WallTime {
    /// Times count from 0 again at this record, or nobody knows whether they do.
    pub fn restart(&mut self, from: Seq) {
        self.boots.push(Boot { from, clocks: Vec::new() });
    }

    /// At this record the world's time was `unix_ms`.
    pub fn clock(&mut self, seq: Seq, at: Millis, unix_ms: u64) {
        if self.boots.is_empty() {
            self.restart(seq);
        }
        if let Some(boot) = self.boots.last_mut() {
            boot.clocks.push(Clock { seq, at, unix_ms });
        }
    }

    /// When the record was made: by the last clock before it, else by the first one after it, both of the same boot;
    /// `None` without either.
    #[must_use]
    pub fn of(&self, seq: Seq, at: Millis) -> Option<UnixMillis> {
        let boot = self.boots.partition_point(|boot| boot.from <= seq).checked_sub(1)?;
        let clocks = &self.boots.get(boot)?.clocks;
        let before = clocks.partition_point(|clock| clock.seq <= seq).saturating_sub(1);
        let clock = clocks.get(before)?;
        let unix = i128::from(clock.unix_ms) + i128::from(at.0) - i128::from(clock.at.0);
        i64::try_from(unix).ok().map(UnixMillis)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_record_takes_its_time_from_the_clock_before_it_or_else_behind_it() {
        let mut time = WallTime::default();
        time.restart(Seq(1));
        time.clock(Seq(3), Millis(500), 1_000_000);
        time.clock(Seq(6), Millis(900), 1_000_404);
        assert_eq!(time.of(Seq(2), Millis(100)), Some(UnixMillis(999_600)));
        assert_eq!(time.of(Seq(3), Millis(500)), Some(UnixMillis(1_000_000)));
        assert_eq!(time.of(Seq(5), Millis(800)), Some(UnixMillis(1_000_300)), "not yet by the later clock");
        assert_eq!(time.of(Seq(7), Millis(1_000)), Some(UnixMillis(1_000_504)));
    }

    #[test]
    fn a_boot_without_a_clock_has_no_wall_time() {
        let mut time = WallTime::default();
        assert_eq!(time.of(Seq(1), Millis(0)), None);
        time.restart(Seq(1));
        time.clock(Seq(2), Millis(10), 5_000);
        time.restart(Seq(3));
        assert_eq!(time.of(Seq(4), Millis(20)), None);
        assert_eq!(time.of(Seq(1), Millis(0)), Some(UnixMillis(4_990)));
    }

    #[test]
    fn times_are_shown_in_utc() {
        assert_eq!(UnixMillis(0).to_string(), "1970-01-01T00:00:00.000Z");
        assert_eq!(UnixMillis(1_000_000_000_123).to_string(), "2001-09-09T01:46:40.123Z");
        assert_eq!(UnixMillis(i64::MAX).to_string(), format!("{} ms since 1970", i64::MAX));
    }
}
