"""Options that several commands share."""

from __future__ import annotations

import click

store_option = click.option(
    "--store",
    metavar="FILE",
    envvar="BLANKFIELD_STORE",
    show_envvar=True,
    help="The store; by default one file in your data folder.",
)
catalog_folder_option = click.option(
    "--catalog-folder",
    multiple=True,
    metavar="FOLDER",
    type=click.Path(),
    help="A folder with catalog files of your own; may be given several times.",
)
width_option = click.option(
    "--width", type=click.IntRange(60, 400), help="Width of the printed answer; by default that of the terminal."
)
