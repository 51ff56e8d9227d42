"""Catalogs made from the same exposures are one look at the sky: their limits never multiply."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from xmatch.catalogs import load_catalogs
from xmatch.classes.evidence import exposures_of, joint_miss


def test_two_lists_of_one_mission_count_once(make: Any) -> None:
    one = make.limit(make.xray_band(catalog="list-a"), 1.0e-13, make.target())
    same = [
        replace(one, limit=replace(one.limit, band=replace(one.limit.band, catalog_id=name, exposures="Curlew")))
        for name in ("list-a", "list-b")
    ]
    other = make.limit(make.xray_band(catalog="list-c"), 1.0e-13, make.target())
    assert [exposures_of(limit) for limit in (*same, other)] == ["Curlew", "Curlew", "list-c"]
    miss = np.array([0.05, 0.5])
    both = joint_miss([(exposures_of(limit), miss) for limit in same], 2)
    assert both.tolist() == [0.05, 0.5]
    assert np.allclose(joint_miss([(exposures_of(limit), miss) for limit in (*same, other)], 2), miss**2)


def test_the_registry_names_exposures_that_its_catalogs_share() -> None:
    shared: dict[str, set[str]] = {}
    for catalog in load_catalogs().values():
        for band in catalog.band_list:
            if band.exposures:
                shared.setdefault(band.exposures, set()).add(catalog.id)
    assert shared == {"XMM-Newton": {"xmm-4xmm-dr13", "xmm-5xmm-dr15"}, "WISE": {"allwise", "catwise2020"}}
