"""The nouns that rooms hand to each other. Frozen dataclasses and the enums of
:mod:`xmatch.vocabulary`, nothing else.

Units are in the field names. Angles are ICRS degrees, position errors are arcseconds and one
sigma *per axis*, position angles run east of north. ``nan`` means "not measured" in arrays;
``None`` means "not given" in single values.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, fields
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

# the words and what is asked are part of the nouns
from xmatch.asking import WHOLE_SKY_ARCSEC as WHOLE_SKY_ARCSEC
from xmatch.asking import Column as Column
from xmatch.asking import Question as Question
from xmatch.asking import Reply as Reply
from xmatch.asking import WantedColumn as WantedColumn
from xmatch.vocabulary import (
    LimitKind as LimitKind,
)
from xmatch.vocabulary import (
    LimitMethod as LimitMethod,
)
from xmatch.vocabulary import (
    MagnitudeSystem as MagnitudeSystem,
)
from xmatch.vocabulary import (
    Outcome as Outcome,
)
from xmatch.vocabulary import (
    Quantity as Quantity,
)
from xmatch.vocabulary import (
    ReplyStatus as ReplyStatus,
)
from xmatch.vocabulary import (
    StandingWord as StandingWord,
)
from xmatch.vocabulary import (
    Waveband as Waveband,
)

if TYPE_CHECKING:
    from xmatch.objects import Source

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]


# ------------------------------------------------------------------------------------------------
# the target
# ------------------------------------------------------------------------------------------------
@dataclass(frozen=True)
class Position:
    """ICRS position with its error ellipse, one sigma per axis."""

    ra_deg: float
    dec_deg: float
    sigma_major_arcsec: float
    sigma_minor_arcsec: float
    angle_deg: float = 0.0
    epoch_yr: float | None = None
    stated: str = ""
    """Position and error in the user's own words."""


@dataclass(frozen=True)
class Distance:
    """Allowed distance range in parsec, or a whole distribution."""

    low_pc: float
    high_pc: float
    origin: str = ""
    prior: str = ""
    """How the range is filled; empty for that of the assumptions."""
    quantiles_pc: tuple[float, ...] = ()
    """A distribution, at evenly spaced cumulative probabilities from ``low_pc`` to ``high_pc``; empty for a range."""
    redshift: float | None = None
    """Set for an object beyond the Galaxy; the distances are then luminosity distances."""
    redshift_error: float = 0.0
    cosmology: str = ""


@dataclass(frozen=True)
class Spin:
    """Period and what is known of its derivative (dimensionless, s/s)."""

    period_s: float
    derivative: float | None = None
    derivative_limit: float | None = None
    derivative_origin: str = ""
    may_be_orbital: bool = False


@dataclass(frozen=True)
class Pulse:
    """One pulse, or the typical one: peak flux density and equivalent width."""

    nu_hz: float
    peak_jy: float
    width_s: float


@dataclass(frozen=True)
class Target:
    """Everything the user knows about the object."""

    name: str
    position: Position
    distance: Distance | None = None
    dm_pc_cm3: float | None = None
    column_cm2: float | None = None
    column_origin: str = ""
    av_mag: float | None = None
    av_origin: str = ""
    spin: Spin | None = None
    pulses: tuple[Pulse, ...] = ()
    note: str = ""
    column_total_cm2: float | None = None
    """Column of the whole line of sight (hydrogen map), a cap."""
    av_total_mag: float | None = None
    """Extinction of the whole line of sight (dust map), a cap."""


# ------------------------------------------------------------------------------------------------
# bands
# ------------------------------------------------------------------------------------------------
@dataclass(frozen=True)
class Band:
    """One band of one catalog, in common physical terms.

    Attributes
    ----------
    nu_low_hz, nu_high_hz : float
        Edges of the band as frequencies.
    nu_hz : float
        Where a flux density is quoted: pivot, or geometric centre of an energy band.
    unit : str
        Unit of the catalog's column, as astropy parses it: ``mag``, ``mJy``, ``erg s-1 cm-2``.
    zero_point_jy : float or None
        Flux density of magnitude zero, for magnitudes.
    assumed_index, assumed_column_cm2 : float or None
        Photon index and column the catalog folded into its band flux.
    depth, depth_n_sigma, depth_completeness
        Nominal depth in the column's unit and what it means: either a threshold of n sigma
        or a completeness fraction; None where no depth is known.
    """

    catalog_id: str
    name: str
    waveband: Waveband
    quantity: Quantity
    unit: str
    nu_low_hz: float
    nu_high_hz: float
    nu_hz: float
    system: MagnitudeSystem | None = None
    zero_point_jy: float | None = None
    assumed_index: float | None = None
    assumed_column_cm2: float | None = None
    depth: float | None = None
    depth_n_sigma: float | None = None
    depth_completeness: float | None = None
    depth_source: str = ""
    flux_scale_error: float = 0.0
    source: str = ""
    exposures: str = ""
    """Name of the exposures behind it, where several catalogs are made from them: such limits are not independent."""

    @property
    def label(self) -> str:
        """``catalog band``, for people."""
        return f"{self.catalog_id} {self.name}"

    @property
    def is_xray(self) -> bool:
        """Whether the band lies in X-rays, where photoelectric absorption applies."""
        return self.waveband in (Waveband.SOFT_XRAY, Waveband.HARD_XRAY)


# ------------------------------------------------------------------------------------------------
# rows
# ------------------------------------------------------------------------------------------------
@dataclass(frozen=True)
class Photometry:
    """Values of one band for all rows of a table, in the band's unit."""

    value: Floats
    error: Floats
    is_limit: Bools


@dataclass(frozen=True)
class Rows:
    """Rows of one or more tables of one catalog, normalised at the door. All arrays have length n.

    Proper motions include the cos(dec) factor; ``nan`` where there is none.
    """

    key: tuple[str, ...]
    ra_deg: Floats
    dec_deg: Floats
    sigma_major_arcsec: Floats
    sigma_minor_arcsec: Floats
    angle_deg: Floats
    epoch_yr: Floats
    pm_ra_mas_yr: Floats
    pm_dec_mas_yr: Floats
    pm_ra_error_mas_yr: Floats
    pm_dec_error_mas_yr: Floats
    flux: Mapping[str, Photometry] = field(default_factory=dict)
    raw: tuple[Mapping[str, object], ...] = ()
    """The rows as served, for the store; empty when read back for a warm answer."""

    def __len__(self) -> int:
        return len(self.key)

    def chosen(self, keep: Bools) -> Rows:
        """The rows where ``keep`` is true, in order."""
        return Rows(
            key=tuple(key for key, kept in zip(self.key, keep, strict=True) if kept),
            **{name: getattr(self, name)[keep] for name in _ROW_ARRAYS},
            flux={
                name: Photometry(one.value[keep], one.error[keep], one.is_limit[keep])
                for name, one in self.flux.items()
            },
            raw=tuple(row for row, kept in zip(self.raw, keep, strict=True) if kept) if self.raw else (),
        )


_ROW_ARRAYS = tuple(f.name for f in fields(Rows) if f.name not in ("key", "flux", "raw"))


@dataclass(frozen=True)
class Pointings:
    """Where a mission looked: one entry per pointing, arrays of one length."""

    key: tuple[str, ...]
    ra_deg: Floats
    dec_deg: Floats
    exposure_s: Floats
    field_radius_arcmin: Floats
    """How far from its axis the field reaches."""
    start: tuple[str, ...]
    instrument: tuple[str, ...]

    def __len__(self) -> int:
        return len(self.key)


@dataclass(frozen=True)
class Search:
    """One stored question and its judged reply. ``search_id`` is the store's."""

    search_id: int
    catalog_id: str
    release: str
    table: str
    asked_at: str
    status: ReplyStatus
    detail: str
    request: str
    ra_deg: float
    dec_deg: float
    radius_arcsec: float
    n_rows: int
    elapsed_s: float = 0.0
    http_status: int | None = None
    retry_after_s: float | None = None
    sha256: str = ""
    from_store: bool = False
    """True when this look did not ask again."""


# ------------------------------------------------------------------------------------------------
# what was found
# ------------------------------------------------------------------------------------------------
@dataclass(frozen=True)
class Measured:
    """One band of one candidate, as the catalog gives it."""

    band: Band
    value: float
    error: float
    is_limit: bool
    flux_cgs: float | None = None
    """The same as observed flux: in the band for X-rays, nu F_nu otherwise."""


@dataclass(frozen=True)
class Candidate:
    """A catalog row compatible with the target's position."""

    catalog_id: str
    key: str
    ra_deg: float
    dec_deg: float
    separation_arcsec: float
    normalised_separation: float
    tail: float
    """Probability that a true match lies at least this far out."""
    chance: float
    """Probability of an unrelated row as close and, where the catalog gives one, as bright (in normalised separation)."""
    odds: float
    """Posterior probability of being the counterpart, all rows of the catalog considered."""
    photometry: tuple[Measured, ...] = ()


@dataclass(frozen=True)
class Limit:
    """How faint the target must be in one band. Value in the band's own unit, as observed."""

    band: Band
    value: float
    kind: LimitKind
    confidence: float
    """One-sided confidence, or detection probability of a completeness limit."""
    n_sigma: float | None
    method: LimitMethod
    note: str
    """How it was found, with the numbers, and which better methods were passed over and why."""
    search_ids: tuple[int, ...] = ()
    verified_depth: bool = True
    """False when it rests on a depth that no published text was checked for."""
    flag: str = ""
    """``coverage unproven``, ``raised by a neighbour``, ``covers 60 % of the error region`` ..."""


@dataclass(frozen=True)
class PhysicalLimit:
    """A limit in the common physical terms. Fluxes in erg s^-1 cm^-2, luminosities in erg s^-1.

    ``corrected_*`` is None where the band is blind: too little light gets through to correct.
    Luminosity tuples hold the low, median and high distance of the prior, in this order, and
    are empty without a distance.
    """

    limit: Limit
    flux_density_jy: float | None
    """At ``band.nu_hz``, as observed."""
    flux_cgs: float
    """Band flux for X-rays, nu F_nu otherwise, as observed (absorbed)."""
    transmitted: float
    """Fraction of the light that gets through the column or the dust."""
    corrected_flux_cgs: float | None
    luminosity_erg_s: tuple[float, ...]
    distance_pc: tuple[float, ...]
    note: str
    """Spectrum, column, extinction used."""


@dataclass(frozen=True)
class Finding:
    """What one catalog says about the target."""

    catalog_id: str
    title: str
    waveband: Waveband
    release: str
    outcome: Outcome
    why: str
    searches: tuple[Search, ...]
    coverage_fraction: float | None
    n_rows: int = 0
    n_compatible: int = 0
    density_per_deg2: float | None = None
    expected_chance: float | None = None
    """Expected number of unrelated rows inside the compatible region."""
    candidates: tuple[Candidate, ...] = ()
    limits: tuple[Limit, ...] = ()
    age_s: float | None = None
    """Age of the oldest answer used."""
    decided: Mapping[str, float] = field(default_factory=dict)
    """The numbers that decided the outcome, beside the thresholds they were held against; empty where none was compatible."""
    density_note: str = ""
    """Where the density comes from and what is uneven about the field."""


# ------------------------------------------------------------------------------------------------
# what it means
# ------------------------------------------------------------------------------------------------
@dataclass(frozen=True)
class DeathLine:
    """One death-line model held against the spin figures."""

    model: str
    log_derivative: float
    """log10 of the period derivative on the line at this period."""
    distance_dex: float
    """log10(derivative) minus the line: positive above the line."""
    says: str
    """``above``, ``below`` or ``nothing`` (an upper limit above the line)."""
    source: str


@dataclass(frozen=True)
class RotationBudget:
    """Spin-down figures for one kind of star. All are upper limits when ``is_limit``."""

    star: str
    inertia_g_cm2: float
    radius_cm: float
    power_erg_s: float
    field_equator_g: float
    field_pole_g: float
    light_cylinder_field_g: float
    is_limit: bool


@dataclass(frozen=True)
class SpinFigures:
    """What period and derivative say, model by model."""

    period_s: float
    derivative: float | None
    derivative_is_limit: bool
    age_yr: float | None
    light_cylinder_cm: float
    budgets: tuple[RotationBudget, ...]
    death_lines: tuple[DeathLine, ...]
    conditional: str
    """Non-empty when the figures hold only if the period is a spin period."""
    note: str


@dataclass(frozen=True)
class ClassTest:
    """One prediction of one class held against one limit, detection or spin figure."""

    class_id: str
    test: str
    sentence: str
    """The numbers compared, with units."""
    survival: float | None
    """Fraction of the class that passes; None for a test that could not be made or only informs."""
    survival_low: float | None
    survival_high: float | None
    source: str
    informs_only: bool = False


@dataclass(frozen=True)
class Standing:
    """What the tests leave of a class, with the range over the variants of the assumptions."""

    class_id: str
    title: str
    word: StandingWord
    reason: str
    survival: float | None
    survival_low: float | None
    """Lowest over the variants, binomial error included."""
    survival_high: float | None
    tests: tuple[ClassTest, ...]
    variants: Mapping[str, float] = field(default_factory=dict)
    """Survival under each variant of the assumptions."""
    would_overturn: str = ""


@dataclass(frozen=True)
class Look:
    """The whole answer about one target, ready to be reported."""

    target: Target
    made_at: str
    version: str
    run_id: int
    digest: str
    """Content hash of the assumptions."""
    assumptions: Mapping[str, object]
    findings: tuple[Finding, ...]
    limits: tuple[PhysicalLimit, ...]
    spin: SpinFigures | None
    standings: tuple[Standing, ...]
    expected_chance: float
    """Expected unrelated rows over all catalogs searched."""
    n_asked: int
    n_from_store: int
    offline: bool
    remarks: tuple[str, ...] = ()
    store: str = ""
    sources: tuple[Source, ...] = ()
    """The compatible rows of all catalogs as physical objects, most probable first."""
    none_listed: float | None = None
    """Posterior probability that the target is none of them."""
    expected_distinct: float | None = None
    """Expected unrelated objects, each counted once however many catalogs list it."""
    waiting: tuple[str, ...] = ()
    """Catalogs that were not asked, because nobody has confirmed their columns."""
