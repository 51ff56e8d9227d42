"""``blankfield browse``: the store in a browser, on this machine only."""

from __future__ import annotations

import click

from xmatch.cli.options import store_option

PORT = 8742


@click.command("browse")
@click.option(
    "--port", type=click.IntRange(0, 65535), default=PORT, show_default=True, help="Port; 0 for any that is free."
)
@click.option("--open", "open_page", is_flag=True, help="Open the page in your browser.")
@store_option
def command(port: int, open_page: bool, store: str | None) -> None:
    """Show the store in a browser, read-only and reachable from this machine only, until you press Ctrl-C."""
    from xmatch.store.browsing import HOST, bound_socket, file_of, serve

    path = file_of(store)
    with bound_socket(port) as listening:
        address = f"http://{HOST}:{listening.getsockname()[1]}/"
        click.echo(f"{path} is shown at {address} until you press Ctrl-C")
        if open_page:
            click.launch(address)
        serve(path, listening)
