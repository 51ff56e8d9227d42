"""Catalogs whose columns nobody has confirmed: kept back until a check has found them, then asked by the names it found."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields, is_dataclass, replace
from typing import Any, Protocol

from xmatch.catalogs.model import Catalog

GOOD = "good"
"""Verdict of a check that unlocks a catalog."""


class Check(Protocol):
    """What is needed of a stored check."""

    @property
    def fingerprint(self) -> str:
        """SHA-256 of the catalog file that was checked."""

    @property
    def verdict(self) -> Any:
        """In words."""

    @property
    def resolved(self) -> Mapping[str, str]:
        """Names by UCD."""


def ready(catalogs: Mapping[str, Catalog], checks: Mapping[str, Check]) -> tuple[dict[str, Catalog], tuple[str, ...]]:
    """Part the registry into what may be asked and what waits for a check.

    Parameters
    ----------
    catalogs : mapping of str to Catalog
        The registry.
    checks : mapping of str to Check
        The latest check of each catalog; one of another state of the file does not count.

    Returns
    -------
    asked : dict of str to Catalog
        In the registry's order, with the names that checks found.
    waiting : tuple of str
        Ids that may not be asked yet.
    """
    asked: dict[str, Catalog] = {}
    waiting = []
    for name, catalog in catalogs.items():
        if not catalog.needs_check:
            asked[name] = catalog
            continue
        check = checks.get(name)
        fits = check is not None and check.fingerprint == catalog.fingerprint and str(check.verdict) == GOOD
        if check is not None and fits and set(catalog.unresolved) <= set(check.resolved):
            asked[name] = with_names(catalog, check.resolved)
        else:
            waiting.append(name)
    return asked, tuple(waiting)


def with_names(catalog: Catalog, names: Mapping[str, str]) -> Catalog:
    """The catalog with stand-ins replaced by the names found."""
    found: Catalog = _renamed(catalog, names)
    return replace(found, state="")


def _renamed(value: Any, names: Mapping[str, str]) -> Any:
    if isinstance(value, str):
        return names.get(value, value)
    if isinstance(value, tuple):
        return tuple(_renamed(item, names) for item in value)
    if is_dataclass(value) and not isinstance(value, type):
        return replace(value, **{f.name: _renamed(getattr(value, f.name), names) for f in fields(value)})
    return value
