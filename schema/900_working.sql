-- Working state: small, replaceable.
CREATE TABLE settings (key TEXT PRIMARY KEY, value TEXT NOT NULL) STRICT;

CREATE TABLE nonces (
  key_id   BLOB NOT NULL CHECK (length(key_id) = 16),
  nonce    BLOB NOT NULL CHECK (length(nonce) = 16),
  expires  INTEGER NOT NULL,
  PRIMARY KEY (key_id, nonce)
) STRICT, WITHOUT ROWID;
CREATE INDEX nonces_by_time ON nonces (expires);

-- Which station fetched which slot's recipe before its freeze; what was decided then is in the ledger.
CREATE TABLE readiness (
  campaign  BLOB NOT NULL CHECK (length(campaign) = 16),
  slot      INTEGER NOT NULL,
  station   TEXT NOT NULL,
  PRIMARY KEY (campaign, slot, station)
) STRICT;
