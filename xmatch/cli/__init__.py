"""The command line. Importing it costs click and nothing else: every command loads its room when it runs."""

from __future__ import annotations

import gc
import importlib
import os
import sys
from collections.abc import Sequence

import click

from xmatch import __version__
from xmatch.errors import BlankfieldError, StoreError

EXIT_FAULT = 70
"""Exit code of a fault nobody foresaw (EX_SOFTWARE of sysexits.h)."""
EXIT_INTERRUPTED = 130
GC_OBJECTS = 200_000
COMMANDS = {
    "look": ("xmatch.cli.look", "What every archive holds at one position, and what that rules out."),
    "demo": ("xmatch.cli.demo", "The main job on an invented sky: embedded archive, own store, no network."),
    "catalogs": ("xmatch.cli.catalogs", "The registry: which catalogs are asked, and what is known of each."),
    "target": ("xmatch.cli.target", "Write a commented target file, or check one."),
    "store": ("xmatch.cli.store", "Where the store is and what it holds; upgrade, back up, check."),
    "browse": ("xmatch.cli.browse", "The store in a browser: read-only, on this machine only."),
    "sql": ("xmatch.cli.sql", "Questions of your own to the store in SQL, and ready-made ones."),
}


class LateGroup(click.Group):
    """A group that imports a command's module only when the command is run or its own help is asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = importlib.import_module(COMMANDS[cmd_name][0]).command
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        if args and args[0] not in COMMANDS:
            raise click.UsageError(f"no command {args[0]!r}; there are {', '.join(COMMANDS)}", ctx)
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl([(name, text) for name, (_, text) in COMMANDS.items()])


@click.group(cls=LateGroup, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="blankfield")
def group() -> None:
    """What every archive already holds at one sky position, how faint anything else must be there, and
    which kinds of object that leaves.

    Limits rest on assumptions that are printed beside them. Consult the catalogs' own papers before publishing.
    """


def main(args: Sequence[str] | None = None) -> None:
    """Run the command line; every foreseen error becomes one line and its exit code."""
    # a short-lived process that imports some hundred modules spends a tenth of a warm answer looking for garbage
    gc.set_threshold(GC_OBJECTS)
    try:
        code = group.main(args=None if args is None else list(args), prog_name="blankfield", standalone_mode=False)
        if isinstance(code, int) and code:
            sys.exit(code)  # a command that said so by ctx.exit
    except click.exceptions.Exit as stop:
        sys.exit(stop.exit_code)
    except click.ClickException as fault:
        fault.show()
        sys.exit(fault.exit_code)
    except (click.Abort, KeyboardInterrupt):
        click.echo("blankfield: stopped; every complete search is kept", err=True)
        sys.exit(EXIT_INTERRUPTED)
    except BlankfieldError as fault:
        click.echo(f"blankfield: {fault}", err=True)
        sys.exit(fault.exit_code)
    except BrokenPipeError:
        # the reader of our pipe left (head, less): not an error, and the interpreter must not complain at exit
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(0)
    except Exception as fault:
        sys.exit(_unforeseen(fault))


def _unforeseen(fault: Exception) -> int:
    """Keep the traceback in a file, tell the user where it is, show it only when asked."""
    import tempfile
    import traceback

    text = "".join(traceback.format_exception(fault))
    if os.environ.get("BLANKFIELD_TRACEBACK"):
        click.echo(text, err=True)
    with tempfile.NamedTemporaryFile("w", prefix="blankfield-fault-", suffix=".txt", delete=False) as file:
        file.write(f"blankfield {__version__}\nPython {sys.version}\narguments: {sys.argv[1:]}\n\n{text}")
    click.echo(
        f"blankfield: a fault in the program itself ({type(fault).__name__}: {fault}). What was complete is kept. "
        f"Please report it with {file.name}",
        err=True,
    )
    return StoreError.exit_code if isinstance(fault, OSError) else EXIT_FAULT
