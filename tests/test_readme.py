"""The README and the other documents cannot drift from the program."""

from __future__ import annotations

import re
import shlex
from pathlib import Path

import click
import pytest

from xmatch import __version__
from xmatch.cli import COMMANDS, group
from xmatch.records import Outcome

TOP = Path(__file__).parent.parent
README = (TOP / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"```sh\n(.*?)```", README, re.S)
CALLS = [
    call.partition(" #")[0].split(" > ")[0].strip()
    for block in BLOCKS
    for call in block.replace("\\\n", " ").splitlines()
    if call.startswith("blankfield ")
]


def test_there_are_calls_to_check() -> None:
    assert len(CALLS) >= 3
    assert len(BLOCKS) >= 4


@pytest.mark.parametrize("call", CALLS)
def test_every_call_in_the_readme_parses(call: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    name, *args = shlex.split(call)[1:]
    command = group.get_command(click.Context(group), name)
    assert command is not None
    command.make_context(name, args)  # raises a usage error for an option that does not exist


@pytest.mark.parametrize("word", [str(outcome) for outcome in Outcome])
def test_every_outcome_is_explained(word: str) -> None:
    assert f"`{word}`" in README


def test_every_option_named_in_the_readme_exists() -> None:
    known = {opt for name in COMMANDS for p in group.get_command(click.Context(group), name).params for opt in p.opts}  # type: ignore[union-attr]
    for option in set(re.findall(r"`(--[a-z-]+)`", README)):
        assert option in known, option


def test_the_version_is_said_once_and_the_citation_agrees() -> None:
    assert f"version: {__version__}" in (TOP / "CITATION.cff").read_text(encoding="utf-8")


def test_every_command_has_a_line_in_the_changelog() -> None:
    changelog = (TOP / "CHANGELOG.md").read_text(encoding="utf-8")
    for name in COMMANDS:
        assert f"blankfield {name}" in changelog


def test_every_error_has_a_sentence_and_stands_in_the_tree() -> None:
    from xmatch import errors

    tree = errors.__doc__ or ""
    for name, kind in vars(errors).items():
        if isinstance(kind, type) and issubclass(kind, Exception):
            assert kind.__doc__, name
            assert name in tree, name
