"""``blankfield sql``: questions of your own to the store, and ready-made ones."""

from __future__ import annotations

import io
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from xmatch.cli.options import store_option
from xmatch.errors import ConfigurationError, StoreError
from xmatch.store.printing import BINARY, FORMATS

if TYPE_CHECKING:
    from xmatch.store.studies import Study

ROW_LIMIT = 10_000
TIME_LIMIT_S = 60.0


@click.command("sql")
@click.argument("question", required=False)
@click.option(
    "--file",
    "file",
    metavar="FILE",
    type=click.Path(path_type=Path),
    help="Read the question from a file, - for standard input.",
)
@click.option("--study", metavar="NAME", help="A ready-made question; --list shows them.")
@click.option("--list", "listed", is_flag=True, help="List the ready-made questions; with --study, tell one in full.")
@click.option(
    "--param",
    "params",
    metavar="NAME=VALUE",
    multiple=True,
    help="Value of a parameter :NAME; may be given several times.",
)
@click.option(
    "--as-of",
    metavar="DATE",
    help="Ask the store as it was at the end of that day (UTC), or at a time with its offset.",
)
@click.option(
    "--format",
    "kind",
    type=click.Choice(FORMATS),
    help="How to write the answer; by default a table, or what the ending of --output says.",
)
@click.option(
    "--output",
    metavar="FILE",
    type=click.Path(path_type=Path, dir_okay=False),
    help="Write the answer to a file, which is replaced whole.",
)
@click.option(
    "--rows",
    "row_limit",
    type=click.IntRange(min=0),
    default=ROW_LIMIT,
    show_default=True,
    help="Most rows; 0 for all.",
)
@click.option(
    "--seconds",
    "time_limit_s",
    type=click.FloatRange(min=0.001),
    default=TIME_LIMIT_S,
    show_default=True,
    help="Longest time.",
)
@store_option
def command(
    question: str | None,
    file: Path | None,
    study: str | None,
    listed: bool,
    params: tuple[str, ...],
    as_of: str | None,
    kind: str | None,
    output: Path | None,
    row_limit: int,
    time_limit_s: float,
    store: str | None,
) -> None:
    """Ask the store a question in SQL. Nothing can be changed by it.

    Tables, views, columns with their units, and functions are told in db/README.md.
    """
    from xmatch.store.asking import ask
    from xmatch.store.studies import filled, value_of
    from xmatch.store.studies import study as read

    if listed:
        _list(study)
        return
    if sum(one is not None for one in (question, file, study)) != 1:
        raise ConfigurationError(
            "give one question: as text, with --file or with --study; --list shows the ready-made ones"
        )
    given: dict[str, Any] = {}
    for one in params:
        name, equals, value = one.partition("=")
        if not equals or not name.isidentifier():
            raise ConfigurationError(f"--param {one!r} is not understood; write --param name=value")
        given[name] = value_of(value)
    notes = {}
    if study is not None:
        chosen = read(study)
        sql, given, notes = chosen.sql, filled(chosen, given), {"study": study, "question": chosen.question}
    else:
        sql = _read(file) if file is not None else str(question)
        notes = {"question": sql.strip()}
    notes |= {"parameters": ", ".join(f"{name}={value}" for name, value in given.items())} if given else {}
    notes |= {"as of": as_of} if as_of else {}
    kind = kind or _kind_of(output)
    if kind in BINARY and output is None and sys.stdout.isatty():
        raise ConfigurationError(f"{kind} is no text for a terminal; give a file with --output")
    with ask(sql, given, where=store, as_of=as_of, time_limit_s=time_limit_s, row_limit=row_limit) as answer:
        n = _write(kind, answer.columns, answer, output, notes)
    if answer.more:
        click.echo(f"blankfield: only the first {n} rows; there are more; --rows 0 gives all", err=True)
    elif kind == "table" and n == 0:
        click.echo("blankfield: no rows", err=True)


def _read(file: Path) -> str:
    try:
        return sys.stdin.read() if str(file) == "-" else file.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as fault:
        raise ConfigurationError(
            f"the question in {file} cannot be read ({fault}); give a text file in UTF-8"
        ) from None


def _kind_of(output: Path | None) -> str:
    ending = "" if output is None else output.suffix.lower().lstrip(".")
    return {"vot": "votable", "xml": "votable"}.get(ending, ending if ending in FORMATS else "table")


def _write(kind: str, columns: list[str], rows: Any, output: Path | None, notes: dict[str, str]) -> int:
    from xmatch.store.printing import write_parquet, write_text

    if kind in BINARY:
        whole = io.BytesIO()
        n = write_parquet(columns, rows, whole, notes)
        if output is None:
            sys.stdout.buffer.write(whole.getvalue())
        else:
            with _replaced(output) as part:
                part.write_bytes(whole.getvalue())
        return n
    if output is None:
        return write_text(kind, columns, rows, sys.stdout, notes)
    with _replaced(output) as part, part.open("w", encoding="utf-8", newline="") as out:
        return write_text(kind, columns, rows, out, notes)


@contextmanager
def _replaced(output: Path) -> Iterator[Path]:
    """A file beside the wanted one, which takes its place when all went well."""
    part = output.with_name(f".{output.name}.part-{os.getpid()}")
    try:
        yield part
        part.replace(output)
    except OSError as fault:
        raise StoreError(f"{output} cannot be written ({fault}); free some space or give another --output") from fault
    finally:
        part.unlink(missing_ok=True)


def _list(name: str | None) -> None:
    from xmatch.store.studies import studies, study

    if name is None:
        known = studies()
        width = max(map(len, known))
        for one in known.values():
            click.echo(f"{one.name:<{width}}  {one.title}")
        return
    _tell(study(name))


def _tell(one: Study) -> None:
    click.echo(f"{one.name}: {one.title}\n\n{one.question}\n")
    for parameter in one.parameters:
        default = "must be given" if parameter.required else f"by default {parameter.default}"
        click.echo(f"--param {parameter.name}=...  {parameter.meaning} ({default})")
    for column in one.columns:
        unit = f" [{column.unit}]" if column.unit else ""
        click.echo(f"  {column.name}{unit}: {column.meaning}")
    click.echo("\n" + one.sql.strip())
