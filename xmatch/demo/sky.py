"""Make the invented sky of the demo. Run by hand; its output is committed under ``fixtures/demo/sky``.

    python -m xmatch.demo.sky fixtures/demo/sky

Nothing here is real: the array, the transient, every star and every source are made up. Only the
column names and units are those of the real catalogs, so that the demo walks the code that real
archives walk. What the sky was built to contain, catalog by catalog, is in :data:`BUILT_TO_SHOW`.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import numpy as np

from xmatch.catalogs import load_catalogs
from xmatch.catalogs.model import Catalog
from xmatch.demo.generic import Generic
from xmatch.records import Floats, Outcome

RA_DEG = 264.50625
DEC_DEG = -33.81583
"""Where the invented transient is: 17:38:01.5 -33:48:57, l = 355.0, b = -1.2 deg."""

BUILT_TO_SHOW = {
    "fermi-4fgl-dr4": Outcome.BLANK,
    "hess-hgps": Outcome.BLANK,  # without a depth in its file, so without a limit
    "swift-bat-157m": Outcome.BLANK,
    "integral-ibis-gps9": Outcome.BLANK,
    "xmm-5xmm-dr15": Outcome.BLANK,  # one pointing holds it, 6 arcmin off axis
    "xmm-4xmm-dr13": Outcome.BLANK,
    "chandra-csc21": Outcome.NOT_COVERED,  # the nearest pointing is 27 arcmin away
    "erass1-main": Outcome.CHANCE,  # one source of a dense invented cluster, 23 arcsec off
    "rosat-2rxs": Outcome.BLANK,
    "swift-2sxps": Outcome.BLANK,  # one short pointing holds it
    "galex-guvcat-ais": Outcome.COVERAGE_UNKNOWN,  # its footprint was not fetched, and it holds nothing here
    "xmm-om-suss6": Outcome.BLANK,
    "gaia-dr3": Outcome.CHANCE,  # one faint star inside the error region of a crowded field
    "ps1-dr1": Outcome.NOT_COVERED,  # the survey ends at Dec -30
    "skymapper-dr4": Outcome.HIDDEN,  # the bright star, in coarse images
    "decaps2": Outcome.CHANCE,  # the same faint star
    "vphas-dr2": Outcome.CHANCE,  # the same faint star
    "igaps-dr1": Outcome.NOT_COVERED,
    "2mass-psc": Outcome.BLANK,
    "vvv-virac2": Outcome.CHANCE,  # the same faint star
    "ukidss-gps": Outcome.NOT_COVERED,
    "allwise": Outcome.HIDDEN,  # a bright star 11 arcsec away
    "catwise2020": Outcome.HIDDEN,  # a bright star 11 arcsec away
    "glimpse": Outcome.NOT_COVERED,  # stops at b = -1 deg
    "racs-low": Outcome.BLANK,
    "racs-mid": Outcome.BLANK,
    "racs-high": Outcome.BLANK,
    "vlass-ql1": Outcome.BLANK,
    "nvss": Outcome.BLANK,
    "sumss": Outcome.NOT_COVERED,  # leaves out the plane
    "mgps2": Outcome.BLANK,
    "tgss-adr1": Outcome.BLANK,
    "gleam-gal": Outcome.BLANK,
    "gleam-x-dr2": Outcome.COVERAGE_UNKNOWN,  # no map of its area, and it holds nothing here
    "lotss-dr3": Outcome.NOT_COVERED,
    "vlssr": Outcome.NOT_COVERED,
    "cornish": Outcome.NOT_COVERED,
    "thor-continuum": Outcome.NOT_COVERED,
    "glostar": Outcome.NOT_COVERED,
    "smgps-compact": Outcome.BLANK,
    # lists prove nothing
    "atnf-psr": Outcome.COVERAGE_UNKNOWN,
    "mcgill-magnetars": Outcome.COVERAGE_UNKNOWN,
    "lpt-cat": Outcome.COVERAGE_UNKNOWN,
    "green-snr": Outcome.COVERAGE_UNKNOWN,
    "aavso-vsx": Outcome.COVERAGE_UNKNOWN,
    "polar-cat": Outcome.COVERAGE_UNKNOWN,
    "gaia-edr3-wd": Outcome.COVERAGE_UNKNOWN,
    "ultracool-sheet": Outcome.COVERAGE_UNKNOWN,
    "simbad-basic": Outcome.COVERAGE_UNKNOWN,
}
PLAUSIBLE = {"e_R": 0.05, "e_D": 0.05, "obj": 1, "Epo": 56_000.0}
"""For a row of an otherwise empty table, by the first letters of the column; magnitudes get 18."""
SEED = 20261201
ARCSEC = 1.0 / 3600.0
VIZIER = "vizier.cds.unistra.fr"


class Sky:
    """Draws the invented objects and writes one table per catalog."""

    def __init__(self) -> None:
        self.rng = np.random.default_rng(SEED)

    def scatter(self, n: int, radius_arcsec: float, hole_arcsec: float) -> tuple[Floats, Floats]:
        """East and north offsets, uniform on a disc with a hole around the transient."""
        r = np.sqrt(self.rng.uniform(hole_arcsec**2, radius_arcsec**2, n))
        phi = self.rng.uniform(0.0, 2.0 * np.pi, n)
        return r * np.sin(phi), r * np.cos(phi)

    def place(self, east: Floats, north: Floats) -> tuple[Floats, Floats]:
        """Offsets in arcsec to RA and Dec in degrees."""
        dec = DEC_DEG + north * ARCSEC
        return (RA_DEG + east * ARCSEC / np.cos(np.radians(dec))) % 360.0, dec

    def magnitudes(self, n: int, bright: float, faint: float, slope: float) -> Floats:
        """Magnitudes of a population whose counts rise as 10^(slope m)."""
        u = self.rng.uniform(size=n)
        low, high = 10.0 ** (slope * bright), 10.0 ** (slope * faint)
        return np.log10(low + u * (high - low)) / slope

    def stars(self) -> dict[str, Floats]:
        """The stars that Gaia, 2MASS and CatWISE share."""
        east, north = self.scatter(2300, 245.0, 8.0)
        n = len(east)
        ks = self.magnitudes(n, 6.5, 16.5, 0.32)
        red = self.rng.gamma(6.0, 0.55, n) + 1.2  # G - Ks
        g = ks + red
        sky = {
            "east": east, "north": north, "Ks": ks, "H": ks + 0.12 * red, "J": ks + 0.33 * red,
            "G": g, "BP": g + 0.35 * red, "RP": g - 0.28 * red,
            "W1": ks - 0.05 - 0.02 * red, "W2": ks - 0.08 - 0.02 * red,
            "pm_ra": self.rng.normal(-1.5, 3.0, n), "pm_dec": self.rng.normal(-3.0, 3.0, n),
        }  # fmt: skip
        # A faint star that crowding put inside the error region, and the bright one that hides the mid-infrared.
        extra = {
            "east": [3.1, 8.43], "north": [-2.4, -7.07], "Ks": [15.9, 5.2], "H": [16.2, 5.5], "J": [16.9, 6.4],
            "G": [19.7, 9.6], "BP": [20.8, 11.4], "RP": [18.6, 8.3], "W1": [15.7, 4.8], "W2": [15.6, 4.9],
            "pm_ra": [-2.2, 3.4], "pm_dec": [-4.0, -6.1],
        }  # fmt: skip
        return {name: np.concatenate([values, extra[name]]) for name, values in sky.items()}

    def noisy(
        self, sky: dict[str, Floats], keep: Any, sigma_arcsec: float, years: float = 0.0
    ) -> tuple[Floats, Floats]:
        """Positions of the kept stars at another epoch, with measurement noise."""
        n = int(np.count_nonzero(keep))
        east = sky["east"][keep] + years * sky["pm_ra"][keep] / 1.0e3 + self.rng.normal(0.0, sigma_arcsec, n)
        north = sky["north"][keep] + years * sky["pm_dec"][keep] / 1.0e3 + self.rng.normal(0.0, sigma_arcsec, n)
        return self.place(east, north)

    def gaia(self, sky: dict[str, Floats]) -> Any:
        near = np.hypot(sky["east"], sky["north"]) < 150.0
        keep = near & (sky["G"] < 20.6)
        ra, dec = self.noisy(sky, keep, 0.0003)
        n = len(ra)
        g = sky["G"][keep]
        sigma_mas = 0.03 * 10.0 ** (0.2 * np.clip(g - 15.0, 0.0, None))
        no_motion = self.rng.uniform(size=n) < 0.06
        pm = [np.where(no_motion, np.nan, sky[name][keep]) for name in ("pm_ra", "pm_dec")]
        return table(
            "gaia-dr3", "I/355/gaiadr3", "RA_ICRS", "DE_ICRS",
            Source=(np.array([5973000000000000000 + 7919 * i for i in range(n)], dtype=np.int64), None),
            RA_ICRS=(ra, "deg"), DE_ICRS=(dec, "deg"), e_RA_ICRS=(sigma_mas, "mas"), e_DE_ICRS=(sigma_mas, "mas"),
            Plx=(self.rng.normal(0.25, 0.3, n), "mas"),
            pmRA=(pm[0], "mas/yr"), pmDE=(pm[1], "mas/yr"),
            e_pmRA=(np.where(no_motion, np.nan, 1.1 * sigma_mas), "mas/yr"),
            e_pmDE=(np.where(no_motion, np.nan, 1.0 * sigma_mas), "mas/yr"),
            Gmag=(g, "mag"), e_Gmag=(0.003 + 0.02 * 10.0 ** (0.4 * (g - 21.0)), "mag"),
            BPmag=(sky["BP"][keep], "mag"), e_BPmag=(0.004 + 0.15 * 10.0 ** (0.4 * (sky["BP"][keep] - 20.9)), "mag"),
            RPmag=(sky["RP"][keep], "mag"), e_RPmag=(0.004 + 0.08 * 10.0 ** (0.4 * (sky["RP"][keep] - 20.3)), "mag"),
        )  # fmt: skip

    def twomass(self, sky: dict[str, Floats]) -> Any:
        near = np.hypot(sky["east"], sky["north"]) < 200.0
        keep = near & (sky["Ks"] < 14.4 + 0.2 * self.rng.standard_normal(len(near)))
        ra, dec = self.noisy(sky, keep, 0.08, years=-16.7)
        n = len(ra)
        flags = np.array([("A" if k < 13.0 else "C") for k in sky["Ks"][keep]])
        blended = self.rng.uniform(size=n) < 0.05
        quality = np.array([f"{'U' if b else f}{f}{f}" for f, b in zip(flags, blended, strict=True)])

        def error(magnitude: Floats, five_sigma: float) -> Floats:
            return 0.02 + 0.2 * 10.0 ** (0.4 * (magnitude - five_sigma))

        return table(
            "2mass-psc", "II/246/out", "RAJ2000", "DEJ2000",
            **{"2MASS": (np.array([f"1738{i:04d}-33{i % 60:02d}{(7 * i) % 60:02d}" for i in range(n)]), None)},
            RAJ2000=(ra, "deg"), DEJ2000=(dec, "deg"), errMaj=(np.full(n, 0.09), "arcsec"),
            errMin=(np.full(n, 0.07), "arcsec"), errPA=(self.rng.uniform(0.0, 180.0, n), "deg"),
            JD=(np.full(n, 2451345.75), "d"),
            Jmag=(sky["J"][keep], "mag"), e_Jmag=(error(sky["J"][keep], 16.3), "mag"),
            Hmag=(sky["H"][keep], "mag"), e_Hmag=(error(sky["H"][keep], 15.3), "mag"),
            Kmag=(sky["Ks"][keep], "mag"), e_Kmag=(error(sky["Ks"][keep], 14.7), "mag"),
            Qflg=(quality, None),
        )  # fmt: skip

    def catwise(self, sky: dict[str, Floats]) -> Any:
        bright = sky["W1"] < 14.6 + 0.3 * self.rng.standard_normal(len(sky["W1"]))
        far = np.hypot(sky["east"] - 8.43, sky["north"] + 7.07)
        keep = bright & ((far > 18.0) | (far < 0.5))  # the bright star empties its surroundings
        ra, dec = self.noisy(sky, keep, 0.15)
        n = len(ra)
        w1, w2 = sky["W1"][keep], sky["W2"][keep]
        return table(
            "catwise2020", "II/365/catwise", "RA_ICRS", "DE_ICRS",
            Name=(np.array([f"J1738{i:05d}-3348" for i in range(n)]), None),
            RA_ICRS=(ra, "deg"), DE_ICRS=(dec, "deg"),
            e_RA_ICRS=(0.05 + 0.05 * 10.0 ** (0.3 * (w1 - 14.0)), "arcsec"),
            e_DE_ICRS=(0.05 + 0.05 * 10.0 ** (0.3 * (w1 - 14.0)), "arcsec"),
            pmRA=(self.rng.normal(0.0, 0.05, n), "arcsec/yr"), pmDE=(self.rng.normal(0.0, 0.05, n), "arcsec/yr"),
            e_pmRA=(np.full(n, 0.05), "arcsec/yr"), e_pmDE=(np.full(n, 0.05), "arcsec/yr"),
            W1mproPM=(w1, "mag"), e_W1mproPM=(0.015 + 0.2 * 10.0 ** (0.4 * (w1 - 15.4)), "mag"),
            W2mproPM=(w2, "mag"), e_W2mproPM=(0.015 + 0.2 * 10.0 ** (0.4 * (w2 - 15.2)), "mag"),
        )  # fmt: skip

    def erass(self) -> Any:
        east, north = self.scatter(810, 2900.0, 60.0)
        east, north = np.append(east, 14.2), np.append(north, 18.1)
        ra, dec = self.place(east, north)
        n = len(ra)
        flux = 6.0e-14 * self.rng.pareto(1.5, n) + 6.0e-14
        flux[-1] = 9.1e-14
        sigma = self.rng.uniform(6.2, 7.8, n)
        sigma[-1] = 7.0
        return table(
            "erass1-main", "J/A+A/682/A34/erass1-m", "RA_ICRS", "DE_ICRS",
            IAUName=(np.array([f"1eRASS J1738{i:03d}.0-3348{i % 60:02d}" for i in range(n)]), None),
            RA_ICRS=(ra, "deg"), DE_ICRS=(dec, "deg"), posErr=(sigma, "arcsec"),
            MLFlux1=(flux, "mW/m2"), EXT=(np.zeros(n), "arcsec"),
        )  # fmt: skip

    def radio(
        self, name: str, remote: str, n: int, faint_mjy: float, sigma_mjy: float, hole_arcsec: float, **facts: Any
    ) -> Any:
        """One radio source list: fluxes fall as S^-1.2 above the survey's threshold."""
        east, north = self.scatter(n, 2900.0, hole_arcsec)
        ra, dec = self.place(east, north)
        flux = faint_mjy * (1.0 + self.rng.pareto(1.2, n))
        sigma = np.hypot(sigma_mjy * self.rng.uniform(0.9, 1.2, n), 0.02 * flux)
        return ra, dec, flux, sigma

    def nvss(self) -> Any:
        ra, dec, flux, sigma = self.radio("nvss", "VIII/65/nvss", 96, 2.6, 0.5, 150.0)
        n = len(ra)
        from astropy.coordinates import Angle

        return table(
            "nvss", "VIII/65/nvss", "_ra", "_dec",
            NVSS=(np.array([f"1738{i:02d}-33{(13 * i) % 60:02d}{i % 60:02d}" for i in range(n)]), None),
            RAJ2000=(Angle(ra, "deg").to_string(unit="hourangle", sep=" ", precision=2, pad=True), '"h:m:s"'),
            DEJ2000=(Angle(dec, "deg").to_string(unit="deg", sep=" ", precision=1, pad=True, alwayssign=True), '"d:m:s"'),
            e_RAJ2000=(self.rng.uniform(0.03, 0.4, n), "s"), e_DEJ2000=(self.rng.uniform(0.5, 6.0, n), "arcsec"),
            **{"S1.4": (flux, "mJy"), "e_S1.4": (sigma, "mJy")},
            _ra=(ra, "deg"), _dec=(dec, "deg"),
        )  # fmt: skip

    def racs(self) -> Any:
        ra, dec, flux, sigma = self.radio("racs-low", "J/other/PASA/38.58/galreg", 150, 2.4, 0.45, 90.0)
        n = len(ra)
        return table(
            "racs-low", "J/other/PASA/38.58/galreg", "RAJ2000", "DEJ2000",
            SID=(np.array([f"RACS_1735-31A_{i}" for i in range(n)]), None),
            RAJ2000=(ra, "deg"), DEJ2000=(dec, "deg"),
            e_RAJ2000=(self.rng.uniform(0.1, 1.5, n), "arcsec"), e_DEJ2000=(self.rng.uniform(0.1, 1.5, n), "arcsec"),
            Ftot=(flux, "mJy"), e_Ftot=(sigma, "mJy"), Fpk=(0.93 * flux, "mJy/beam"), e_Fpk=(sigma, "mJy/beam"),
        )  # fmt: skip

    def vlass(self) -> Any:
        ra, dec, flux, sigma = self.radio("vlass-ql1", "comp", 92, 0.85, 0.17, 40.0)
        n = len(ra)
        twice = np.zeros(n, dtype=np.int16)
        twice[5:9] = 2
        return table(
            "vlass-ql1", "J/ApJS/255/30/comp", "RAJ2000", "DEJ2000",
            CompName=(np.array([f"VLASS1QLCIR J1738{i:02d}.00-3348{i % 60:02d}.0" for i in range(n)]), None),
            RAJ2000=(ra, "deg"), DEJ2000=(dec, "deg"),
            e_RAJ2000=(self.rng.uniform(2.0e-5, 1.0e-4, n), "deg"), e_DEJ2000=(self.rng.uniform(2.0e-5, 1.0e-4, n), "deg"),
            Ftot=(flux, "mJy"), e_Ftot=(sigma, "mJy"), Fpeak=(0.95 * flux, "mJy/beam"), e_Fpeak=(sigma, "mJy/beam"),
            DupFlag=(twice, None), QualFlag=(np.zeros(n, dtype=np.int16), None),
        )  # fmt: skip

    def pulsars(self) -> Any:
        # the nearest is a degree away; names are invented
        ra, dec = self.place(np.array([2700.0, -5600.0, 900.0]), np.array([2340.0, 1500.0, -6400.0]))
        from astropy.coordinates import Angle

        return table(
            "atnf-psr", "B/psr/psr", "_ra", "_dec",
            PSRJ=(np.array(["J1741-3309", "J1730-3323", "J1739-3535"]), None),
            RAJ2000=(Angle(ra, "deg").to_string(unit="hourangle", sep=" ", precision=2, pad=True), '"h:m:s"'),
            DEJ2000=(Angle(dec, "deg").to_string(unit="deg", sep=" ", precision=1, pad=True, alwayssign=True), '"d:m:s"'),
            P0=(np.array([0.4873, 1.2021, 0.0919]), "s"), P1=(np.array([2.1e-15, 6.0e-15, 4.4e-16]), "s/s"),
            DM=(np.array([212.0, 96.4, 340.0]), "pc/cm3"), S1400=(np.array([1.3, 0.4, np.nan]), "mJy"),
            _ra=(ra, "deg"), _dec=(dec, "deg"),
        )  # fmt: skip

    def empty_ps1(self) -> Any:
        """PS1 stops at Dec -30: the table exists and holds nothing here."""
        none = np.empty(0)
        bands = {f"{band}mag": (none, "mag") for band in "grizy"} | {f"e_{band}mag": (none, "mag") for band in "grizy"}
        return table(
            "ps1-dr1", "II/349/ps1", "RAJ2000", "DEJ2000",
            objID=(np.empty(0, dtype=np.int64), None), RAJ2000=(none, "deg"), DEJ2000=(none, "deg"),
            e_RAJ2000=(none, "arcsec"), e_DEJ2000=(none, "arcsec"), Epoch=(none, "d"), **bands,
        )  # fmt: skip

    def tables(self) -> list[Any]:
        """Every table of the invented sky: those with a story, then those made from their catalog files."""
        stars = self.stars()
        told = [
            self.gaia(stars), self.empty_ps1(), self.twomass(stars), self.catwise(stars), self.erass(),
            self.nvss(), self.racs(), self.vlass(), self.pulsars(),
        ]  # fmt: skip
        generic = Generic(self.rng, self.place, stars, table)
        names = {made.meta["catalog"] for made in told}
        registry = load_catalogs()
        others = [made for name, catalog in registry.items() if name not in names for made in generic.tables(catalog)]
        # further tables of the told ones, of other parts of the sky
        served = {made.meta["remote_table"] for made in told}
        others += [
            generic.table(registry[name], i, elsewhere=True)
            for name in sorted(names)
            for i, one in enumerate(registry[name].tables)
            if one.remote_table and one.remote_table not in served
        ]
        at_control = [self.at_control(registry[made.meta["catalog"]], made) for made in told]
        # two catalogs may share one log
        return list({made.meta["catalog"]: made for made in [*at_control, *others]}.values())

    def at_control(self, catalog: Catalog, made: Any) -> Any:
        """The table with a few more rows where a check looks for them; what they say does not matter."""
        if catalog.rows_at_least is not None:
            made.meta["filler_rows"] = catalog.rows_at_least
        if catalog.control is None:
            return made
        from astropy.table import Table, vstack

        control = catalog.control
        few = Table(made[:0], copy=True)
        for i in range(4):
            offset = control.radius_arcsec * ARCSEC * 0.3 * (i - 1.5) / 2.0
            row = {name: made[name][0] if len(made) else PLAUSIBLE.get(name[:3], 18.0) for name in made.colnames}
            row[made.meta["ra"]], row[made.meta["dec"]] = control.ra_deg + offset, control.dec_deg + offset
            few.add_row(row)
        grown = vstack([made, few], metadata_conflicts="silent")
        for name in made.colnames:
            grown[name].meta.update(made[name].meta)
            grown[name].info.format = made[name].info.format
        return grown


DIGITS = {"deg": "%.7f", "mas": "%.4f", "mas/yr": "%.3f", "mag": "%.4f", "arcsec": "%.3f", "mJy": "%.3f",
          "mJy/beam": "%.3f", "arcsec/yr": "%.4f", "s": "%.3f", "mW/m2": "%.4e", "d": "%.3f", "Jy": "%.5g",
          "Jy/beam": "%.5g", "erg s-1 cm-2": "%.4e"}  # fmt: skip


def table(catalog_id: str, remote_table: str, ra: str, dec: str, /, **columns: Any) -> Any:
    """An astropy table with what the embedded archive needs to serve it."""
    from astropy.table import Table

    made = Table(meta={
        "catalog": catalog_id, "remote_table": remote_table, "host": VIZIER,
        "cone_path": f"/viz-bin/conesearch/{remote_table}", "ra": ra, "dec": dec,
        "description": "Invented rows for the demo: none of this is real.",
    })  # fmt: skip
    for name, (values, unit, *ucd) in columns.items():
        made[name] = np.asarray(values)
        if unit is not None:
            made[name].meta["unit"] = unit
        if ucd and ucd[0]:
            made[name].meta["ucd"] = ucd[0]
        if unit in DIGITS and made[name].dtype.kind == "f":
            made[name].info.format = DIGITS[unit]
    return made


def write(folder: Path) -> None:
    """Write every table as ECSV; the served unit stands in the column's meta, as archives spell it."""
    folder.mkdir(parents=True, exist_ok=True)
    for made in Sky().tables():
        for name in made.colnames:
            if made[name].info.format:
                made[name][:] = [float(made[name].info.format % value) for value in made[name]]  # short files
        made.write(folder / f"{made.meta['catalog']}.ecsv", format="ascii.ecsv", overwrite=True)


if __name__ == "__main__":
    write(Path(sys.argv[1]))
