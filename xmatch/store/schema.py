"""The tables, in SQLAlchemy Core. ``db/README.md`` tells them to people, and a test holds the two together.

Units stand in the column names and in ``info["unit"]``. On SQLite every table is STRICT: a value of the
wrong type is refused instead of kept. Times are UTC, ISO 8601 with ``Z``.
"""

from __future__ import annotations

from collections.abc import Iterable
from enum import StrEnum
from typing import Any

from sqlalchemy import (
    BigInteger,
    CheckConstraint,
    Column,
    Double,
    ForeignKey,
    ForeignKeyConstraint,
    Index,
    MetaData,
    PrimaryKeyConstraint,
    Table,
    Text,
    UniqueConstraint,
)
from sqlalchemy.dialects import sqlite
from sqlalchemy.types import TypeEngine

from xmatch.records import (
    LimitKind,
    LimitMethod,
    MagnitudeSystem,
    Outcome,
    Quantity,
    ReplyStatus,
    StandingWord,
    Waveband,
)
from xmatch.store.place import APPLICATION_ID, REVISION, REVISION_TABLE, SCHEMA_VERSION

__all__ = ["APPEND_ONLY", "APPLICATION_ID", "REVISION", "REVISION_TABLE", "SCHEMA_VERSION", "metadata", "triggers"]

HEALPIX_ORDER = 29
"""Order of the nested HEALPix index: a coarser order is a shift by two bits a step."""

_INT: TypeEngine[Any] = BigInteger().with_variant(sqlite.INTEGER(), "sqlite")
_REAL: TypeEngine[Any] = Double().with_variant(sqlite.REAL(), "sqlite")
_TIME = "____-__-__T__:__:__%Z"

metadata = MetaData(
    naming_convention={"ix": "%(table_name)s_%(column_0_N_name)s", "uq": "%(table_name)s_%(column_0_N_name)s_unique"}
)


def _column(kind: Any, name: str, meaning: str, *args: Any, unit: str = "", null: bool = False, **facts: Any) -> Any:
    return Column(name, kind, *args, nullable=null, comment=meaning, info={"unit": unit}, **facts)


def _text(name: str, meaning: str, *args: Any, **facts: Any) -> Any:
    return _column(Text(), name, meaning, *args, **facts)


def _int(name: str, meaning: str, *args: Any, **facts: Any) -> Any:
    return _column(_INT, name, meaning, *args, **facts)


def _real(name: str, meaning: str, *args: Any, **facts: Any) -> Any:
    return _column(_REAL, name, meaning, *args, **facts)


def _key(name: str, meaning: str) -> Any:
    return _column(_INT, name, meaning, primary_key=True, autoincrement=True)


def _time(name: str, meaning: str, **facts: Any) -> Any:
    return _text(name, meaning, CheckConstraint(f"{name} LIKE '{_TIME}'"), unit="UTC", **facts)


def _flag(name: str, meaning: str, **facts: Any) -> Any:
    return _int(name, meaning, CheckConstraint(f"{name} IN (0, 1)"), unit="0 or 1", **facts)


def _word(name: str, meaning: str, words: Iterable[str], **facts: Any) -> Any:
    listed = ", ".join(f"'{word}'" for word in words)
    return _text(name, meaning, CheckConstraint(f"{name} IN ({listed})"), **facts)


def _enum(name: str, meaning: str, words: type[StrEnum], **facts: Any) -> Any:
    return _word(name, meaning, [word.value for word in words], **facts)


def _table(name: str, meaning: str, *parts: Any, clustered: bool = False) -> Table:
    # "clustered": the rows lie in the order of their primary key, so a range of it is one read
    return Table(name, metadata, *parts, comment=meaning, sqlite_strict=True, sqlite_with_rowid=not clustered)


target = _table(
    "target",
    "One state of knowledge about one object; a change of anything makes a new version, the old one stays.",
    _key("target_id", "Key."),
    _text("name", "Name of the object."),
    _int("version", "1 for the first state of knowledge under this name, and so on.", unit="count"),
    _text("digest", "SHA-256 of the content.", unique=True),
    _real("ra_deg", "ICRS right ascension.", CheckConstraint("ra_deg >= 0 AND ra_deg < 360"), unit="deg"),
    _real("dec_deg", "ICRS declination.", CheckConstraint("dec_deg BETWEEN -90 AND 90"), unit="deg"),
    _real("sigma_major_arcsec", "Major semi-axis of the error ellipse, one sigma per axis.", unit="arcsec"),
    _real("sigma_minor_arcsec", "Minor semi-axis of the error ellipse, one sigma per axis.", unit="arcsec"),
    _real("angle_deg", "Position angle of the major axis, east of north.", unit="deg"),
    _real("epoch_yr", "Epoch of the position.", unit="Julian year", null=True),
    _real("distance_low_pc", "Nearest distance allowed.", unit="pc", null=True),
    _real("distance_high_pc", "Farthest distance allowed.", unit="pc", null=True),
    _real("dm_pc_cm3", "Dispersion measure.", unit="pc cm-3", null=True),
    _real("period_s", "Period of the pulses.", unit="s", null=True),
    _text("content", "Everything known of the target.", unit="JSON"),
    _time("first_seen_at", "When this version was first looked at."),
    UniqueConstraint("name", "version"),
    Index("target_ra_deg_dec_deg", "ra_deg", "dec_deg"),
)

catalog = _table(
    "catalog",
    "One release of one catalog, as one state of its catalog file describes it.",
    _key("catalog_key", "Key."),
    _text("catalog_id", "Id of the catalog: the name of its file."),
    _text("release", "Release of the catalog."),
    _text("title", "Title, for people."),
    _enum("waveband", "Part of the spectrum.", Waveband),
    _text("fingerprint", "SHA-256 of the catalog file."),
    _time("first_seen_at", "When this state of the file was first used."),
    UniqueConstraint("catalog_id", "release", "fingerprint"),
)

band = _table(
    "band",
    "One band of one catalog. A changed fact makes a new row, so that old numbers keep their meaning.",
    _key("band_id", "Key."),
    _text("digest", "SHA-256 of the content.", unique=True),
    _text("catalog_id", "Id of the catalog."),
    _text("name", "Name of the band."),
    _enum("waveband", "Part of the spectrum.", Waveband),
    _enum("quantity", "What the column holds.", Quantity),
    _text("unit", "Unit of every value and error of this band, here and in flux and flux_limit."),
    _enum("system", "Magnitude system.", MagnitudeSystem, null=True),
    _real("nu_low_hz", "Lower edge.", unit="Hz"),
    _real("nu_high_hz", "Upper edge.", unit="Hz"),
    _real("nu_hz", "Where a flux density is quoted.", unit="Hz"),
    _real("zero_point_jy", "Flux density of magnitude zero.", unit="Jy", null=True),
    _real("depth", "Nominal depth.", unit="in band.unit", null=True),
    _text("depth_source", "Where the nominal depth is from."),
    _text("content", "Every fact of the band.", unit="JSON"),
)

catalog_band = _table(
    "catalog_band",
    "Which bands a state of a catalog file describes.",
    _int("catalog_key", "The state of the catalog file.", ForeignKey("catalog.catalog_key"), primary_key=True),
    _int("band_id", "The band.", ForeignKey("band.band_id"), primary_key=True),
    clustered=True,
)

assumptions = _table(
    "assumptions",
    "One set of choices that numbers depend on.",
    _text("assumptions_digest", "Content hash of the set: same hash, same assumptions.", primary_key=True),
    _text("content", "The set.", unit="JSON"),
)

run = _table(
    "run",
    "One look at one target.",
    _key("run_id", "Key."),
    _int("target_id", "What was looked at.", ForeignKey("target.target_id"), index=True),
    _text("version", "Version of blankfield."),
    _text("options", "How the look was made.", unit="JSON"),
    _time("started_at", "When it began."),
    _time("finished_at", "When it ended; NULL when it was stopped from outside.", null=True),
    _time("answered_at", "When its conclusions were stored; NULL when it came to none.", null=True),
    _text(
        "assumptions_digest",
        "Assumptions behind every conclusion of this look.",
        ForeignKey("assumptions.assumptions_digest"),
        null=True,
    ),
    _int("n_asked", "Searches that asked an archive.", unit="count", null=True),
    _int("n_from_store", "Searches answered by the store.", unit="count", null=True),
    _flag("offline", "Whether no archive could be asked.", null=True),
    _real("expected_chance", "Unrelated rows expected in the error regions of all catalogs.", unit="count", null=True),
    _text("spin", "Spin figures.", unit="JSON", null=True),
    _text("remarks", "Remarks to the reader.", unit="JSON", null=True),
    _text("answer_digest", "Content hash of the conclusions; equal hashes, equal conclusions.", null=True),
)

search = _table(
    "search",
    "One question put to one table of one catalog, and how its reply was judged. Never changed.",
    _key("search_id", "Key; later searches have higher ones."),
    _int("run_id", "The look that asked.", ForeignKey("run.run_id"), index=True),
    _int("target_id", "About which target.", ForeignKey("target.target_id")),
    _int("catalog_key", "Which catalog.", ForeignKey("catalog.catalog_key")),
    _text("table_name", "Short name of the table inside the catalog file."),
    _text("protocol", "How it was asked."),
    _text("address", "Address of the service."),
    _text("remote_table", "The archive's own name of the table."),
    _text("request", "Exactly what was sent."),
    _time("asked_at", "When."),
    _enum("status", "What came back.", ReplyStatus),
    _text("detail", "What was seen, in words."),
    _real("ra_deg", "ICRS right ascension of the centre of the cone.", unit="deg"),
    _real("dec_deg", "ICRS declination of the centre of the cone.", unit="deg"),
    _real("radius_arcsec", "Radius of the cone.", CheckConstraint("radius_arcsec > 0"), unit="arcsec"),
    _int("row_limit", "Most rows that were asked for.", unit="count"),
    _int("n_rows", "Rows kept: exactly so many are in row.", CheckConstraint("n_rows >= 0"), unit="count"),
    _int("n_rows_served", "Rows the archive sent, second listings and rows without a position included.", unit="count"),
    _real("elapsed_s", "Time the question took.", unit="s"),
    _int("http_status", "HTTP status; NULL when none came.", null=True),
    _real("retry_after_s", "Time the archive asked us to wait.", unit="s", null=True),
    _text("sha256", "SHA-256 of the reply as received."),
    _int("reply_bytes", "Size of the reply as received.", unit="byte"),
    _int("tries", "How often it was asked until this came.", unit="count"),
    _text("client", "Versions of what asked and decoded."),
    Index("search_target_id_catalog_key_table_name", "target_id", "catalog_key", "table_name"),
    Index("search_asked_at", "asked_at"),
)

row = _table(
    "row",
    "One row of one reply, in common units. Lies in the order of the sky. Never changed.",
    _int("hpx29", "Nested HEALPix index of order 29 of the position; shift right two bits for each coarser order."),
    _int("search_id", "The search that brought it.", ForeignKey("search.search_id")),
    _int("ordinal", "Place in the reply, from 0.", unit="count"),
    _text("source_key", "The catalog's own identifier, always text."),
    _real("ra_deg", "ICRS right ascension, as listed.", unit="deg"),
    _real("dec_deg", "ICRS declination, as listed.", unit="deg"),
    _real("sigma_major_arcsec", "Major semi-axis of the error ellipse, one sigma per axis.", unit="arcsec", null=True),
    _real("sigma_minor_arcsec", "Minor semi-axis of the error ellipse, one sigma per axis.", unit="arcsec", null=True),
    _real("angle_deg", "Position angle of the major axis, east of north.", unit="deg", null=True),
    _real("epoch_yr", "Epoch of the position.", unit="Julian year", null=True),
    _real("pm_ra_mas_yr", "Proper motion in right ascension, with cos(dec).", unit="mas/yr", null=True),
    _real("pm_dec_mas_yr", "Proper motion in declination.", unit="mas/yr", null=True),
    _real("pm_ra_error_mas_yr", "Error of pm_ra_mas_yr, one sigma.", unit="mas/yr", null=True),
    _real("pm_dec_error_mas_yr", "Error of pm_dec_mas_yr, one sigma.", unit="mas/yr", null=True),
    _text("raw", "The row as served; NULL when it was not kept.", unit="JSON", null=True),
    # the order of the key is the order on disc; the unique index is the way in by search
    PrimaryKeyConstraint("hpx29", "search_id", "ordinal"),
    UniqueConstraint("search_id", "ordinal"),
    clustered=True,
)

flux = _table(
    "flux",
    "One band of one row, where the catalog gives anything. The unit is band.unit. Never changed.",
    _int("search_id", "The search that brought the row.", primary_key=True),
    _int("ordinal", "The row's place in the reply.", primary_key=True),
    _int("band_id", "The band.", ForeignKey("band.band_id"), primary_key=True),
    _real("value", "Value; NULL where there is none.", unit="in band.unit", null=True),
    _real("error", "One-sigma error; NULL where none is listed.", unit="in band.unit", null=True),
    _flag("is_limit", "Whether the value is an upper limit of the catalog's own."),
    ForeignKeyConstraint(["search_id", "ordinal"], ["row.search_id", "row.ordinal"]),
    clustered=True,
)

finding = _table(
    "finding",
    "What one catalog says about the target of one look.",
    _key("finding_id", "Key."),
    _int("run_id", "The look.", ForeignKey("run.run_id")),
    _text("catalog_id", "Id of the catalog."),
    _text("release", "Release of the catalog."),
    _text("title", "Title of the catalog, for people."),
    _enum("waveband", "Part of the spectrum.", Waveband),
    _enum("outcome", "What the replies may be called.", Outcome),
    _text("why", "What decided, in words."),
    _real("coverage_fraction", "Covered part of the error region; NULL when unknown.", unit="fraction", null=True),
    _int("n_rows", "Rows around the position.", unit="count"),
    _int("n_compatible", "Rows compatible with the position.", unit="count"),
    _real("density_per_deg2", "Density of unrelated rows.", unit="deg-2", null=True),
    _real("expected_chance", "Unrelated rows expected in the error region.", unit="count", null=True),
    _real("age_s", "Age of the oldest reply used.", unit="s", null=True),
    UniqueConstraint("run_id", "catalog_id"),
)

finding_search = _table(
    "finding_search",
    "Which searches a finding rests on, the failed ones it mentions included.",
    _int("finding_id", "The finding.", ForeignKey("finding.finding_id"), primary_key=True),
    _int("search_id", "The search.", ForeignKey("search.search_id"), primary_key=True, index=True),
    _flag("from_store", "Whether the look took it from the store instead of asking."),
    clustered=True,
)

match = _table(
    "match",
    "One catalog row compatible with the position of the target.",
    _key("match_id", "Key."),
    _int("finding_id", "The finding it belongs to.", ForeignKey("finding.finding_id"), index=True),
    _int("search_id", "Search of the row, if the row is in the store.", null=True),
    _int("ordinal", "The row's place in its reply.", unit="count", null=True),
    _text("source_key", "The catalog's own identifier."),
    _real("ra_deg", "ICRS right ascension.", unit="deg"),
    _real("dec_deg", "ICRS declination.", unit="deg"),
    _real("separation_arcsec", "Separation from the target.", unit="arcsec"),
    _real("normalised_separation", "Separation in units of the combined error ellipse.", unit="sigma"),
    _real("tail", "Probability that a true match lies at least this far out.", unit="probability"),
    _real("chance", "Probability of an unrelated row at least this close.", unit="probability"),
    _real("odds", "Probability of being the counterpart, all rows considered.", unit="probability"),
    ForeignKeyConstraint(["search_id", "ordinal"], ["row.search_id", "row.ordinal"]),
)

flux_limit = _table(
    "flux_limit",
    "How faint the target must be in one band, as observed and in common physical terms.",
    _key("limit_id", "Key."),
    _int("finding_id", "The finding it was drawn from.", ForeignKey("finding.finding_id"), index=True),
    _int("band_id", "The band.", ForeignKey("band.band_id")),
    _real("value", "The limit, as observed.", unit="in band.unit"),
    _enum("kind", "Which of the three things called upper limit it is.", LimitKind),
    _real("confidence", "One-sided confidence, or detection probability.", unit="probability"),
    _real("n_sigma", "Threshold of the catalog.", unit="sigma", null=True),
    _enum("method", "How it was found.", LimitMethod),
    _text("note", "How it was found, with the numbers."),
    _text("flag", "What a reader must be told beside it."),
    _flag("verified_depth", "Whether its depth was checked against a published text."),
    _real("flux_density_jy", "Limit on the flux density at band.nu_hz, as observed.", unit="Jy", null=True),
    _real("flux_erg_s_cm2", "Limit on the flux of the band, or nu F_nu; as observed.", unit="erg s-1 cm-2", null=True),
    _real("transmitted", "Fraction of the light that gets through.", unit="fraction", null=True),
    _real("corrected_flux_erg_s_cm2", "Flux limit without absorption; NULL: blind.", unit="erg s-1 cm-2", null=True),
    _text("physical_note", "Spectrum, column and extinction used.", null=True),
)

limit_search = _table(
    "limit_search",
    "Which searches a limit came from.",
    _int("limit_id", "The limit.", ForeignKey("flux_limit.limit_id"), primary_key=True),
    _int("search_id", "The search.", ForeignKey("search.search_id"), primary_key=True, index=True),
    clustered=True,
)

luminosity_limit = _table(
    "luminosity_limit",
    "One flux limit at one distance.",
    _int("limit_id", "The flux limit.", ForeignKey("flux_limit.limit_id"), primary_key=True),
    _int("ordinal", "Place in order of rising distance, from 0.", unit="count", primary_key=True),
    _word("place", "Which distance of the prior it is.", ("low", "median", "high", "grid")),
    _real("distance_pc", "Distance.", unit="pc"),
    _real("luminosity_erg_s", "Limit on the luminosity.", unit="erg s-1"),
    clustered=True,
)

standing = _table(
    "standing",
    "What the tests leave of one class.",
    _key("standing_id", "Key."),
    _int("run_id", "The look.", ForeignKey("run.run_id")),
    _text("class_id", "Id of the class: the name of its file."),
    _text("title", "Title of the class, for people."),
    _enum("word", "What is left.", StandingWord),
    _text("reason", "Why, in words."),
    _real("survival", "Fraction of the class that passes.", unit="fraction", null=True),
    _real("survival_low", "Lowest over the variants of the assumptions.", unit="fraction", null=True),
    _real("survival_high", "Highest over the variants of the assumptions.", unit="fraction", null=True),
    _text("variants", "Survival under each variant.", unit="JSON"),
    _text("would_overturn", "The observation that would change it."),
    UniqueConstraint("run_id", "class_id"),
)

class_test = _table(
    "class_test",
    "One prediction of one class held against the data.",
    _int("standing_id", "The standing it is part of.", ForeignKey("standing.standing_id"), primary_key=True),
    _int("ordinal", "Place among the tests, from 0.", unit="count", primary_key=True),
    _text("test", "Name of the test."),
    _text("sentence", "The numbers compared, with units."),
    _real("survival", "Fraction of the class that passes this test.", unit="fraction", null=True),
    _real("survival_low", "Lower end.", unit="fraction", null=True),
    _real("survival_high", "Upper end.", unit="fraction", null=True),
    _text("source", "Where the prediction is from."),
    _flag("informs_only", "Whether it cannot rule out by itself."),
    clustered=True,
)

schema_revision = _table(
    REVISION_TABLE,
    "Which migration the tables are at. One row.",
    _text("version_num", "Number of the last migration.", primary_key=True),
)

APPEND_ONLY = (search, row, flux)
"""Tables in which nothing is ever changed or removed; triggers refuse it."""


def triggers(dialect: str = "sqlite", tables: Iterable[Table] = APPEND_ONLY) -> list[str]:
    """Return the statements that keep the history in some tables from being rewritten."""
    pairs = [(table.name, what) for table in tables for what in ("UPDATE", "DELETE")]
    if dialect == "sqlite":
        return [
            f"CREATE TRIGGER {name}_no_{what.lower()} BEFORE {what} ON {name} "
            f"BEGIN SELECT RAISE(ABORT, '{name} is append-only'); END"
            for name, what in pairs
        ]
    refuse = (
        "CREATE OR REPLACE FUNCTION refuse_change() RETURNS trigger LANGUAGE plpgsql AS "
        "$$ BEGIN RAISE EXCEPTION '%% is append-only', TG_TABLE_NAME USING ERRCODE = 'integrity_constraint_violation'; END $$"
    )
    return [refuse] + [
        f'CREATE OR REPLACE TRIGGER {name}_no_{what.lower()} BEFORE {what} ON "{name}" '
        "FOR EACH STATEMENT EXECUTE FUNCTION refuse_change()"
        for name, what in pairs
    ]
