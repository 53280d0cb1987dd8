"""Love numbers of the user's own: published or computed elsewhere, read from a table in the frame they were made in."""

import os
from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from massfingerprint.arguments import one_of, real_number
from massfingerprint.constants import GRAVITATIONAL_CONSTANT, SPHERE_RADIUS
from massfingerprint.earth.frames import check_frame, in_frame
from massfingerprint.earth.love import love_numbers
from massfingerprint.errors import TableError
from massfingerprint.files.tables import numbers, read_columns

Array = NDArray[np.float64]
FILLS = ("refuse", "interpolate")
_LOAD = ("h_load", "l_load", "k_load")
_TIDE = ("h_tide", "l_tide", "k_tide")
_POWERS = {
    "h_load": 0,
    "l_load": 1,
    "k_load": 1,
    "h_tide": 1,
    "l_tide": 2,
    "k_tide": 2,
}  # times n to these: smooth, of one size
_NO_HOLES_TO = 10
_PRINTED = 2e-3  # a published degree 1 has three decimals or more
_FAR = 0.6  # h'_1 and l'_1 in CE: 0.29 and 0.10 for the Earth


def read_love_numbers(
    path: str | os.PathLike[str],
    *,
    reference_frame: str,
    radius: float = SPHERE_RADIUS.value,
    mean_density: float | None = None,
    surface_gravity: float | None = None,
    fill: str = "refuse",
) -> xr.Dataset:
    """Read Love numbers from a table.

    Parameters
    ----------
    path : path
        Columns apart by commas or blanks: ``degree``, ``h_load``, ``l_load``, ``k_load`` (or ``degree_times_l_load``,
        ``degree_times_k_load``, as many tables print them), optionally ``h_tide``, ``l_tide``, ``k_tide``; dimensionless. Degrees
        ascend from 0 or 1 without holes. Degree 1 is that of the frame named.
    reference_frame : str
        Frame of degree 1 in the table: ``CE``, ``CM``, ``CF``, ``CL`` or ``CH``.
    radius : float
        m, of the Earth they belong to.
    mean_density : float, optional
        kg m-3; PREM's by default.
    surface_gravity : float, optional
        m s-2; by default that of a sphere of this radius and density. It must agree with them to 1 %.
    fill : str
        ``"refuse"`` a table with holes, or ``"interpolate"``: holes above degree 10 are filled by a cubic spline in the logarithm
        of the degree through h', n l' and n k' (n h, n^2 l and n^2 k of tides). With 24 degrees up to 2048, as tables print
        them, PREM comes out within 0.3 %.

    Returns
    -------
    Dataset (degree)
        As ``love_numbers``, degree 1 converted to CE. Without a row of degree 0, h'_0 is 0. Tide numbers that are not in the table
        are PREM's. Attributes as ``love_numbers``, and ``given_degrees``, ``degree_zero`` and ``tide_source``: what came from
        where. The table ends where the file ends, its limits at high degree are not known.

    Raises
    ------
    MissingFileError, TableError
        File, line, column, what came, what is allowed, what to do.
    InputError
        If an argument cannot be used.
    """
    check_frame(reference_frame)
    one_of(fill, FILLS, argument="fill", kind="way to treat holes")
    attrs = _earth(radius, mean_density, surface_gravity)
    frame, _ = read_columns(path, required=("degree", "h_load"))
    table = _values(frame, path)
    degree = _degrees(frame, path)
    _check_values(table, degree, frame, path)
    _check_degree_one(table, degree, reference_frame, path)
    attrs["degree_zero"] = "as given" if degree[0] == 0 else "not given, h'_0 set to 0"
    if degree[0] != 0:
        degree = np.concatenate([[0], degree])
        table = {name: np.concatenate([[0.0], values]) for name, values in table.items()}
    whole, attrs["given_degrees"] = _without_holes(table, degree, fill, path)
    missing = [name for name in _TIDE if name not in whole]
    attrs["tide_source"] = f"{', '.join(missing)} of PREM, the others as given" if missing else "as given"
    if len(missing) == len(_TIDE):
        attrs["tide_source"] = "PREM"
    attrs["source"] = f"table {Path(path).name}, degree 1 given in {reference_frame}"
    return in_frame(_labelled(whole, {**attrs, "reference_frame": reference_frame}), "CE")


def _earth(radius: float, mean_density: float | None, surface_gravity: float | None) -> dict[str, float | str]:
    """Attributes of the Earth the numbers belong to."""
    a = real_number(radius, argument="radius", allowed="6e6 to 7e6 m", low=6e6, high=7e6)
    given = love_numbers(max_degree=1).attrs["mean_density"] if mean_density is None else mean_density
    rho = real_number(given, argument="mean_density", allowed="1000 to 20000 kg m-3", low=1e3, high=2e4)
    expected = 4.0 / 3.0 * np.pi * GRAVITATIONAL_CONSTANT.value * rho * a
    words = f"within 1 % of {expected:.4f} m s-2, the gravity of this radius and mean density"
    g = expected if surface_gravity is None else surface_gravity
    g = real_number(g, argument="surface_gravity", allowed=words, low=0.99 * expected, high=1.01 * expected)
    return {"radius": a, "mean_density": rho, "surface_gravity": g}


def _degrees(frame: pd.DataFrame, path: str | os.PathLike[str]) -> NDArray[np.int64]:
    degree, lines = numbers(frame, "degree", path=path), frame.index
    wrong = np.flatnonzero((degree < 0.0) | (degree != np.round(degree)))
    if wrong.size:
        row = int(wrong[0])
        raise TableError(
            f"{path}: line {lines[row]}: degree is {frame['degree'].iloc[row]}; must be a whole number of 0 or more."
        )
    wrong = np.flatnonzero(np.diff(degree) <= 0.0)
    if wrong.size:
        row = int(wrong[0]) + 1
        raise TableError(
            f"{path}: line {lines[row]}: degree is {degree[row]:g} after {degree[row - 1]:g}; degrees must ascend, each once."
        )
    if 1.0 not in degree:
        raise TableError(
            f"{path}: lacks degree 1, which depends on the frame. Add its row in the frame named (k'_1 is 0 in CE, -1 in CM)."
        )
    if degree[-1] < 2.0:
        raise TableError(f"{path}: ends at degree 1; must go to degree 2 or more. Add the rows above.")
    return degree.astype(np.int64)


def _values(frame: pd.DataFrame, path: str | os.PathLike[str]) -> dict[str, Array]:
    """Load numbers and the tide numbers there are, (row,) each."""
    out = {"h_load": numbers(frame, "h_load", path=path)}
    degree = np.maximum(numbers(frame, "degree", path=path), 1.0)
    for name in ("l_load", "k_load"):
        times = f"degree_times_{name}"
        if (name in frame) == (times in frame):
            came = "both" if name in frame else "neither"
            raise TableError(
                f"{path}: needs one column of {name} or {times}, has {came}. Give the one that is printed."
            )
        out[name] = numbers(frame, name, path=path) if name in frame else numbers(frame, times, path=path) / degree
    out |= {name: numbers(frame, name, path=path) for name in _TIDE if name in frame}
    return {name: values.copy() for name, values in out.items()}  # pandas gives views that cannot be written to


def _check_values(
    table: dict[str, Array], degree: NDArray[np.int64], frame: pd.DataFrame, path: str | os.PathLike[str]
) -> None:
    above = degree >= 2
    rules = (
        ("h_load", above & (table["h_load"] >= 0.0), "negative: a load pushes the ground down"),
        (
            "k_load",
            above & (np.abs(table["k_load"] + 0.5) >= 0.5),
            "between -1 and 0; printed as n k' it is degree_times_k_load",
        ),
        (
            "l_load",
            above & (np.abs(table["l_load"]) >= 1.0),
            "between -1 and 1; printed as n l' it is degree_times_l_load",
        ),
        (
            "k_load",
            (degree == 0) & (table["k_load"] != 0.0),
            "0 at degree 0: a load does not change the Earth's own mass",
        ),
        ("l_load", (degree == 0) & (table["l_load"] != 0.0), "0 at degree 0: a uniform load moves nothing sideways"),
    )
    for name, wrong, allowed in rules:
        if wrong.any():
            row = int(np.flatnonzero(wrong)[0])
            raise TableError(
                f"{path}: line {frame.index[row]}: {name} is {table[name][row]:g} at degree {degree[row]}; must be {allowed}."
            )


def _check_degree_one(
    table: dict[str, Array], degree: NDArray[np.int64], frame: str, path: str | os.PathLike[str]
) -> None:
    """Refuse a degree 1 that contradicts the frame named, and put k'_1 where the frame has it by definition."""
    row = int(np.flatnonzero(degree == 1)[0])
    h, side, k = (float(table[name][row]) for name in _LOAD)
    came = f"{path}: degree 1 (h' {h:g}, l' {side:g}, k' {k:g}) is not that of {frame}"
    cure = "Name the frame it is in, or convert it."
    own = {"CE": 0.0, "CM": -1.0}.get(frame)
    if own is not None:
        if abs(k - own) > _PRINTED:
            raise TableError(f"{came}: there k'_1 is {own:g}. {cure}")
        table["k_load"][row] = k = own
    elif abs(k) > _FAR or (k == 0.0 and max(abs(h), abs(side)) > _PRINTED):
        raise TableError(f"{came}: there k'_1 is small but not 0; it is 0 in CE and -1 in CM. {cure}")
    zero, words = {"CF": (h + 2.0 * side, "h'_1 + 2 l'_1"), "CL": (side, "l'_1"), "CH": (h, "h'_1")}.get(
        frame, (0.0, "")
    )
    if abs(zero) > _PRINTED:
        raise TableError(f"{came}: there {words} is 0, got {zero:.3g}. {cure}")
    if max(abs(h - k), abs(side - k)) > _FAR:
        raise TableError(f"{came}: with k'_1 taken off, h'_1 and l'_1 must be within {_FAR:g} of 0. {cure}")


def _without_holes(
    table: dict[str, Array], degree: NDArray[np.int64], fill: str, path: str | os.PathLike[str]
) -> tuple[dict[str, Array], str]:
    """Numbers of all degrees from 0 to the last, and in words which of them the file gave."""
    last = int(degree[-1])
    holes = np.setdiff1d(np.arange(last + 1), degree)
    if not holes.size:
        return table, f"all to {last}"
    if fill == "refuse":
        raise TableError(
            f"{path}: lacks degree {holes[0]}. Give every degree, or pass fill='interpolate' for those above 10."
        )
    if holes[0] <= _NO_HOLES_TO:
        raise TableError(
            f"{path}: lacks degree {holes[0]}; degrees up to {_NO_HOLES_TO} are not interpolated. Give them all."
        )
    given, every = degree[1:], np.arange(1.0, last + 1.0)
    whole = {}
    for name, values in table.items():
        scale = given.astype(np.float64) ** _POWERS[name]
        # from degree 2: degree 1 is a matter of the frame, and tides have none
        curve = CubicSpline(np.log(given[1:]), (values[1:] * scale)[1:])(np.log(every)) / every ** _POWERS[name]
        whole[name] = np.concatenate([values[:1], curve])
        whole[name][degree] = values
    return (
        whole,
        f"{given.size} of 1 to {last}: {' '.join(str(n) for n in given)}; the others by a cubic spline in log degree",
    )


def _labelled(whole: dict[str, Array], attrs: dict[str, float | str]) -> xr.Dataset:
    """Dataset laid out as PREM's, with PREM's tide numbers where there are none."""
    count = next(iter(whole.values())).size
    like = love_numbers(max_degree=count - 1)
    out = like.copy(deep=True)
    for name, values in whole.items():
        held = values.copy()
        if name in _TIDE:
            held[:2] = 0.0
        out[name] = ("degree", held, like[name].attrs)
    return xr.Dataset(out.data_vars, out.coords, attrs)
