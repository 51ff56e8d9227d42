"""What is asked of an archive and what comes back, as frozen dataclasses. Rooms import them from
:mod:`xmatch.records`, with the other nouns."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from xmatch.vocabulary import ReplyStatus


@dataclass(frozen=True)
class WantedColumn:
    """A column the reply must (or may) hold, with the unit it must be convertible to."""

    name: str
    unit: str | None = None
    required: bool = True
    low: float | None = None
    """Smallest plausible value, in ``unit``."""
    high: float | None = None
    """Largest plausible value, in ``unit``."""


WHOLE_SKY_ARCSEC = 180.0 * 3600.0
"""Radius of a cone that covers the sphere."""


@dataclass(frozen=True)
class Question:
    """One cone put to one table of one catalog."""

    catalog_id: str
    release: str
    table: str
    """Short name of the table inside the catalog file."""
    protocol: str
    """``cone``, ``vizier``, ``tap``, ``simbad`` or ``file``."""
    address: str
    remote_table: str
    """The archive's own name of the table; empty where the address says it all."""
    ra_deg: float
    dec_deg: float
    radius_arcsec: float
    columns: tuple[WantedColumn, ...]
    row_limit: int
    geometry: str = "circle"
    """How a TAP service takes the cone: ``circle``, or ``box`` where it knows no geometry."""
    mode: str = "sync"
    """``sync`` or ``async``, for TAP."""
    format: str = "votable"
    """Format of a file: ``csv``, ``fits``, ``votable`` or ``ecsv``."""
    units: Mapping[str, str] = field(default_factory=dict, hash=False)
    """Units of columns that come without one."""

    rows_at_least: int = 0
    """Rows that a list is known to hold; fewer are no whole answer."""

    @property
    def is_whole(self) -> bool:
        """Whether the whole table is asked for: a cone that covers the sphere."""
        return self.radius_arcsec >= WHOLE_SKY_ARCSEC


@dataclass(frozen=True)
class Column:
    """One column of a reply: values, unit as served, and which values are missing."""

    values: NDArray[np.generic]
    unit: str | None
    missing: NDArray[np.bool_]


@dataclass(frozen=True)
class Reply:
    """What one question brought, already judged on its raw bytes.

    ``columns`` is None unless ``status`` is whole or truncated.
    """

    question: Question
    status: ReplyStatus
    detail: str
    """What was seen, in words; for a failure: the value seen, what is allowed, what to do."""
    request: str
    """Exactly what was sent: method, address, body."""
    asked_at: str
    """UTC, ISO 8601 with ``Z``."""
    elapsed_s: float
    columns: Mapping[str, Column] | None = None
    n_rows: int = 0
    http_status: int | None = None
    retry_after_s: float | None = None
    sha256: str = ""
    reply_bytes: int = 0
    tries: int = 1
    client: str = ""
    """Versions of what asked and decoded."""
    body: bytes | None = field(default=None, repr=False)
    """The reply itself, kept only for a list that is mirrored whole."""
