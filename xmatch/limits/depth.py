"""How deep a catalog goes at the position: from its own neighbours where they tell, else its nominal depth.

Every answer is turned into one meaning: the flux above which the catalog lists a source with the probability
``assumptions.confidence``. For a threshold of t sigma that is (t + z) sigma, not t.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.limits.bounds import completeness_sigma, restate, z_one_sided
from xmatch.records import Band, Floats, Limit, LimitKind, LimitMethod, Photometry, Quantity

SIGMA_MAG_AT_ONE = 2.5 / np.log(10.0)
"""Magnitude error at a signal-to-noise ratio of 1 (definition; linear error propagation)."""
THRESHOLD_SIGMA = 5.0
"""Detection threshold that source lists usually apply (common practice, no source)."""
SUPPORT_MAG = 1.0
"""The faintest neighbours must reach within this of a claimed depth (common practice, no source)."""
BEYOND_NOMINAL_MAG = 1.0
"""A local depth deeper than the nominal one by more than this is not believed (common practice, no source)."""
FAINT_PART = 1.0 / 3.0
"""Part of the neighbours, from the faint end, whose quoted errors are read (common practice, no source)."""
CLIP_SIGMA, CLIP_ROUNDS = 3.0, 5


@dataclass(frozen=True)
class _Depth:
    """A depth with its meaning: threshold of n sigma, or a completeness already."""

    value: float
    n_sigma: float | None
    method: LimitMethod
    note: str


def limit_for_band(
    band: Band, photometry: Photometry | None, *, assumptions: Assumptions, why_none: str = "no neighbours"
) -> Limit | None:
    """Completeness limit of one band at the position, as observed, in the band's unit.

    Parameters
    ----------
    band : Band
        With its nominal depth, if one is known.
    photometry : Photometry or None
        Neighbours in this band; ``nan`` and listed limits are left out.
    assumptions : Assumptions
        Confidence and how many neighbours a local depth needs.
    why_none : str
        Why there is no photometry, for the note.

    Returns
    -------
    Limit or None
        None when neither the neighbours nor the file tell a depth.

    Notes
    -----
    In order of trust: quoted errors of the neighbours at 5 sigma; their faint end (turn-over of the counts of
    magnitudes; order statistic of a power law of fluxes); the nominal depth. The note names what was passed over.
    """
    passed: list[str] = []
    chosen: _Depth | None = None
    if photometry is None:
        passed.append(why_none)
    else:
        good = np.isfinite(photometry.value) & ~photometry.is_limit
        if band.quantity is not Quantity.MAGNITUDE:
            good &= photometry.value > 0.0
        value, error = photometry.value[good], photometry.error[good]
        if len(value) < assumptions.depth_min_rows:
            passed.append(f"local depth needs {assumptions.depth_min_rows} neighbours, {len(value)} are listed")
        else:
            for estimate in (_from_errors, _from_faint_end):
                depth = estimate(band, value, error, passed)
                if depth is not None and _believable(band, depth, passed):
                    chosen = depth
                    break
    verified = True
    if chosen is None:
        chosen = _nominal(band)
        if chosen is None:
            return None
        verified = not any(word in band.depth_source for word in ("memory", "unverified", "public use"))
    z = float(z_one_sided(assumptions.confidence))
    note = chosen.note
    if chosen.n_sigma is not None:
        total = float(completeness_sigma(chosen.n_sigma, assumptions.confidence))
        value_at = float(restate(chosen.value, chosen.n_sigma, total, band.quantity))
        note += f"; {assumptions.confidence:.0%} of sources at {total:.2f} sigma are listed"
    elif chosen.method is LimitMethod.NOMINAL and band.depth_completeness is not None:
        stated = min(max(band.depth_completeness, 1.0e-3), 1.0 - 1.0e-3)
        z_stated = float(z_one_sided(stated))
        value_at = float(restate(chosen.value, THRESHOLD_SIGMA + z_stated, THRESHOLD_SIGMA + z, band.quantity))
        total = THRESHOLD_SIGMA + z
        note += (
            f"; taken from {stated:.0%} to {assumptions.confidence:.0%} as for a {THRESHOLD_SIGMA:g} sigma threshold"
        )
    else:
        value_at, total = chosen.value, THRESHOLD_SIGMA + z
    if passed:
        note += f"; passed over: {'; '.join(passed)}"
    return Limit(
        band=band,
        value=value_at,
        kind=LimitKind.COMPLETENESS,
        confidence=assumptions.confidence,
        n_sigma=total,
        method=chosen.method,
        note=note,
        verified_depth=verified,
    )


def _from_errors(band: Band, value: Floats, error: Floats, passed: list[str]) -> _Depth | None:
    """Depth at 5 sigma from the errors that the neighbours quote."""
    use = np.isfinite(error) & (error > 0.0)
    if np.count_nonzero(use) < max(10, len(value) // 2):
        passed.append("too few neighbours quote an error")
        return None
    value, error = value[use], error[use]
    if band.quantity is Quantity.MAGNITUDE:
        order = np.argsort(value)[-max(10, len(value) // 2) :]
        slope, zero = _robust_line(value[order], np.log10(error[order]))
        if not slope > 0.0:
            passed.append("quoted errors do not grow towards the faint end")
            return None
        depth = (np.log10(SIGMA_MAG_AT_ONE / THRESHOLD_SIGMA) - zero) / slope
        gap = depth - float(np.quantile(value, 0.95))
        if gap > SUPPORT_MAG:
            passed.append(f"quoted errors reach 5 sigma {gap:.1f} mag beyond the faintest neighbours")
            return None
    else:
        faint = error[np.argsort(value)[: max(10, int(len(value) * FAINT_PART))]]
        depth = THRESHOLD_SIGMA * float(np.median(faint))
        gap = 2.5 * np.log10(float(np.quantile(value, 0.05)) / depth)
        if gap > SUPPORT_MAG:
            passed.append(f"5 sigma of the quoted errors lies a factor {10 ** (0.4 * gap):.1f} below every neighbour")
            return None
    return _Depth(
        float(depth),
        THRESHOLD_SIGMA,
        LimitMethod.LOCAL_ERRORS,
        f"{THRESHOLD_SIGMA:g} sigma depth {depth:.4g} {band.unit} from the errors of {len(value)} neighbours",
    )


def _from_faint_end(band: Band, value: Floats, error: Floats, passed: list[str]) -> _Depth | None:
    """Depth from where the neighbours end."""
    n = len(value)
    if band.quantity is Quantity.MAGNITUDE:
        depth = _half_sample_mode(np.sort(value))
        return _Depth(
            depth,
            None,
            LimitMethod.LOCAL_FAINT_END,
            f"counts of {n} neighbours turn over at {depth:.2f} mag, where completeness begins to fall: taken as the completeness limit",
        )
    faintest = float(value.min())
    spread = float(np.log(value / faintest).sum())
    if not spread > 0.0:
        passed.append("every neighbour has the same flux")
        return None
    beta = (n - 1) / spread
    depth = faintest * (1.0 - 1.0 / (n * beta)) if n * beta > 1.0 else faintest
    return _Depth(
        depth,
        THRESHOLD_SIGMA,
        LimitMethod.LOCAL_FAINT_END,
        f"faint end of {n} neighbours at {depth:.3g} {band.unit} (power-law counts, slope {beta:.2f})",
    )


def _believable(band: Band, depth: _Depth, passed: list[str]) -> bool:
    """A neighbourhood cannot be much deeper than the whole catalog."""
    if band.depth is None:
        return True
    if band.quantity is Quantity.MAGNITUDE:
        deeper = depth.value - band.depth
    else:
        deeper = 2.5 * np.log10(band.depth / depth.value)
    if deeper <= BEYOND_NOMINAL_MAG:
        return True
    passed.append(f"{depth.method} gives {depth.value:.4g} {band.unit}, {deeper:.1f} mag beyond the nominal depth")
    return False


def _nominal(band: Band) -> _Depth | None:
    if band.depth is None:
        return None
    meaning = (
        f"{band.depth_n_sigma:g} sigma"
        if band.depth_n_sigma is not None
        else f"{band.depth_completeness or 0:.0%} complete"
    )
    return _Depth(
        band.depth,
        band.depth_n_sigma,
        LimitMethod.NOMINAL,
        f"nominal depth {band.depth:.4g} {band.unit} ({meaning}; {band.depth_source})",
    )


def _robust_line(x: Floats, y: Floats) -> tuple[float, float]:
    """Slope and zero of a straight line, outliers clipped around their median absolute deviation."""
    keep = np.ones(len(x), dtype=bool)
    slope, zero = 0.0, float(np.median(y))
    for _ in range(CLIP_ROUNDS):
        xm, ym = x[keep].mean(), y[keep].mean()
        spread = float(np.square(x[keep] - xm).sum())
        if spread == 0.0:
            break
        slope = float(((x[keep] - xm) * (y[keep] - ym)).sum()) / spread
        zero = float(ym - slope * xm)
        residual = y - zero - slope * x
        width = 1.4826 * float(np.median(np.abs(residual[keep])))  # MAD to sigma of a Gaussian
        new = np.abs(residual) <= max(CLIP_SIGMA * width, 1.0e-9)
        if np.array_equal(new, keep) or np.count_nonzero(new) < 5:
            break
        keep = new
    return slope, zero


def _half_sample_mode(ordered: Floats) -> float:
    """Mode of a sorted sample: the densest half, again and again (Bickel & Fruehwirth 2006, CSDA 50, 3500)."""
    values = ordered
    while len(values) > 3:
        half = (len(values) + 1) // 2
        widths = values[half - 1 :] - values[: len(values) - half + 1]
        start = int(np.argmin(widths))
        values = values[start : start + half]
    return float(np.mean(values))
