"""``blankfield store``: where the store is, what it holds, and how to keep it well."""

from __future__ import annotations

import json
from pathlib import Path

import click

from xmatch.cli.options import store_option


@click.group("store", invoke_without_command=True)
@store_option
@click.option("--json", "as_json", is_flag=True, help="Print as JSON.")
@click.pass_context
def command(context: click.Context, store: str | None, as_json: bool) -> None:
    """Say where the store is, its schema version and how much it holds; or keep it well. Alone it changes nothing."""
    context.obj = store
    if context.invoked_subcommand is None:
        _status(store, as_json)


@command.command("status")
@store_option
@click.option("--json", "as_json", is_flag=True, help="Print as JSON.")
@click.pass_obj
def status(outer: str | None, store: str | None, as_json: bool) -> None:
    """Say where the store is, its schema version and how much it holds."""
    _status(store or outer, as_json)


def _status(store: str | None, as_json: bool) -> None:
    from xmatch.store.store import open_store

    with open_store(store, read_only=True) as opened:
        facts = opened.status()
        remarks = opened.remarks
    if as_json:
        click.echo(json.dumps(facts, indent=2))
    else:
        for name, value in facts.items():
            click.echo(f"{name.replace('_', ' '):<22} {value}")
    for remark in remarks:
        click.echo(f"blankfield: {remark}", err=True)


@command.command("upgrade")
@store_option
@click.pass_obj
def upgrade(outer: str | None, store: str | None) -> None:
    """Bring a store of an earlier blankfield to the schema of this one; a copy of the file is made before."""
    from xmatch.store.maintenance import upgrade_store

    for line in upgrade_store(store or outer):
        click.echo(line)


@command.command("backup")
@store_option
@click.argument("to", metavar="FILE", type=click.Path(path_type=Path))
@click.pass_obj
def backup(outer: str | None, store: str | None, to: Path) -> None:
    """Copy the store as it is at this moment to FILE, also while others write. An existing file is never replaced."""
    from xmatch.store.maintenance import backup_store

    click.echo(f"copied to {backup_store(store or outer, to)}")


@command.command("check")
@store_option
@click.pass_obj
def check(outer: str | None, store: str | None) -> None:
    """Check that every search is whole, references are sound and contents match their hashes. Exit code 3 if not."""
    from xmatch.store.maintenance import check_store

    for line in check_store(store or outer):
        click.echo(line)


@command.command("copy")
@store_option
@click.argument("to", metavar="TO")
@click.pass_obj
def copy(outer: str | None, store: str | None, to: str) -> None:
    """Copy the whole store to TO: a new file, or an empty PostgreSQL database or schema (postgresql+psycopg://...).

    Every table is read back and compared, in number and content, before anything is kept.
    """
    from xmatch.store.copying import copy_store

    for table in copy_store(store or outer, to):
        click.echo(f"{table.table:<18} {table.rows:>10}  {table.checksum}")
    click.echo("every table is the same on both sides")
