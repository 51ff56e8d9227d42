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
    envvar="BLANKFIELD_CATALOGS",
    show_envvar=True,
    type=click.Path(),
    help="A folder with catalog files of your own; may be given several times.",
)
width_option = click.option(
    "--width", type=click.IntRange(60, 400), help="Width of the printed answer; by default that of the terminal."
)
contact_option = click.option(
    "--contact",
    envvar="BLANKFIELD_CONTACT",
    show_envvar=True,
    metavar="EMAIL",
    help="Your address, sent to archives so that they can reach you.",
)
