"""Further tables: whole lists, footprints, pointings and checks of catalogs. Told in ``db/README.md`` with the others."""

from __future__ import annotations

from enum import StrEnum

from sqlalchemy import CheckConstraint, ForeignKey, Index, LargeBinary, PrimaryKeyConstraint

from xmatch.store.schema import _column, _enum, _flag, _int, _key, _real, _table, _text, _time


class CheckVerdict(StrEnum):
    """What a check of a catalog found at the live service."""

    GOOD = "good"
    """Every column is there in a unit that can be converted, and the control cone returned rows."""
    DRIFT = "drift"
    """The service answers, but not as the catalog file says."""
    NO_ROWS = "no rows"
    """The columns are as the file says, but the control cone is empty."""
    UNANSWERED = "unanswered"
    """No usable answer came; nothing follows."""


list_copy = _table(
    "list_copy",
    "One whole list as an archive sent it, kept so that looks can search it here. Never changed.",
    _key("list_id", "Key; later copies have higher ones."),
    _text("catalog_id", "Id of the catalog."),
    _text("release", "Release of the catalog."),
    _text("table_name", "Short name of the table inside the catalog file."),
    _text("request", "Exactly what was sent."),
    _time("asked_at", "When."),
    _text("sha256", "SHA-256 of the reply as received."),
    _int("reply_bytes", "Size of the reply as received.", unit="byte"),
    _text("client", "Versions of what asked and decoded."),
    _int(
        "n_rows", "Rows with a position: exactly so many are in list_row.", CheckConstraint("n_rows >= 0"), unit="count"
    ),
    _column(LargeBinary(), "body", "The reply as received, compressed with zlib.", unit="zlib"),
    Index("list_copy_catalog_id_table_name", "catalog_id", "table_name"),
)

list_row = _table(
    "list_row",
    "One row of a whole list. Never changed.",
    _int("list_id", "The list.", ForeignKey("list_copy.list_id")),
    _int("ordinal", "Place in the list.", unit="count"),
    _text("source_key", "Name of the object in the list."),
    _real("ra_deg", "ICRS right ascension.", unit="deg"),
    _real("dec_deg", "ICRS declination.", unit="deg"),
    _int("hpx29", "Nested HEALPix index of order 29 of the position."),
    _text("raw", "The row as served.", unit="JSON"),
    PrimaryKeyConstraint("list_id", "ordinal"),
    Index("list_row_hpx29", "hpx29"),
    clustered=True,
)

footprint = _table(
    "footprint",
    "One footprint as it was fetched. Never changed.",
    _key("footprint_id", "Key; later ones are newer."),
    _text("catalog_id", "Id of the catalog."),
    _text("release", "Release of the catalog."),
    _text("address", "Where it came from."),
    _time("asked_at", "When."),
    _text("sha256", "SHA-256 of the file."),
    _real(
        "sky_fraction",
        "Part of the sky that it covers.",
        CheckConstraint("sky_fraction BETWEEN 0 AND 1"),
        unit="fraction",
    ),
    _column(LargeBinary(), "body", "The MOC file, compressed with zlib.", unit="zlib"),
    Index("footprint_catalog_id", "catalog_id"),
)

pointing = _table(
    "pointing",
    "One pointing near a target, from a mission's observation log. Never changed.",
    _int("search_id", "The search that brought it.", ForeignKey("search.search_id")),
    _int("ordinal", "Place in the reply.", unit="count"),
    _text("name", "Name of the observation."),
    _text("instrument", "Instrument, where the log says so."),
    _text("started", "Start as the log writes it."),
    _real("ra_deg", "ICRS right ascension of the axis.", unit="deg"),
    _real("dec_deg", "ICRS declination of the axis.", unit="deg"),
    _real("exposure_s", "Exposure.", CheckConstraint("exposure_s > 0"), unit="s"),
    _real("field_radius_arcmin", "How far from the axis the field reaches.", unit="arcmin"),
    _real("off_axis_arcmin", "Angle between the axis and the target.", unit="arcmin"),
    _flag("holds_target", "Whether the field holds the target's position."),
    PrimaryKeyConstraint("search_id", "ordinal"),
    clustered=True,
)

catalog_check = _table(
    "catalog_check",
    "One comparison of a catalog file with the live service. Never changed.",
    _key("check_id", "Key; later checks have higher ones."),
    _text("catalog_id", "Id of the catalog."),
    _text("release", "Release of the catalog."),
    _text("fingerprint", "SHA-256 of the catalog file that was checked."),
    _time("checked_at", "When."),
    _enum("verdict", "What was found.", CheckVerdict),
    _text("detail", "What was seen, in words."),
    _text("resolved", "Names found for columns that the file gives only by UCD.", unit="JSON"),
    _text("found", "Columns that the service serves, by table.", unit="JSON"),
    Index("catalog_check_catalog_id", "catalog_id"),
)

ADDED_IN_2 = (list_copy, list_row, footprint, pointing, catalog_check)
"""Tables of schema version 2; version 1 had none of them, and nothing else differs."""

__all__ = ["ADDED_IN_2", "CheckVerdict", "catalog_check", "footprint", "list_copy", "list_row", "pointing"]
