"""``massfingerprint explain``: where a number of a study comes from."""

import dataclasses
import textwrap
from pathlib import Path
from typing import Any

import click

from massfingerprint.study.explain import Input, Trace, trace
from massfingerprint.study.folder import as_json, read_folder
from massfingerprint.study.metadata import CAUTION

_WIDTH = 110
_SHOWN = 6  # values of a long list


@click.command(name="explain")
@click.argument("folder", type=click.Path(path_type=Path))
@click.argument("number", metavar="NUMBER-ID")
@click.option("--json", "as_data", is_flag=True, help="Print the trace as JSON, with every value.")
def command(folder: Path, number: str, as_data: bool) -> None:
    """Say where a number comes from: its formula, the inputs with units, the factor, citation and checksums.

    FOLDER is what a study left; NUMBER-ID stands beside the number in its tables. Inputs with an id can be asked for in turn.

    Example: massfingerprint explain out global-rate:whole-record:total
    """
    found = trace(read_folder(folder), number)
    click.echo(as_json(dataclasses.asdict(found)) if as_data else "\n".join(_lines(found)), nl=not as_data)


def _lines(found: Trace) -> list[str]:
    out = [f"{found.id}", f"{found.words}: {found.value:.6g} {found.unit}", ""]
    out += [*textwrap.wrap(f"= {found.formula}", _WIDTH), ""]
    out += [line for one in found.inputs for line in _input(one)]
    out += ["", *textwrap.wrap(f"Uncertainty: {found.uncertainty}.", _WIDTH)]
    out += [line for name, value in found.origin.items() for line in _origin(name, value)]
    return [*out, CAUTION]


def _input(one: Input) -> list[str]:
    if isinstance(one.value, list):
        kept = [one.value[i] for i in range(min(_SHOWN // 2, len(one.value)))]
        shown = ", ".join(map(str, kept)) + (f", ... {one.value[-1]}" if len(one.value) > len(kept) else "")
        value = f"{len(one.value)} values: {shown}"
    else:
        value = f"{one.value:.9g}" if isinstance(one.value, float) else str(one.value)
    return [f"  {one.name} = {value} {one.unit}" + (f"   id {one.id}" if one.id else "")]


def _origin(name: str, value: Any) -> list[str]:
    if isinstance(value, dict):
        return [f"{name}:", *(f"  {key}: {item}" for key, item in value.items())]
    return textwrap.wrap(f"{name}: {value}", _WIDTH)
