-- The ledger: immutable. Everything public and who said it; hidden entries as commitments.
CREATE TABLE leaves (
  seq        INTEGER PRIMARY KEY,
  frame      BLOB NOT NULL,
  leaf_hash  BLOB NOT NULL CHECK (length(leaf_hash) = 32)
) STRICT;
CREATE TRIGGER leaves_no_update BEFORE UPDATE ON leaves BEGIN SELECT RAISE(ABORT, 'the ledger is append-only'); END;
CREATE TRIGGER leaves_no_delete BEFORE DELETE ON leaves BEGIN SELECT RAISE(ABORT, 'the ledger is append-only'); END;
CREATE TRIGGER leaves_in_order BEFORE INSERT ON leaves
  WHEN NEW.seq <> (SELECT coalesce(max(seq), -1) + 1 FROM leaves) BEGIN SELECT RAISE(ABORT, 'the ledger has no gaps'); END;

CREATE TABLE heads (
  size  INTEGER PRIMARY KEY,
  text  TEXT NOT NULL
) STRICT;
CREATE TRIGGER heads_no_update BEFORE UPDATE ON heads BEGIN SELECT RAISE(ABORT, 'heads are final'); END;

CREATE TABLE cosignatures (
  size       INTEGER NOT NULL,
  key_id     BLOB NOT NULL CHECK (length(key_id) = 16),
  signature  BLOB NOT NULL CHECK (length(signature) = 64),
  PRIMARY KEY (size, key_id)
) STRICT, WITHOUT ROWID;
CREATE INDEX cosignatures_by_key ON cosignatures (key_id, size);

-- Hidden entries wait here for their batch; seq is set once, when the commitment enters the ledger.
CREATE TABLE hidden (
  commitment   BLOB PRIMARY KEY CHECK (length(commitment) = 64),
  campaign     BLOB NOT NULL CHECK (length(campaign) = 16),
  received     INTEGER NOT NULL,
  due          INTEGER NOT NULL,
  nonce        BLOB NOT NULL CHECK (length(nonce) = 32),
  entry        BLOB NOT NULL,
  signature    BLOB NOT NULL CHECK (length(signature) = 64),
  author       BLOB NOT NULL CHECK (length(author) = 16),
  promise      BLOB NOT NULL CHECK (length(promise) = 64),
  seq          INTEGER
) STRICT;
CREATE INDEX hidden_by_campaign ON hidden (campaign, received);
CREATE TRIGGER hidden_no_delete BEFORE DELETE ON hidden BEGIN SELECT RAISE(ABORT, 'a promise is kept'); END;
CREATE TRIGGER hidden_once BEFORE UPDATE ON hidden
  WHEN OLD.seq IS NOT NULL OR NEW.entry <> OLD.entry OR NEW.nonce <> OLD.nonce OR NEW.commitment <> OLD.commitment
  BEGIN SELECT RAISE(ABORT, 'a hidden entry is final'); END;
