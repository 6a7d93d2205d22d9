-- The chain: what all records of a station up to each come to. Records that were kept before there was a chain have none.

ALTER TABLE records ADD COLUMN digest BLOB CHECK (length(digest) = 16);

-- What the station said the records before this one come to, where the ledger does not hold the one before it: behind a
-- gap, and at the begin of the chain.
CREATE TABLE anchors (
    station BLOB    NOT NULL REFERENCES stations (station),
    seq     INTEGER NOT NULL CHECK (seq > 0),
    before  BLOB    NOT NULL CHECK (length(before) = 16),
    PRIMARY KEY (station, seq)
) STRICT, WITHOUT ROWID;
