"""A demo store of nine catalogs with a story each: small enough that answers to questions are checked by hand."""

from __future__ import annotations

from pathlib import Path

from xmatch.archives.transport import Transport
from xmatch.catalogs import load_catalogs
from xmatch.catalogs.model import Catalog
from xmatch.demo.scene import demo_archive, demo_target
from xmatch.pipeline import look
from xmatch.store.store import open_store

STREET = (
    "erass1-main", "gaia-dr3", "ps1-dr1", "2mass-psc", "catwise2020", "nvss", "racs-low", "vlass-ql1", "atnf-psr",
)  # fmt: skip


def nine_catalogs() -> dict[str, Catalog]:
    """The nine, in the registry's order."""
    return {name: catalog for name, catalog in load_catalogs().items() if name in STREET}


def make_store(path: Path) -> Path:
    """One look of the demo's target at the nine."""
    with demo_archive() as archive, open_store(path) as store:
        transport = Transport(addresses=archive.address)
        look(demo_target(), store=store, catalogs=nine_catalogs(), transport=transport)
        transport.close_session()
    return path
