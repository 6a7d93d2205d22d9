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

/// Times that something lies between, as far as they are known.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Bounds {
    /// Not before this.
    pub earliest: Option<UnixMillis>,
    /// Not after this.
    pub latest: Option<UnixMillis>,
}

/// The time itself where both are the same.
impl fmt::Display for Bounds {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match (self.earliest, self.latest) {
            (Some(earliest), Some(latest)) if earliest == latest => earliest.fmt(f),
            (Some(earliest), Some(latest)) => write!(f, "between {earliest} and {latest}"),
            (Some(earliest), None) => write!(f, "not before {earliest}"),
            (None, Some(latest)) => write!(f, "not after {latest}"),
            (None, None) => f.write_str("unknown"),
        }
    }
}

/// The clocks that one station was told, run by run, in the order of its records. A run is what lies within one boot, and
/// behind a gap a new one begins, since a boot may be missing.
#[derive(Clone, Debug, Default)]
pub struct WallTime {
    runs: Vec<Run>,
}

#[derive(Clone, Debug)]
struct Run {
    /// Its first record.
    from: Seq,
    /// The station's time when the run began: 0 for a boot, that of the first record behind a gap.
    began: Millis,
    /// That of its last record.
    ended: Millis,
    clocks: Vec<Clock>,
}

#[derive(Clone, Copy, Debug)]
struct Clock {
    seq: Seq,
    at: Millis,
    unix_ms: u64,
}

impl WallTime {
    /// Times count from 0 again at this record.
    pub fn restart(&mut self, from: Seq) {
        self.runs.push(Run { from, began: Millis(0), ended: Millis(0), clocks: Vec::new() });
    }

    /// Records before this one are missing, and nobody knows whether times count from 0 again.
    pub fn gap(&mut self, from: Seq) {
        let unknown = Millis(u64::MAX);
        self.runs.push(Run { from, began: unknown, ended: Millis(0), clocks: Vec::new() });
    }

    /// This record was made at this time of the station.
    pub fn record(&mut self, seq: Seq, at: Millis) {
        if self.runs.is_empty() {
            self.restart(seq);
        }
        if let Some(run) = self.runs.last_mut() {
            run.began = run.began.min(at);
            run.ended = run.ended.max(at);
        }
    }

    /// At this record the world's time was `unix_ms`.
    pub fn clock(&mut self, seq: Seq, at: Millis, unix_ms: u64) {
        self.record(seq, at);
        if let Some(run) = self.runs.last_mut() {
            run.clocks.push(Clock { seq, at, unix_ms });
        }
    }

    /// When the record was made: by the last clock before it, else by the first one after it, both of the same run;
    /// `None` without either.
    #[must_use]
    pub fn of(&self, seq: Seq, at: Millis) -> Option<UnixMillis> {
        self.runs.get(self.run_of(seq)?)?.wall(seq, at)
    }

    /// Between which times the record was made. Without a clock in its own run: not before the end of the last run that
    /// had one, nor after the begin of the next one; what the runs between took comes off either way.
    #[must_use]
    pub fn bounds(&self, seq: Seq, at: Millis) -> Bounds {
        let Some(index) = self.run_of(seq) else { return Bounds::default() };
        let (Some(before), Some(run), Some(behind)) =
            (self.runs.get(..index), self.runs.get(index), self.runs.get(index + 1..))
        else {
            return Bounds::default();
        };
        if let Some(time) = run.wall(seq, at) {
            return Bounds { earliest: Some(time), latest: Some(time) };
        }
        let plus = |time: UnixMillis, by: u64| time.0.checked_add_unsigned(by).map(UnixMillis);
        let minus = |time: UnixMillis, by: u64| time.0.checked_sub_unsigned(by).map(UnixMillis);
        let mut since = at.since(run.began);
        let earliest = before.iter().rev().find_map(|earlier| {
            let end = earlier.wall(Seq(u32::MAX), earlier.ended);
            if end.is_none() {
                since = since.saturating_add(earlier.ended.since(earlier.began));
            }
            end
        });
        let mut until = run.ended.since(at);
        let latest = behind.iter().find_map(|later| {
            let begin = later.wall(later.from, later.began);
            if begin.is_none() {
                until = until.saturating_add(later.ended.since(later.began));
            }
            begin
        });
        Bounds {
            earliest: earliest.and_then(|time| plus(time, since)),
            latest: latest.and_then(|time| minus(time, until)),
        }
    }

    fn run_of(&self, seq: Seq) -> Option<usize> {
        self.runs.partition_point(|run| run.from <= seq).checked_sub(1)
    }
}

impl Run {
    fn wall(&self, seq: Seq, at: Millis) -> Option<UnixMillis> {
        let before = self.clocks.partition_point(|clock| clock.seq <= seq).saturating_sub(1);
        let clock = self.clocks.get(before)?;
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

    /// Four runs: clocked, not, not, clocked. All times in ms; the world's begin with the first boot at 1,000,000.
    #[test]
    fn a_record_of_a_run_without_a_clock_lies_between_its_neighbours_clocks() {
        let mut time = WallTime::default();
        time.restart(Seq(1));
        time.record(Seq(1), Millis(0));
        time.clock(Seq(2), Millis(100), 1_000_100);
        time.record(Seq(3), Millis(5_000));
        time.restart(Seq(4));
        time.record(Seq(4), Millis(0));
        time.record(Seq(5), Millis(300));
        time.record(Seq(6), Millis(2_000));
        time.restart(Seq(7));
        time.record(Seq(7), Millis(0));
        time.record(Seq(8), Millis(700));
        time.restart(Seq(9));
        time.record(Seq(9), Millis(0));
        time.record(Seq(10), Millis(60));
        time.clock(Seq(11), Millis(80), 1_020_080);
        let bounds = |seq, at| {
            let Bounds { earliest, latest } = time.bounds(Seq(seq), Millis(at));
            (earliest.map(|time| time.0), latest.map(|time| time.0))
        };
        // The first run ends at 1,005,000; the last begins at 1,020,000.
        assert_eq!(bounds(5, 300), (Some(1_005_300), Some(1_020_000 - 700 - 1_700)));
        assert_eq!(bounds(8, 700), (Some(1_005_000 + 2_000 + 700), Some(1_020_000)));
        assert_eq!(bounds(3, 5_000), (Some(1_005_000), Some(1_005_000)), "known");
        assert_eq!(bounds(10, 60), (Some(1_020_060), Some(1_020_060)), "by the clock behind it");
        assert_eq!(
            time.bounds(Seq(5), Millis(300)).to_string(),
            "between 1970-01-01T00:16:45.300Z and 1970-01-01T00:16:57.600Z"
        );
    }

    #[test]
    fn with_a_clock_on_one_side_only_one_bound_is_known() {
        let mut time = WallTime::default();
        time.restart(Seq(1));
        time.record(Seq(2), Millis(400));
        assert_eq!(time.bounds(Seq(2), Millis(400)), Bounds::default());
        time.restart(Seq(3));
        time.clock(Seq(4), Millis(50), 9_050);
        assert_eq!(
            time.bounds(Seq(2), Millis(150)),
            Bounds { earliest: None, latest: Some(UnixMillis(9_000 - 250)) }
        );
        time.restart(Seq(5));
        time.record(Seq(6), Millis(30));
        let after = time.bounds(Seq(6), Millis(30));
        assert_eq!(after, Bounds { earliest: Some(UnixMillis(9_080)), latest: None });
        assert_eq!(after.to_string(), "not before 1970-01-01T00:00:09.080Z");
    }

    #[test]
    fn behind_a_gap_only_what_is_known_of_it_counts() {
        let mut time = WallTime::default();
        time.restart(Seq(1));
        time.clock(Seq(2), Millis(100), 1_000);
        time.gap(Seq(9));
        time.record(Seq(9), Millis(7_000));
        time.record(Seq(10), Millis(7_500));
        // Perhaps the same boot, perhaps not: 500 ms after the gap at least.
        assert_eq!(time.bounds(Seq(10), Millis(7_500)).earliest, Some(UnixMillis(1_500)));
        assert_eq!(time.of(Seq(10), Millis(7_500)), None);
    }

    #[test]
    fn times_are_shown_in_utc() {
        assert_eq!(UnixMillis(0).to_string(), "1970-01-01T00:00:00.000Z");
        assert_eq!(UnixMillis(1_000_000_000_123).to_string(), "2001-09-09T01:46:40.123Z");
        assert_eq!(UnixMillis(i64::MAX).to_string(), format!("{} ms since 1970", i64::MAX));
    }
}
