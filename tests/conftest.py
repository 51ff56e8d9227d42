"""What every test shares: nothing leaves loopback, no store of the user's is touched, one embedded archive per test."""

from __future__ import annotations

import socket
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import hypothesis
import pytest

hypothesis.settings.register_profile("ci", derandomize=True, deadline=None, max_examples=60)
hypothesis.settings.load_profile("ci")

LOOPBACK = ("127.", "::1", "localhost")


@pytest.fixture(autouse=True)
def only_loopback(monkeypatch: pytest.MonkeyPatch) -> None:
    """Refuse every connection that would leave this machine."""
    connect = socket.socket.connect

    def guarded(self: socket.socket, address: Any) -> None:
        host = address[0] if isinstance(address, tuple) else ""
        if isinstance(address, tuple) and not str(host).startswith(LOOPBACK):
            raise AssertionError(f"a test tried to reach {host}")
        connect(self, address)

    monkeypatch.setattr(socket.socket, "connect", guarded)


@pytest.fixture(autouse=True)
def clean_environment(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """No setting of the person who runs the tests leaks in, and no store of theirs is touched."""
    import os

    for name in list(os.environ):
        if name.startswith("BLANKFIELD_") or name.lower().endswith("_proxy"):
            monkeypatch.delenv(name)
    monkeypatch.setenv("BLANKFIELD_STORE", str(tmp_path / "test.sqlite"))


@pytest.fixture
def archive() -> Iterator[Any]:
    """The embedded archive with the invented sky."""
    from xmatch.demo.scene import demo_archive

    with demo_archive() as running:
        yield running
