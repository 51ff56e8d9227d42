"""From the rows of all catalogs to physical objects: what they are, where they should have been seen and were not.

Pure composition of the match and flux rooms: no store, no network, no clock.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.flux.physical import observed_flux_cgs
from xmatch.match.decide import Weighed, listed_in
from xmatch.match.distinct import Field, new_shares
from xmatch.match.ellipse import covariance
from xmatch.match.groups import Group, Listed, group
from xmatch.objects import Source, Unseen
from xmatch.records import Band, Finding, Measured, Position, Rows, Target

BESIDE_DEX = 0.35
"""Two measured bands, one on each side and no farther in frequency, foretell what lies between (our choice)."""
SAME_DEX = 0.06
"""A band this close in frequency foretells by itself (our choice)."""
CLEARLY = 2.0
"""Factor by which a foretold flux must exceed a limit to say "should have been seen" (our choice)."""


def objects_of(
    target: Target,
    rows: Mapping[str, Rows],
    bands: Mapping[str, Sequence[Band]],
    weighed: Mapping[str, Weighed],
    found: Sequence[Finding],
    assumptions: Assumptions,
    *,
    radius_arcsec: float,
    distance_pc: float | None = None,
) -> tuple[tuple[Source, ...], float | None]:
    """Return the physical objects behind the compatible rows, and the probability that none is the target.

    Parameters
    ----------
    target : Target
        What is looked at.
    rows, bands, weighed : mapping of str
        By catalog: its rows, its bands, and how its rows were weighed.
    found : sequence of Finding
        For the limits of catalogs that list nothing of an object.
    assumptions : Assumptions
        Priors and thresholds.
    radius_arcsec : float
        Radius of the smallest cone that was searched.
    distance_pc : float, optional
        For the target's own motion when a speed is assumed.

    Notes
    -----
    See :func:`xmatch.match.groups.group` for the sources. Where no row is compatible the second value is None: a
    probability over no objects would say nothing.
    """
    ids = [catalog_id for catalog_id in weighed if len(rows[catalog_id])]
    listed = [Listed(catalog_id, rows[catalog_id], weighed[catalog_id]) for catalog_id in ids]
    grouped = group(
        target.position, listed, radius_arcsec=radius_arcsec, assumptions=assumptions, distance_pc=distance_pc
    )
    if not grouped.groups:
        return (), None
    return tuple(_source(one, listed, bands, found) for one in grouped.groups), grouped.none_listed


def distinct_expected(
    position: Position, weighed: Mapping[str, Weighed], assumptions: Assumptions
) -> tuple[float, float]:
    """Unrelated objects expected over all catalogs, each counted once, and how many independent trials that makes.

    A catalog counts for the share of its rows that no more crowded catalog lists as well.
    """
    t = covariance(position.sigma_major_arcsec, position.sigma_minor_arcsec, position.angle_deg)
    fields = [
        Field(w.east_arcsec, w.north_arcsec, w.cxx - t[0], w.cyy - t[1], w.cxy - t[2], w.expected_chance)
        for w in weighed.values()
    ]
    shares = new_shares(fields, assumptions.compatible_sigma)
    expected = float(sum(share * field.expected for share, field in zip(shares, fields, strict=True)))
    return expected, max(1.0, float(shares.sum()))


def _source(
    one: Group, listed: Sequence[Listed], bands: Mapping[str, Sequence[Band]], found: Sequence[Finding]
) -> Source:
    photometry = [
        measured
        for c, i in one.members
        for measured in listed_in(listed[c].rows, i, bands[listed[c].catalog_id], observed_flux_cgs)
    ]
    photometry.sort(key=lambda m: (m.band.nu_hz, m.band.label))
    return Source(
        members=tuple((listed[c].catalog_id, listed[c].rows.key[i]) for c, i in one.members),
        ra_deg=one.ra_deg,
        dec_deg=one.dec_deg,
        sigma_major_arcsec=one.sigma_major_arcsec,
        sigma_minor_arcsec=one.sigma_minor_arcsec,
        angle_deg=one.angle_deg,
        separation_arcsec=one.separation_arcsec,
        normalised_separation=one.normalised,
        chance=one.chance,
        odds=one.odds,
        log10_bayes=one.log10_bayes,
        together=one.together,
        photometry=tuple(photometry),
        unseen=_unseen(photometry, {listed[c].catalog_id for c, _ in one.members}, found),
    )


def _unseen(photometry: Sequence[Measured], members: set[str], found: Sequence[Finding]) -> tuple[Unseen, ...]:
    """Every band with a limit in a catalog that lists no row of the object."""
    missing = []
    for finding in found:
        if finding.catalog_id in members:
            continue
        for limit in finding.limits:
            at_most = observed_flux_cgs(limit.value, limit.band)
            foretold = foretold_flux_cgs(photometry, limit.band)
            should = None
            if foretold is not None and (foretold >= CLEARLY * at_most or foretold <= at_most / CLEARLY):
                should = foretold > at_most
            missing.append(Unseen(finding.catalog_id, limit.band.name, at_most, foretold, should))
    return tuple(missing)


def foretold_flux_cgs(photometry: Sequence[Measured], band: Band) -> float | None:
    """Flux that the bands next to it foretell, as observed, erg s^-1 cm^-2; None where they are too far away.

    Parameters
    ----------
    photometry : sequence of Measured
        Measured bands of an object; limits are left out.
    band : Band
        The band to foretell. X-ray bands, whose flux is that in the band, speak only for X-ray bands.

    Notes
    -----
    A straight line in log flux over log frequency between the nearest band on each side, both within ``BESIDE_DEX``
    (power law; definition), or the value of a band within ``SAME_DEX``.
    """
    known = sorted(
        (float(np.log10(m.band.nu_hz / band.nu_hz)), float(np.log10(m.flux_cgs)))
        for m in photometry
        if m.flux_cgs is not None and m.flux_cgs > 0.0 and not m.is_limit and m.band.is_xray == band.is_xray
    )
    below = [one for one in known if -BESIDE_DEX <= one[0] <= 0.0]
    above = [one for one in known if 0.0 < one[0] <= BESIDE_DEX]
    if below and above and not band.is_xray:
        (x0, y0), (x1, y1) = below[-1], above[0]
        return float(10.0 ** (y0 - x0 * (y1 - y0) / (x1 - x0)))
    near = min(known, key=lambda one: abs(one[0]), default=None)
    return float(10.0 ** near[1]) if near is not None and abs(near[0]) <= SAME_DEX else None
