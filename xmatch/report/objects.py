"""The physical objects at the position, in words."""

from __future__ import annotations

from collections.abc import Iterator

from xmatch.objects import Source, Unseen
from xmatch.records import Look
from xmatch.report.words import number

SHOWN_OBJECTS = 5


def object_lines(look: Look) -> Iterator[tuple[str, str]]:
    """(label, text) of each paragraph: one per object with its rows, its bands, and where it is missing."""
    for index, source in enumerate(look.sources[:SHOWN_OBJECTS], 1):
        yield f"  {index}  ", _what(source)
        bands = [m for m in source.photometry if m.flux_cgs is not None]
        if len(bands) > 1:
            listed = ", ".join(f"{m.band.label} {'< ' if m.is_limit else ''}{number(m.flux_cgs)}" for m in bands)
            yield "     bands ", f"{listed} erg/s/cm^2, as observed, in order of rising frequency"
        missing = [one for one in source.unseen if one.should_be_seen]
        if missing:
            yield "     missing ", "; ".join(_missing(one) for one in missing)
        agreeing = sorted({one.catalog_id for one in source.unseen} - {one.catalog_id for one in missing})
        if agreeing:
            yield "     not listed ", f"in {', '.join(agreeing)}, which says nothing against it"
    left = len(look.sources) - SHOWN_OBJECTS
    if left > 0:
        yield "  ", f"and {left} more"
    if look.none_listed is not None:
        yield "  ", f"Probability that the target is none of them: {number(look.none_listed)}."


def _what(source: Source) -> str:
    rows = ", ".join(f"{catalog} {key}" for catalog, key in source.members)
    text = (
        f"{rows}: {source.separation_arcsec:.2f} arcsec ({source.normalised_separation:.2f} sigma), probability of being the "
        f"target {number(source.odds)}, of an unrelated object so close {number(source.chance)}"
    )
    if len(source.members) > 1:
        text += (
            f"; its {len(source.members)} rows are one object with probability {number(source.together, 3)} (Bayes factor "
            f"1e{source.log10_bayes:.0f})"
        )
    return text


def _missing(one: Unseen) -> str:
    return (
        f"{one.catalog_id} {one.band_name} should list it: its other bands foretell {number(one.predicted_flux_cgs)}, above "
        f"the limit {number(one.limit_flux_cgs)} erg/s/cm^2"
    )
