"""``blankfield demo``: the main job on an invented sky, with an embedded archive and a store of its own."""

from __future__ import annotations

import contextlib
import shutil
import tempfile
from pathlib import Path

import click

from xmatch.cli.options import width_option


@click.command("demo")
@click.option("--store", metavar="FILE", help="Keep the demo's store here; by default it is thrown away.")
@click.option(
    "--write-target",
    metavar="FOLDER",
    type=click.Path(file_okay=False, path_type=Path),
    help="Also write the demo's target file here.",
)
@click.option(
    "--trouble",
    metavar="CATALOG=FAULT",
    multiple=True,
    help="Make an archive misbehave, such as 'nvss=html' or 'vlass-ql1=unavailable'.",
)
@click.option("--json", "as_json", is_flag=True, help="Print the whole answer as JSON.")
@click.option("--quiet", is_flag=True, help="No progress on standard error.")
@width_option
def command(
    store: str | None,
    write_target: Path | None,
    trouble: tuple[str, ...],
    as_json: bool,
    quiet: bool,
    width: int | None,
) -> None:
    """Run the main job on an invented sky: an archive inside this program, a store of its own, no network.

    The array Tern, its transient Tern-4 and every object around it are made up.
    """  # fmt: skip
    from xmatch.cli.running import print_answer, run_look
    from xmatch.demo.scene import TARGET_FILE, demo_archive, demo_target
    from xmatch.resources import fixture_path

    with contextlib.ExitStack() as stack:
        archive = stack.enter_context(demo_archive())
        for one in trouble:
            cause_trouble(archive, one)
        if store is None:
            store = str(
                Path(stack.enter_context(tempfile.TemporaryDirectory(prefix="blankfield-demo-"))) / "demo.sqlite"
            )
        if write_target is not None:
            write_target.mkdir(parents=True, exist_ok=True)
            shutil.copy(fixture_path(TARGET_FILE), write_target)
        check_unconfirmed(store, archive.address)
        answer = run_look(demo_target(), quiet=quiet or as_json, store=store, archives=archive.address)
        assert answer is not None
        print_answer(answer, width, as_json)
    if not as_json:
        click.echo(
            "Everything above is invented: the array, the source and its sky. Your own target: blankfield target > mine.toml"
        )


def check_unconfirmed(store: str, address: str) -> None:
    """Do what a user does once: have the columns that nobody has confirmed found at the archive."""
    from xmatch.archives.transport import Transport
    from xmatch.catalogs import load_catalogs
    from xmatch.inspection import check_catalogs
    from xmatch.store.store import open_store

    waiting = [catalog for catalog in load_catalogs().values() if catalog.needs_check]
    with open_store(store) as opened:
        known = opened.latest_checks()
        due = [catalog for catalog in waiting if catalog.id not in known]
        check_catalogs(due, store=opened, transport=Transport(addresses=address))


def cause_trouble(archive: object, one: str) -> None:
    """Make one archive misbehave as asked."""
    from xmatch.catalogs import load_catalogs
    from xmatch.demo.faults import KINDS, Fault
    from xmatch.errors import ConfigurationError

    catalog_id, _, kind = one.partition("=")
    registry = load_catalogs()
    if catalog_id not in registry or kind not in KINDS:
        raise ConfigurationError(
            f"--trouble {one!r} is not understood; give CATALOG=FAULT with a catalog among {', '.join(registry)} "
            f"and a fault among {', '.join(KINDS)}"
        )
    for table in registry[catalog_id].tables:
        remote = table.remote_table or table.address.partition("/conesearch/")[2] or catalog_id
        for name in (remote, f"{remote}/sources"):
            archive.misbehave(name, Fault(kind))  # type: ignore[attr-defined]
