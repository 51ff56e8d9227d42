"""Simple Cone Search (IVOA, version 1.03): the exact address, built by pyvo and sent by our own transport."""

from __future__ import annotations

import warnings
from threading import Lock
from urllib.parse import urlencode

from xmatch.archives.transport import Request
from xmatch.records import Question

ARCSEC_PER_DEG = 3600.0
ALL_COLUMNS = 3
"""VERB=3 asks for every column: a service chooses the columns, so the ones we need must not be left out."""
_building = Lock()


def request(question: Question) -> Request:
    """Build the GET request of one cone.

    Parameters
    ----------
    question : Question
        ``ra_deg``, ``dec_deg`` in ICRS degrees, ``radius_arcsec`` in arcsec. One row more than
        ``row_limit`` is asked for (MAXREC), so that a cut answer shows itself; services of version 1.03
        are free to ignore it.

    Returns
    -------
    Request
        RA, DEC and SR in degrees, VERB and MAXREC.

    References
    ----------
    Plante et al. 2008, IVOA Recommendation "Simple Cone Search", version 1.03; MAXREC: Dowler et al. 2017,
    IVOA Recommendation "Data Access Layer Interface", version 1.1.
    """
    with _building, warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from pyvo.dal.scs import SCSQuery

        query = SCSQuery(
            question.address,
            pos=(question.ra_deg, question.dec_deg),
            radius=question.radius_arcsec / ARCSEC_PER_DEG,
            verbosity=ALL_COLUMNS,
            maxrec=question.row_limit + 1,
        )
        base, values = query.queryurl, {name: _plain(value) for name, value in query.items()}
        query._session.close()
    separator = "" if base.endswith(("?", "&")) else "&" if "?" in base else "?"
    return Request("GET", f"{base}{separator}{urlencode(values)}")


def _plain(value: object) -> str:
    """Numbers without an exponent: some services do not read one. 1e-10 deg is far below any error."""
    return f"{float(value):.10f}".rstrip("0").rstrip(".") if isinstance(value, float) else str(value)
