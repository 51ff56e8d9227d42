"""Published footprints: a MOC file read by mocpy, asked for points. Reading it is exact; its own cells are its error."""

from __future__ import annotations

import tempfile
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np

from xmatch.errors import MisreadError
from xmatch.records import Bools, Floats

FORMATS = ("fits", "json", "ascii")
"""Forms in which the IVOA standard writes a MOC."""


class Footprint:
    """One footprint file.

    Parameters
    ----------
    body : bytes
        A MOC as FITS, JSON or ASCII.

    References
    ----------
    Fernique et al. 2022, IVOA Recommendation "MOC: Multi-Order Coverage map", version 2.0.
    """

    def __init__(self, body: bytes) -> None:
        self._body = body

    @cached_property
    def _moc(self) -> Any:
        from mocpy import MOC

        begins = self._body.lstrip()[:6]
        form = "fits" if begins == b"SIMPLE" else "json" if begins.startswith(b"{") else "ascii"
        # mocpy reads paths
        with tempfile.TemporaryDirectory() as folder:
            path = Path(folder) / "footprint"
            path.write_bytes(self._body)
            try:
                moc = MOC.load(str(path), format=form)
            except (OSError, ValueError, TypeError) as fault:
                raise MisreadError(f"the footprint cannot be read as a MOC ({form}): {fault}; fetch it again") from None
        if moc.empty():
            raise MisreadError(
                "the footprint is empty, as a service gives it for a name it does not know; check its address"
            )
        return moc

    @property
    def sky_fraction(self) -> float:
        """Part of the sky that it covers.

        Raises
        ------
        MisreadError
            When the file is no MOC, or an empty one.
        """
        return float(self._moc.sky_fraction)

    def contains(self, ra_deg: Floats, dec_deg: Floats) -> Bools:
        """Whether positions (ICRS degrees, arrays of one shape) lie inside.

        Raises
        ------
        MisreadError
            As :attr:`sky_fraction`.
        """
        import astropy.units as u

        ra, dec = np.ravel(np.asarray(ra_deg, dtype=float)), np.ravel(np.asarray(dec_deg, dtype=float))
        inside = self._moc.contains_lonlat(ra * u.deg, dec * u.deg)
        return np.asarray(inside, dtype=bool).reshape(np.shape(ra_deg))
