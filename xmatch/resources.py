"""Where the files are that ship beside the code: the SQL contract and the demo's invented sky.

In a source checkout they lie beside the package (``db/``, ``fixtures/``), in an installed wheel inside
it (``xmatch/_db``, ``xmatch/_fixtures``). Callers never need to know which.
"""

from __future__ import annotations

from pathlib import Path

from xmatch.errors import BlankfieldError

_PACKAGE = Path(__file__).resolve().parent


def db_path(name: str = "") -> Path:
    """Return the path of a file of the SQL contract, or of its folder.

    Parameters
    ----------
    name : str
        Path below ``db/``, such as ``views.sql``.

    Raises
    ------
    BlankfieldError
        When the installation lacks it.
    """
    return _find("db", name, _PACKAGE)


def fixture_path(name: str = "") -> Path:
    """Return the path of a fixture file, or of the folder. An installed wheel holds only ``demo/``.

    Parameters
    ----------
    name : str
        Path below ``fixtures/``, such as ``demo/sky``.

    Raises
    ------
    BlankfieldError
        When the installation lacks it.
    """
    return _find("fixtures", name, _PACKAGE)


def _find(folder: str, name: str, package: Path) -> Path:
    inside = package / f"_{folder}"
    # beside the package only in a checkout: site-packages may hold a stranger's folder of the same name
    beside = package.parent / folder
    roots = [inside] + ([beside] if (package.parent / "pyproject.toml").is_file() else [])
    for root in roots:
        if (root / name).exists():
            return root / name
    raise BlankfieldError(
        f"{folder}/{name} is missing from this installation (looked in {', '.join(map(str, roots))}); "
        "install blankfield again"
    )
