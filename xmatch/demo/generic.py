"""Tables of the invented sky for catalogs that need no story of their own: made from what their catalog files say.

Stars are those of the scene, seen through each catalog's bands down to its depth; other sources are scattered, none near
the transient. Names that a catalog file does not know are invented here, with the UCDs by which a check finds them.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any
from urllib.parse import urlsplit

import numpy as np

from xmatch.catalogs.model import BY_UCD, BandColumns, Catalog, ErrorMeaning
from xmatch.constants import C_CM_S
from xmatch.records import Floats, Quantity

STAR_BANDS = {"BP": 0.511, "G": 0.622, "RP": 0.777, "J": 1.235, "H": 1.662, "Ks": 2.159, "W1": 3.35, "W2": 4.60}
"""Where the scene's magnitudes lie, in micron; others are read between them."""
EMPTY_HERE = frozenset({"galex-guvcat-ais", "gleam-x-dr2"})
"""Catalogs that hold nothing around the transient, as if they had never looked."""
INVENTED_NAMES = {
    "pos.eq.ra;meta.main": "RAdeg", "pos.eq.dec;meta.main": "DEdeg", "phot.mag;em.opt.I": "imag",
}  # fmt: skip
INVENTED_FLUX = "Speak1"
N_SCATTERED = 140
"""Sources per sparse catalog: enough that a few tens lie in each cone."""
N_CONTROL = 6
N_LISTED = 40
POINTINGS = {
    "xmmmaster": [("0990010101", 6.0, 12_400.0), ("0990010201", 41.0, 30_100.0)],
    "chanmaster": [("99001", 27.0, 9_800.0)],
    "swiftmastr": [("00099001001", 10.2, 1_930.0), ("00099001002", 33.0, 4_100.0)],
}
"""Observation logs: name, angle between axis and transient in arcmin, exposure in s."""

Place = Callable[[Floats, Floats], tuple[Floats, Floats]]
Make = Callable[..., Any]


class Generic:
    """Makes tables from catalog files.

    Parameters
    ----------
    rng : numpy.random.Generator
        The only source of chance.
    place : callable
        Offsets east and north of the transient in arcsec to degrees.
    stars : mapping of str to ndarray
        The scene's stars: offsets, magnitudes, motions.
    make : callable
        Makes a table from its name, remote name, position columns and columns with units.
    """

    def __init__(self, rng: np.random.Generator, place: Place, stars: Mapping[str, Floats], make: Make) -> None:
        self.rng, self.place, self.stars, self.make = rng, place, stars, make

    def tables(self, catalog: Catalog) -> list[Any]:
        """The catalog's tables, and its observation log."""
        made = [self.table(catalog, number) for number in range(len(catalog.tables))]
        if catalog.log is not None:
            made.append(self.log(catalog))
        return made

    def table(self, catalog: Catalog, number: int, *, elsewhere: bool = False) -> Any:
        """One table: rows around the transient where it looked there, and some at the control position."""
        served = catalog.tables[number]
        radius = catalog.neighbourhood_arcsec * 1.1
        magnitudes: dict[str, Floats] = {}
        looked = bool(catalog.coverage.contains(*self.place(np.zeros(1), np.zeros(1)))[0])
        if number > 0 or elsewhere or catalog.id in EMPTY_HERE or not looked:
            east, north = np.empty(0), np.empty(0)
        elif (
            catalog.bands
            and catalog.bands[0].band.nu_hz > C_CM_S / 30.0e-4
            and catalog.bands[0].band.nu_hz < C_CM_S / 0.3e-4
        ):
            east, north, magnitudes = self.seen_stars(catalog, radius)
        else:
            n = N_LISTED if catalog.is_object_list else N_SCATTERED
            hole = 0.25 * radius if catalog.is_object_list else max(0.06 * radius, 1.5 * catalog.resolution_arcsec)
            r, phi = np.sqrt(self.rng.uniform(hole**2, radius**2, n)), self.rng.uniform(0.0, 2.0 * np.pi, n)
            east, north = r * np.sin(phi), r * np.cos(phi)
        ra, dec = self.place(east, north)
        if catalog.control is not None:
            spread = catalog.control.radius_arcsec / 3600.0 / 2.0
            ra = np.append(ra, (catalog.control.ra_deg + self.rng.uniform(-spread, spread, N_CONTROL) / 2.0) % 360.0)
            dec = np.append(dec, catalog.control.dec_deg + self.rng.uniform(-spread, spread, N_CONTROL) / 2.0)
        n = len(ra)
        columns = self.columns(catalog, ra, dec, len(east), magnitudes)
        remote = served.remote_table
        if served.protocol == "vizier" and catalog.id in ("hess-hgps", "xmm-om-suss6", "smgps-compact"):
            remote = f"{served.remote_table}/sources"
        name = catalog.id if number == 0 and not elsewhere else f"{catalog.id}-{number + 1}"
        made = self.make(name, remote or catalog.id, "_ra", "_dec", **columns, _ra=(ra, "deg"), _dec=(dec, "deg"))
        self.address(made, served.protocol, served.address, remote)
        if served.protocol == "file":
            made.meta["file_format"] = served.format
        if not catalog.sexagesimal and not catalog.ra.startswith("_"):
            made.meta |= {"ra_served": self.named(catalog.ra), "dec_served": self.named(catalog.dec)}
        if catalog.rows_at_least is not None:
            made.meta["filler_rows"] = catalog.rows_at_least
        assert len(made) == n
        return made

    def address(self, made: Any, protocol: str, address: str, remote: str) -> None:
        """Where the embedded archive serves it."""
        parts = urlsplit(address)
        made.meta["host"] = parts.netloc
        made.meta.pop("cone_path", None)
        if protocol in ("tap", "simbad"):
            made.meta |= {"tap_path": parts.path, "tap_table": remote}
        elif protocol == "file":
            made.meta["file_path"] = parts.path
        elif protocol == "cone":
            made.meta["cone_path"] = parts.path

    def seen_stars(self, catalog: Catalog, radius: float) -> tuple[Floats, Floats, dict[str, Floats]]:
        """Stars above the depth of any band, with a magnitude in each."""
        x = np.log10(list(STAR_BANDS.values()))
        table = np.array([self.stars[name] for name in STAR_BANDS])
        near = np.hypot(self.stars["east"], self.stars["north"]) < radius
        magnitudes, seen = {}, np.zeros(len(near), dtype=bool)
        for columns in catalog.bands:
            band = columns.band
            at = np.log10(C_CM_S / band.nu_hz * 1.0e4)
            # between the nearest two bands of the scene; beyond its ends the nearest one
            magnitude = np.array([np.interp(at, x, star) for star in table.T])
            depth = _depth_mag(columns)
            blurred = depth + 0.15 * self.rng.standard_normal(len(magnitude))
            seen |= (magnitude < blurred) & near
            magnitudes[band.name] = magnitude
        # a bright star empties its surroundings where images are coarse
        brightest = int(np.argmin(self.stars["Ks"]))
        from_it = np.hypot(
            self.stars["east"] - self.stars["east"][brightest], self.stars["north"] - self.stars["north"][brightest]
        )
        seen &= (from_it > 3.0 * catalog.resolution_arcsec) | (from_it == 0.0)
        return self.stars["east"][seen], self.stars["north"][seen], {k: v[seen] for k, v in magnitudes.items()}

    def columns(
        self, catalog: Catalog, ra: Floats, dec: Floats, n_here: int, magnitudes: Mapping[str, Floats]
    ) -> dict[str, Any]:
        """Every column that a look wants, as the archive would serve it."""
        n = len(ra)
        columns: dict[str, Any] = {}
        if catalog.key is not None:
            names = np.array([f"{catalog.id[:4].upper()} {i:04d}" for i in range(n)])
            columns[catalog.key] = (names, None)
        for name, values in ((catalog.ra, ra), (catalog.dec, dec)):
            if catalog.sexagesimal:
                columns[name] = (_sexagesimal(values, hours=name == catalog.ra), None)
            elif not name.startswith("_"):
                unit = None if name in catalog.units else "deg"
                columns[self.named(name)] = (values, unit, name.removeprefix(BY_UCD) if name.startswith(BY_UCD) else "")
        error = catalog.error
        sigma = 0.3 + 0.02 * catalog.resolution_arcsec
        factor = {ErrorMeaning.ELLIPSE: 2.4 if error.level else 1.0, ErrorMeaning.RADIUS: 2.0, ErrorMeaning.RADIAL: 1.4}
        for name in error.columns[:2]:
            columns[name] = (np.full(n, sigma * factor.get(error.meaning, 1.0)), "arcsec")
        for name in error.columns[2:]:
            columns[name] = (self.rng.uniform(0.0, 180.0, n), "deg")
        if catalog.motion is not None:
            motion = (catalog.motion.ra, catalog.motion.dec, catalog.motion.ra_error, catalog.motion.dec_error)
            for listed in motion:
                if listed is not None:
                    columns[listed] = (self.rng.normal(0.0, 2.0, n), None if listed in catalog.units else "mas/yr")
        for kept in catalog.keep:
            columns[kept] = (np.full(n, "-"), None)
        if not columns:
            columns["Name"] = (np.array([f"object {i}" for i in range(n)]), None)
        for band in catalog.bands:
            columns |= self.photometry(catalog, band, n, n_here, magnitudes)
        return columns

    def photometry(
        self, catalog: Catalog, columns: BandColumns, n: int, n_here: int, magnitudes: Mapping[str, Floats]
    ) -> dict[str, Any]:
        """Value, error and quality letters of one band."""
        if columns.value is None:
            return {}
        band = columns.band
        value = np.full(n, np.nan)
        if band.name in magnitudes:
            value[:n_here] = magnitudes[band.name]
            value[n_here:] = self.rng.uniform(12.0, 16.0, n - n_here)
            error = 0.02 + 0.2 * 10.0 ** (0.4 * (value - _depth_mag(columns) - 0.5))
            if band.quantity is not Quantity.MAGNITUDE:
                value, error = 10.0 ** (-0.4 * value), 0.92 * error * 10.0 ** (-0.4 * value)
        elif band.quantity is Quantity.MAGNITUDE:
            value, error = self.rng.uniform(12.0, 16.0, n), np.full(n, 0.05)
        else:
            value = (band.depth or 1.0e-13) * (1.02 + self.rng.pareto(1.3, n))
            error = 0.18 * (band.depth or 1.0e-13) + 0.02 * value
        unit = None if columns.value in catalog.units else band.unit
        ucd = columns.value.removeprefix(BY_UCD) if columns.value.startswith(BY_UCD) else ""
        made: dict[str, Any] = {self.named(columns.value): (value, unit, ucd)}
        if columns.error is not None:
            made[columns.error] = (error, band.unit)
        if columns.limit_flag is not None:
            made[columns.limit_flag.column] = (np.full(n, "A" * 8), None)
        return made

    def named(self, name: str) -> str:
        """The invented name of a column that the file knows only by its UCD."""
        if not name.startswith(BY_UCD):
            return name
        return INVENTED_NAMES.get(name.removeprefix(BY_UCD), INVENTED_FLUX)

    def log(self, catalog: Catalog) -> Any:
        """An observation log: some pointings near the transient, one at the control position."""
        log = catalog.log
        assert log is not None and catalog.control is not None
        listed = POINTINGS[log.table.remote_table]
        off = np.array([60.0 * arcmin for _, arcmin, _ in listed])
        phi = self.rng.uniform(0.0, 2.0 * np.pi, len(off))
        ra, dec = self.place(off * np.sin(phi), off * np.cos(phi))
        ra, dec = np.append(ra, catalog.control.ra_deg), np.append(dec, catalog.control.dec_deg)
        exposures = np.append([seconds for _, _, seconds in listed], 20_000.0)
        columns: dict[str, Any] = {
            log.key: (np.array([name for name, _, _ in listed] + ["control"]), None),
            log.ra: (ra, "deg"), log.dec: (dec, "deg"), log.exposure: (exposures, "s"),
        }  # fmt: skip
        if log.start is not None:
            columns[log.start] = (np.full(len(ra), 58_000.5), "d")
        if log.instrument is not None:
            columns[log.instrument] = (np.full(len(ra), "ACIS-I"), None)
        made = self.make(log.table.remote_table, log.table.remote_table, log.ra, log.dec, **columns)
        self.address(made, log.table.protocol, log.table.address, log.table.remote_table)
        return made


def _depth_mag(columns: BandColumns) -> float:
    """Where stars of the scene fade from a catalog."""
    band = columns.band
    if band.depth is None:
        return 17.0
    return band.depth if band.quantity is Quantity.MAGNITUDE else -2.5 * float(np.log10(band.depth / 3630.78))


def _sexagesimal(values: Floats, *, hours: bool) -> Any:
    from astropy.coordinates import Angle

    unit = "hourangle" if hours else "deg"
    return Angle(values, "deg").to_string(unit=unit, sep=" ", precision=2, pad=True, alwayssign=not hours)
