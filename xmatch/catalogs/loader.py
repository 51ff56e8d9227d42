"""Read and check catalog files. A fault names file, key, value and what is allowed."""

from __future__ import annotations

import hashlib
import tomllib
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from xmatch.catalogs.checked import Checked
from xmatch.catalogs.model import (
    LOG_TABLE,
    BandColumns,
    Catalog,
    Control,
    DropRule,
    EpochFacts,
    EpochScale,
    ErrorColumns,
    ErrorMeaning,
    LimitFlag,
    MotionColumns,
    PointingLog,
    Table,
)
from xmatch.constants import C_CM_S, KEV_HZ
from xmatch.errors import FactError
from xmatch.limits.coverage import Region
from xmatch.records import Band, MagnitudeSystem, Quantity, Waveband

PROTOCOLS = ("cone", "vizier", "tap", "simbad", "file")
NEED_TABLE = ("vizier", "tap", "simbad")
"""Protocols whose address alone does not say which table."""
GEOMETRIES = ("circle", "box")
"""How a TAP service is asked: by ADQL geometry, or by plain comparisons and a cut of our own."""
MODES = ("sync", "async")
POSITIONS = ("decimal", "sexagesimal")
NEEDS_CHECK = "needs check"
"""State of a file whose columns nobody has confirmed: it is asked only after a successful check."""
ROWS_MOC = "/viz-bin/moc/"
"""Where VizieR serves maps of the rows of its tables."""
FORMATS = ("csv", "fits", "votable", "ecsv")
REFRESH = ("frozen", "yearly", "monthly", "rolling")
COVERAGE_KINDS = ("all sky", "declination", "galactic box", "footprint", "pointed", "unstated", "compilation")

UNITS_OF_QUANTITY = {
    Quantity.MAGNITUDE: ("mag",),
    Quantity.FLUX_DENSITY: ("Jy", "mJy", "uJy", "Jy/beam", "mJy/beam"),
    Quantity.BAND_FLUX: ("erg s-1 cm-2",),
}
_TO_HZ = {
    # frequency and energy scale up with nu, wavelength down: handled by the kind
    "frequency": {"Hz": 1.0, "MHz": 1.0e6, "GHz": 1.0e9},
    "energy": {"eV": KEV_HZ / 1.0e3, "keV": KEV_HZ, "MeV": KEV_HZ * 1.0e3, "GeV": KEV_HZ * 1.0e6},
}
_WAVELENGTH_CM = {"angstrom": 1.0e-8, "nm": 1.0e-7, "um": 1.0e-4, "cm": 1.0}
SHIPPED = Path(__file__).parent / "files"


def load_catalogs(extra_folders: Sequence[str | Path] = ()) -> dict[str, Catalog]:
    """Read every catalog file that ships with blankfield and in the user's folders.

    Parameters
    ----------
    extra_folders : sequence of path
        Folders with the user's own ``*.toml`` catalog files.

    Returns
    -------
    dict of str to Catalog
        By id, in order of falling energy of the waveband, then by id.

    Raises
    ------
    FactError
        When a file breaks the rules, or two files claim one id.
    """
    found: dict[str, Catalog] = {}
    for folder in (SHIPPED, *map(Path, extra_folders)):
        if not folder.is_dir():
            raise FactError(f"no catalog folder at {folder}; give a folder that holds catalog files (*.toml)")
        for path in sorted(folder.glob("*.toml")):
            catalog = read_catalog(path)
            if catalog.id in found:
                raise FactError(
                    f"{path}: id = {catalog.id!r} is taken by {found[catalog.id].path}; every catalog needs its own id"
                )
            found[catalog.id] = catalog
    order = list(Waveband)
    return dict(sorted(found.items(), key=lambda item: (order.index(item[1].waveband), item[0])))


def read_catalog(path: str | Path) -> Catalog:
    """Read and check one catalog file.

    Raises
    ------
    FactError
        Naming the file, the key, the value seen and what is allowed.
    """
    path = Path(path)
    raw = path.read_bytes()
    try:
        content = tomllib.loads(raw.decode("utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as fault:
        # tomllib refuses duplicate keys by itself
        raise FactError(f"{path}: not readable as TOML ({fault}); mend that line") from None
    return _Reader(path, content, hashlib.sha256(raw).hexdigest()).catalog()


class _Reader(Checked):
    """The sections of a catalog file."""

    # --- sections ----------------------------------------------------------------------------
    def catalog(self) -> Catalog:
        top = self.section(
            "",
            self.content,
            (
                "id", "title", "waveband", "release", "refresh", "cite", "acknowledgement", "source", "notes",
                "tables", "columns", "epoch", "bands", "drop", "coverage", "neighbourhood", "instrument", "state",
                "mirror", "control", "exposures",
            ),
        )  # fmt: skip
        catalog_id = self.text("", top, "id")
        if catalog_id != self.path.stem:
            raise self.fault("id", catalog_id, f"the id must be the file's name, {self.path.stem!r}")
        waveband = self.word("", top, "waveband", Waveband)
        self.need_source("", top)
        cite = top.get("cite")
        if not isinstance(cite, list) or not cite or not all(isinstance(item, str) for item in cite):
            raise self.fault("cite", cite, "a list of bibcodes or DOIs is needed")
        notes = top.get("notes", [])
        if not isinstance(notes, list) or not all(isinstance(item, str) for item in notes):
            raise self.fault("notes", notes, "a list of sentences is needed")
        columns = self.section(
            "columns",
            top.get("columns"),
            ("key", "ra", "dec", "source", "error", "motion", "units", "positions", "keep"),
        )
        self.need_source("columns", columns)
        if columns.get("positions", "decimal") not in POSITIONS:
            raise self.fault("columns.positions", columns["positions"], f"one of {', '.join(POSITIONS)} is needed")
        mirror = self.section("mirror", top.get("mirror", {}), ("rows_at_least", "source"))
        if "mirror" in top:
            self.need_source("mirror", mirror)
        if "state" in top and top["state"] != NEEDS_CHECK:
            raise self.fault("state", top["state"], f"the only state is {NEEDS_CHECK!r}; leave it out otherwise")
        neighbourhood = self.section(
            "neighbourhood", top.get("neighbourhood"), ("radius_arcsec", "row_limit", "source")
        )
        instrument = self.section(
            "instrument", top.get("instrument", {}), ("resolution_arcsec", "integration_s", "source")
        )
        resolution = self.number("instrument", instrument, "resolution_arcsec", low=0.0, default=0.0)
        if instrument:
            self.need_source("instrument", instrument)
        bands = tuple(self.band(catalog_id, waveband, i, item) for i, item in enumerate(self.list_of("bands")))
        names = [columns_.band.name for columns_ in bands]
        if len(set(names)) != len(names):
            raise self.fault("bands", names, "every band needs its own name")
        tables = tuple(self.table(i, item) for i, item in enumerate(self.list_of("tables")))
        if not tables:
            raise self.fault("tables", [], "at least one [[tables]] is needed")
        return Catalog(
            id=catalog_id,
            title=self.text("", top, "title"),
            waveband=waveband,
            release=self.text("", top, "release"),
            refresh=self.choice("", top, "refresh", REFRESH),
            cite=tuple(cite),
            acknowledgement=self.text("", top, "acknowledgement"),
            tables=tables,
            key=self.maybe_text("columns", columns, "key"),
            ra=self.text("columns", columns, "ra"),
            dec=self.text("columns", columns, "dec"),
            error=self.error(columns.get("error")),
            motion=self.motion(columns["motion"]) if "motion" in columns else None,
            epoch=self.epoch(top.get("epoch")),
            bands=bands,
            drop=tuple(self.drop(i, item) for i, item in enumerate(self.list_of("drop"))),
            coverage=self.region("coverage", top.get("coverage")),
            log=self.log(top.get("coverage")),
            state=str(top.get("state", "")),
            rows_at_least=int(self.number("mirror", mirror, "rows_at_least", low=1)) if "mirror" in top else None,
            sexagesimal=columns.get("positions") == "sexagesimal",
            units=self.words("columns", columns, "units"),
            keep=self.texts("columns", columns, "keep"),
            control=self.control(top["control"]) if "control" in top else None,
            neighbourhood_arcsec=self.number(
                "neighbourhood", neighbourhood, "radius_arcsec", low=1.0, high=5.0 * 3600.0
            ),
            row_limit=int(self.number("neighbourhood", neighbourhood, "row_limit", low=10, high=100_000)),
            resolution_arcsec=resolution,
            resolution_source=str(instrument.get("source", "")),
            integration_s=self.maybe_number("instrument", instrument, "integration_s", low=0.0),
            notes=tuple(notes),
            sources=tuple(self.sources),
            fingerprint=self.fingerprint,
            path=str(self.path),
        )

    def list_of(self, key: str) -> list[object]:
        value = self.content.get(key, [])
        if not isinstance(value, list):
            raise self.fault(key, value, f"write it as [[{key}]]")
        return value

    def table(self, number: int, content: object) -> Table:
        where = f"tables[{number}]"
        table = self.section(
            where, content, ("name", "protocol", "address", "table", "geometry", "mode", "format", "holds", "source")
        )
        address = self.text(where, table, "address")
        if not address.startswith(("https://", "http://")):
            raise self.fault(f"{where}.address", address, "an address that starts with https:// is needed")
        protocol = self.choice(where, table, "protocol", PROTOCOLS)
        return Table(
            name=self.text(where, table, "name"),
            protocol=protocol,
            address=address,
            remote_table=self.text(where, table, "table") if protocol in NEED_TABLE else str(table.get("table", "")),
            geometry=self.choice(where, {"geometry": "circle", **table}, "geometry", GEOMETRIES),
            mode=self.choice(where, {"mode": "sync", **table}, "mode", MODES),
            format=self.choice(where, {"format": "votable", **table}, "format", FORMATS),
            holds=self.region(f"{where}.holds", table["holds"]) if "holds" in table else None,
            source=self.need_source(where, table),
        )

    def region(self, where: str, content: object) -> Region:
        region = self.section(
            where, content, ("kind", "dec_deg", "l_deg", "b_deg", "outside", "moc", "log", "also", "source")
        )
        outside = region.get("outside", False)
        if not isinstance(outside, bool):
            raise self.fault(f"{where}.outside", outside, "true or false is needed")
        return Region(
            kind=self.choice(where, region, "kind", COVERAGE_KINDS),
            dec_deg=self.pair(where, region, "dec_deg", -90.0, 90.0),
            l_deg=self.pair(where, region, "l_deg", 0.0, 360.0),
            b_deg=self.pair(where, region, "b_deg", -90.0, 90.0),
            outside=outside,
            source=self.need_source(where, region),
            moc=self.moc(where, region),
            also=tuple(self.region(f"{where}.also[{i}]", part) for i, part in enumerate(region.get("also", []))),
        )

    def moc(self, where: str, region: dict[str, Any]) -> str:
        """Address of the published footprint."""
        if (region.get("kind") == "footprint") != ("moc" in region):
            raise self.fault(
                f"{where}.moc", region.get("moc"), "a footprint needs the address of its MOC; others have none"
            )
        if "moc" not in region:
            return ""
        address = self.text(where, region, "moc")
        if ROWS_MOC in address:
            raise self.fault(
                f"{where}.moc",
                address,
                "a MOC made of a table's rows says where objects are, not where the telescope looked: give an image footprint",
            )
        return address

    def log(self, content: object) -> PointingLog | None:
        where = "coverage.log"
        coverage = content if isinstance(content, dict) else {}
        if (coverage.get("kind") == "pointed") != ("log" in coverage):
            raise self.fault(where, coverage.get("log"), "pointed coverage needs its observation log; others have none")
        if "log" not in coverage:
            return None
        log = self.section(
            where, coverage["log"],
            ("protocol", "address", "table", "geometry", "mode", "key", "ra", "dec", "exposure", "start", "instrument",
             "field_radius_arcmin", "reference_s", "vignetting_at_edge", "units", "source"),
        )  # fmt: skip
        table: dict[str, Any] = {
            key: log[key] for key in ("protocol", "address", "table", "geometry", "mode", "source") if key in log
        }
        return PointingLog(
            table=self.table(0, {"name": LOG_TABLE} | table),
            key=self.text(where, log, "key"),
            ra=self.text(where, log, "ra"),
            dec=self.text(where, log, "dec"),
            exposure=self.text(where, log, "exposure"),
            start=self.maybe_text(where, log, "start"),
            instrument=self.maybe_text(where, log, "instrument"),
            field_radius_arcmin=self.number(where, log, "field_radius_arcmin", low=0.1, high=300.0),
            reference_s=self.number(where, log, "reference_s", low=1.0),
            vignetting_at_edge=self.number(where, log, "vignetting_at_edge", low=0.01, high=1.0),
            units=self.words(where, log, "units"),
            source=self.need_source(where, log),
        )

    def control(self, content: object) -> Control:
        where = "control"
        control = self.section(where, content, ("ra_deg", "dec_deg", "radius_arcsec", "source"))
        return Control(
            ra_deg=self.number(where, control, "ra_deg", low=0.0, high=360.0),
            dec_deg=self.number(where, control, "dec_deg", low=-90.0, high=90.0),
            radius_arcsec=self.number(where, control, "radius_arcsec", low=1.0, high=5.0 * 3600.0),
            source=self.need_source(where, control),
        )

    def error(self, content: object) -> ErrorColumns:
        where = "columns.error"
        error = self.section(
            where,
            content,
            ("meaning", "ra", "dec", "major", "minor", "angle", "radius", "radial", "correlation", "level",
             "floor_arcsec", "source"),
        )  # fmt: skip
        meaning = self.word(where, error, "meaning", ErrorMeaning)
        needed = {
            ErrorMeaning.PER_AXIS: ("ra", "dec"),
            ErrorMeaning.ELLIPSE: ("major", "minor", "angle"),
            ErrorMeaning.RADIUS: ("radius",),
            ErrorMeaning.RADIAL: ("radial",),
            ErrorMeaning.NONE: (),
        }[meaning]
        level = self.maybe_number(where, error, "level", 0.0, 1.0)
        if meaning is ErrorMeaning.RADIUS and level is None:
            raise self.fault(f"{where}.level", level, "a radius needs the fraction it holds (0 to 1)")
        if meaning not in (ErrorMeaning.RADIUS, ErrorMeaning.ELLIPSE) and level is not None:
            raise self.fault(f"{where}.level", level, "only a radius or an ellipse has a fraction that it holds")
        floor = self.number(where, error, "floor_arcsec", low=0.0, default=0.0)
        if meaning is ErrorMeaning.NONE and floor == 0.0:
            raise self.fault(
                f"{where}.floor_arcsec", floor, "without error columns a floor above 0 must stand for them"
            )
        return ErrorColumns(
            meaning=meaning,
            columns=tuple(self.text(where, error, key) for key in needed),
            correlation=self.maybe_text(where, error, "correlation"),
            level=level,
            floor_arcsec=floor,
            source=self.need_source(where, error),
        )

    def motion(self, content: object) -> MotionColumns:
        where = "columns.motion"
        motion = self.section(where, content, ("ra", "dec", "ra_error", "dec_error", "cosdec", "source"))
        cosdec = motion.get("cosdec")
        if not isinstance(cosdec, bool):
            raise self.fault(
                f"{where}.cosdec", cosdec, "say true when the RA motion holds the factor cos(dec), or false"
            )
        return MotionColumns(
            ra=self.text(where, motion, "ra"),
            dec=self.text(where, motion, "dec"),
            ra_error=self.maybe_text(where, motion, "ra_error"),
            dec_error=self.maybe_text(where, motion, "dec_error"),
            cosdec=cosdec,
            source=self.need_source(where, motion),
        )

    def epoch(self, content: object) -> EpochFacts:
        epoch = self.section("epoch", content, ("value_yr", "column", "scale", "source"))
        column = self.maybe_text("epoch", epoch, "column")
        return EpochFacts(
            value_yr=self.number("epoch", epoch, "value_yr", low=1850.0, high=2100.0),
            column=column,
            scale=self.word("epoch", epoch, "scale", EpochScale) if column else EpochScale.YEAR,
            source=self.need_source("epoch", epoch),
        )

    def drop(self, number: int, content: object) -> DropRule:
        where = f"drop[{number}]"
        rule = self.section(where, content, ("column", "at_least", "why", "source"))
        return DropRule(
            column=self.text(where, rule, "column"),
            at_least=self.number(where, rule, "at_least"),
            why=self.text(where, rule, "why"),
            source=self.need_source(where, rule),
        )

    def band(self, catalog_id: str, waveband: Waveband, number: int, content: object) -> BandColumns:
        where = f"bands[{number}]"
        band = self.section(
            where,
            content,
            ("name", "kind", "low", "high", "pivot", "unit_of_edges", "quantity", "unit", "value", "error", "system",
             "zero_point_jy", "zero_point_source", "assumed_index", "assumed_column_cm2", "limit_flag", "plausible",
             "flux_scale_error", "depth", "source"),
        )  # fmt: skip
        source = self.need_source(where, band)
        quantity = self.word(where, band, "quantity", Quantity)
        unit = self.choice(where, band, "unit", UNITS_OF_QUANTITY[quantity])
        system, zero_point = None, None
        if quantity is Quantity.MAGNITUDE:
            system = self.word(where, band, "system", MagnitudeSystem)
            zero_point = self.number(where, band, "zero_point_jy", low=1.0e-3, high=1.0e6)
            self.source(f"{where}.zero_point", self.text(where, band, "zero_point_source"))
        low_hz, high_hz, nu_hz = self.edges(where, band)
        depth = self.section(
            f"{where}.depth", band.get("depth", {}), ("value", "n_sigma", "completeness", "holds", "source")
        )
        if depth:
            self.need_source(f"{where}.depth", depth)
            if ("n_sigma" in depth) == ("completeness" in depth):
                raise self.fault(f"{where}.depth", depth, "say either n_sigma or completeness, not both")
        holds = f" ({depth['holds']})" if "holds" in depth else ""
        return BandColumns(
            band=Band(
                catalog_id=catalog_id,
                name=self.text(where, band, "name"),
                waveband=waveband,
                quantity=quantity,
                unit=unit,
                nu_low_hz=low_hz,
                nu_high_hz=high_hz,
                nu_hz=nu_hz,
                system=system,
                zero_point_jy=zero_point,
                assumed_index=self.maybe_number(where, band, "assumed_index"),
                assumed_column_cm2=self.maybe_number(where, band, "assumed_column_cm2", low=0.0),
                depth=self.maybe_number(f"{where}.depth", depth, "value"),
                depth_n_sigma=self.maybe_number(f"{where}.depth", depth, "n_sigma", low=0.1),
                depth_completeness=self.maybe_number(f"{where}.depth", depth, "completeness", 0.0, 1.0),
                depth_source=f"{depth['source']}{holds}" if depth else "",
                flux_scale_error=self.number(where, band, "flux_scale_error", low=0.0, high=1.0, default=0.0),
                source=source,
                exposures=str(self.content.get("exposures", "")),
            ),
            value=self.maybe_text(where, band, "value"),
            error=self.maybe_text(where, band, "error"),
            limit_flag=self.limit_flag(f"{where}.limit_flag", band["limit_flag"]) if "limit_flag" in band else None,
            **dict(zip(("low", "high"), self.plausible(where, band), strict=True)),
        )

    def plausible(self, where: str, band: dict[str, Any]) -> tuple[float | None, float | None]:
        pair = self.pair(where, band, "plausible", -1.0e30, 1.0e30)
        return (None, None) if pair is None else pair

    def limit_flag(self, where: str, content: object) -> LimitFlag:
        flag = self.section(where, content, ("column", "place", "letters", "source"))
        return LimitFlag(
            column=self.text(where, flag, "column"),
            place=int(self.number(where, flag, "place", low=0, high=63, default=0)),
            letters=self.text(where, flag, "letters"),
            source=self.need_source(where, flag),
        )

    def edges(self, where: str, band: dict[str, Any]) -> tuple[float, float, float]:
        """Return (low, high, quoted) frequency in Hz from edges stated in the band's own kind."""
        kind = self.choice(where, band, "kind", ("frequency", "wavelength", "energy"))
        scale = _WAVELENGTH_CM if kind == "wavelength" else _TO_HZ[kind]
        unit = self.choice(where, band, "unit_of_edges", tuple(scale))
        low = self.number(where, band, "low", low=0.0)
        high = self.number(where, band, "high", low=0.0)
        if not 0.0 < low < high:
            raise self.fault(f"{where}.low", low, f"0 < low < high is needed; high is {high:g}")
        pivot = self.number(where, band, "pivot", low=low, high=high, default=(low * high) ** 0.5)
        if kind == "wavelength":
            to_hz = [C_CM_S / (value * scale[unit]) for value in (high, low, pivot)]
        else:
            to_hz = [value * scale[unit] for value in (low, high, pivot)]
        return to_hz[0], to_hz[1], to_hz[2]
