"""Whole lists, footprints, pointings and checks of catalogs.

The statements are those of the time, written out: later changes of the tables are later migrations.
"""

from __future__ import annotations

from alembic import op

revision = "0002"
down_revision = "0001"

STATEMENTS = (
    """
CREATE TABLE list_copy (
    list_id INTEGER NOT NULL,
    catalog_id TEXT NOT NULL,
    release TEXT NOT NULL,
    table_name TEXT NOT NULL,
    request TEXT NOT NULL,
    asked_at TEXT NOT NULL CHECK (asked_at LIKE '____-__-__T__:__:__%Z'),
    sha256 TEXT NOT NULL,
    reply_bytes INTEGER NOT NULL,
    client TEXT NOT NULL,
    n_rows INTEGER NOT NULL CHECK (n_rows >= 0),
    body BLOB NOT NULL,
    PRIMARY KEY (list_id)
)
 STRICT
""",
    """
CREATE TABLE list_row (
    list_id INTEGER NOT NULL,
    ordinal INTEGER NOT NULL,
    source_key TEXT NOT NULL,
    ra_deg REAL NOT NULL,
    dec_deg REAL NOT NULL,
    hpx29 INTEGER NOT NULL,
    raw TEXT NOT NULL,
    PRIMARY KEY (list_id, ordinal),
    FOREIGN KEY(list_id) REFERENCES list_copy (list_id)
)
 WITHOUT ROWID,
 STRICT
""",
    """
CREATE TABLE footprint (
    footprint_id INTEGER NOT NULL,
    catalog_id TEXT NOT NULL,
    release TEXT NOT NULL,
    address TEXT NOT NULL,
    asked_at TEXT NOT NULL CHECK (asked_at LIKE '____-__-__T__:__:__%Z'),
    sha256 TEXT NOT NULL,
    sky_fraction REAL NOT NULL CHECK (sky_fraction BETWEEN 0 AND 1),
    body BLOB NOT NULL,
    PRIMARY KEY (footprint_id)
)
 STRICT
""",
    """
CREATE TABLE pointing (
    search_id INTEGER NOT NULL,
    ordinal INTEGER NOT NULL,
    name TEXT NOT NULL,
    instrument TEXT NOT NULL,
    started TEXT NOT NULL,
    ra_deg REAL NOT NULL,
    dec_deg REAL NOT NULL,
    exposure_s REAL NOT NULL CHECK (exposure_s > 0),
    field_radius_arcmin REAL NOT NULL,
    off_axis_arcmin REAL NOT NULL,
    holds_target INTEGER NOT NULL CHECK (holds_target IN (0, 1)),
    PRIMARY KEY (search_id, ordinal),
    FOREIGN KEY(search_id) REFERENCES search (search_id)
)
 WITHOUT ROWID,
 STRICT
""",
    """
CREATE TABLE catalog_check (
    check_id INTEGER NOT NULL,
    catalog_id TEXT NOT NULL,
    release TEXT NOT NULL,
    fingerprint TEXT NOT NULL,
    checked_at TEXT NOT NULL CHECK (checked_at LIKE '____-__-__T__:__:__%Z'),
    verdict TEXT NOT NULL CHECK (verdict IN ('good', 'drift', 'no rows', 'unanswered')),
    detail TEXT NOT NULL,
    resolved TEXT NOT NULL,
    found TEXT NOT NULL,
    PRIMARY KEY (check_id)
)
 STRICT
""",
    """
CREATE INDEX list_copy_catalog_id_table_name ON list_copy (catalog_id, table_name)
""",
    """
CREATE INDEX list_row_hpx29 ON list_row (hpx29)
""",
    """
CREATE INDEX footprint_catalog_id ON footprint (catalog_id)
""",
    """
CREATE INDEX catalog_check_catalog_id ON catalog_check (catalog_id)
""",
)


def upgrade() -> None:
    """Add the tables. There was no PostgreSQL back-end before version 3, so files are all there is to upgrade."""
    for statement in STATEMENTS:
        op.execute(statement.strip())
