"""What a catalog file says, as frozen dataclasses."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from enum import StrEnum

from xmatch.limits.coverage import Region
from xmatch.records import WHOLE_SKY_ARCSEC, Band, Question, WantedColumn, Waveband

LOG_TABLE = "observation log"
"""Name of the table that holds a mission's pointings, in every catalog that has one."""
BY_UCD = "ucd:"
"""Begins the stand-in for a column whose name is not confirmed: what follows is its UCD (IVOA)."""
LONGEST_LIST = 100_000
"""A list with more rows is asked by cone, not kept whole (our choice)."""
LONGEST_EXPOSURE_S = 1.0e7
"""No single pointing is longer (our choice: four months)."""


class ErrorMeaning(StrEnum):
    """What the position-error columns of a catalog mean."""

    PER_AXIS = "per axis"
    """One sigma along right ascension (with cos dec) and along declination."""
    ELLIPSE = "ellipse"
    """One-sigma semi-axes and position angle east of north."""
    RADIUS = "radius"
    """Radius that holds the stated fraction of sources."""
    RADIAL = "radial"
    """Square root of the summed variances of both axes."""
    NONE = "none"
    """No error is listed; the stated floor stands for it."""


class EpochScale(StrEnum):
    """Time scale of an epoch column."""

    MJD = "mjd"
    JD = "jd"
    YEAR = "year"


@dataclass(frozen=True)
class ErrorColumns:
    """Position-error columns and their meaning; units are read from the reply."""

    meaning: ErrorMeaning
    columns: tuple[str, ...]
    correlation: str | None
    level: float | None
    """Fraction that a radius or an ellipse holds; None for an ellipse of one sigma."""
    floor_arcsec: float
    """Systematic one-sigma error per axis, added in quadrature."""
    source: str


@dataclass(frozen=True)
class MotionColumns:
    """Proper-motion columns; ``cosdec`` says whether the RA term holds the factor cos(dec)."""

    ra: str
    dec: str
    ra_error: str | None
    dec_error: str | None
    cosdec: bool
    source: str


@dataclass(frozen=True)
class EpochFacts:
    """Epoch of the positions: one value for all rows, or a column with its scale."""

    value_yr: float
    column: str | None
    scale: EpochScale
    source: str


@dataclass(frozen=True)
class LimitFlag:
    """A flag column whose letter says that the band's column holds a limit."""

    column: str
    place: int
    letters: str
    source: str


@dataclass(frozen=True)
class BandColumns:
    """Where one band's numbers stand in the table."""

    band: Band
    value: str | None
    """None where no column is known: the depth still gives a limit, but a row has no flux."""
    error: str | None
    limit_flag: LimitFlag | None
    low: float | None
    high: float | None


@dataclass(frozen=True)
class DropRule:
    """Rows that are copies of others, by the catalog's own flag: dropped at the door."""

    column: str
    at_least: float
    why: str
    source: str


@dataclass(frozen=True)
class Table:
    """One table of the catalog at one archive, and the part of the sky it holds."""

    name: str
    protocol: str
    address: str
    remote_table: str
    holds: Region | None
    source: str
    geometry: str = "circle"
    """``circle`` where a TAP service knows ADQL geometry, ``box`` where plain comparisons must do."""
    mode: str = "sync"
    """``sync`` or ``async``, for TAP."""
    format: str = "votable"
    """``csv``, ``fits``, ``votable`` or ``ecsv``, for a file."""


@dataclass(frozen=True)
class PointingLog:
    """The observation log of a mission that points: where it looked, how long, and how far its field reaches."""

    table: Table
    key: str
    ra: str
    dec: str
    exposure: str
    start: str | None
    instrument: str | None
    field_radius_arcmin: float
    reference_s: float
    """Exposure on the axis for which the depths of the bands stand."""
    vignetting_at_edge: float
    """Part of the effective area that is left at the edge of the field."""
    units: Mapping[str, str]
    source: str


@dataclass(frozen=True)
class Control:
    """A cone that is known to hold rows."""

    ra_deg: float
    dec_deg: float
    radius_arcsec: float
    source: str


@dataclass(frozen=True)
class Catalog:
    """One catalog file, checked. See the template for the meaning of each entry."""

    id: str
    title: str
    waveband: Waveband
    release: str
    refresh: str
    cite: tuple[str, ...]
    acknowledgement: str
    tables: tuple[Table, ...]
    key: str | None
    """Column with the object's name; None where the list has none, and the position stands for it."""
    ra: str
    dec: str
    error: ErrorColumns
    motion: MotionColumns | None
    epoch: EpochFacts
    bands: tuple[BandColumns, ...]
    drop: tuple[DropRule, ...]
    coverage: Region
    neighbourhood_arcsec: float
    row_limit: int
    resolution_arcsec: float
    resolution_source: str
    integration_s: float | None
    notes: tuple[str, ...]
    sources: tuple[str, ...]
    """Every source named in the file, in order, once."""
    fingerprint: str
    """SHA-256 of the file's bytes."""
    path: str
    log: PointingLog | None = None
    """Observation log, for pointed coverage."""
    state: str = ""
    """``needs check`` where the file's author could not confirm the columns."""
    rows_at_least: int | None = None
    """For a small list that is fetched whole and searched in the store: rows that it is known to hold."""
    sexagesimal: bool = False
    """Whether the position columns are text, hours and degrees."""
    units: Mapping[str, str] = field(default_factory=dict)
    """Units of columns that the service serves without one (CSV files, old tables)."""
    control: Control | None = None
    keep: tuple[str, ...] = ()
    """Further columns that are kept with each row where the archive has them."""

    @property
    def band_list(self) -> tuple[Band, ...]:
        """The bands in file order."""
        return tuple(columns.band for columns in self.bands)

    @property
    def unresolved(self) -> tuple[str, ...]:
        """Columns whose name is not known yet, only their UCD: a check finds out."""
        return tuple(column.name for column in self.wanted_columns() if column.name.startswith(BY_UCD))

    @property
    def needs_check(self) -> bool:
        """Whether nobody has confirmed its columns: it is asked only after a successful check."""
        return bool(self.state) or bool(self.unresolved)

    @property
    def is_mirrored(self) -> bool:
        """Whether it is fetched whole and searched in the store."""
        return self.rows_at_least is not None

    @property
    def is_object_list(self) -> bool:
        """Whether absence from it can never be a limit."""
        return self.waveband is Waveband.OBJECT_LIST

    @property
    def unverified(self) -> tuple[str, ...]:
        """Sources that say the fact was not checked against a published text."""
        return tuple(source for source in self.sources if "memory" in source or "seen in public use" in source)

    def wanted_columns(self) -> tuple[WantedColumn, ...]:
        """Columns a reply must hold, each once, with plausible ranges where the file states them."""
        wanted: dict[str, WantedColumn] = {}

        def want(name: str | None, **facts: object) -> None:
            if name is not None and name not in wanted:
                wanted[name] = WantedColumn(name, **facts)  # type: ignore[arg-type]

        want(self.key)
        if self.sexagesimal:
            want(self.ra)
            want(self.dec)
        else:
            want(self.ra, unit="deg", low=0.0, high=360.0)
            want(self.dec, unit="deg", low=-90.0, high=90.0)
        for name in self.error.columns:
            want(name)
        want(self.error.correlation)
        if self.motion is not None:
            for motion_name in (self.motion.ra, self.motion.dec, self.motion.ra_error, self.motion.dec_error):
                want(motion_name)
        want(self.epoch.column)
        for columns in self.bands:
            want(columns.value, unit=columns.band.unit, low=columns.low, high=columns.high)
            want(columns.error)
            if columns.limit_flag is not None:
                want(columns.limit_flag.column)
        for rule in self.drop:
            want(rule.column)
        for extra in self.keep:
            want(extra, required=False)
        return tuple(wanted.values())

    def question(self, table: Table, ra_deg: float, dec_deg: float, radius_arcsec: float) -> Question:
        """Return the cone to put to one of the tables."""
        return Question(
            catalog_id=self.id,
            release=self.release,
            table=table.name,
            protocol=table.protocol,
            address=table.address,
            remote_table=table.remote_table,
            ra_deg=ra_deg,
            dec_deg=dec_deg,
            radius_arcsec=radius_arcsec,
            columns=self.wanted_columns(),
            row_limit=self.row_limit,
            geometry=table.geometry,
            mode=table.mode,
            format=table.format,
            units=self.units,
        )

    def whole_question(self, table: Table) -> Question:
        """Return the question for every row of a list."""
        whole = self.question(table, 0.0, 0.0, WHOLE_SKY_ARCSEC)
        return replace(whole, row_limit=LONGEST_LIST, rows_at_least=self.rows_at_least or 0)

    def log_question(self, ra_deg: float, dec_deg: float, radius_arcsec: float) -> Question:
        """Return the cone to put to the observation log: every pointing whose field may reach the position."""
        log = self.log
        assert log is not None
        columns = [
            WantedColumn(log.key),
            WantedColumn(log.ra, unit="deg", low=0.0, high=360.0),
            WantedColumn(log.dec, unit="deg", low=-90.0, high=90.0),
            WantedColumn(log.exposure, unit="s", low=0.0, high=LONGEST_EXPOSURE_S),
            *[WantedColumn(name) for name in (log.start, log.instrument) if name is not None],
        ]
        return Question(
            catalog_id=self.id,
            release=self.release,
            table=LOG_TABLE,
            protocol=log.table.protocol,
            address=log.table.address,
            remote_table=log.table.remote_table,
            ra_deg=ra_deg,
            dec_deg=dec_deg,
            radius_arcsec=radius_arcsec + 60.0 * log.field_radius_arcmin,
            columns=tuple(columns),
            row_limit=self.row_limit,
            geometry=log.table.geometry,
            mode=log.table.mode,
            units=log.units,
        )
