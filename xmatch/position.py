"""Reading what people write down: positions, errors, distances, periods, pulses. Strict: nothing is guessed.

Positions come in exactly these forms:

- ``12:34:56.7 -45:06:07`` and ``12h34m56.7s -45d06m07s``: right ascension in hours, declination in degrees. Colons in a
  right ascension mean hours by convention of the trade.
- ``188.736 -45.102``: degrees, when both numbers carry a decimal point, or with ``deg`` behind them.

Anything else, such as ``12 34`` or ``12 34 56 -45 06 07``, could be read in two ways and is refused with both of them.
"""

from __future__ import annotations

import math
import re

from xmatch.constants import LY_CM, PC_CM
from xmatch.errors import PositionError, TargetError
from xmatch.match.ellipse import sigma_from_radius

_SIGNS = str.maketrans({"−": "-", "–": "-", "＋": "+", "′": "'", "″": '"', "\u00b5": "u", "\u03bc": "u"})
_NUMBER = r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?"
_COLON = re.compile(r"^([+-]?)(\d{1,3}):(\d{1,2})(?::(\d{1,2}(?:\.\d*)?))?$")
_HMS = re.compile(r"^([+-]?)(\d{1,2})h(\d{1,2})m(?:(\d{1,2}(?:\.\d*)?)s)?$")
_DMS = re.compile(r"""^([+-]?)(\d{1,2})[d°](\d{1,2})(?:m|')(?:(\d{1,2}(?:\.\d*)?)(?:s|"))?$""")
_DEGREES = re.compile(rf"^({_NUMBER})(?:deg|d|°)?$")
HOURS_TO_DEG = 15.0
ADVICE = "write '12:34:56.7 -45:06:07' (hours and degrees) or '188.736 -45.102 deg'"


def parse_position(text: str) -> tuple[float, float]:
    """Read a position.

    Parameters
    ----------
    text : str
        Right ascension and declination in one of the forms of this module.

    Returns
    -------
    ra_deg, dec_deg : float
        ICRS, degrees.

    Raises
    ------
    PositionError
        For a form that is not one of ours, or a value out of range; an ambiguous form is echoed in both readings.
    """
    words = text.translate(_SIGNS).replace(",", " ").split()
    in_degrees = bool(words) and words[-1].lower() in ("deg", "degree", "degrees")
    if in_degrees:
        words = words[:-1]
    if len(words) != 2:
        if len(words) == 6 and not in_degrees:
            raise PositionError(_ambiguous(text, words))
        raise PositionError(f"{text!r} is not a position; {ADVICE}")
    ra, dec = words
    sexagesimal = _COLON.match(ra) or _HMS.match(ra)
    if sexagesimal and in_degrees:
        raise PositionError(f"{text!r} says deg but writes hours, minutes and seconds; {ADVICE}")
    if sexagesimal:
        dec_match = _COLON.match(dec) or _DMS.match(dec)
        if dec_match is None:
            raise PositionError(
                f"declination {dec!r} does not go with {ra!r}: it could be degrees or a typing slip; {ADVICE}"
            )
        return _check(text, HOURS_TO_DEG * _sexagesimal(ra, sexagesimal, 24), _sexagesimal(dec, dec_match, 91))
    ra_match, dec_match = _DEGREES.match(ra.lower()), _DEGREES.match(dec.lower())
    if ra_match is None or dec_match is None:
        raise PositionError(f"{text!r} is not a position; {ADVICE}")
    marked = in_degrees or all(word.lower().endswith(("deg", "d", "°")) for word in words)
    if not marked and not all("." in word for word in words):
        raise PositionError(_ambiguous(text, words))
    return _check(text, float(ra_match[1]), float(dec_match[1]))


def _sexagesimal(word: str, match: re.Match[str], limit: int) -> float:
    """Value of a sexagesimal word; the sign counts also before a zero."""
    first, minutes, seconds = int(match[2]), int(match[3]), float(match[4] or 0.0)
    if first >= limit or minutes >= 60 or seconds >= 60.0:
        raise PositionError(
            f"{word!r} is out of range; the first part must be below {limit}, minutes and seconds below 60"
        )
    value = first + minutes / 60.0 + seconds / 3600.0
    return -value if match[1] == "-" else value


def _check(text: str, ra_deg: float, dec_deg: float) -> tuple[float, float]:
    if not (math.isfinite(ra_deg) and math.isfinite(dec_deg)):
        raise PositionError(f"{text!r} is not finite; {ADVICE}")
    if not 0.0 <= ra_deg < 360.0:
        raise PositionError(f"right ascension {ra_deg:g} deg is out of range; 0 to 360 deg is allowed")
    if not -90.0 <= dec_deg <= 90.0:
        raise PositionError(f"declination {dec_deg:g} deg is out of range; -90 to +90 deg is allowed")
    return ra_deg, dec_deg


def _ambiguous(text: str, words: list[str]) -> str:
    """Both readings of a bare form, so that the user sees what it could be."""
    half = len(words) // 2
    try:
        parts = [abs(float(word)) for word in words[:half]]
        ra = sum(part / 60.0**i for i, part in enumerate(parts))
        sign = -1.0 if words[half].startswith("-") else 1.0
        dec = sign * sum(abs(float(word)) / 60.0**i for i, word in enumerate(words[half:]))
        hours = f"{HOURS_TO_DEG * ra:.6g} {dec:+.6g} deg"
        degrees = f"{ra:.6g} {dec:+.6g} deg"
    except ValueError:
        return f"{text!r} is not a position; {ADVICE}"
    return f"{text!r} can be read in two ways: right ascension in hours gives {hours}, in degrees gives {degrees}; {ADVICE}"


def format_position(ra_deg: float, dec_deg: float) -> str:
    """Both notations: ``17:38:01.500 -33:48:56.99 = 264.506250 -33.815830 deg (ICRS)``; never prints 60 s."""
    ra_ms = round(ra_deg / HOURS_TO_DEG * 3.6e6) % 86_400_000
    dec_cs = round(abs(dec_deg) * 3.6e5)
    sign = "-" if math.copysign(1.0, dec_deg) < 0 and dec_cs else "+"
    ra = f"{ra_ms // 3_600_000:02d}:{ra_ms // 60_000 % 60:02d}:{ra_ms % 60_000 / 1e3:06.3f}"
    dec = f"{sign}{dec_cs // 360_000:02d}:{dec_cs // 6_000 % 60:02d}:{dec_cs % 6_000 / 1e2:05.2f}"
    # adding 0.0 turns a rounded -0.0 into +0.0, so that both notations carry the same sign
    return f"{ra} {dec} = {round(ra_deg, 6) % 360.0:.6f} {round(dec_deg, 6) + 0.0:+.6f} deg (ICRS)"


# ------------------------------------------------------------------------------------------------
# errors, distances, times, pulses
# ------------------------------------------------------------------------------------------------
# Capitals count: MJy and mJy, Mpc and mpc are nine orders of magnitude apart.
_PC = {"pc": 1.0, "kpc": 1.0e3, "Mpc": 1.0e6, "ly": LY_CM / PC_CM, "kly": 1.0e3 * LY_CM / PC_CM}
_SECONDS = {"s": 1.0, "ms": 1.0e-3, "min": 60.0, "h": 3600.0, "d": 86400.0}
_HZ = {"Hz": 1.0, "kHz": 1.0e3, "MHz": 1.0e6, "GHz": 1.0e9}
_JY = {"Jy": 1.0, "mJy": 1.0e-3, "uJy": 1.0e-6}
_LEVEL = re.compile(rf"^({_NUMBER})\s*(%|sigma)$")


def _positive(what: str, value: float, unit: str = "") -> float:
    if not (math.isfinite(value) and value > 0.0):
        raise TargetError(f"{what} {value:g}{f' {unit}' if unit else ''} is not allowed; it must be above 0")
    return value


def _with_unit(what: str, text: str, units: dict[str, float], example: str) -> float:
    match = re.match(rf"^\s*({_NUMBER}|nan|inf)\s*([A-Za-z]+)\s*$", text.translate(_SIGNS))
    if match is None or match[2] not in units:
        raise TargetError(
            f"{what} {text.strip()!r} is not understood; give a number with its unit ({', '.join(units)}; capitals "
            f"count), such as {example!r}"
        )
    return _positive(what, float(match[1]) * units[match[2]])


def parse_distance(text: str) -> tuple[float, float]:
    """Read a distance range: ``1.6..4.1 kpc``, ``5000..13000 ly``, ``5.0 +- 1.0 kpc``; (low, high) in pc.

    Raises
    ------
    TargetError
        Without a unit, inverted, not above 0, or a single value: a luminosity limit needs a range.
    """
    clean = text.translate(_SIGNS).replace("±", "+-")
    match = re.match(rf"^\s*({_NUMBER}|nan)\s*(\.\.|\+-)\s*({_NUMBER}|nan)\s*([A-Za-z]+)\s*$", clean)
    if match is None or match[4] not in _PC:
        raise TargetError(
            f"distance {text!r} is not understood; give a range with its unit (pc, kpc, Mpc, ly; capitals count), such as '1.6..4.1 kpc' or "
            "'5.0 +- 1.0 kpc'; a single distance would hide how much every luminosity depends on it"
        )
    unit = _PC[match[4]]
    first, second = float(match[1]), float(match[3])
    low, high = (first, second) if match[2] == ".." else (first - second, first + second)
    return check_distance(low * unit, high * unit)


def check_distance(low_pc: float, high_pc: float) -> tuple[float, float]:
    """Check a distance range in pc: finite, above 0, not inverted."""
    if not (math.isfinite(low_pc) and math.isfinite(high_pc) and 0.0 < low_pc <= high_pc):
        raise TargetError(f"distance range {low_pc:g} to {high_pc:g} pc is not allowed; 0 < low <= high is needed")
    return low_pc, high_pc


def parse_one_distance(text: str) -> float:
    """Read one end of a distance range with its unit, pc."""
    return _with_unit("distance", text, _PC, "1.6 kpc")


def parse_period(text: str) -> float:
    """Read a period with its unit (s, ms, min, h, d), seconds."""
    return _with_unit("period", text, _SECONDS, "2711.4 s")


def parse_pulse(text: str) -> tuple[float, float, float]:
    """Read a pulse, ``2.1 Jy @ 200 MHz for 35 s``: frequency in Hz, peak in Jy, width in s."""
    match = re.match(r"^(.+?)@(.+?)\bfor\b(.+)$", text)
    if match is None:
        raise TargetError(
            f"pulse {text!r} is not understood; write peak @ frequency for width, such as '2.1 Jy @ 200 MHz for 35 s'"
        )
    return (
        _with_unit("pulse frequency", match[2], _HZ, "200 MHz"),
        _with_unit("pulse peak", match[1], _JY, "2.1 Jy"),
        _with_unit("pulse width", match[3], _SECONDS, "35 s"),
    )


def sigma_per_axis(length_arcsec: float, level: str) -> float:
    """One sigma per axis from a stated error and what it holds.

    Parameters
    ----------
    length_arcsec : float
        Radius or semi-axis, above 0.
    level : str
        ``1 sigma`` (or another number of sigma) per axis, or the contained fraction, such as ``90%``.

    Notes
    -----
    A fraction is that of a two-dimensional Gaussian (Rayleigh distribution), not of one axis.
    """
    if not (math.isfinite(length_arcsec) and length_arcsec > 0.0):
        raise PositionError(f"position error {length_arcsec:g} arcsec is not allowed; it must be above 0")
    match = _LEVEL.match(level.strip())
    if match is None:
        raise PositionError(
            f"error level {level!r} is not understood; give '1 sigma' (per axis) or a fraction such as '90%'"
        )
    value = float(match[1])
    if match[2] == "sigma":
        if not (math.isfinite(value) and value > 0.0):
            raise PositionError(f"error level {level!r} is not allowed; the number of sigma must be finite and above 0")
        return length_arcsec / value
    if not 0.0 < value < 100.0:
        raise PositionError(f"error level {level!r} is not allowed; a fraction lies between 0% and 100%")
    return float(sigma_from_radius(length_arcsec, value / 100.0))


def parse_error(text: str, level: str) -> tuple[float, float, float]:
    """Read ``1.8`` or ``1.8,1.2,20`` (arcsec, arcsec, degrees east of north): one-sigma semi-axes and angle."""
    parts = [part.strip() for part in text.translate(_SIGNS).split(",")]
    # float() alone would read 1_8 as eighteen
    values = [float(part) for part in parts] if all(re.fullmatch(_NUMBER, part) for part in parts) else []
    if len(values) not in (1, 3):
        raise PositionError(
            f"position error {text!r} is not understood; give a radius, or 'major,minor,angle' in arcsec and degrees"
        )
    return check_ellipse(
        values[0], values[-2] if len(values) == 3 else values[0], values[2] if len(values) == 3 else 0.0, level
    )


def check_ellipse(major: float, minor: float, angle_deg: float, level: str) -> tuple[float, float, float]:
    """Check a stated ellipse and turn it to one sigma per axis."""
    if not math.isfinite(angle_deg):
        raise PositionError(f"angle {angle_deg} is not allowed; give degrees east of north")
    sigma_major, sigma_minor = sigma_per_axis(major, level), sigma_per_axis(minor, level)
    if sigma_minor > sigma_major:
        raise PositionError(f"semi-axes {major:g} and {minor:g} arcsec are inverted; give the major one first")
    return sigma_major, sigma_minor, angle_deg % 180.0
