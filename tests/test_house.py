"""The arrows of the house, the size of its files, and what start-up may import."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parent.parent / "xmatch"
GROUND = {"errors", "records", "asking", "units", "vocabulary", "assumptions", "constants"}
PURE = {"match", "limits", "flux", "spin"}
MAY_IMPORT = {
    **{name: GROUND for name in GROUND},
    **{name: GROUND | PURE for name in PURE},
    "resources": GROUND,
    "position": GROUND | PURE,
    "target": GROUND | PURE | {"position"},
    "classes": GROUND | PURE,
    "catalogs": GROUND | PURE,
    "store": GROUND | {"resources", "__init__"},
    "archives": GROUND | {"__init__"},
    "demo": GROUND | {"resources", "target", "catalogs", "__init__"},
    "plan": GROUND | PURE | {"catalogs"},
    "weigh": GROUND | PURE | {"catalogs", "plan"},
    "gather": GROUND | PURE | {"catalogs", "archives", "store", "plan", "weigh"},
    "pipeline": GROUND | PURE | {"catalogs", "classes", "archives", "store", "plan", "gather", "weigh", "__init__"},
    "inspection": GROUND | PURE | {"catalogs", "archives", "store"},
    "report": GROUND | PURE | {"catalogs", "position", "__init__"},
}
HEAVY = {"numpy", "pandas", "sqlalchemy", "astropy", "astroquery", "pyvo", "scipy", "rich", "requests", "matplotlib"}
LONGEST_FILE = 500


def modules() -> list[Path]:
    return sorted(PACKAGE.rglob("*.py"))


def room_of(path: Path) -> str:
    parts = path.relative_to(PACKAGE).parts
    return parts[0] if len(parts) > 1 else path.stem


def imported_rooms(path: Path) -> set[str]:
    rooms = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        names: list[str] = []
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            module = node.module or ""
            names = [f"{module}.{alias.name}" for alias in node.names] if module == "xmatch" else [module]
        for name in names:
            if name.split(".")[0] == "xmatch":
                room = name.split(".")[1] if "." in name else "__init__"
                rooms.add("__init__" if room == "__version__" else room)
    return rooms


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(PACKAGE)))
def test_imports_point_one_way(path: Path) -> None:
    room = room_of(path)
    if room in ("cli", "__main__", "__init__"):
        return
    assert imported_rooms(path) - {room} <= MAY_IMPORT[room], room


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(PACKAGE)))
def test_no_file_grows_too_long(path: Path) -> None:
    assert len(path.read_text(encoding="utf-8").splitlines()) <= LONGEST_FILE


def loaded_after(code: str) -> set[str]:
    done = subprocess.run(
        [sys.executable, "-c", f"{code}\nimport sys; print(*sorted(sys.modules))"],
        check=True, capture_output=True, text=True,
    )  # fmt: skip
    return set(done.stdout.split("\n")[-2].split())


def test_help_imports_nothing_heavy() -> None:
    loaded = loaded_after("from xmatch.cli import main\ntry:\n    main(['--help'])\nexcept SystemExit:\n    pass")
    assert "click" in loaded
    assert not loaded & HEAVY


def test_importing_the_package_touches_nothing_heavy() -> None:
    assert not loaded_after("import xmatch") & HEAVY
