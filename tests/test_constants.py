"""Constants are equal to astropy's, which carries CODATA 2018/2022 and the IAU values."""

from __future__ import annotations

import astropy.constants as const
import astropy.units as u
import pytest
from astropy.constants import codata2018

from xmatch import constants as ours


@pytest.mark.parametrize(
    ("mine", "theirs"),
    [
        (ours.C_CM_S, const.c.cgs.value),
        (ours.H_ERG_S, const.h.cgs.value),
        (ours.K_ERG_K, const.k_B.cgs.value),
        (ours.KEV_ERG, u.keV.to(u.erg)),
        (ours.KEV_HZ, (1 * u.keV).to(u.Hz, equivalencies=u.spectral()).value),
        (ours.KEV_K, (1 * u.keV).to(u.K, equivalencies=u.temperature_energy()).value),
        (ours.SIGMA_SB_CGS, const.sigma_sb.cgs.value),
        (ours.G_CGS, codata2018.G.cgs.value),
        (ours.AU_CM, const.au.cgs.value),
        (ours.PC_CM, const.pc.cgs.value),
        (ours.LY_CM, u.lyr.to(u.cm)),
        (ours.YR_S, u.yr.to(u.s)),
        (ours.GM_SUN_CGS, const.GM_sun.cgs.value),
        (ours.RSUN_CM, const.R_sun.cgs.value),
        (ours.LSUN_ERG_S, const.L_sun.cgs.value),
        (ours.JY_CGS, u.Jy.to(u.erg / u.s / u.cm**2 / u.Hz)),
        (ours.DEG2_SR, (u.deg**2).to(u.sr)),
        (ours.KM_S_KPC_MAS_YR, (u.au / u.yr).to(u.km / u.s)),
    ],
)
def test_equal_to_astropy(mine: float, theirs: float) -> None:
    assert mine == pytest.approx(theirs, rel=1e-9)
