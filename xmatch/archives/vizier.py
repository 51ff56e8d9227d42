"""The VizieR request form: its text built by astroquery, sent by our own transport."""

from __future__ import annotations

import warnings
from threading import Lock

from xmatch.archives.transport import Request
from xmatch.records import Question

_building = Lock()


def request(question: Question) -> Request:
    """Build the POST request of one cone at one VizieR table.

    Parameters
    ----------
    question : Question
        ``remote_table`` as VizieR spells it; ``ra_deg``, ``dec_deg`` in ICRS degrees, ``radius_arcsec``
        in arcsec; ``columns`` are asked for by name, those that begin with an underscore as columns that
        VizieR computes. One row more than ``row_limit`` is asked for, so that a cut answer shows itself.

    Returns
    -------
    Request
        The body holds one parameter a line. Its centre is in FK5, as VizieR takes a centre without a
        frame: up to 0.03 arcsec from the ICRS numbers of the question. The column metadata is asked for,
        so that a table without rows is still present in the answer.

    Notes
    -----
    Only the text is astroquery's: its own asking takes an error page for an empty answer and keeps it for a
    week (astroquery#3626).
    """
    # astropy's warning filters and first imports are the process's: one thread at a time
    with _building, warnings.catch_warnings():
        warnings.simplefilter("ignore")
        import astropy.units as u
        from astropy.coordinates import SkyCoord
        from astroquery.vizier import VizierClass

        client = VizierClass(
            columns=[column.name for column in question.columns],
            catalog=question.remote_table,
            row_limit=question.row_limit + 1,
        )
        client._session.close()
        body = client.query_region(
            SkyCoord(question.ra_deg, question.dec_deg, unit="deg", frame="icrs"),
            radius=question.radius_arcsec * u.arcsec,
            catalog=question.remote_table,
            cache=False,
            get_query_payload=True,
        )
    return Request("POST", question.address, str(body).encode())
