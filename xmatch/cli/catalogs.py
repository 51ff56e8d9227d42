"""``blankfield catalogs``: the registry in words, its checks against live services, lists kept here, files of one's own."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from xmatch.cli.options import catalog_folder_option, contact_option, store_option

if TYPE_CHECKING:
    from xmatch.catalogs.model import Catalog

json_option = click.option("--json", "as_json", is_flag=True, help="Print as JSON.")
quiet_option = click.option("--quiet", is_flag=True, help="No progress on standard error.")
EXIT_NOT_GOOD = 1
"""Exit code when a service drifted, did not answer, or something could not be fetched."""


@click.group("catalogs", invoke_without_command=True)
@catalog_folder_option
@json_option
@click.pass_context
def command(ctx: click.Context, catalog_folder: tuple[str, ...], as_json: bool) -> None:
    """Which catalogs a look asks, with waveband, release, depth, coverage and what is unverified.

    Without a further command the whole registry is listed.
    """
    ctx.obj = catalog_folder
    if ctx.invoked_subcommand is None:
        from xmatch.report.registry import list_lines

        _print(_registry(catalog_folder), as_json, list_lines)


@command.command("show")
@click.argument("catalog_id", metavar="ID")
@catalog_folder_option
@json_option
@click.pass_context
def show(ctx: click.Context, catalog_id: str, catalog_folder: tuple[str, ...], as_json: bool) -> None:
    """Print one catalog in full, each fact with its source."""
    from xmatch.report.registry import show_lines

    _print(_chosen(ctx, (catalog_id,), catalog_folder), as_json, lambda found: show_lines(found[0]))


@command.command("check")
@click.argument("catalog_ids", nargs=-1, metavar="[ID]...")
@click.option("--unconfirmed", is_flag=True, help="Only those that wait for a check.")
@catalog_folder_option
@store_option
@contact_option
@json_option
@quiet_option
@click.pass_context
def check(
    ctx: click.Context,
    catalog_ids: tuple[str, ...],
    unconfirmed: bool,
    catalog_folder: tuple[str, ...],
    store: str | None,
    contact: str | None,
    as_json: bool,
    quiet: bool,
) -> None:
    """Ask each live service for its columns and for rows at a known place, and say what differs from the file.

    A catalog whose columns nobody has confirmed is asked by looks only after a good check. Exit code 1 when any service
    differs or does not answer.
    """
    from xmatch.archives.transport import Transport
    from xmatch.cli.running import progress_on
    from xmatch.inspection import check_catalogs
    from xmatch.store.store import open_store

    chosen = _chosen(ctx, catalog_ids, catalog_folder)
    if unconfirmed:
        chosen = [catalog for catalog in chosen if catalog.needs_check]
    with open_store(store) as opened, progress_on(quiet or as_json) as progress:
        results = check_catalogs(chosen, store=opened, transport=Transport(contact=contact), tell=progress)
    if as_json:
        listed = [
            {"id": r.catalog_id, "verdict": str(r.verdict), "detail": r.detail, "resolved": dict(r.resolved), "n_rows": r.n_rows}
            for r in results
        ]  # fmt: skip
        click.echo(json.dumps(listed, indent=2))
    else:
        width = max((len(r.catalog_id) for r in results), default=0)
        for r in results:
            click.echo(f"{r.catalog_id:<{width}}  {r.verdict}: {r.detail}")
    if any(str(r.verdict) != "good" for r in results):
        ctx.exit(EXIT_NOT_GOOD)


@command.command("mirror")
@click.argument("catalog_ids", nargs=-1, metavar="[ID]...")
@catalog_folder_option
@store_option
@contact_option
@quiet_option
@click.pass_context
def mirror(
    ctx: click.Context,
    catalog_ids: tuple[str, ...],
    catalog_folder: tuple[str, ...],
    store: str | None,
    contact: str | None,
    quiet: bool,
) -> None:
    """Fetch whole lists and published footprints into the store, where looks then use them.

    None is needed for a first look: lists are fetched when they are due, and without a footprint the coverage is said to
    be unknown. Exit code 1 when anything could not be fetched; what the store held before stays.
    """
    from xmatch.archives.transport import Transport
    from xmatch.cli.running import progress_on
    from xmatch.inspection import mirror_catalogs
    from xmatch.store.store import open_store

    chosen = _chosen(ctx, catalog_ids, catalog_folder)
    with open_store(store) as opened, progress_on(quiet) as progress:
        done = mirror_catalogs(chosen, store=opened, transport=Transport(contact=contact), tell=progress)
    if not done:
        click.echo("nothing to fetch: none of these is a list or has a published footprint")
    for one in done:
        click.echo(f"{one.catalog_id}: {one.what}{'' if one.good else ' not kept'}: {one.detail}")
    if not all(one.good for one in done):
        ctx.exit(EXIT_NOT_GOOD)


@command.command("new")
@click.argument("catalog_id", metavar="ID")
@click.option(
    "--folder",
    metavar="FOLDER",
    default=".",
    show_default=True,
    type=click.Path(file_okay=False, path_type=Path),
    help="Where to write it; give the same folder to --catalog-folder.",
)
def new(catalog_id: str, folder: Path) -> None:
    """Write a commented catalog file for a catalog of your own."""
    from xmatch.catalogs.template import write_template

    click.echo(
        f"wrote {write_template(catalog_id, folder)}; edit it, then: blankfield catalogs show {catalog_id} --catalog-folder {folder}"
    )


def _registry(folders: tuple[str, ...]) -> list[Catalog]:
    from xmatch.catalogs import load_catalogs

    return list(load_catalogs(folders).values())


def _chosen(ctx: click.Context, ids: tuple[str, ...], folders: tuple[str, ...]) -> list[Catalog]:
    """The catalogs named, all without names; folders may stand before or after the subcommand."""
    from xmatch.errors import FactError

    registry = {catalog.id: catalog for catalog in _registry((*(ctx.obj or ()), *folders))}
    for name in ids:
        if name not in registry:
            raise FactError(f"no catalog {name!r} in the registry; there are {', '.join(registry)}")
    return [registry[name] for name in ids] if ids else list(registry.values())


def _print(catalogs: list[Catalog], as_json: bool, lines: Callable[[list[Catalog]], Any]) -> None:
    from xmatch.report.registry import catalog_dict

    if as_json:
        click.echo(json.dumps([catalog_dict(catalog) for catalog in catalogs], indent=2))
        return
    for line in lines(catalogs):
        click.echo(line)
