"""``blankfield catalogs``: the registry, in words."""

from __future__ import annotations

import json

import click

from xmatch.cli.options import catalog_folder_option


@click.command("catalogs")
@click.argument("catalog_id", required=False, metavar="[ID]")
@catalog_folder_option
@click.option("--json", "as_json", is_flag=True, help="Print the registry as JSON.")
def command(catalog_id: str | None, catalog_folder: tuple[str, ...], as_json: bool) -> None:
    """List the catalogs that a look asks, or print one (ID) in full with its sources."""
    from xmatch.catalogs import load_catalogs
    from xmatch.errors import FactError
    from xmatch.report.registry import catalog_dict, list_lines, show_lines

    registry = load_catalogs(catalog_folder)
    if catalog_id is None:
        chosen = list(registry.values())
    elif catalog_id in registry:
        chosen = [registry[catalog_id]]
    else:
        raise FactError(f"no catalog {catalog_id!r} in the registry; there are {', '.join(registry)}")
    if as_json:
        click.echo(json.dumps([catalog_dict(catalog) for catalog in chosen], indent=2))
    else:
        for line in list_lines(chosen) if catalog_id is None else show_lines(chosen[0]):
            click.echo(line)
