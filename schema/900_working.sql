-- Working state: small, replaceable.
CREATE TABLE settings (key TEXT PRIMARY KEY, value TEXT NOT NULL) STRICT;

CREATE TABLE nonces (
  key_id   BLOB NOT NULL CHECK (length(key_id) = 16),
  nonce    BLOB NOT NULL CHECK (length(nonce) = 16),
  expires  INTEGER NOT NULL,
  PRIMARY KEY (key_id, nonce)
) STRICT, WITHOUT ROWID;
CREATE INDEX nonces_by_time ON nonces (expires);

-- Which host of a station (0 main, 1 spare) fetched a slot's recipe before its freeze; what was decided then is in the ledger.
CREATE TABLE readiness (
  campaign  BLOB NOT NULL CHECK (length(campaign) = 16),
  slot      INTEGER NOT NULL,
  station   TEXT NOT NULL,
  place     INTEGER NOT NULL CHECK (place IN (0, 1)),
  PRIMARY KEY (campaign, slot, station, place)
) STRICT;

-- Which of them plays a slot: the first that asked for its key or filed anything about it.
CREATE TABLE leases (
  campaign  BLOB NOT NULL CHECK (length(campaign) = 16),
  slot      INTEGER NOT NULL,
  station   TEXT NOT NULL,
  place     INTEGER NOT NULL CHECK (place IN (0, 1)),
  PRIMARY KEY (campaign, slot, station)
) STRICT;
