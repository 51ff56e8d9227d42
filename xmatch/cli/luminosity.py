"""``blankfield luminosity``: a target's pulses and any flux, over its distances and columns."""

from __future__ import annotations

from typing import Any

import click

from xmatch.cli.convert import ASSUMPTION_OPTIONS, FLUX_OPTIONS, options_of, show


@click.command("luminosity")
@click.argument("target", metavar="TARGET.toml", type=click.Path())
@click.option("--flux", metavar="'VALUE UNIT'", help="A flux or limit of the target, with --band or --at.")
@options_of(FLUX_OPTIONS, ASSUMPTION_OPTIONS)
@click.option("--json", "as_json", is_flag=True, help="Print everything as JSON.")
def command(target: str, flux: str | None, as_json: bool, **given: Any) -> None:
    """Luminosities of the pulses in TARGET, and of one more flux, at the near end, median and far end of its distance.

    Isotropic, beamed, per hertz, integrated, peak and average are different numbers and stand under different names. --json
    adds each as a function of distance. The assumptions say what a column off by its scatter would make of a band flux.

    \b
        blankfield luminosity mine.toml
        blankfield luminosity mine.toml --flux "1e-14 erg s-1 cm-2" --band "0.5..2 keV"
    """
    from xmatch.cli.convert import ask
    from xmatch.convert import luminosities
    from xmatch.target import read_target

    show(luminosities(read_target(target), ask(flux or "", None, given)), as_json)
