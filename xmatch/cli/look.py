"""``blankfield look``: the main job."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from xmatch.cli.options import catalog_folder_option, contact_option, store_option, width_option

if TYPE_CHECKING:
    from xmatch.records import Target

TARGET_OPTIONS = (
    click.option("--name", help="Name of the target; by default its position."),
    click.option("--error", metavar="ARCSEC|MAJ,MIN,ANGLE", help="Position error: radius, or semi-axes and angle east of north."),
    click.option("--error-level", metavar="LEVEL", help="What the error holds: '1 sigma' (per axis, the default), '68%', '90%', '95%' ..."),
    click.option("--epoch", type=float, metavar="YEAR", help="Epoch of the position, Julian year."),
    click.option("--distance", metavar="LO..HI UNIT", help="Distance range, such as '1.6..4.1 kpc' or '5000..13000 ly'."),
    click.option("--dm", type=float, metavar="PC/CM3", help="Dispersion measure."),
    click.option("--column", type=float, metavar="CM-2", help="Equivalent hydrogen column of all the matter in front."),
    click.option("--av", type=float, metavar="MAG", help="Visual extinction."),
    click.option("--period", metavar="TIME", help="Period with its unit, such as '2711.4 s' or '45.2 min'."),
    click.option("--derivative", type=float, metavar="S/S", help="Measured period derivative."),
    click.option("--derivative-limit", type=float, metavar="S/S", help="Upper limit on the period derivative."),
    click.option("--period-may-be-orbital", is_flag=True, help="Rotation tests then only inform."),
    click.option("--pulse", "pulses", multiple=True, metavar="'S @ FREQ for WIDTH'", help="A pulse, such as '2.1 Jy @ 200 MHz for 35 s'."),
)  # fmt: skip


def target_options(function: Any) -> Any:
    """Add every option that describes a target."""
    for option in reversed(TARGET_OPTIONS):
        function = option(function)
    return function


@click.command("look")
@click.argument("target", metavar="TARGET.toml|'RA DEC'")
@target_options
@store_option
@click.option("--offline", is_flag=True, help="Never ask; answer from the store, whatever its age.")
@click.option("--again", is_flag=True, help="Ask every archive again, also where the store has a fresh answer.")
@click.option(
    "--age", "age_limit_days", type=click.FloatRange(min=0.0), metavar="DAYS", help="Ask again what is older than this."
)
@click.option("--only", multiple=True, metavar="CATALOG", help="Ask this catalog only; may be given several times.")
@catalog_folder_option
@contact_option
@click.option("--show-requests", is_flag=True, help="Print exactly what would be asked, and ask nothing.")
@click.option("--json", "as_json", is_flag=True, help="Print the whole answer as JSON.")
@click.option("--quiet", is_flag=True, help="No progress on standard error.")
@width_option
def command(target: str, as_json: bool, quiet: bool, width: int | None, show_requests: bool, **options: Any) -> None:
    """What every archive holds at one position, how faint anything else must be, and what that leaves.

    The target is a file (see 'blankfield target') or a quoted position: '17:38:01.50 -33:48:57.0' with hours and degrees,
    or '264.50625 -33.81583 deg'.
    """  # fmt: skip
    from xmatch.cli.running import print_answer, run_look
    from xmatch.position import format_position

    known = read_or_build(target, options)
    click.echo(f"{known.name}: {format_position(known.position.ra_deg, known.position.dec_deg)}", err=True)
    answer = run_look(known, quiet=quiet or as_json, show_requests=show_requests, **options)
    if answer is not None:
        print_answer(answer, width, as_json)


def read_or_build(where: str, options: dict[str, Any]) -> Target:
    """A target file, or a position with what the options add. Takes the target's options out of the dictionary."""
    from xmatch.errors import TargetError
    from xmatch.target import build_target, read_target

    about = {str(name): options.pop(name) for name in [
        "name", "error", "error_level", "epoch", "distance", "dm", "column", "av", "period", "derivative",
        "derivative_limit", "period_may_be_orbital", "pulses",
    ]}  # fmt: skip
    path = Path(where)
    if path.suffix == ".toml" or path.is_file():
        given = [f"--{name.replace('_', '-')}" for name, value in about.items() if value not in (None, False, ())]
        if given:
            raise TargetError(
                f"{', '.join(given)} cannot be given together with a target file; write it into {where} instead"
            )
        return read_target(path)
    return build_target(where, **about)
