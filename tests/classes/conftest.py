"""Small builders for targets, limits and class files."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import pytest

from xmatch.assumptions import Assumptions
from xmatch.classes.draws import Deviates, Draws, Variant, draw
from xmatch.classes.evidence import Evidence
from xmatch.classes.loader import read_class
from xmatch.classes.model import ClassFile
from xmatch.constants import C_CM_S, KEV_HZ
from xmatch.flux.physical import physical_limit, resolve
from xmatch.records import (
    Band,
    Distance,
    Finding,
    Limit,
    LimitKind,
    LimitMethod,
    MagnitudeSystem,
    PhysicalLimit,
    Position,
    Pulse,
    Quantity,
    Spin,
    Target,
    Waveband,
)
from xmatch.spin.figures import figures


@dataclass(frozen=True)
class Make:
    """Builders, in one place."""

    folder: Path

    def target(self, **changes: Any) -> Target:
        base = Target(
            name="Tern-4",
            position=Position(264.5, -33.8, 1.0, 1.0),
            distance=Distance(1600.0, 4100.0),
            dm_pc_cm3=148.0,
            spin=Spin(2711.4, derivative_limit=2.4e-12),
            pulses=(Pulse(2.0e8, 2.1, 35.0),),
        )
        return replace(base, **changes)

    def xray_band(self, low_kev: float = 0.2, high_kev: float = 2.3, catalog: str = "invented-x") -> Band:
        return Band(
            catalog_id=catalog, name=f"{low_kev:g}-{high_kev:g} keV", waveband=Waveband.SOFT_XRAY,
            quantity=Quantity.BAND_FLUX, unit="erg s-1 cm-2", nu_low_hz=low_kev * KEV_HZ,
            nu_high_hz=high_kev * KEV_HZ, nu_hz=(low_kev * high_kev) ** 0.5 * KEV_HZ,
        )  # fmt: skip

    def light_band(
        self, name: str = "J", um: float = 1.235, width_um: float = 0.162, zero_jy: float = 1594.0,
        catalog: str = "invented-ir", system: MagnitudeSystem = MagnitudeSystem.VEGA,
    ) -> Band:  # fmt: skip
        return Band(
            catalog_id=catalog, name=name, waveband=Waveband.NEAR_INFRARED, quantity=Quantity.MAGNITUDE, unit="mag",
            nu_low_hz=C_CM_S / ((um + width_um / 2) * 1e-4), nu_high_hz=C_CM_S / ((um - width_um / 2) * 1e-4),
            nu_hz=C_CM_S / (um * 1e-4), system=system, zero_point_jy=zero_jy,
        )  # fmt: skip

    def limit(
        self, band: Band, value: float, target: Target, *, flag: str = "", n_sigma: float = 6.645,
        confidence: float = 0.95, assumptions: Assumptions | None = None,
    ) -> PhysicalLimit:  # fmt: skip
        limit = Limit(
            band=band, value=value, kind=LimitKind.COMPLETENESS, confidence=confidence, n_sigma=n_sigma,
            method=LimitMethod.NOMINAL, note="invented", flag=flag,
        )  # fmt: skip
        return physical_limit(limit, target, resolve(target, assumptions or Assumptions()))

    def sharp(self, band: Band, value: float, target: Target) -> PhysicalLimit:
        """A limit whose completeness is a step: everything brighter is found, everything fainter missed."""
        return self.limit(band, value, target, n_sigma=1.0e6, confidence=0.5)

    def evidence(
        self, target: Target, limits: tuple[PhysicalLimit, ...] = (), *, assumptions: Assumptions | None = None,
        findings: tuple[Finding, ...] = (),
    ) -> Evidence:  # fmt: skip
        settled = resolve(target, assumptions or Assumptions(draws=20_000))
        spin = figures(target.spin) if target.spin is not None else None
        return Evidence(target, limits, findings, spin, settled)

    def draws(self, evidence: Evidence, variant: Variant | None = None, class_id: str = "invented") -> Draws:
        a = evidence.assumptions
        chosen = variant or Variant(a.distance_prior)
        return draw(Deviates.drawn(a), evidence.target.distance, a, chosen, class_id)

    def class_file(self, text: str, name: str = "invented") -> ClassFile:
        path = self.folder / f"{name}.toml"
        path.write_text(text, encoding="utf-8")
        return read_class(path)


@pytest.fixture
def make(tmp_path: Path) -> Make:
    return Make(tmp_path)


@pytest.fixture
def template() -> Callable[..., str]:
    """Text of a class file with a log-normal X-ray luminosity."""

    def text(
        *, mean: float = 33.0, scatter: float = 1.0, low: float = 0.3, high: float = 0.30001,
        solid_angle: str = "4 pi", class_id: str = "invented",
    ) -> str:  # fmt: skip
        words = f'flux_kind = "steady", solid_angle = "{solid_angle}"'
        return f"""
id = "{class_id}"
title = "invented class"
summary = "invented"

[[predictions]]
test = "x-ray luminosity"
spectrum = "blackbody"
luminosity_of = "bolometric"
luminosity = {{ value = {mean}, unit = "log10 erg/s", {words}, source = "invented" }}
scatter = {{ value = {scatter}, unit = "dex", source = "invented" }}
temperature = {{ low = {low}, high = {high}, unit = "keV", source = "invented" }}
"""

    return text
