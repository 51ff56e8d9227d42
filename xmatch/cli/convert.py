"""``blankfield convert``: one flux in every other term."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

if TYPE_CHECKING:
    from xmatch.convert import Ask, Converted

ASSUMPTION_OPTIONS = (
    click.option("--photon-index", type=float, metavar="INDEX", help="Power law, of this photon index (default 2)."),
    click.option("--blackbody", type=float, metavar="KEV", help="Blackbody of this temperature kT instead."),
    click.option("--bremsstrahlung", type=float, metavar="KEV", help="Thermal bremsstrahlung of this kT instead (Gaunt factor 1)."),
    click.option("--spectrum-file", type=click.Path(), metavar="FILE", help="A table instead: energy in keV and E N(E), one pair a line."),
    click.option("--radio-index", "index", type=float, default=-1.6, show_default=True, help="S ~ nu^INDEX of a flux density."),
    click.option("--integrate", metavar="LO..HI UNIT", help="Integrate a flux density over this range, such as '10..10000 MHz'."),
    click.option("--column", "column_cm2", type=float, metavar="CM-2", help="Equivalent hydrogen column."),
    click.option("--av", "av_mag", type=float, metavar="MAG", help="Visual extinction."),
    click.option("--dm", "dm_pc_cm3", type=float, metavar="PC/CM3", help="Dispersion measure, for the column."),
    click.option("--law", help="Extinction law by name; Gordon et al. 2023 by default."),
    click.option("--r-v", type=float, metavar="R_V", help="Total-to-selective extinction; 3.1 by default."),
    click.option("--beam", "beam_fraction", type=float, default=1.0, show_default=True, help="Fraction of the sphere lit."),
    click.option("--prior", type=click.Choice(["log-uniform", "uniform", "volume"]), default="log-uniform", show_default=True, help="How a distance range is filled."),
)  # fmt: skip
FLUX_OPTIONS = (
    click.option("--band", metavar="LO..HI UNIT", help="Band of a band flux, such as '0.5..2 keV'."),
    click.option("--at", metavar="X UNIT", help="Frequency, wavelength or energy of a flux density or magnitude."),
    click.option("--to-band", metavar="LO..HI UNIT", help="A second band to move a band flux to."),
    click.option("--to-at", metavar="X UNIT", help="A second place to give the flux density at."),
    click.option("--system", type=click.Choice(["AB", "Vega", "ST"]), default="AB", show_default=True, help="Of a magnitude."),
    click.option("--zero-point", "zero_point_jy", type=float, metavar="JY", help="Of a Vega magnitude."),
)  # fmt: skip


def options_of(*groups: Any) -> Any:
    """A decorator that adds groups of options in their order."""

    def add(function: Any) -> Any:
        for option in reversed([option for group in groups for option in group]):
            function = option(function)
        return function

    return add


@click.command("convert")
@click.argument("flux", metavar="'VALUE UNIT'")
@options_of(FLUX_OPTIONS, ASSUMPTION_OPTIONS)
@click.option("--distance", metavar="LO..HI UNIT", help="Range, or a value with its errors: '5.0 +1.2 -0.8 kpc'.")
@click.option("--redshift", type=float, help="Instead of a distance.")
@click.option("--cosmology", default="Planck18", show_default=True, help="By its name in astropy.cosmology.")
@click.option("--duty-cycle", type=float, help="Width over period, when the flux is the peak of a pulse.")
@click.option("--json", "as_json", is_flag=True, help="Print everything as JSON.")
def command(
    flux: str, distance: str | None, redshift: float | None, cosmology: str, as_json: bool, **given: Any
) -> None:
    """One flux as flux density, band flux, photons, magnitudes and luminosities, with every assumption printed.

    \b
        blankfield convert "1e-14 erg s-1 cm-2" --band "0.5..2 keV" --dm 148 --distance "1.6..4.1 kpc"
        blankfield convert "20.7 mag" --system Vega --zero-point 3228.75 --at "0.582 um" --av 2
    """
    from xmatch.convert import convert
    from xmatch.distance_keys import parse_known_distance
    from xmatch.errors import ConfigurationError

    if distance and redshift is not None:
        raise ConfigurationError("--distance and --redshift were both given; give one of them")
    where = parse_known_distance(distance) if distance else None
    if redshift is not None:
        from xmatch.flux.distance import at_redshift

        where = at_redshift(redshift, cosmology)
    show({flux: convert(ask(flux, where, given))}, as_json)


def ask(flux: str, distance: Any, given: dict[str, Any]) -> Ask:
    """The question that the options make."""
    from xmatch.convert import Ask, read_spectrum
    from xmatch.errors import ConfigurationError
    from xmatch.flux.spectra import Blackbody, PowerLaw, Spectrum, ThermalBremsstrahlung

    given = dict(given)
    table = given.pop("spectrum_file")
    shapes = [given.pop(name) for name in ("photon_index", "blackbody", "bremsstrahlung")]
    if sum(value is not None for value in [table, *shapes]) > 1:
        raise ConfigurationError(
            "--photon-index, --blackbody, --bremsstrahlung and --spectrum-file exclude each other; give one of them"
        )
    if table is not None:
        given["spectrum"] = read_spectrum(table)
    kinds: tuple[type[Spectrum], ...] = (PowerLaw, Blackbody, ThermalBremsstrahlung)
    for kind, value in zip(kinds, shapes, strict=True):
        if value is not None:
            given["spectrum"] = kind(value)  # type: ignore[call-arg]
    return Ask(flux, distance=distance, **{key: value for key, value in given.items() if value is not None})


def show(answers: dict[str, Converted], as_json: bool) -> None:
    """Print what each flux came to."""
    if as_json:
        import json

        from xmatch.convert import plain

        click.echo(
            json.dumps({name: plain(answer.as_dict()) for name, answer in answers.items()}, indent=2, allow_nan=False)
        )
        return
    for name, answer in answers.items():
        click.echo(name)
        for key, value in answer.values.items():
            if key.startswith("over_distance_"):
                continue  # the whole function is for scripts: --json
            numbers = value if isinstance(value, list) else [value]
            click.echo(f"  {key:42} {'  '.join(f'{number:.6g}' for number in numbers)}")
        for remark in answer.remarks:
            click.echo(f"  {remark}")
        click.echo("  assumed:")
        for line in answer.assumptions:
            click.echo(f"    {line}")
