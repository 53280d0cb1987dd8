"""What a study will do before it does it: sizes, memory, time."""

import time

import numpy as np

from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import regular_grid
from massfingerprint.study.inputs import Inputs
from massfingerprint.study.patterns import SITE_FIELDS
from massfingerprint.study.recipe import Recipe

_PAIRS_A_SOLVE = 5  # rounds to 1e-8, a pair on the rings of the solver each, and their corrections
_PAIRS_A_SOURCE = 3  # spreading, analysis, fields
_SECONDS_A_FIGURE = 0.5
_LIBRARIES = 350e6  # bytes that the libraries take by themselves


def plan(recipe: Recipe, inputs: Inputs) -> list[str]:
    """Lines for people: what will be solved, how large it gets, how long it takes on this machine.

    The time is one transform pair at the study's degree, measured now, times the pairs of the solves; memory is the size of the
    arrays held at once. Both are estimates, to a factor of two.
    """
    grid, degree = regular_grid(recipe.grid.spacing), recipe.grid.max_degree
    sources, sites = inputs.ledger.sizes["source"], len(inputs.sites)
    cells, coefficients = grid.nlat * grid.nlon, 2 * _transform.coefficient_count(degree)
    held = sources * (cells * (len(recipe.output.fields) + 2) + coefficients * 2 * len(SITE_FIELDS)) * 8 + _LIBRARIES
    pair = _pair_seconds(degree)
    coarse = _pair_seconds(min(degree, 256))
    solving = sources * pair * (_PAIRS_A_SOLVE + _PAIRS_A_SOURCE) + sites * coarse * _PAIRS_A_SOLVE
    figures = sources + 2 + 3 * sites if recipe.output.maps else 0
    drawing = figures * _SECONDS_A_FIGURE * len(recipe.output.figure_formats) / 2
    time_axis = inputs.ledger["time"].values
    windows = ", ".join(f"{name} ({start} to {end})" for name, (start, end) in inputs.windows.items())
    fields = ", ".join(name.replace("_", " ") for name in recipe.output.fields)
    return [
        f"{recipe.title}",
        f"Mass record: {sources} sources, {time_axis.size} times from {str(time_axis[0])[:10]} to {str(time_axis[-1])[:10]}.",
        f"Sites: {sites}. Windows: {windows}.",
        f"Fields on {grid.nlat} x {grid.nlon} cells ({recipe.grid.spacing:g} degree), solved to degree {degree}, "
        f"rotation {'on' if recipe.earth.rotation else 'off'}, frame {recipe.output.reference_frame}: {fields}.",
        f"Figures: {figures}, each as {' and '.join(recipe.output.figure_formats)}." if figures else "Figures: none.",
        f"Memory: about {held / 1e9:.1f} GB. Time: about {_seconds(solving)} to solve (less where patterns are kept), "
        f"{_seconds(drawing)} to draw.",
        f"Folder: {recipe.output.folder}.",
    ]


def _pair_seconds(degree: int) -> float:
    """Seconds of one synthesis and one analysis on the solver's rings, the best of three."""
    rings = _transform.GaussLegendreRings(degree, degree)
    values = np.zeros(_transform.coefficient_count(degree), dtype=np.complex128)
    taken = []
    for _ in range(3):
        start = time.perf_counter()
        rings.analyse(rings.synthesise(values))
        taken.append(time.perf_counter() - start)
    return min(taken)


def _seconds(value: float) -> str:
    return f"{value:.0f} s" if value < 100 else f"{value / 60:.0f} min"
