"""The registry: one declarative file per catalog, the loader that validates it, and the door.

``load_catalogs()`` reads the files that ship with blankfield and any folders of the user's own;
:func:`xmatch.catalogs.door.normalise` turns a judged reply into rows in common units.
"""

from xmatch.catalogs.loader import load_catalogs
from xmatch.catalogs.model import Catalog, Table

__all__ = ["Catalog", "Table", "load_catalogs"]
