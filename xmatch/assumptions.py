"""The recorded set of choices that every number depends on, and its content hash.

Nothing in blankfield computes a limit, a flux or a standing without one of these. Two numbers
with the same hash were made under the same assumptions.
"""

from __future__ import annotations

import dataclasses
import hashlib
import json
from dataclasses import dataclass


@dataclass(frozen=True)
class Assumptions:
    """Every choice behind a number. Field names carry the unit.

    Each default is stated with its source, or as "common practice, no source".
    """

    # --- positions -------------------------------------------------------------------------
    compatible_sigma: float = 3.4393
    """Normalised separation up to which a row is compatible (99.73 % of true matches; Rayleigh quantile)."""
    frame_sigma_arcsec: float = 0.05
    """Alignment error between any two frames, added per axis (common practice, no source)."""
    population_motion_mas_yr: float = 30.0
    """Per-axis spread of unknown proper motions of field stars (common practice, no source)."""
    motion_error_mas_yr: float = 5.0
    """Per-axis error of a listed proper motion whose own error is missing (common practice, no source)."""
    parallax_mas: float = 0.0
    """Largest annual parallax allowed to a row, whose position may be of any time of the year; 0 means none."""
    target_speed_km_s: float = 0.0
    """1-D transverse speed allowed to the target itself; 0 means it is taken as still."""
    listed_fraction: float = 0.5
    """Prior chance that a true counterpart would be listed in a catalog (uninformative; stated)."""
    heavy_tail: float = 0.001
    """Share of true matches whose error is not what was stated: spread evenly over the cone (common practice, no
    source), so that no row is ever impossible."""
    offset_positions: int = 200
    """Positions beside the target at which the same search is repeated, to see what chance really does."""
    offset_positions_least: int = 50
    """Fewer positions than this that fit into the cone give no empirical check."""
    offset_disagree_p: float = 0.003
    """Binomial probability below which the repeated search disagrees with the density and replaces it."""
    gradient_p: float = 0.01
    """Rayleigh-test probability below which crowding is said to rise to one side."""
    together_odds: float = 0.5
    """Probability from which rows of two catalogs are taken as one object (common practice, no source)."""
    counterpart_odds: float = 0.9
    """Probability of a true match from which a row may be called counterpart (common practice, no source)."""
    counterpart_global_chance: float = 0.01
    """Chance alignment over all catalogs searched above which no row is called counterpart."""
    crowding_odds: float = 0.5
    """Below this best probability, rows that crowding explains are called chance."""
    crowding_tail: float = 0.05
    """Rows are explained by crowding when at least as many are expected with this probability."""
    density_min_rows: int = 20
    """Rows a neighbourhood must hold for its density to be trusted (common practice, no source)."""
    # --- limits ----------------------------------------------------------------------------
    confidence: float = 0.95
    """One-sided confidence, or detection probability of a completeness limit."""
    depth_min_rows: int = 30
    """Neighbours needed for a local depth (common practice, no source)."""
    halo_residual: float = 0.1
    """Fraction of a neighbour's light left at the position (0.05-0.1; common practice, no source)."""
    deblend_fwhm: float = 0.8
    """Separation, in FWHM, inside which a neighbour hides everything fainter (common practice, no source)."""
    # --- spectra and the line of sight -------------------------------------------------------
    photon_index: float = 2.0
    """Photon index of the default X-ray power law (common practice, no source)."""
    column_cm2: float | None = None
    """Equivalent hydrogen column, cm^-2; None = derived from the target, see column_origin."""
    column_origin: str = ""
    """Where the column came from, in words."""
    column_scatter_dex: float = 0.3
    """Log-normal scatter of the column (factor 2: He, Ng & Kaspi 2013, ApJ 768, 64)."""
    column_total_cm2: float | None = None
    """Column of the whole line of sight, which no draw exceeds; None = not given."""
    av_total_mag: float | None = None
    """Extinction of the whole line of sight, which no draw exceeds; None = not given."""
    av_mag: float | None = None
    """Visual extinction; None = derived from the column, see av_origin."""
    av_origin: str = ""
    """Where the extinction came from, in words."""
    abundances: str = "Wilms, Allen & McCray 2000"
    """Abundances behind the photoelectric cross-section."""
    extinction_law: str = "Gordon et al. 2023"
    """Extinction curve."""
    r_v: float = 3.1
    """Total-to-selective extinction."""
    blind_transmission: float = 0.01
    """Transmitted fraction below which no corrected flux is given: the band is blind (our choice)."""
    radio_index: float = -1.6
    """Radio spectral index, S ~ nu^alpha (Jankowski et al. 2018 mean for pulsars; value from memory)."""
    radio_low_hz: float = 1.0e7
    """Lower edge of the integrated radio luminosity."""
    radio_high_hz: float = 1.0e10
    """Upper edge of the integrated radio luminosity."""
    beam_fraction: float = 1.0
    """Omega/4pi of the emission; 1 = isotropic, stated beside every luminosity."""
    # --- distance --------------------------------------------------------------------------
    distance_prior: str = "log-uniform"
    """How the distance range is filled: log-uniform, uniform or volume."""
    # --- draws -----------------------------------------------------------------------------
    draws: int = 100_000
    """Number of draws behind a survival fraction."""
    seed: int = 20_261_201
    """Seed of the draws; same seed, same numbers."""
    ruled_out_below: float = 0.003
    """Survival below which a class is ruled out (3-sigma equivalent)."""
    strained_below: float = 0.05
    """Survival below which a class is strained."""

    def as_dict(self) -> dict[str, object]:
        """Return the set as plain values, in field order."""
        return dataclasses.asdict(self)

    @property
    def digest(self) -> str:
        """Content hash: the first 16 hex digits of SHA-256 over the canonical JSON."""
        text = json.dumps(self.as_dict(), sort_keys=True, separators=(",", ":"), allow_nan=False)
        return hashlib.sha256(text.encode()).hexdigest()[:16]

    def but(self, **changes: object) -> Assumptions:
        """Return a copy with some choices changed."""
        return dataclasses.replace(self, **changes)  # type: ignore[arg-type]
