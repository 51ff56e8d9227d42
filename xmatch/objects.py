"""Physical objects made of rows of several catalogs: nouns, like those of :mod:`xmatch.records`."""

from __future__ import annotations

from dataclasses import dataclass

from xmatch.records import Measured


@dataclass(frozen=True)
class Unseen:
    """A band of a catalog that lists nothing of an object. Fluxes as observed, erg s^-1 cm^-2."""

    catalog_id: str
    band_name: str
    limit_flux_cgs: float
    predicted_flux_cgs: float | None
    """From the object's bands next to it; None where they are too far away to tell."""
    should_be_seen: bool | None
    """True: it is missing where it should be. None: nothing can be said."""


@dataclass(frozen=True)
class Source:
    """Rows of one or more catalogs that are one physical object compatible with the target's position."""

    members: tuple[tuple[str, str], ...]
    """(catalog, key) of each row: no catalog twice."""
    ra_deg: float
    dec_deg: float
    """Weighted mean at the target's epoch."""
    sigma_major_arcsec: float
    sigma_minor_arcsec: float
    angle_deg: float
    separation_arcsec: float
    normalised_separation: float
    chance: float
    """Probability of an unrelated object as close, at the density of the sparsest catalog that lists it."""
    odds: float
    """Posterior probability of being the target, all objects considered."""
    log10_bayes: float
    """Of its rows being one object; 0 for a single row."""
    together: float
    """Posterior probability of the same; 1 for a single row."""
    photometry: tuple[Measured, ...] = ()
    """Its spectrum across the catalogs, in order of rising frequency."""
    unseen: tuple[Unseen, ...] = ()
