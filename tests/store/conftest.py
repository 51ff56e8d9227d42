"""An open store with one target, one catalog and one run; and the builders."""

from __future__ import annotations

import importlib.util
import inspect
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


def _load(file: str = "builders") -> ModuleType:
    name = f"blankfield_store_{file}"
    if name not in sys.modules:
        spec = importlib.util.spec_from_file_location(name, HERE / f"{file}.py")
        assert spec is not None and spec.loader is not None
        sys.modules[name] = importlib.util.module_from_spec(spec)
        spec.loader.exec_module(sys.modules[name])
    return sys.modules[name]


postgres_server = _load("postgres_server")


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


BACKENDS = ("sqlite", "postgresql")


def pytest_generate_tests(metafunc: pytest.Metafunc) -> None:
    """Every test of a store, and not of its file, runs on both kinds of database."""
    asked = inspect.signature(metafunc.function).parameters
    if "scene" in asked and "path" not in asked:
        metafunc.parametrize("backend", BACKENDS, indirect=True)


@pytest.fixture
def backend(request: pytest.FixtureRequest) -> str:
    return str(getattr(request, "param", "sqlite"))


@pytest.fixture
def where(backend: str, path: Path, request: pytest.FixtureRequest) -> Any:
    """Place for a new store: a file, or an empty schema on a server of our own."""
    return path if backend == "sqlite" else request.getfixturevalue("empty_schema")()


@pytest.fixture(scope="session")
def server(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Any]:
    with postgres_server.running(tmp_path_factory.mktemp("postgresql")) as started:
        yield started


@pytest.fixture
def empty_schema(server: Any) -> Any:
    """Makes empty schemas: call it for the URL of a new one."""
    return server.new_schema


@pytest.fixture
def scene(where: Any, build: Any) -> Iterator[Scene]:
    with open_store(where) as store:
        target_id = store.put_target(build.TARGET)
        build.register(store)
        yield Scene(store, target_id, store.begin_run(target_id, "0.1", {"offline": False}))


@pytest.fixture
def child_environment() -> dict[str, str]:
    """Environment for a process of its own that imports blankfield from here."""
    inherited = os.environ.get("PYTHONPATH")
    here = str(HERE.parent.parent)
    return os.environ | {"PYTHONPATH": here if not inherited else here + os.pathsep + inherited}
