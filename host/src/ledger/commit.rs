//! Taking a window of records: each is new, known, or refused, and fits the chain or is not taken.

use donelight_core::chain::Digest;
use donelight_core::record::{Gap, Seq};
use donelight_core::wire::StationId;
use rusqlite::{Connection, OptionalExtension, Transaction, params};

use super::{Committed, UnixMillis, Verified, Window};

/// What the ledger has of a number.
struct Known {
    bytes: Vec<u8>,
    digest: Option<Digest>,
}

/// A record with the chain's digest behind it.
#[derive(Clone, Copy)]
struct Linked<'a> {
    seq: Seq,
    bytes: &'a [u8],
    digest: Digest,
}

pub(super) fn last(connection: &Connection, station: StationId) -> rusqlite::Result<Seq> {
    let mut query = connection.prepare_cached(
        "SELECT max(ifnull((SELECT max(seq) FROM records WHERE station = ?1), 0),
                    ifnull((SELECT max(last) FROM gaps WHERE station = ?1), 0))",
    )?;
    query.query_row([station.0], |row| row.get(0)).map(Seq)
}

/// The last record that is kept, with its digest.
pub(super) fn head(
    connection: &Connection,
    station: StationId,
) -> rusqlite::Result<Option<(Seq, Option<Digest>)>> {
    let mut query = connection
        .prepare_cached("SELECT seq, digest FROM records WHERE station = ?1 ORDER BY seq DESC LIMIT 1")?;
    query
        .query_row([station.0], |row| Ok((Seq(row.get(0)?), row.get::<_, Option<_>>(1)?.map(Digest))))
        .optional()
}

pub(super) fn note_gap(
    connection: &Connection,
    station: StationId,
    gap: Gap,
    now: UnixMillis,
) -> rusqlite::Result<()> {
    let mut insert = connection.prepare_cached(
        "INSERT INTO gaps (station, first, last, noticed_ms) VALUES (?1, ?2, ?3, ?4)
         ON CONFLICT (station, first) DO UPDATE SET last = max(last, excluded.last)",
    )?;
    insert.execute(params![station.0, gap.first.0, gap.last.0, now.0]).map(|_| ())
}

/// Takes the window up to its end, or up to the first record that contradicts what is known.
pub(super) fn enter(
    transaction: Transaction<'_>,
    station: StationId,
    window: &Window<'_>,
    now: UnixMillis,
) -> rusqlite::Result<Committed> {
    let mut committed = Committed::default();
    let mut settled = last(&transaction, station)?;
    let mut digest = window.before;
    let Some((first, _)) = window.records.first() else { return Ok(committed) };
    match digest_before(&transaction, station, *first)? {
        Some(known) if known != digest => {
            committed.misfit = Some(*first);
            return Ok(committed);
        }
        Some(_) => {}
        None => note_anchor(&transaction, station, *first, digest)?,
    }
    for (seq, bytes) in &window.records {
        digest = digest.then(bytes);
        let linked = Linked { seq: *seq, bytes, digest };
        match known(&transaction, station, *seq)? {
            Some(known) if known.bytes != *bytes => {
                note_conflict(&transaction, station, (*seq, bytes), now)?;
                committed.conflicts.push(*seq);
                break;
            }
            Some(known) if known.digest.is_some_and(|known| known != digest) => {
                committed.misfit = Some(*seq);
                break;
            }
            Some(known) if known.digest.is_some() => continue,
            // Kept before there was a chain: now it is in it.
            Some(_) => chain(&transaction, station, linked)?,
            None => {
                if let Some(gap) = Gap::between(settled.next(), *seq) {
                    note_gap(&transaction, station, gap, now)?;
                    committed.gaps.push(gap);
                }
                insert(&transaction, station, linked, now)?;
                committed.new += 1;
            }
        }
        settled = settled.max(*seq);
    }
    transaction.commit()?;
    Ok(committed)
}

/// The digest before this number, as far as the ledger knows it.
fn digest_before(connection: &Connection, station: StationId, seq: Seq) -> rusqlite::Result<Option<Digest>> {
    if seq == Seq::FIRST {
        return Ok(Some(Digest::origin(station)));
    }
    let before = known(connection, station, Seq(seq.0.saturating_sub(1)))?;
    Ok(before.and_then(|known| known.digest))
}

fn known(connection: &Connection, station: StationId, seq: Seq) -> rusqlite::Result<Option<Known>> {
    let mut query =
        connection.prepare_cached("SELECT bytes, digest FROM records WHERE station = ?1 AND seq = ?2")?;
    let read = |row: &rusqlite::Row<'_>| {
        Ok(Known { bytes: row.get(0)?, digest: row.get::<_, Option<_>>(1)?.map(Digest) })
    };
    query.query_row(params![station.0, seq.0], read).optional()
}

fn insert(
    connection: &Connection,
    station: StationId,
    record: Linked<'_>,
    now: UnixMillis,
) -> rusqlite::Result<()> {
    let mut insert = connection.prepare_cached(
        "INSERT INTO records (station, seq, bytes, received_ms, digest) VALUES (?1, ?2, ?3, ?4, ?5)",
    )?;
    insert.execute(params![station.0, record.seq.0, record.bytes, now.0, record.digest.0]).map(|_| ())
}

fn chain(connection: &Connection, station: StationId, record: Linked<'_>) -> rusqlite::Result<()> {
    let mut update =
        connection.prepare_cached("UPDATE records SET digest = ?3 WHERE station = ?1 AND seq = ?2")?;
    update.execute(params![station.0, record.seq.0, record.digest.0]).map(|_| ())
}

fn note_anchor(
    connection: &Connection,
    station: StationId,
    seq: Seq,
    before: Digest,
) -> rusqlite::Result<()> {
    let mut insert = connection
        .prepare_cached("INSERT OR IGNORE INTO anchors (station, seq, before) VALUES (?1, ?2, ?3)")?;
    insert.execute(params![station.0, seq.0, before.0]).map(|_| ())
}

fn note_conflict(
    connection: &Connection,
    station: StationId,
    (seq, bytes): Verified<'_>,
    now: UnixMillis,
) -> rusqlite::Result<()> {
    let mut insert = connection.prepare_cached(
        "INSERT OR IGNORE INTO conflicts (station, seq, bytes, noticed_ms) VALUES (?1, ?2, ?3, ?4)",
    )?;
    insert.execute(params![station.0, seq.0, bytes, now.0]).map(|_| ())
}
