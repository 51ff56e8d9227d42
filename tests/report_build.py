"""Looks made by hand, so that the report is tested without the rooms below it."""

from __future__ import annotations

from typing import Any

from xmatch.assumptions import Assumptions
from xmatch.catalogs import load_catalogs
from xmatch.flux.physical import physical_limit, resolve
from xmatch.limits.depth import limit_for_band
from xmatch.records import (
    Candidate,
    Distance,
    Finding,
    Look,
    Measured,
    Outcome,
    Position,
    ReplyStatus,
    Search,
    Spin,
    Standing,
    StandingWord,
    Target,
)
from xmatch.spin.figures import figures

REGISTRY = load_catalogs()
HOSTILE = "evil\x1b[31m[red]name[/red]\x07\n\r\u202eabc"


def search(catalog_id: str, status: ReplyStatus = ReplyStatus.WHOLE, from_store: bool = False) -> Search:
    return Search(
        search_id=1, catalog_id=catalog_id, release="r", table="main", asked_at="2026-12-01T00:00:00Z", status=status,
        detail="seen", request="GET x", ra_deg=1.0, dec_deg=2.0, radius_arcsec=120.0, n_rows=10, from_store=from_store,
    )  # fmt: skip


def finding(catalog_id: str, outcome: Outcome, **facts: Any) -> Finding:
    catalog = REGISTRY[catalog_id]
    base: dict[str, Any] = {
        "catalog_id": catalog_id, "title": catalog.title, "waveband": catalog.waveband, "release": catalog.release,
        "outcome": outcome, "why": f"because it is {outcome}", "searches": (search(catalog_id),), "coverage_fraction": 1.0,
        "n_rows": 10, "age_s": 5.0,
    }  # fmt: skip
    return Finding(**(base | facts))


def candidate(catalog_id: str, key: str = "row 1") -> Candidate:
    band = REGISTRY[catalog_id].bands[0].band
    return Candidate(catalog_id, key, 1.0, 2.0, 0.53, 1.2, 0.48, 0.02, 0.93, (Measured(band, 17.31, 0.02, False),))


def look(findings: tuple[Finding, ...], *, distance: bool = True, name: str = "Tern-9", **facts: Any) -> Look:
    target = Target(
        name, Position(264.50625, -33.81583, 1.8, 1.2, 20.0, 2026.4, "as stated"),
        distance=Distance(1600.0, 4100.0) if distance else None, dm_pc_cm3=148.0, spin=Spin(2711.4, derivative_limit=2.4e-12),
    )  # fmt: skip
    a = resolve(target, Assumptions())
    bands = [
        columns.band for catalog in REGISTRY.values() for columns in catalog.bands if columns.band.depth is not None
    ]
    limits = [limit for band in bands if (limit := limit_for_band(band, None, assumptions=a)) is not None]
    base: dict[str, Any] = {
        "target": target, "made_at": "2026-12-01T12:00:00Z", "version": "0", "run_id": 1, "digest": a.digest,
        "assumptions": a.as_dict(), "findings": findings, "limits": tuple(physical_limit(limit, target, a) for limit in limits),
        "spin": figures(target.spin) if target.spin else None,
        "standings": (
            Standing("x", "some class", StandingWord.RULED_OUT, "why", 0.0, 0.0, 3.8e-5, (), {"as assumed": 0.0}, "a miracle"),
            Standing("y", "another", StandingWord.OPEN, "why not", None, None, None, ()),
        ),
        "expected_chance": 0.4, "n_asked": len(findings), "n_from_store": 0, "offline": False,
    }  # fmt: skip
    return Look(**(base | facts))
