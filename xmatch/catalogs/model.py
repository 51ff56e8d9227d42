"""What a catalog file says, as frozen dataclasses."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from xmatch.limits.coverage import Region
from xmatch.records import Band, Question, WantedColumn, Waveband


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
    """Containment of a radius."""
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
    value: str
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
    key: str
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

    @property
    def band_list(self) -> tuple[Band, ...]:
        """The bands in file order."""
        return tuple(columns.band for columns in self.bands)

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
        )
