"""The registry in words: one line per catalog, or one catalog in full."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from xmatch.catalogs.model import Catalog
from xmatch.constants import C_CM_S, KEV_HZ
from xmatch.limits.coverage import Region
from xmatch.records import Band


def list_lines(catalogs: Sequence[Catalog]) -> Iterable[str]:
    """One line per catalog, grouped by waveband, with depth, coverage and what is unverified."""
    waveband = None
    width = max((len(catalog.id) for catalog in catalogs), default=0)
    for catalog in catalogs:
        if catalog.waveband is not waveband:
            if waveband is not None:
                yield ""
            waveband = catalog.waveband
            yield str(waveband)
        depths = ", ".join(_depth(band) for band in catalog.band_list if band.depth is not None) or "no depth"
        n = len(catalog.unverified)
        state = "; waits for a check" if catalog.needs_check else ""
        note = f"{state}; {n} fact{'' if n == 1 else 's'} unverified" if catalog.unverified else state
        yield f"  {catalog.id:<{width}}  {catalog.release}; {depths}; {coverage_text(catalog)}{note}"


def show_lines(catalog: Catalog) -> Iterable[str]:
    """One catalog in full, each fact with its source."""
    yield f"{catalog.id}: {catalog.title}"
    yield f"  waveband        {catalog.waveband}"
    yield f"  release         {catalog.release} (asked again: {catalog.refresh})"
    yield f"  cite            {', '.join(catalog.cite)}"
    yield f"  acknowledge     {catalog.acknowledgement}"
    yield f"  coverage        {coverage_text(catalog)} [{catalog.coverage.source}]"
    yield f"  neighbourhood   {catalog.neighbourhood_arcsec:g} arcsec, at most {catalog.row_limit} rows"
    if catalog.resolution_arcsec:
        yield f"  resolution      {catalog.resolution_arcsec:g} arcsec [{catalog.resolution_source}]"
    if catalog.integration_s is not None:
        yield f"  integration     {catalog.integration_s:g} s [{catalog.resolution_source}]"
    error = catalog.error
    meaning = str(error.meaning) if error.level is None else f"{error.meaning} that holds {error.level:.0%}"
    listed = f" in {', '.join(error.columns)}" if error.columns else ""
    yield f"  position error  {meaning}{listed}, floor {error.floor_arcsec:g} arcsec [{error.source}]"
    if catalog.motion is not None:
        yield f"  proper motion   {catalog.motion.ra}, {catalog.motion.dec} [{catalog.motion.source}]"
    yield f"  epoch           {catalog.epoch.value_yr:g} {catalog.epoch.column or ''} [{catalog.epoch.source}]"
    for table in catalog.tables:
        yield f"  table           {table.name}: {table.protocol} {table.address} {table.remote_table} [{table.source}]"
    for columns in catalog.bands:
        band = columns.band
        yield f"  band            {band.name}: {edges_text(band)}; {band.quantity} in {columns.value or 'no known column'} [{band.source}]"
        if band.system is not None:
            yield f"                  {band.system} magnitudes, {band.zero_point_jy:g} Jy at zero"
        if band.depth is not None:
            yield f"                  depth {_depth(band)} [{band.depth_source}]"
    for rule in catalog.drop:
        yield f"  left out        {rule.column} >= {rule.at_least:g}: {rule.why} [{rule.source}]"
    if catalog.log is not None:
        log = catalog.log
        yield f"  observations    {log.table.address} {log.table.remote_table}: {log.exposure} in a field of {log.field_radius_arcmin:g} arcmin [{log.source}]"
    if catalog.rows_at_least is not None:
        yield f"  kept whole      a list of at least {catalog.rows_at_least} rows"
    if catalog.control is not None:
        control = catalog.control
        yield f"  control         {control.radius_arcsec:g} arcsec around {control.ra_deg:g} {control.dec_deg:+g} deg [{control.source}]"
    if catalog.needs_check:
        yield "  state           waits for a check: blankfield catalogs check"
    for note in catalog.notes:
        yield f"  note            {note}"
    for source in catalog.unverified:
        yield f"  unverified      {source}"


def catalog_dict(catalog: Catalog) -> dict[str, object]:
    """One catalog as plain values."""
    return {
        "id": catalog.id,
        "title": catalog.title,
        "waveband": str(catalog.waveband),
        "release": catalog.release,
        "refresh": catalog.refresh,
        "cite": list(catalog.cite),
        "acknowledgement": catalog.acknowledgement,
        "coverage": coverage_text(catalog),
        "tables": [
            {"name": t.name, "protocol": t.protocol, "address": t.address, "remote_table": t.remote_table}
            for t in catalog.tables
        ],
        "bands": [
            {
                "name": band.name,
                "quantity": str(band.quantity),
                "unit": band.unit,
                "system": None if band.system is None else str(band.system),
                "zero_point_jy": band.zero_point_jy,
                "nu_low_hz": band.nu_low_hz,
                "nu_high_hz": band.nu_high_hz,
                "nu_hz": band.nu_hz,
                "depth": band.depth,
                "depth_n_sigma": band.depth_n_sigma,
                "depth_completeness": band.depth_completeness,
                "depth_source": band.depth_source,
            }
            for band in catalog.band_list
        ],
        "needs_check": catalog.needs_check,
        "unverified": list(catalog.unverified),
        "fingerprint": catalog.fingerprint,
    }


def coverage_text(catalog: Catalog) -> str:
    """The coverage in words."""
    region = catalog.coverage
    if region.also:
        own, *others = [_region_text(part) for part in (region, *region.also)]
        return f"{own}; or {'; or '.join(others)}"
    return _region_text(region)


def _region_text(region: Region) -> str:
    parts = [region.kind]
    if region.dec_deg is not None:
        parts.append(f"Dec {region.dec_deg[0]:+g} to {region.dec_deg[1]:+g}")
    if region.l_deg is not None:
        parts.append(f"l {region.l_deg[0]:g} to {region.l_deg[1]:g}")
    if region.b_deg is not None and region.b_deg != (-90.0, 90.0):
        parts.append(f"{'outside ' if region.outside else ''}b {region.b_deg[0]:+g} to {region.b_deg[1]:+g}")
    return " ".join(parts)


def edges_text(band: Band) -> str:
    """Edges of a band in the unit a person of that waveband uses."""
    low, high = band.nu_low_hz, band.nu_high_hz
    if band.is_xray:
        return f"{low / KEV_HZ:.3g}-{high / KEV_HZ:.3g} keV"
    if high < 1.0e12:  # radio: below a terahertz
        return f"{low / 1.0e9:.4g}-{high / 1.0e9:.4g} GHz"
    return f"{C_CM_S / high * 1.0e4:.3g}-{C_CM_S / low * 1.0e4:.3g} um"


def _depth(band: Band) -> str:
    meaning = (
        f"{band.depth_n_sigma:g} sigma"
        if band.depth_n_sigma is not None
        else f"{band.depth_completeness or 0.0:.0%} complete"
    )
    return f"{band.name} {band.depth:g} {band.unit} ({meaning})"
