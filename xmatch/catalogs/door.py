"""The door: a judged reply becomes rows in common units, or is refused.

Everything that differs between catalogs ends here: names, units, the meaning of position errors,
epoch scales, limits stored in flux columns, duplicate listings.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from xmatch.catalogs.model import BandColumns, Catalog, EpochScale, ErrorMeaning
from xmatch.errors import MisreadError
from xmatch.match.ellipse import axes, sigma_from_radial, sigma_from_radius
from xmatch.match.separation import separation_arcsec
from xmatch.records import Bools, Column, Floats, Photometry, Pointings, Quantity, Question, Reply, Rows
from xmatch.units import unit_factor

ARCSEC_PER_SECOND_OF_TIME = 15.0
MJD_J2000 = 51544.5
JD_MJD = 2400000.5
DAYS_PER_YEAR = 365.25
HOURS, DEGREES_PER_HOUR = 24.0, 15.0
_SEXAGESIMAL = re.compile(
    r"\s*([+-]?)(\d{1,3}(?:\.\d*)?)(?:[\s:hd]+(\d{1,2}(?:\.\d*)?))?(?:[\s:m']+(\d{1,2}(?:\.\d*)?))?[s\"]?\s*\Z"
)


def normalise(catalog: Catalog, reply: Reply) -> Rows:
    """Turn the columns of a whole or truncated reply into rows in common units.

    Parameters
    ----------
    catalog : Catalog
        The catalog file the reply answers to.
    reply : Reply
        A reply whose raw bytes have been judged; its ``columns`` must be present.

    Returns
    -------
    Rows
        Rows with a finite position; ``nan`` where a value is missing. Rows that the catalog flags as
        second listings are left out.

    Raises
    ------
    MisreadError
        When a column is missing or a unit cannot be turned into ours: nothing is guessed.
    """
    if reply.columns is None:
        raise MisreadError(f"{catalog.id}: the reply holds no columns ({reply.detail}); ask again")
    door = _Door(catalog, reply.columns)
    return door.rows()


class _Door:
    def __init__(self, catalog: Catalog, columns: Mapping[str, Column]) -> None:
        self.catalog = catalog
        self.columns = columns
        # archives change the case of names between releases; ours is the file's
        self.by_lower = {name.lower(): name for name in columns}

    def column(self, name: str) -> Column:
        found = self.by_lower.get(name.lower())
        if found is None:
            raise MisreadError(
                f"{self.catalog.id}: column {name!r} is not in the reply, which holds {', '.join(self.columns)}; "
                "the catalog file needs an update"
            )
        column = self.columns[found]
        if column.unit is None and name in self.catalog.units:
            # the file states a unit only where the archive states none
            return replace(column, unit=self.catalog.units[name])
        return column

    def floats(self, name: str, unit: str | None) -> Floats:
        """Values of a column as floats in ``unit`` (None: as served), missing ones ``nan``."""
        column = self.column(name)
        try:
            values = np.asarray(column.values, dtype=np.float64).copy()
        except (TypeError, ValueError):
            raise MisreadError(f"{self.catalog.id}: column {name!r} holds text where numbers are expected") from None
        values[np.asarray(column.missing, dtype=bool)] = np.nan
        if unit is not None:
            values *= self.factor(name, column.unit, unit)
        return values

    def factor(self, name: str, served: str | None, wanted: str) -> float:
        """Return what turns the served unit into the wanted one; a missing unit is a fault, not a guess."""
        factor = unit_factor(served, wanted)
        if factor is None:
            raise MisreadError(
                f"{self.catalog.id}: column {name!r} came in {served!r}, which cannot be read as {wanted}; "
                "the archive changed or the catalog file is wrong"
            )
        return factor

    def angle_arcsec(self, name: str, dec_deg: Floats | None = None) -> Floats:
        """An error column in arcsec. Seconds of time are allowed for a right-ascension error."""
        column = self.column(name)
        if column.unit in ("s", "seconds") and dec_deg is not None:
            return self.floats(name, None) * ARCSEC_PER_SECOND_OF_TIME * np.cos(np.radians(dec_deg))
        return self.floats(name, "arcsec")

    def rows(self) -> Rows:
        catalog = self.catalog
        ra_deg, dec_deg = self.position()
        keep = np.isfinite(ra_deg) & np.isfinite(dec_deg)
        for rule in catalog.drop:
            keep &= ~(self.floats(rule.column, None) >= rule.at_least)
        major, minor, angle = self.ellipse(dec_deg)
        pm = self.motion(dec_deg)
        return Rows(
            key=self.keys(ra_deg, dec_deg, keep),
            ra_deg=ra_deg[keep] % 360.0,
            dec_deg=dec_deg[keep],
            sigma_major_arcsec=major[keep],
            sigma_minor_arcsec=minor[keep],
            angle_deg=angle[keep],
            epoch_yr=self.epoch(len(ra_deg))[keep],
            pm_ra_mas_yr=pm[0][keep],
            pm_dec_mas_yr=pm[1][keep],
            pm_ra_error_mas_yr=pm[2][keep],
            pm_dec_error_mas_yr=pm[3][keep],
            flux={columns.band.name: self.photometry(columns, keep) for columns in catalog.bands},
            raw=self.raw(keep),
        )

    def keys(self, ra_deg: Floats, dec_deg: Floats, keep: Bools) -> tuple[str, ...]:
        """Names of the rows; the position in degrees where the list gives none."""
        if self.catalog.key is None:
            return tuple(f"{ra:.5f}{dec:+.5f}" for ra, dec in zip(ra_deg[keep], dec_deg[keep], strict=True))
        return tuple(_as_text(value) for value in np.asarray(self.column(self.catalog.key).values)[keep])

    def position(self) -> tuple[Floats, Floats]:
        """Positions in degrees; text is hours and degrees, and text that is no position is a row without one."""
        catalog = self.catalog
        if not catalog.sexagesimal:
            return self.floats(catalog.ra, "deg"), self.floats(catalog.dec, "deg")
        ra, dec = ([_as_text(value) for value in self.column(name).values] for name in (catalog.ra, catalog.dec))
        pairs = np.array([_from_text(*pair) for pair in zip(ra, dec, strict=True)], dtype=float).reshape(-1, 2)
        if len(pairs) and not np.isfinite(pairs).any():
            raise MisreadError(
                f"{catalog.id}: none of {len(pairs)} rows has a position that can be read, such as {ra[0]!r} {dec[0]!r}; "
                "the list changed its form or the catalog file is wrong"
            )
        return pairs[:, 0], pairs[:, 1]

    def ellipse(self, dec_deg: Floats) -> tuple[Floats, Floats, Floats]:
        """One-sigma semi-axes and angle, systematic floor added; a missing error falls back to the worst listed."""
        error = self.catalog.error
        zero = np.zeros_like(dec_deg)
        if error.meaning is ErrorMeaning.NONE:
            major, minor, angle = zero, zero, zero
        elif error.meaning is ErrorMeaning.ELLIPSE:
            major, minor = (self.angle_arcsec(name) for name in error.columns[:2])
            angle = self.floats(error.columns[2], "deg")
            if error.level is not None:
                major, minor = (sigma_from_radius(axis, error.level) for axis in (major, minor))
        elif error.meaning is ErrorMeaning.PER_AXIS:
            sigma_ra = self.angle_arcsec(error.columns[0], dec_deg)
            sigma_dec = self.angle_arcsec(error.columns[1])
            rho = self.floats(error.correlation, None) if error.correlation else zero
            major, minor, angle = axes(sigma_ra**2, sigma_dec**2, rho * sigma_ra * sigma_dec)
        else:
            radius = self.angle_arcsec(error.columns[0])
            sigma = sigma_from_radius(radius, error.level) if error.level is not None else sigma_from_radial(radius)
            major, minor, angle = sigma, sigma.copy(), zero
        major, minor = (_fill_with_worst(axis) for axis in (np.asarray(major), np.asarray(minor)))
        floor = error.floor_arcsec
        return np.hypot(major, floor), np.hypot(minor, floor), np.nan_to_num(np.asarray(angle), nan=0.0)

    def motion(self, dec_deg: Floats) -> tuple[Floats, Floats, Floats, Floats]:
        nothing = np.full_like(dec_deg, np.nan)
        motion = self.catalog.motion
        if motion is None:
            return nothing, nothing.copy(), nothing.copy(), nothing.copy()
        cos = 1.0 if motion.cosdec else np.cos(np.radians(dec_deg))
        unit = "mas / yr"
        ra_error = self.floats(motion.ra_error, unit) * cos if motion.ra_error else nothing
        dec_error = self.floats(motion.dec_error, unit) if motion.dec_error else nothing.copy()
        return self.floats(motion.ra, unit) * cos, self.floats(motion.dec, unit), ra_error, dec_error

    def epoch(self, n: int) -> Floats:
        facts = self.catalog.epoch
        default = np.full(n, facts.value_yr)
        if facts.column is None:
            return default
        value = self.floats(facts.column, None)
        if facts.scale is EpochScale.JD:
            value = 2000.0 + (value - JD_MJD - MJD_J2000) / DAYS_PER_YEAR
        elif facts.scale is EpochScale.MJD:
            value = 2000.0 + (value - MJD_J2000) / DAYS_PER_YEAR
        return np.where(np.isfinite(value), value, default)

    def photometry(self, columns: BandColumns, keep: Bools) -> Photometry:
        unit = columns.band.unit
        if columns.value is None:
            nothing = np.full(int(keep.sum()), np.nan)
            return Photometry(value=nothing, error=nothing.copy(), is_limit=np.zeros(len(nothing), dtype=bool))
        value = self.floats(columns.value, unit)
        if columns.band.quantity is not Quantity.MAGNITUDE:
            # a listed flux of zero or less is a missing measurement in a source list
            value[~(value > 0.0)] = np.nan
        error = self.floats(columns.error, unit) if columns.error else np.full_like(value, np.nan)
        is_limit = np.zeros(len(value), dtype=bool)
        if columns.limit_flag is not None:
            flag = columns.limit_flag
            letters = [_as_text(v)[flag.place : flag.place + 1] for v in self.column(flag.column).values]
            is_limit = np.array([bool(letter) and letter in flag.letters for letter in letters], dtype=bool)
        return Photometry(value=value[keep], error=error[keep], is_limit=is_limit[keep])

    def raw(self, keep: Bools) -> tuple[Mapping[str, object], ...]:
        """The rows as served, missing values as None, ready to be stored as text."""
        names = list(self.columns)
        listed = [
            [None if gone else _plain(value) for value, gone in zip(column.values, column.missing, strict=True)]
            for column in self.columns.values()
        ]
        rows: Iterable[tuple[object, ...]] = zip(*listed, strict=True)
        return tuple(dict(zip(names, row, strict=True)) for row, kept in zip(rows, keep, strict=True) if kept)


def pointings_of(catalog: Catalog, reply: Reply) -> Pointings:
    """Turn the reply of an observation log into pointings.

    Parameters
    ----------
    catalog : Catalog
        A catalog of a mission that points; its ``log`` names the columns.
    reply : Reply
        A whole reply of the log.

    Returns
    -------
    Pointings
        Every entry with a position and an exposure above zero; the reach of each field as the catalog file states it.

    Raises
    ------
    MisreadError
        As :func:`normalise`.
    """
    log = catalog.log
    if log is None or reply.columns is None:
        raise MisreadError(
            f"{catalog.id}: the reply holds no columns of an observation log ({reply.detail}); ask again"
        )
    door = _Door(replace(catalog, units=log.units), reply.columns)
    ra, dec, exposure = door.floats(log.ra, "deg"), door.floats(log.dec, "deg"), door.floats(log.exposure, "s")
    keep = np.isfinite(ra) & np.isfinite(dec) & (exposure > 0.0)

    def listed(name: str | None) -> tuple[str, ...]:
        if name is None:
            return ("",) * int(keep.sum())
        return tuple(_as_text(value) for value in np.asarray(door.column(name).values)[keep])

    return Pointings(
        key=listed(log.key),
        ra_deg=ra[keep] % 360.0,
        dec_deg=dec[keep],
        exposure_s=exposure[keep],
        field_radius_arcmin=np.full(int(keep.sum()), log.field_radius_arcmin),
        start=listed(log.start),
        instrument=listed(log.instrument),
    )


def within(rows: Rows, question: Question) -> Rows:
    """The rows inside the cone, where the archive gave more: a box around it, or a whole list."""
    inside = separation_arcsec(question.ra_deg, question.dec_deg, rows.ra_deg, rows.dec_deg) <= question.radius_arcsec
    return rows if inside.all() else rows.chosen(inside)


def _from_text(ra: str, dec: str) -> tuple[float, float]:
    """Hours and degrees, whatever stands between the numbers; the error in brackets behind the last digits is cut."""
    hours, degrees = (_numbers(text.partition("(")[0]) for text in (ra, dec))
    if hours is None or degrees is None or not 0.0 <= hours < HOURS or not -90.0 <= degrees <= 90.0:
        return np.nan, np.nan
    return hours * DEGREES_PER_HOUR, degrees


def _numbers(text: str) -> float | None:
    """Hours or degrees from up to three numbers with the sign in front; None where it is no such thing."""
    found = _SEXAGESIMAL.match(text.replace("\u2212", "-"))
    if found is None:
        return None
    sign = -1.0 if found[1] == "-" else 1.0
    whole, minutes, seconds = (float(part) if part else 0.0 for part in found.groups()[1:])
    if minutes >= 60.0 or seconds >= 60.0:
        return None
    return sign * (whole + minutes / 60.0 + seconds / 3600.0)


def _fill_with_worst(axis: Floats) -> Floats:
    """A row without a listed error is as uncertain as the worst of its neighbours, never perfect."""
    listed = axis[np.isfinite(axis) & (axis > 0.0)]
    worst = float(listed.max()) if listed.size else 0.0
    return np.where(np.isfinite(axis) & (axis > 0.0), axis, worst)


def _plain(value: object) -> object:
    return value.item() if isinstance(value, np.generic) else value


def _as_text(value: object) -> str:
    if isinstance(value, bytes):
        return value.decode("utf-8", "replace").strip()
    return str(_plain(value)).strip()


def join(parts: Iterable[Rows]) -> Rows:
    """Put the rows of several tables of one catalog together, in order. No parts give empty rows."""
    listed = list(parts)
    if len(listed) == 1:
        return listed[0]

    def stack(name: str) -> NDArray[np.float64]:
        return np.concatenate([getattr(part, name) for part in listed]) if listed else np.empty(0)

    bands = list(dict.fromkeys(name for part in listed for name in part.flux))
    return Rows(
        key=tuple(key for part in listed for key in part.key),
        ra_deg=stack("ra_deg"),
        dec_deg=stack("dec_deg"),
        sigma_major_arcsec=stack("sigma_major_arcsec"),
        sigma_minor_arcsec=stack("sigma_minor_arcsec"),
        angle_deg=stack("angle_deg"),
        epoch_yr=stack("epoch_yr"),
        pm_ra_mas_yr=stack("pm_ra_mas_yr"),
        pm_dec_mas_yr=stack("pm_dec_mas_yr"),
        pm_ra_error_mas_yr=stack("pm_ra_error_mas_yr"),
        pm_dec_error_mas_yr=stack("pm_dec_error_mas_yr"),
        flux={
            name: Photometry(
                value=np.concatenate([part.flux[name].value for part in listed]),
                error=np.concatenate([part.flux[name].error for part in listed]),
                is_limit=np.concatenate([part.flux[name].is_limit for part in listed]),
            )
            for name in bands
        },
        raw=tuple(row for part in listed for row in part.raw),
    )
