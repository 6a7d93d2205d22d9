-- The records as the stations sent them, and nothing that can be derived from them.
-- A station is its 8-byte number; times are milliseconds since 1970-01-01 00:00 UTC on the host's clock.

CREATE TABLE stations (
    station       BLOB    NOT NULL PRIMARY KEY CHECK (length(station) = 8),
    firmware      TEXT    NOT NULL,
    first_seen_ms INTEGER NOT NULL,
    last_seen_ms  INTEGER NOT NULL
) STRICT, WITHOUT ROWID;

CREATE TABLE records (
    station     BLOB    NOT NULL REFERENCES stations (station),
    seq         INTEGER NOT NULL CHECK (seq > 0),
    bytes       BLOB    NOT NULL,
    received_ms INTEGER NOT NULL,
    PRIMARY KEY (station, seq)
) STRICT, WITHOUT ROWID;

-- Numbers that a station no longer had when they were asked for.
CREATE TABLE gaps (
    station    BLOB    NOT NULL REFERENCES stations (station),
    first      INTEGER NOT NULL CHECK (first > 0),
    last       INTEGER NOT NULL CHECK (last >= first),
    noticed_ms INTEGER NOT NULL,
    PRIMARY KEY (station, first)
) STRICT, WITHOUT ROWID;

-- Records that differ from the one that is kept under the same number.
CREATE TABLE conflicts (
    station    BLOB    NOT NULL REFERENCES stations (station),
    seq        INTEGER NOT NULL,
    bytes      BLOB    NOT NULL,
    noticed_ms INTEGER NOT NULL,
    PRIMARY KEY (station, seq, bytes)
) STRICT, WITHOUT ROWID;
