"""A commented catalog file to start from. It loads as it stands, so that a mistake made later is the user's own."""

from __future__ import annotations

import re
from pathlib import Path

from xmatch.errors import FactError

_ID = re.compile(r"[a-z0-9][a-z0-9.-]*\Z")

TEMPLATE = """\
# A catalog file. Every number has its source beside it: a bibcode, the archive's page, or "from memory", which marks the
# fact as unverified. Unknown keys are refused, so a slip of the pen is noticed. Lines that begin with # are optional.

id = "{id}"                       # the file's name
title = "My survey, source list"
waveband = "radio"                # gamma ray, hard X-ray, soft X-ray, ultraviolet, optical, near-infrared, mid-infrared,
                                  # radio, or object list (whose absences prove nothing)
release = "1"                     # a new release makes every target due again
refresh = "frozen"                # how often it changes: frozen, yearly, monthly, rolling
state = "needs check"             # leave this line out once you have confirmed the columns yourself; until then looks pass
                                  # the catalog over, and a good `blankfield catalogs check` unlocks it
# exposures = "My telescope"      # where another catalog is made from the same images: their limits are not independent
cite = ["bibcode or DOI"]
acknowledgement = "We used my survey."
source = "from memory"
# notes = ["What a reader should know."]

# One table, or several that share the columns below: a survey that keeps the plane apart is one catalog.
[[tables]]
name = "main"
protocol = "vizier"               # vizier, cone, tap, simbad or file
address = "https://vizier.cds.unistra.fr/viz-bin/votable"
table = "J/ApJ/1/1/table1"        # not needed for cone and file
# geometry = "box"                # tap: for a service without CONTAINS and CIRCLE
# mode = "async"                  # tap: for a service that answers by jobs only
# format = "csv"                  # file: csv, fits, votable or ecsv
# holds = {{ kind = "galactic box", b_deg = [-5.0, 5.0], source = "from memory" }}
source = "from memory"

[columns]
key = "Name"                      # leave it out where the list has no names: the position stands for them
ra = "RAJ2000"                    # ICRS or J2000, degrees; the unit is read from the reply
dec = "DEJ2000"
# positions = "sexagesimal"       # where both are text, hours and degrees
# units = {{ RAJ2000 = "deg" }}     # only for columns that the service serves without a unit
# keep = ["Type"]                 # further columns to keep with each row
source = "from memory"

[columns.error]
meaning = "per axis"              # per axis (ra, dec), ellipse (major, minor, angle; level for one that holds a stated
                                  # fraction), radius (radius and level), radial (root of the summed variances), none
ra = "e_RAJ2000"
dec = "e_DEJ2000"
floor_arcsec = 0.5                # systematic error per axis, added in quadrature
source = "from memory"

# [columns.motion]
# ra = "pmRA"
# dec = "pmDE"
# cosdec = true                   # whether the RA motion holds the factor cos(dec)
# source = "from memory"

[epoch]
value_yr = 2015.0
# column = "MJD"
# scale = "mjd"                   # mjd, jd or year
source = "from memory"

[coverage]
kind = "declination"              # all sky, declination (dec_deg), galactic box (l_deg, b_deg), footprint (moc = address),
                                  # pointed (with [coverage.log]), unstated, or compilation for a list
dec_deg = [-40.0, 90.0]
source = "from memory"

[neighbourhood]
radius_arcsec = 2700.0            # wide enough for some tens of rows around a target
row_limit = 2000
source = "our choice"

# [mirror]                        # a small list that is fetched whole and searched in the store
# rows_at_least = 300             # fewer rows than this are no whole answer
# source = "from memory"

[instrument]
resolution_arcsec = 45.0
integration_s = 23.0              # how long one place was looked at: it decides what the limit says of a pulse
source = "from memory"

[control]                         # a cone that is known to hold rows, for `blankfield catalogs check`
ra_deg = 187.2779
dec_deg = 2.0524
radius_arcsec = 2700.0
source = "from memory"

[[bands]]
name = "1.4 GHz"
kind = "frequency"                # frequency, wavelength or energy, with edges and their unit
low = 1.38
high = 1.42
# pivot = 1.4                     # where a flux density is quoted; the geometric mean without it
unit_of_edges = "GHz"
quantity = "flux density"         # magnitude (with system and zero_point_jy), flux density, band flux
unit = "mJy"                      # what the served unit must be convertible to
value = "S1.4"                    # leave it out where no column is known: the depth still gives a limit
error = "e_S1.4"
plausible = [0.0, 1.0e6]          # values outside are not believed
flux_scale_error = 0.05
# limit_flag = {{ column = "q", place = 0, letters = "U", source = "from memory" }}
source = "from memory"
depth = {{ value = 2.5, n_sigma = 5.0, source = "from memory" }}   # or completeness = 0.95
"""


def write_template(catalog_id: str, folder: Path) -> Path:
    """Write a commented catalog file.

    Parameters
    ----------
    catalog_id : str
        Lower-case letters, digits, hyphens and dots: it becomes the file's name.
    folder : Path
        Made where it does not exist.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    FactError
        An id that cannot be one, or a file that is already there.
    """
    if not _ID.match(catalog_id):
        raise FactError(f"id {catalog_id!r} is not allowed; use lower-case letters, digits, hyphens and dots")
    path = folder / f"{catalog_id}.toml"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with path.open("x", encoding="utf-8") as file:
            file.write(TEMPLATE.format(id=catalog_id))
    except FileExistsError:
        raise FactError(f"{path} is there already; it was left alone: take another id or folder") from None
    except OSError as fault:
        raise FactError(f"{path} cannot be written ({fault.strerror}); take another --folder") from None
    return path
