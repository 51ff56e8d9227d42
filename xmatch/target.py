"""Target files and targets from the command line, with every range checked."""

from __future__ import annotations

import difflib
import math
import tomllib
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

from xmatch import position as read
from xmatch.constants import YR_S
from xmatch.distance_keys import DISTANCE_KEYS, distance_section, parse_known_distance, written_distance
from xmatch.errors import InputError, TargetError
from xmatch.keys import digits, toml_text
from xmatch.keys import number as _number
from xmatch.keys import text as _text
from xmatch.records import Position, Pulse, Spin, Target

ABSORPTION_KEYS = ("column_cm2", "column_origin", "av_mag", "av_origin", "column_total_cm2", "av_total_mag")
SECTIONS = {
    "target": ("name", "note"),
    "position": (
        "ra", "dec", "ra_deg", "dec_deg", "epoch", "error_arcsec", "error_major_arcsec", "error_minor_arcsec",
        "error_angle_deg", "error_level",
    ),
    "distance": DISTANCE_KEYS,
    "dispersion": ("dm_pc_cm3",),
    "absorption": ABSORPTION_KEYS,
    "spin": (
        "period_s", "derivative", "derivative_limit", "period_change_ms", "baseline_yr", "origin", "may_be_orbital",
    ),
    "pulses": ("frequency_mhz", "peak_jy", "width_s"),
}  # fmt: skip
DEFAULT_ERROR = "1.0"
DEFAULT_LEVEL = "1 sigma"
EPOCHS = (1850.0, 2150.0)


def template() -> str:
    """A commented target file to fill in."""
    return """# What is known of one object. Delete what is not known: nothing is guessed in its place.

[target]
name = "mine"
note = ""

[position]
ra = "17:38:01.50"          # hours, minutes, seconds; or ra_deg = 264.50625
dec = "-33:48:57.0"         # or dec_deg = -33.81583
epoch = 2026.4              # Julian year of the position
error_major_arcsec = 1.8    # or error_arcsec = 1.5 for a round error
error_minor_arcsec = 1.2
error_angle_deg = 20.0      # of the major axis, east of north
error_level = "1 sigma"     # per axis; or the fraction it holds: "68%", "90%", "95%"

[distance]                  # a range: every luminosity is given over it
low = "1.6 kpc"             # pc, kpc, Mpc, ly
high = "4.1 kpc"
#prior = "log-uniform"      # how the range is filled; or uniform, volume
# or, instead of the range, one of these:
#   value = "5.0 kpc", plus = "1.2 kpc", minus = "0.8 kpc"          a median with its one-sigma errors
#   parallax_mas = 0.4, parallax_error_mas = 0.1                    its posterior (zero_point_mas, scale_kpc)
#   samples = "posterior.txt", samples_unit = "kpc"                 one distance a line, beside this file
#   models = ["NE2001", "NE2025"]                                   from dm_pc_cm3 (extra 'dm'; model_scatter_ln)
#   redshift = 0.03, redshift_error = 0.001, cosmology = "Planck18" another galaxy
origin = "dispersion measure, two electron-density models"

[dispersion]
dm_pc_cm3 = 148.0

#[absorption]               # else the column follows from the dispersion measure
#column_cm2 = 4.4e21
#column_origin = "X-ray spectrum of a neighbour"
#av_mag = 1.5
#av_origin = "dust map"
#column_total_cm2 = 2e22    # of the whole line of sight, which nothing exceeds; or av_total_mag

[spin]
period_s = 2711.4
period_change_ms = 0.9      # the period changed by less than this over the baseline;
baseline_yr = 12.0          # or derivative = 1e-13, or derivative_limit = 2.4e-12
origin = "archival pulses"
may_be_orbital = false

[[pulses]]
frequency_mhz = 200.0
peak_jy = 2.1
width_s = 35.0
"""


def read_target(path: str | Path) -> Target:
    """Read and check a target file.

    Raises
    ------
    TargetError, PositionError
        Naming the file, the key, the value seen and what is allowed.
    """
    path = Path(path)
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as fault:
        raise TargetError(f"{path}: cannot be read ({fault.strerror}); give a target file or a position") from None
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as fault:
        raise TargetError(f"{path}: not readable as TOML ({fault}); mend that line") from None
    try:
        return _from_sections(content, path.stem, path.parent)
    except InputError as fault:
        raise type(fault)(f"{path}: {fault}") from None


def build_target(
    where: str,
    *,
    name: str | None = None,
    error: str | None = None,
    error_level: str | None = None,
    epoch: float | None = None,
    distance: str | None = None,
    dm: float | None = None,
    column: float | None = None,
    av: float | None = None,
    period: str | None = None,
    derivative: float | None = None,
    derivative_limit: float | None = None,
    period_may_be_orbital: bool = False,
    pulses: Sequence[str] = (),
) -> Target:
    """Build a target from what stands on a command line, with the checks of a target file."""
    ra, dec = read.parse_position(where)
    level = error_level or DEFAULT_LEVEL
    major, minor, angle = read.parse_error(error or DEFAULT_ERROR, level)
    stated = (
        f"{where}, error {error or DEFAULT_ERROR} arcsec ({level}{'' if error else ', our default: none was given'})"
    )
    spin = None
    if period is not None:
        spin = _spin(
            read.parse_period(period), derivative, derivative_limit, "given on the command line", period_may_be_orbital
        )
    elif derivative is not None or derivative_limit is not None:
        raise TargetError("a period derivative was given without a period; give --period too")
    return Target(
        name=name or _default_name(ra, dec),
        position=Position(ra, dec, major, minor, angle, _epoch(epoch), stated),
        distance=parse_known_distance(distance) if distance else None,
        dm_pc_cm3=_at_least_zero("dispersion measure", dm, "pc cm^-3"),
        column_cm2=_at_least_zero("column", column, "cm^-2"),
        column_origin="given on the command line" if column is not None else "",
        av_mag=_at_least_zero("A_V", av, "mag"),
        av_origin="given on the command line" if av is not None else "",
        spin=spin,
        pulses=tuple(Pulse(*read.parse_pulse(pulse)) for pulse in pulses),
    )


def write_target(target: Target) -> str:
    """Write a target as a file that :func:`read_target` reads back to the same numbers.

    Only the frequency of a pulse may differ, in its last binary digit: the file gives it in MHz.
    """
    p = target.position
    lines = ["[target]", f"name = {toml_text(target.name)}"]
    if target.note:
        lines.append(f"note = {toml_text(target.note)}")
    lines += [
        "", "[position]", f"ra_deg = {digits(p.ra_deg)}", f"dec_deg = {digits(p.dec_deg)}",
        f"error_major_arcsec = {digits(p.sigma_major_arcsec)}", f"error_minor_arcsec = {digits(p.sigma_minor_arcsec)}",
        f"error_angle_deg = {digits(p.angle_deg)}", 'error_level = "1 sigma"',
    ]  # fmt: skip
    if p.epoch_yr is not None:
        lines.append(f"epoch = {digits(p.epoch_yr)}")
    if target.distance is not None:
        lines += ["", *written_distance(target.distance)]
    if target.dm_pc_cm3 is not None:
        lines += ["", "[dispersion]", f"dm_pc_cm3 = {digits(target.dm_pc_cm3)}"]
    if any(getattr(target, key) not in (None, "") for key in ABSORPTION_KEYS):
        lines += ["", "[absorption]"]
        for key in ABSORPTION_KEYS:
            value = getattr(target, key)
            if value not in (None, ""):
                lines.append(f"{key} = {toml_text(value) if isinstance(value, str) else digits(value)}")
    if target.spin is not None:
        s = target.spin
        lines += ["", "[spin]", f"period_s = {digits(s.period_s)}"]
        lines += [
            f"{key} = {digits(value)}"
            for key, value in (("derivative", s.derivative), ("derivative_limit", s.derivative_limit))
            if value is not None
        ]
        lines += [f"origin = {toml_text(s.derivative_origin)}", f"may_be_orbital = {str(s.may_be_orbital).lower()}"]
    for pulse in target.pulses:
        lines += [
            "",
            "[[pulses]]",
            f"frequency_mhz = {digits(pulse.nu_hz / 1e6)}",
            f"peak_jy = {digits(pulse.peak_jy)}",
            f"width_s = {digits(pulse.width_s)}",
        ]
    return "\n".join(lines) + "\n"


def _from_sections(content: dict[str, Any], stem: str, folder: Path) -> Target:
    for section, value in content.items():
        if section not in SECTIONS:
            raise TargetError(
                f"section [{section}] is not known{_near(section, SECTIONS)}; there are {', '.join(SECTIONS)}"
            )
        if section == "pulses" and not isinstance(value, list):
            raise TargetError("pulses must be a list; write [[pulses]] in double brackets above each pulse")
        for entry in value if section == "pulses" else [value]:
            if not isinstance(entry, dict):
                raise TargetError(f"{section} = {entry!r} is not allowed; write it as a section with keys")
            for key in entry:
                if key not in SECTIONS[section]:
                    raise TargetError(
                        f"{section}.{key} is not known{_near(key, SECTIONS[section])}; there are {', '.join(SECTIONS[section])}"
                    )
    if "position" not in content:
        raise TargetError("section [position] is missing; every target needs one")
    about, dispersion, absorption = (content.get(name, {}) for name in ("target", "dispersion", "absorption"))
    place = _position(content["position"])
    dm = _at_least_zero("dispersion.dm_pc_cm3", _number("dispersion", dispersion, "dm_pc_cm3"), "pc cm^-3")
    return Target(
        name=_text("target", about, "name") or stem,
        position=place,
        distance=distance_section(content["distance"], folder, place, dm) if "distance" in content else None,
        dm_pc_cm3=dm,
        column_cm2=_at_least_zero("absorption.column_cm2", _number("absorption", absorption, "column_cm2"), "cm^-2"),
        column_origin=_text("absorption", absorption, "column_origin"),
        av_mag=_at_least_zero("absorption.av_mag", _number("absorption", absorption, "av_mag"), "mag"),
        av_origin=_text("absorption", absorption, "av_origin"),
        column_total_cm2=_at_least_zero(
            "absorption.column_total_cm2", _number("absorption", absorption, "column_total_cm2"), "cm^-2"
        ),
        av_total_mag=_at_least_zero(
            "absorption.av_total_mag", _number("absorption", absorption, "av_total_mag"), "mag"
        ),
        spin=_spin_section(content["spin"]) if "spin" in content else None,
        pulses=tuple(_pulse(entry) for entry in content.get("pulses", [])),
        note=_text("target", about, "note"),
    )


def _position(section: dict[str, Any]) -> Position:
    as_text, as_degrees = {"ra", "dec"} & section.keys(), {"ra_deg", "dec_deg"} & section.keys()
    if as_text == {"ra", "dec"} and not as_degrees:
        where = f"{_text('position', section, 'ra')} {_text('position', section, 'dec')}"
        ra, dec = read.parse_position(where)
    elif as_degrees == {"ra_deg", "dec_deg"} and not as_text:
        numbers = [_number("position", section, key) for key in ("ra_deg", "dec_deg")]
        where = f"{numbers[0]!r} {numbers[1]!r} deg"
        ra, dec = read.parse_position(where)
    else:
        raise TargetError("position needs either ra and dec (text) or ra_deg and dec_deg (numbers), both of a pair")
    level = _text("position", section, "error_level") or DEFAULT_LEVEL
    round_error = _number("position", section, "error_arcsec")
    axes = [
        _number("position", section, key) for key in ("error_major_arcsec", "error_minor_arcsec", "error_angle_deg")
    ]
    if round_error is not None and axes != [None, None, None]:
        raise TargetError("position has both error_arcsec and an error ellipse; give one of them")
    if round_error is not None:
        major, minor, angle = read.check_ellipse(round_error, round_error, 0.0, level)
        error = f"error {round_error:g} arcsec"
    elif axes[0] is not None and axes[1] is not None:
        major, minor, angle = read.check_ellipse(axes[0], axes[1], axes[2] or 0.0, level)
        error = f"error {axes[0]:g} x {axes[1]:g} arcsec at {axes[2] or 0.0:g} deg"
    else:
        raise TargetError(
            "position needs error_arcsec, or error_major_arcsec and error_minor_arcsec: a match without an error means nothing"
        )
    return Position(
        ra, dec, major, minor, angle, _epoch(_number("position", section, "epoch")), f"{where}, {error} ({level})"
    )


def _spin_section(section: dict[str, Any]) -> Spin:
    number = {key: _number("spin", section, key) for key in SECTIONS["spin"] if key not in ("origin", "may_be_orbital")}
    if number["period_s"] is None:
        raise TargetError("spin.period_s is missing; give the period in seconds")
    limit = number["derivative_limit"]
    change, baseline = number["period_change_ms"], number["baseline_yr"]
    if (change is None) != (baseline is None):
        raise TargetError("spin.period_change_ms and spin.baseline_yr belong together; give both")
    if change is not None and baseline is not None:
        if limit is not None:
            raise TargetError("spin has a derivative_limit and a period change; give one of them")
        if not (change > 0.0 and baseline > 0.0):
            raise TargetError(
                f"spin: a change of {change:g} ms over {baseline:g} yr is not allowed; both must be above 0"
            )
        limit = change / 1.0e3 / (baseline * YR_S)
    orbital = section.get("may_be_orbital", False)
    if not isinstance(orbital, bool):
        raise TargetError(f"spin.may_be_orbital = {orbital!r} is not allowed; write true or false")
    return _spin(number["period_s"], number["derivative"], limit, _text("spin", section, "origin"), orbital)


def _spin(period_s: float, derivative: float | None, limit: float | None, origin: str, orbital: bool) -> Spin:
    if not (math.isfinite(period_s) and period_s > 0.0):
        raise TargetError(f"period {period_s:g} s is not allowed; it must be above 0")
    if derivative is not None and not math.isfinite(derivative):
        raise TargetError(f"period derivative {derivative} is not allowed; it must be finite")
    if limit is not None and not (math.isfinite(limit) and limit > 0.0):
        raise TargetError(f"limit {limit} on the period derivative is not allowed; it must be above 0")
    return Spin(period_s, derivative, limit, origin, orbital)


def _pulse(section: dict[str, Any]) -> Pulse:
    values = []
    for key in SECTIONS["pulses"]:
        value = _number("pulses", section, key)
        if value is None or not value > 0.0:
            raise TargetError(f"pulses.{key} = {value!r} is not allowed; every pulse needs it, above 0")
        values.append(value)
    return Pulse(values[0] * 1.0e6, values[1], values[2])


def _at_least_zero(what: str, value: float | None, unit: str) -> float | None:
    if value is not None and not (math.isfinite(value) and value >= 0.0):
        raise TargetError(f"{what} {value} {unit} is not allowed; it must be 0 or more")
    return value


def _epoch(value: float | None) -> float | None:
    if value is not None and not EPOCHS[0] <= value <= EPOCHS[1]:
        raise TargetError(f"epoch {value} is not allowed; give a Julian year from {EPOCHS[0]:g} to {EPOCHS[1]:g}")
    return value


def _default_name(ra_deg: float, dec_deg: float) -> str:
    return read.format_position(ra_deg, dec_deg).partition(" = ")[0]


def _near(word: str, known: Iterable[str]) -> str:
    close = difflib.get_close_matches(word, list(known), n=1)
    return f" (did you mean {close[0]}?)" if close else ""
