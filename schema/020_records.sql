-- Sealed records: immutable ciphertext, one row each; a repeated R is refused by the unique index.
CREATE TABLE records (
  campaign   BLOB NOT NULL CHECK (length(campaign) = 16),
  position   INTEGER NOT NULL,
  type       INTEGER NOT NULL,
  slot       INTEGER NOT NULL,
  station    TEXT NOT NULL,
  author     BLOB NOT NULL CHECK (length(author) = 16),
  record_id  BLOB NOT NULL CHECK (length(record_id) = 64),
  r_point    BLOB NOT NULL CHECK (length(r_point) = 32),
  record     BLOB NOT NULL,
  PRIMARY KEY (campaign, position)
) STRICT;
CREATE UNIQUE INDEX records_once ON records (campaign, r_point);
CREATE UNIQUE INDEX records_by_id ON records (campaign, record_id);
CREATE INDEX records_by_slot ON records (campaign, slot, type);
CREATE TRIGGER records_no_update BEFORE UPDATE ON records BEGIN SELECT RAISE(ABORT, 'records are final'); END;
CREATE TRIGGER records_no_delete BEFORE DELETE ON records BEGIN SELECT RAISE(ABORT, 'records are final'); END;

CREATE TABLE recipes (
  campaign  BLOB NOT NULL CHECK (length(campaign) = 16),
  slot      INTEGER NOT NULL,
  station   TEXT NOT NULL,
  place     INTEGER NOT NULL,
  recipe    BLOB NOT NULL,
  PRIMARY KEY (campaign, slot, station, place)
) STRICT;
CREATE TRIGGER recipes_no_update BEFORE UPDATE ON recipes BEGIN SELECT RAISE(ABORT, 'recipes are final'); END;

CREATE TABLE prekeys (
  campaign  BLOB NOT NULL CHECK (length(campaign) = 16),
  station   TEXT NOT NULL,
  place     INTEGER NOT NULL,
  points    BLOB NOT NULL,
  PRIMARY KEY (campaign, station, place)
) STRICT;

-- Slot keys, encrypted under the service's storage key; deleted (and overwritten: secure_delete) after the slot.
CREATE TABLE slot_keys (
  campaign  BLOB NOT NULL CHECK (length(campaign) = 16),
  slot      INTEGER NOT NULL,
  boxed     BLOB NOT NULL,
  PRIMARY KEY (campaign, slot)
) STRICT;
