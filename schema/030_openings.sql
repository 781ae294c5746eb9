-- What custodians gave for openings. Spot boxes are encrypted between custodians; the service can't read them.
CREATE TABLE shares (
  campaign   BLOB NOT NULL CHECK (length(campaign) = 16),
  opening    BLOB NOT NULL CHECK (length(opening) = 16),
  custodian  TEXT NOT NULL,
  shares     BLOB NOT NULL,
  PRIMARY KEY (campaign, opening, custodian)
) STRICT;
CREATE TRIGGER shares_no_update BEFORE UPDATE ON shares BEGIN SELECT RAISE(ABORT, 'shares are final'); END;

CREATE TABLE boxes (
  campaign  BLOB NOT NULL CHECK (length(campaign) = 16),
  opening   BLOB NOT NULL CHECK (length(opening) = 16),
  sender    TEXT NOT NULL,
  receiver  TEXT NOT NULL,
  box       BLOB NOT NULL,
  PRIMARY KEY (campaign, opening, sender, receiver)
) STRICT;
CREATE TRIGGER boxes_no_update BEFORE UPDATE ON boxes BEGIN SELECT RAISE(ABORT, 'boxes are final'); END;
