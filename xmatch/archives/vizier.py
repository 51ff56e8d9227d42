"""The VizieR request form: its text built by astroquery, sent by our own transport."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from threading import Lock

from xmatch.archives.transport import Request
from xmatch.records import Question

_building = Lock()


def request(question: Question) -> Request:
    """Build the POST request of one cone at one VizieR table; see :func:`request_for`."""
    return request_for([question])


def request_for(questions: Sequence[Question]) -> Request:
    """Build the POST request of one cone at one or more VizieR tables.

    Parameters
    ----------
    questions : sequence of Question
        ``remote_table`` as VizieR spells it; ``ra_deg``, ``dec_deg`` in ICRS degrees, ``radius_arcsec``
        in arcsec; ``columns`` are asked for by name, those that begin with an underscore as columns that
        VizieR computes. One row more than ``row_limit`` is asked for, so that a cut answer shows itself. All share
        address, centre, radius and row limit; each table gives those of the named columns that it has.

    Returns
    -------
    Request
        The body holds one parameter a line. Its centre is in FK5, as VizieR takes a centre without a
        frame: up to 0.03 arcsec from the ICRS numbers of the question. The column metadata is asked for,
        so that a table without rows is still present in the answer. A question for the whole table has no centre.

    Notes
    -----
    Only the text is astroquery's: its own asking takes an error page for an empty answer and keeps it for a
    week (astroquery#3626).
    """
    first = questions[0]
    tables = [question.remote_table for question in questions]
    columns = list(dict.fromkeys(column.name for question in questions for column in question.columns))
    # astropy's warning filters and first imports are the process's: one thread at a time
    with _building, warnings.catch_warnings():
        warnings.simplefilter("ignore")
        import astropy.units as u
        from astropy.coordinates import SkyCoord
        from astroquery.vizier import VizierClass

        client = VizierClass(columns=columns, catalog=tables, row_limit=first.row_limit + 1)
        client._session.close()
        if first.is_whole:
            body = client.query_constraints(catalog=tables, cache=False, get_query_payload=True)
            # astroquery adds a radius of 180 deg, about which VizieR complains: no centre goes with it
            body = "".join(line for line in str(body).splitlines(keepends=True) if not line.startswith("-c."))
        else:
            body = client.query_region(
                SkyCoord(first.ra_deg, first.dec_deg, unit="deg", frame="icrs"),
                radius=first.radius_arcsec * u.arcsec,
                catalog=tables,
                cache=False,
                get_query_payload=True,
            )
    return Request("POST", first.address, str(body).encode())
