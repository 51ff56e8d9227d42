"""An open store with one target, one catalog and one run; and the builders."""

from __future__ import annotations

import importlib.util
import os
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from xmatch.store.store import Store, open_store

HERE = Path(__file__).parent


def _load() -> ModuleType:
    name = "blankfield_store_builders"
    if name not in sys.modules:
        spec = importlib.util.spec_from_file_location(name, HERE / "builders.py")
        assert spec is not None and spec.loader is not None
        sys.modules[name] = importlib.util.module_from_spec(spec)
        spec.loader.exec_module(sys.modules[name])
    return sys.modules[name]


@dataclass
class Scene:
    store: Store
    target_id: int
    run_id: int


@pytest.fixture
def build() -> Any:
    """The builders, as a module."""
    return _load()


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "scene.sqlite"


@pytest.fixture
def scene(path: Path, build: Any) -> Iterator[Scene]:
    with open_store(path) as store:
        target_id = store.put_target(build.TARGET)
        build.register(store)
        yield Scene(store, target_id, store.begin_run(target_id, "0.1", {"offline": False}))


@pytest.fixture
def child_environment() -> dict[str, str]:
    """Environment for a process of its own that imports blankfield from here."""
    inherited = os.environ.get("PYTHONPATH")
    here = str(HERE.parent.parent)
    return os.environ | {"PYTHONPATH": here if not inherited else here + os.pathsep + inherited}
