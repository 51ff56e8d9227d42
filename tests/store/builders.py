"""Invented targets, catalogs, replies and answers, for the tests of the store and the processes they start."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.records import (
    Band,
    Candidate,
    ClassTest,
    Distance,
    Finding,
    Limit,
    LimitKind,
    LimitMethod,
    Look,
    MagnitudeSystem,
    Measured,
    Outcome,
    Photometry,
    PhysicalLimit,
    Position,
    Quantity,
    Question,
    Reply,
    ReplyStatus,
    Rows,
    Search,
    Standing,
    StandingWord,
    Target,
    Waveband,
)

TARGET = Target(
    "Tern-4", Position(264.50625, -33.81583, 1.8, 1.2, 20.0, 2026.0), distance=Distance(2e3, 8e3, "invented")
)
ABOVE_DOUBLES = 2**53 + 1
"""The smallest whole number that a double cannot hold."""


def band(name: str = "J", **changes: Any) -> Band:
    made = Band(
        catalog_id="curlew", name=name, waveband=Waveband.NEAR_INFRARED, quantity=Quantity.MAGNITUDE, unit="mag",
        nu_low_hz=2.1e14, nu_high_hz=2.8e14, nu_hz=2.4e14, system=MagnitudeSystem.VEGA, zero_point_jy=1594.0,
        depth=15.8, depth_n_sigma=10.0, depth_source="invented",
    )  # fmt: skip
    return replace(made, **changes)


BANDS = (band("J"), band("H"))


def rows(n: int, *, seed: int = 1, raw: bool = True) -> Rows:
    """n rows with gaps: every third has no J, every fourth no proper motion."""
    random = np.random.default_rng(seed)
    every = np.arange(n)

    def some(step: int) -> np.ndarray[Any, Any]:
        return np.where(every % step == 0, np.nan, random.normal(15.0, 1.0, n))

    return Rows(
        key=tuple(str(ABOVE_DOUBLES + i) for i in range(n)),
        ra_deg=(264.50625 + random.normal(0.0, 0.02, n)) % 360.0,
        dec_deg=-33.81583 + random.normal(0.0, 0.02, n),
        sigma_major_arcsec=random.uniform(0.1, 1.0, n),
        sigma_minor_arcsec=random.uniform(0.1, 1.0, n),
        angle_deg=random.uniform(0.0, 180.0, n),
        epoch_yr=np.full(n, 1999.5),
        pm_ra_mas_yr=some(4),
        pm_dec_mas_yr=some(4),
        pm_ra_error_mas_yr=some(4),
        pm_dec_error_mas_yr=some(4),
        flux={
            "J": Photometry(some(3), some(3), every % 7 == 1),
            "H": Photometry(some(2), some(5), np.zeros(n, dtype=bool)),
        },
        raw=tuple({"id": ABOVE_DOUBLES + i, "note": "wide" * 20, "J": None} for i in range(n)) if raw else (),
    )


def reply(n_rows: int = 0, status: ReplyStatus = ReplyStatus.WHOLE, **changes: Any) -> Reply:
    question = Question(
        catalog_id="curlew", release="2", table="main", protocol="cone", address="http://127.0.0.1/cone",
        remote_table="", ra_deg=264.50625, dec_deg=-33.81583, radius_arcsec=60.0, columns=(), row_limit=1000,
    )  # fmt: skip
    about = {name: changes.pop(name) for name in list(changes) if hasattr(question, name)}
    made = Reply(
        question=replace(question, **about), status=status, detail=f"{status}", request="GET http://127.0.0.1/cone",
        asked_at="2026-12-01T12:00:00Z", elapsed_s=0.4, n_rows=n_rows, http_status=200, sha256="0" * 64,
        reply_bytes=512, client="test",
    )  # fmt: skip
    return replace(made, **changes)


def register(store: Any, bands: tuple[Band, ...] = BANDS, fingerprint: str = "f" * 64, **where: str) -> int:
    key: int = store.put_catalog(
        where.get("catalog_id", "curlew"), where.get("release", "2"), "Curlew survey", Waveband.NEAR_INFRARED,
        fingerprint, bands,
    )  # fmt: skip
    return key


def look(run_id: int, search: Search, found: Rows, **changes: Any) -> Look:
    """An answer with everything in it: a candidate, two limits of which one is blind, tests and standings."""
    candidate = Candidate(
        "curlew", found.key[0], float(found.ra_deg[0]), float(found.dec_deg[0]), 1.2, 0.8, 0.7, 0.01, 0.6,
        (Measured(BANDS[0], 15.1, 0.1, False),),
    )  # fmt: skip
    limits = tuple(
        Limit(
            item, value, LimitKind.DETECTION, 0.95, 5.0, LimitMethod.NOMINAL, "nominal", (search.search_id,),
            verified_depth=False, flag="coverage unproven",
        )
        for item, value in zip(BANDS, (16.1, 15.4), strict=True)
    )  # fmt: skip
    finding = Finding(
        "curlew", "Curlew survey", Waveband.NEAR_INFRARED, "2", Outcome.AMBIGUOUS, "one row near", (search,), 1.0,
        n_rows=len(found), n_compatible=1, density_per_deg2=3.0e4, expected_chance=0.02, candidates=(candidate,),
        limits=limits, age_s=12.0,
    )  # fmt: skip
    silent = Finding("stilt", "Stilt survey", Waveband.RADIO, "1", Outcome.UNANSWERED, "HTTP 503", (), None, age_s=None)
    physical = tuple(
        PhysicalLimit(
            limit, 5.9e-4, 1.4e-12, 0.2, corrected, (1.0e33, 4.0e33, 1.1e34), (2.0e3, 4.0e3, 8.0e3), "A_V 5 mag"
        )
        for limit, corrected in zip(limits, (7.0e-12, None), strict=True)
    )
    test = ClassTest("godwit", "J magnitude", "16.1 against 14.0 mag", 0.01, 0.005, 0.02, "invented")
    standing = Standing(
        "godwit", "Godwit-like stars", StandingWord.STRAINED, "too bright in J", 0.01, 0.005, 0.02, (test,),
        {"no dust": 0.03}, "J to 18 mag",
    )  # fmt: skip
    assumptions = Assumptions()
    made = Look(
        target=TARGET, made_at="2026-12-01T12:00:00Z", version="0.1", run_id=run_id, digest=assumptions.digest,
        assumptions=assumptions.as_dict(), findings=(finding, silent), limits=physical, spin=None,
        standings=(standing,), expected_chance=0.02, n_asked=1, n_from_store=0, offline=False, remarks=("a remark",),
    )  # fmt: skip
    return replace(made, **changes)
