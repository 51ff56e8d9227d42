"""``blankfield target``: a commented target file to fill in, or the check of one."""

from __future__ import annotations

from pathlib import Path

import click


@click.command("target")
@click.argument("file", required=False, type=click.Path(dir_okay=False, path_type=Path))
def command(file: Path | None) -> None:
    """Check FILE and print it as it is understood; without FILE, print a commented template to fill in.

    \b
        blankfield target > mine.toml
        blankfield target mine.toml
    """
    from xmatch.position import format_position
    from xmatch.target import read_target, template, write_target

    if file is None:
        click.echo(template(), nl=False)
        return
    target = read_target(file)
    click.echo(f"# {format_position(target.position.ra_deg, target.position.dec_deg)}")
    click.echo(write_target(target), nl=False)
