"""The demo's scene: the invented target and the embedded archive that serves the invented sky."""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING

from xmatch.resources import fixture_path
from xmatch.target import read_target

if TYPE_CHECKING:
    from xmatch.demo.server import EmbeddedArchive
    from xmatch.demo.tables import DemoTable
    from xmatch.records import Target

TARGET_FILE = "demo/tern-4.toml"
SKY_FOLDER = "demo/sky"


def demo_target() -> Target:
    """The invented transient Tern-4."""
    return read_target(fixture_path(TARGET_FILE))


def demo_archive() -> EmbeddedArchive:
    """An embedded archive, not yet started, that serves every table of the invented sky."""
    from xmatch.demo.server import EmbeddedArchive

    return EmbeddedArchive(_tables())


@lru_cache(maxsize=1)
def _tables() -> tuple[DemoTable, ...]:
    from xmatch.demo.tables import load_table

    return tuple(load_table(path) for path in sorted(fixture_path(SKY_FOLDER).glob("*.ecsv")))
