"""What ``look`` and ``demo`` share: run a look with progress, print it as asked."""

from __future__ import annotations

import json
import sys
from typing import TYPE_CHECKING, Any

import click

if TYPE_CHECKING:
    from collections.abc import Iterator

    from rich.console import Console

    from xmatch.pipeline import Progress
    from xmatch.records import Look

from contextlib import contextmanager


@contextmanager
def progress_on(stderr: Console, quiet: bool) -> Iterator[Progress | None]:
    """Show what is being asked, on standard error; plain lines when it is not a terminal."""
    if quiet:
        yield None
        return
    if not stderr.is_terminal:

        def line(catalog_id: str, what: str) -> None:
            if what != "asking":
                click.echo(f"{catalog_id}: {what}", err=True)

        yield line
        return
    from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as Bar

    waiting: list[str] = []
    columns = (TextColumn("asking"), BarColumn(), MofNCompleteColumn(), TimeElapsedColumn(), TextColumn("{task.description}"))
    with Bar(*columns, console=stderr, transient=True) as bar:
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


def consoles(width: int | None) -> tuple[Any, Any]:
    """Return the consoles for the answer (standard output) and for progress (standard error)."""
    from rich.console import Console

    return Console(width=width, soft_wrap=False), Console(stderr=True)


def print_answer(answer: Look, out: Console, as_json: bool) -> None:
    """Print the answer for people, or as JSON for scripts."""
    if as_json:
        from xmatch.report.asjson import to_json

        json.dump(to_json(answer), sys.stdout, indent=2, ensure_ascii=False, allow_nan=False)
        sys.stdout.write("\n")
        return
    from xmatch.report.terminal import render

    render(answer, out)
