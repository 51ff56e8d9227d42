"""The functions that questions in SQL may use beside the database's own, on SQLite connections.

``db/functions-postgresql.sql`` defines the same ones for PostgreSQL, and a test holds the two together. NULL in, NULL
out.
"""

from __future__ import annotations

import json
import math
import sqlite3
from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any, NamedTuple

from xmatch.constants import C_CM_S, KEV_HZ, PC_CM
from xmatch.errors import RangeError
from xmatch.store import cone

AB_ZERO_JY = 3631.0
"""Flux density of AB magnitude zero (Oke & Gunn 1983, ApJ 266, 713: 48.60 in erg s^-1 cm^-2 Hz^-1)."""
DAY_S = 86400.0


class Function(NamedTuple):
    """One function: its arguments, what it returns, and what it does."""

    call: Callable[..., Any]
    arguments: str
    unit: str
    meaning: str
    on_postgresql: bool = True


def _in_cone(ra: float, dec: float, ra0: float, dec0: float, radius: float) -> int:
    return int(cone.separation_arcsec(ra, dec, ra0, dec0) <= radius)


def _stretches(ra: float, dec: float, radius: float) -> str:
    return json.dumps(cone.ranges(ra, dec, radius))


def _moment(text: str) -> datetime:
    moment = datetime.fromisoformat(text)
    return moment if moment.tzinfo else moment.replace(tzinfo=UTC)


def _days_between(earlier: str, later: str) -> float:
    return (_moment(later) - _moment(earlier)).total_seconds() / DAY_S


FUNCTIONS = {
    "separation_arcsec": Function(
        cone.separation_arcsec, "ra1_deg, dec1_deg, ra2_deg, dec2_deg", "arcsec", "Angle between two positions."
    ),
    "in_cone": Function(
        _in_cone,
        "ra_deg, dec_deg, ra0_deg, dec0_deg, radius_arcsec",
        "0 or 1",
        "Whether a position lies within a radius of another.",
    ),
    "cone_stretches": Function(
        _stretches,
        "ra0_deg, dec0_deg, radius_arcsec",
        "JSON",
        "Pairs of first and last hpx29 that hold a cone, for json_each: the fast way in; in_cone must follow.",
        on_postgresql=False,
    ),
    "healpix": Function(
        lambda ra, dec, order: cone.index(ra, dec, order),
        "ra_deg, dec_deg, depth",
        "",
        "Nested HEALPix index of a position at an order from 0 to 29.",
        on_postgresql=False,
    ),
    "jy_from_ab_mag": Function(lambda mag: AB_ZERO_JY * 10.0 ** (-0.4 * mag), "mag", "Jy", "Flux density of an AB magnitude."),
    "ab_mag_from_jy": Function(lambda jy: -2.5 * math.log10(jy / AB_ZERO_JY), "jy", "mag", "AB magnitude of a flux density."),
    "jy_from_mag": Function(
        lambda mag, zero: zero * 10.0 ** (-0.4 * mag),
        "mag, zero_point_jy",
        "Jy",
        "Flux density of a magnitude whose zero has the flux density given.",
    ),
    "luminosity_erg_s": Function(
        lambda flux, distance: 4.0 * math.pi * (distance * PC_CM) ** 2 * flux,
        "flux_erg_s_cm2, distance_pc",
        "erg s-1",
        "Isotropic luminosity of a flux at a distance.",
    ),
    "flux_erg_s_cm2": Function(
        lambda luminosity, distance: luminosity / (4.0 * math.pi * (distance * PC_CM) ** 2),
        "luminosity_erg_s, distance_pc",
        "erg s-1 cm-2",
        "Flux of an isotropic luminosity at a distance.",
    ),
    "hz_from_kev": Function(lambda kev: kev * KEV_HZ, "kev", "Hz", "Frequency of a photon energy."),
    "hz_from_um": Function(lambda um: C_CM_S * 1e4 / um, "um", "Hz", "Frequency of a vacuum wavelength in micrometre."),
    "days_between": Function(_days_between, "earlier, later", "d", "Days from one time to another."),
}  # fmt: skip
_MATH: dict[str, tuple[int, Callable[..., Any]]] = {
    "radians": (1, math.radians), "degrees": (1, math.degrees), "sin": (1, math.sin), "cos": (1, math.cos),
    "asin": (1, math.asin), "sqrt": (1, math.sqrt), "log10": (1, math.log10), "power": (2, math.pow),
}  # fmt: skip


def _null_through(call: Callable[..., Any]) -> Callable[..., Any]:
    def null_in_null_out(*values: Any) -> Any:
        if None in values:
            return None
        try:
            return call(*values)
        except (ValueError, ZeroDivisionError, OverflowError, RangeError):
            # as the database's own functions do: no answer where there is none
            return None

    return null_in_null_out


def register(connection: sqlite3.Connection) -> None:
    """Make the functions known on a connection, and the mathematics where SQLite was built without."""
    for name, function in FUNCTIONS.items():
        n = function.arguments.count(",") + 1
        connection.create_function(name, n, _null_through(function.call), deterministic=True)
    try:
        connection.execute("SELECT power(radians(1.0), 2)").fetchone()
    except sqlite3.OperationalError:
        for name, (n, call) in _MATH.items():
            connection.create_function(name, n, _null_through(call), deterministic=True)


def register_clock(connection: sqlite3.Connection, now: str) -> None:
    """Define ``now_utc()``: one moment for a whole question."""
    connection.create_function("now_utc", 0, lambda: now)
