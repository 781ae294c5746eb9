/* The tables of a bundle. A change here is a new bundle format. */
#include "server/ledger/bundle_schema.h"

#include <stddef.h>

const struct bundle_table bundle_tables[] = {
    {"about", "(key TEXT PRIMARY KEY, value TEXT NOT NULL) STRICT"},
    {"leaves", "(seq INTEGER PRIMARY KEY, frame BLOB NOT NULL) STRICT"},
    {"heads", "(text TEXT NOT NULL) STRICT"},
    {"hidden", "(commitment BLOB PRIMARY KEY, seq INTEGER NOT NULL, received INTEGER NOT NULL, due INTEGER NOT NULL,"
               " promise BLOB NOT NULL, nonce BLOB NOT NULL, entry BLOB NOT NULL, signature BLOB NOT NULL,"
               " author BLOB NOT NULL) STRICT"},
    {"records", "(position INTEGER PRIMARY KEY, type INTEGER NOT NULL, slot INTEGER NOT NULL, station TEXT NOT NULL,"
                " author BLOB NOT NULL, record_id BLOB NOT NULL, record BLOB NOT NULL) STRICT"},
    {"recipes", "(slot INTEGER NOT NULL, station TEXT NOT NULL, place INTEGER NOT NULL, recipe BLOB NOT NULL,"
                " PRIMARY KEY (slot, station, place)) STRICT"},
    {"prekeys", "(station TEXT NOT NULL, place INTEGER NOT NULL, points BLOB NOT NULL,"
                " PRIMARY KEY (station, place)) STRICT"},
    {"shares", "(opening BLOB NOT NULL, custodian TEXT NOT NULL, shares BLOB NOT NULL,"
               " PRIMARY KEY (opening, custodian)) STRICT"},
    {NULL, NULL}};
