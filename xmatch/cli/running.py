"""What ``look`` and ``demo`` share: run a look with progress, print it as asked."""

from __future__ import annotations

import json
import shutil
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from xmatch.pipeline import Progress
    from xmatch.records import Look, Target

MIN_WIDTH = 60
"""Narrower than this no table of numbers can be read."""


def run_look(
    target: Target,
    *,
    quiet: bool = False,
    store: str | None = None,
    offline: bool = False,
    again: bool = False,
    age_limit_days: float | None = None,
    only: tuple[str, ...] = (),
    catalog_folder: tuple[str, ...] = (),
    contact: str | None = None,
    archives: str | None = None,
    show_requests: bool = False,
) -> Look | None:
    """Run a look as the options say; None when only the requests were to be shown."""
    from xmatch.catalogs import load_catalogs
    from xmatch.errors import ConfigurationError
    from xmatch.pipeline import LookOptions, look, requests_of
    from xmatch.store.store import open_store

    if offline and again:
        raise ConfigurationError("--offline and --again contradict each other; give one of them")
    registry = load_catalogs(catalog_folder)
    for name in only:
        if name not in registry:
            raise ConfigurationError(f"--only {name!r} names no catalog; there are {', '.join(registry)}")
    chosen = {name: catalog for name, catalog in registry.items() if not only or name in only}
    options = LookOptions(offline=offline, again=again, age_limit_days=age_limit_days, partial=bool(only))
    with open_store(store) as opened:
        transport = None
        if show_requests or not offline:
            from xmatch.archives.transport import Transport

            transport = Transport(contact=contact, addresses=archives)
        if show_requests and transport is not None:
            for text in requests_of(target, store=opened, catalogs=chosen, transport=transport, options=options):
                click.echo(text)
                click.echo()
            return None
        with progress_on(quiet) as progress:
            return look(target, store=opened, catalogs=chosen, transport=transport, options=options, progress=progress)


@contextmanager
def progress_on(quiet: bool) -> Iterator[Progress | None]:
    """Show what is being asked, on standard error; plain lines when it is not a terminal."""
    if quiet:
        yield None
        return
    if not sys.stderr.isatty():

        def line(catalog_id: str, what: str) -> None:
            if what != "asking":
                click.echo(f"{catalog_id}: {what}", err=True)

        yield line
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as Bar

    waiting: list[str] = []
    columns = (
        TextColumn("asking"),
        BarColumn(),
        MofNCompleteColumn(),
        TimeElapsedColumn(),
        TextColumn("{task.description}"),
    )
    with Bar(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("", total=0)

        def update(catalog_id: str, what: str) -> None:
            if what == "asking":
                waiting.append(catalog_id)
                bar.update(task, total=len(waiting) + bar.tasks[0].completed)
            elif catalog_id in waiting:
                waiting.remove(catalog_id)
                bar.advance(task)
            bar.update(task, description="waiting for " + ", ".join(waiting[:4]) if waiting else "")

        yield update


def width_of(width: int | None) -> int:
    """Width of the answer: as asked, that of the terminal, or ``COLUMNS``; 80 where nothing says."""
    return width or max(MIN_WIDTH, shutil.get_terminal_size().columns)


def print_answer(answer: Look, width: int | None, as_json: bool) -> None:
    """Print the answer for people, or as JSON for scripts. A pipe needs no rich, whose import would be felt."""
    if as_json:
        from xmatch.report.asjson import to_json

        json.dump(to_json(answer), sys.stdout, indent=2, allow_nan=False)
        sys.stdout.write("\n")
        return
    from xmatch.report.terminal import lines, render

    if not sys.stdout.isatty():
        for line, _ in lines(answer, width_of(width)):
            click.echo(line)
        return
    from rich.console import Console

    render(answer, Console(width=width))
