"""``massfingerprint earth``: Love numbers as a table."""

import click

from massfingerprint.earth.frames import FRAMES, in_frame
from massfingerprint.earth.love import MODELS, love_numbers
from massfingerprint.errors import InputError

_COLUMNS = ("h_load", "l_load", "k_load", "h_tide", "l_tide", "k_tide")


def _degrees(text: str) -> list[int]:
    """Degrees of a comma-separated list, or InputError naming the piece that is not one."""
    out = []
    for piece in text.split(","):
        if not piece.strip().isdecimal():
            raise InputError(
                f"--degrees: must be whole numbers of 0 or more separated by commas, got {piece.strip()!r}."
            )
        out.append(int(piece))
    return out


@click.command(name="earth")
@click.option(
    "--degrees", default="1,2,3,10,100,1000", show_default=True, help="Spherical-harmonic degrees, comma-separated."
)
@click.option("--model", default="prem", show_default=True, help=f"Earth: {', '.join(MODELS)}.")
@click.option("--frame", default="CE", show_default=True, help=f"Frame of degree 1: {', '.join(FRAMES)}.")
@click.option("--recompute", is_flag=True, help="Integrate the radial equations instead of reading the shipped table.")
def command(degrees: str, model: str, frame: str, recompute: bool) -> None:
    """Print load and tide Love numbers (dimensionless).

    Example: massfingerprint earth --degrees 1,2,10
    """
    wanted = _degrees(degrees)
    table = in_frame(love_numbers(model, max_degree=max([*wanted, 1]), recompute=recompute), frame)
    click.echo(f"degree {' '.join(f'{name:>13}' for name in _COLUMNS)}")
    for degree in wanted:
        click.echo(f"{degree:6d} {' '.join(f'{float(table[name][degree]):13.8f}' for name in _COLUMNS)}")
    click.echo(f"Earth: {table.attrs['source']}. Degree 1 in {frame}.", err=True)
