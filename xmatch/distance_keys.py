"""The distance of a target, in each of the forms a target file or a command line may give it."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

from xmatch import keys
from xmatch import position as read
from xmatch.electron_density import MODELS, distances_pc
from xmatch.errors import TargetError
from xmatch.flux import distance as known
from xmatch.flux.luminosity import PRIORS
from xmatch.limits.coverage import icrs_to_galactic
from xmatch.records import Distance, Position

FORMS = {
    "a range": (("low", "high"), ("prior",)),
    "a range in kpc": (("low_kpc", "high_kpc"), ("prior",)),
    "a value with errors": (("value", "plus", "minus"), ()),
    "a parallax": (("parallax_mas", "parallax_error_mas"), ("zero_point_mas", "scale_kpc")),
    "samples": (("samples", "samples_unit"), ()),
    "quantiles": (("quantiles_pc",), ()),
    "models": (("models",), ("model_scatter_ln",)),
    "a redshift": (("redshift",), ("redshift_error", "cosmology", "prior")),
}
"""Keys each form needs, and those it may have besides ``origin``."""
DISTANCE_KEYS = (*dict.fromkeys(key for need, may in FORMS.values() for key in (*need, *may)), "origin")
_NUMBER = r"\d+\.?\d*(?:[eE][+-]?\d+)?"
_ASYMMETRIC = re.compile(rf"^\s*({_NUMBER})\s*\+\s*({_NUMBER})\s*[-\u2212]\s*({_NUMBER})\s*([A-Za-z]+)\s*$")


def parse_known_distance(text: str, origin: str = "given on the command line") -> Distance:
    """A range (``1.6..4.1 kpc``) or a value with its errors (``5.0 +1.2 -0.8 kpc``).

    Raises
    ------
    TargetError
        As :func:`xmatch.position.parse_distance`.
    """
    match = _ASYMMETRIC.match(text)
    if match is None:
        return Distance(*read.parse_distance(text), origin)
    value, plus, minus = (read.parse_one_distance(f"{match[n]} {match[4]}") for n in (1, 2, 3))
    return known.with_errors(value, plus, minus, f"{text.strip()}, {origin}")


def distance_section(
    section: dict[str, Any], folder: Path, place: Position | None = None, dm_pc_cm3: float | None = None
) -> Distance:
    """Read the section [distance] of a target file.

    Parameters
    ----------
    section : dict
        Keys are checked to be known ones by the caller.
    folder : Path
        Where the file stands; samples are looked for beside it.
    place, dm_pc_cm3 : Position, float or None
        For the electron-density models.

    Raises
    ------
    TargetError, RangeError, ConfigurationError
        Naming the keys, what is allowed and what to do.
    """
    given = section.keys() - {"origin"}
    form = next((name for name, (need, may) in FORMS.items() if set(need) <= given <= {*need, *may}), None)
    if form is None:
        needs = "; ".join(f"{name}: {', '.join(need)}" for name, (need, _) in FORMS.items())
        raise TargetError(
            f'distance needs low and high with units, such as low = "1.6 kpc", or the keys of exactly one other form; it has '
            f"{', '.join(sorted(given)) or 'none'}. The forms are {needs}"
        )
    origin = keys.text("distance", section, "origin")

    def number(key: str, default: float = 0.0) -> float:
        value = keys.number("distance", section, key)
        return default if value is None else value

    def length(key: str) -> float:
        return read.parse_one_distance(keys.text("distance", section, key))

    if form == "a value with errors":
        value, plus, minus = (length(key) for key in FORMS[form][0])
        return known.with_errors(value, plus, minus, origin)
    if form == "a parallax":
        return known.from_parallax(
            number("parallax_mas"), number("parallax_error_mas"), zero_point_mas=number("zero_point_mas"),
            scale_pc=1.0e3 * number("scale_kpc", known.SCALE_LENGTH_PC / 1.0e3), origin=origin,
        )  # fmt: skip
    if form == "samples":
        return known.from_samples(_samples_pc(section, folder), origin or keys.text("distance", section, "samples"))
    if form == "quantiles":
        return known.tabulated(_numbers("quantiles_pc", section["quantiles_pc"]), origin)
    if form == "models":
        return _from_models(section, origin, place, dm_pc_cm3, number("model_scatter_ln", known.MODEL_SCATTER_LN))
    prior = keys.text("distance", section, "prior")
    if prior and prior not in PRIORS:
        raise TargetError(f"distance.prior = {prior!r} is not known; there are {', '.join(PRIORS)}")
    if form == "a redshift":
        cosmology = keys.text("distance", section, "cosmology") or known.COSMOLOGIES[0]
        found = known.at_redshift(number("redshift"), cosmology, number("redshift_error"))
        found = replace(found, origin=origin or found.origin)
        return replace(found, prior=prior)
    if form == "a range":
        low, high = length("low"), length("high")
    else:
        low, high = 1.0e3 * number("low_kpc"), 1.0e3 * number("high_kpc")
    return Distance(*read.check_distance(low, high), origin, prior)


def _numbers(key: str, value: object) -> list[float]:
    if not isinstance(value, list) or any(isinstance(v, bool) or not isinstance(v, int | float) for v in value):
        raise TargetError(f"distance.{key} = {str(value)[:40]} is not allowed; write a list of numbers")
    return [float(v) for v in value]


def _samples_pc(section: dict[str, Any], folder: Path) -> np.ndarray[Any, np.dtype[np.float64]]:
    path = folder / keys.text("distance", section, "samples")
    unit = read.parse_one_distance(f"1 {keys.text('distance', section, 'samples_unit')}")
    try:
        lines = path.read_text(encoding="utf-8").splitlines()
    except (OSError, UnicodeDecodeError) as fault:
        raise TargetError(f"distance.samples: {path} cannot be read ({fault}); give a text file of numbers") from None
    values = []
    for number, line in enumerate(lines, 1):
        if line.strip() and not line.lstrip().startswith("#"):
            try:
                values.append(float(line))
            except ValueError:
                raise TargetError(
                    f"{path}, line {number}: {line[:40]!r} is no number; write one distance a line"
                ) from None
    return np.asarray(values) * unit


def _from_models(
    section: dict[str, Any], origin: str, place: Position | None, dm_pc_cm3: float | None, scatter_ln: float
) -> Distance:
    names = section["models"]
    if not isinstance(names, list) or not names or any(name not in MODELS for name in names):
        raise TargetError(f"distance.models = {str(names)[:60]} is not allowed; write a list of {', '.join(MODELS)}")
    if place is None or not dm_pc_cm3:
        raise TargetError("distance.models needs dispersion.dm_pc_cm3, above 0; give it, or a distance range")
    gal_l, gal_b = (float(v) for v in icrs_to_galactic(place.ra_deg, place.dec_deg))
    found = known.from_models(distances_pc(gal_l, gal_b, dm_pc_cm3, names), names, scatter_ln)
    told = f"DM {dm_pc_cm3:g} pc cm^-3: {found.origin}" + (f"; {origin}" if origin else "")
    return known.tabulated(found.quantiles_pc, told)


def written_distance(d: Distance) -> list[str]:
    """The lines of a target file that :func:`distance_section` reads back to the same distance.

    A parallax, samples and models come back as the distribution they led to, so that reading it again asks nothing.
    """
    lines = ["[distance]"]
    if d.quantiles_pc:
        lines.append(f"quantiles_pc = [{', '.join(keys.digits(v) for v in d.quantiles_pc)}]")
    else:
        lines += [f'low = "{keys.digits(d.low_pc)} pc"', f'high = "{keys.digits(d.high_pc)} pc"']
    if d.prior:
        lines.append(f"prior = {keys.toml_text(d.prior)}")
    if d.redshift is not None:
        lines = [
            "[distance]", f"redshift = {keys.digits(d.redshift)}", f"redshift_error = {keys.digits(d.redshift_error)}",
            f"cosmology = {keys.toml_text(d.cosmology)}",
            *([f"prior = {keys.toml_text(d.prior)}"] if d.prior else []),
        ]  # fmt: skip
    return [*lines, f"origin = {keys.toml_text(d.origin)}"]
