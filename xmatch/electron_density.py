"""Distance of a dispersion measure by published electron-density models, each asked in a process of its own.

The models come with the optional extra ``dm`` (the package mwprop, GPL-3). It is run, never imported here: it writes into its
own folder on import, and only the first model imported in a process answers as itself. Each question therefore gets a fresh
process and a private copy of the package.
"""

from __future__ import annotations

import json
import math
import subprocess
import sys
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor

from xmatch.errors import ConfigurationError, RangeError

MODELS = {
    "NE2001": "Cordes & Lazio 2002, arXiv:astro-ph/0207156",
    "NE2025": "Ocker & Cordes 2026, ApJ 1002, 3 (from memory)",
}
LONGEST_S = 120.0
"""A line of sight that leaves the model takes up to half a minute; longer is a fault."""
WORKER = """
import contextlib, importlib, importlib.util, io, json, shutil, sys, tempfile
from pathlib import Path
model, l, b, dm = sys.argv[1], *map(float, sys.argv[2:5])
found = importlib.util.find_spec("mwprop")
if found is None:
    print(json.dumps({"missing": True}))
    raise SystemExit
with tempfile.TemporaryDirectory() as folder, contextlib.redirect_stdout(io.StringIO()):
    shutil.copytree(list(found.submodule_search_locations)[0], Path(folder) / "mwprop")
    sys.path.insert(0, folder)
    room = importlib.import_module(f"mwprop.nemod.{model}")
    answer = getattr(room, model.lower())(l, b, dm, 1, classic=False)[1]
print(json.dumps({"kpc": float(answer["DIST"]), "beyond": str(answer["limdist"]).strip() == ">"}))
"""


def distance_pc(l_deg: float, b_deg: float, dm_pc_cm3: float, model: str) -> float:
    """Distance of a dispersion measure in one model, pc. The model's own error, a factor 1.5 or more, is not in it.

    Parameters
    ----------
    l_deg, b_deg : float
        Galactic longitude and latitude.
    dm_pc_cm3 : float
        Above 0.
    model : str
        One of :data:`MODELS`, where the sources stand.

    Raises
    ------
    RangeError
        For an unknown model, a dispersion measure not above 0, or one that exceeds all the model holds on this line: the
        distance it then gives means nothing.
    ConfigurationError
        Where the extra is not installed, or the model fails.
    """
    if model not in MODELS:
        raise RangeError(f"electron-density model {model!r} is not known; there are {', '.join(MODELS)}")
    if not (math.isfinite(dm_pc_cm3) and dm_pc_cm3 > 0.0):
        raise RangeError(f"dispersion measure {dm_pc_cm3} pc cm^-3 is not allowed; it must be above 0")
    command = [sys.executable, "-c", WORKER, model, *(repr(float(v)) for v in (l_deg, b_deg, dm_pc_cm3))]
    try:
        done = subprocess.run(command, capture_output=True, text=True, timeout=LONGEST_S, check=False)
    except subprocess.TimeoutExpired:
        raise ConfigurationError(f"{model} gave no answer in {LONGEST_S:g} s; give a distance range instead") from None
    lines = done.stdout.strip().splitlines()
    if done.returncode != 0 or not lines:
        last = (done.stderr.strip().splitlines() or ["no message"])[-1]
        raise ConfigurationError(f"{model} failed ({last}); reinstall the extra 'dm' or give a distance range instead")
    answer = json.loads(lines[-1])
    if "missing" in answer:
        raise ConfigurationError(
            f"{model} is not installed; pip install 'blankfield[dm]', or give a distance range instead of models"
        )
    if answer["beyond"]:
        raise RangeError(
            f"DM {dm_pc_cm3:g} pc cm^-3 at l {l_deg:.3f}, b {b_deg:.3f} exceeds what {model} holds along that line; give a "
            "distance range instead"
        )
    return 1.0e3 * float(answer["kpc"])


def distances_pc(l_deg: float, b_deg: float, dm_pc_cm3: float, models: Sequence[str] = tuple(MODELS)) -> list[float]:
    """The same by several models side by side, asked at once, in their order."""
    with ThreadPoolExecutor(max_workers=len(models)) as pool:
        return list(pool.map(lambda model: distance_pc(l_deg, b_deg, dm_pc_cm3, model), models))
