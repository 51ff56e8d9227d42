"""Limits of a pointed X-ray exposure: what its length and its off-axis losses leave."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.limits.counts import counts_to_flux, kashyap_limit
from xmatch.records import Floats


def pointed_limit(
    exposure_s: ArrayLike, background_per_s: ArrayLike, enclosed: ArrayLike, vignetting: ArrayLike,
    ecf_counts_cm2_erg: ArrayLike, false_alarm: ArrayLike, detection_probability: ArrayLike,
) -> Floats:  # fmt: skip
    """Detection limit of one exposure, erg s^-1 cm^-2 in the band of the conversion factor, as observed.

    Parameters
    ----------
    exposure_s : array_like
        Live time, s, > 0, not corrected for vignetting.
    background_per_s : array_like
        Background in the aperture, counts s^-1, >= 0, as counted off axis.
    enclosed, vignetting : array_like
        Fraction of a source in the aperture and effective area over that on axis, in (0, 1].
    ecf_counts_cm2_erg : array_like
        Counts s^-1 per erg s^-1 cm^-2 on axis, for one stated spectrum and band, > 0.
    false_alarm, detection_probability : array_like
        In (0, 1).

    Notes
    -----
    Kashyap et al. 2010, ApJ 719, 900 for the counts; divided by exposure, losses and conversion factor (definition).
    """
    t, v = np.asarray(exposure_s, dtype=float), np.asarray(vignetting, dtype=float)
    if not np.all(t > 0.0) or not np.all((v > 0.0) & (v <= 1.0)):
        raise RangeError(
            f"exposure {exposure_s} s with vignetting {vignetting} is not allowed; give a time above 0 and a part in (0, 1]"
        )
    counts = kashyap_limit(np.asarray(background_per_s, dtype=float) * t, false_alarm, detection_probability)
    return counts_to_flux(counts, t, np.asarray(enclosed, dtype=float) * v, ecf_counts_cm2_erg)
