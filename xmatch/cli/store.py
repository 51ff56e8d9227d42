"""``blankfield store``: where the store is and what it holds."""

from __future__ import annotations

import json

import click

from xmatch.cli.options import store_option


@click.command("store")
@store_option
@click.option("--json", "as_json", is_flag=True, help="Print as JSON.")
def command(store: str | None, as_json: bool) -> None:
    """Say where the store is, its schema version and how much it holds. Nothing is changed."""
    from xmatch.store.store import open_store

    with open_store(store, read_only=True) as opened:
        facts = opened.status()
    if as_json:
        click.echo(json.dumps(facts, indent=2))
    else:
        for name, value in facts.items():
            click.echo(f"{name.replace('_', ' '):<22} {value}")
