"""What mass change does to the Earth as a whole: its centre of mass, its low-degree gravity field, its axis and its spin.

All of it is linear in the load, so each number is one per gigatonne and mass source; times a mass record it is a series or a rate
(``sea_level_series(..., fields=EARTH_NUMBERS)``) with the uncertainty of the record.
"""

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import whole_number
from massfingerprint.earth.frames import check_frame, geocentre_motion
from massfingerprint.earth.response import gravity_coefficients
from massfingerprint.errors import InputError, UnitsError
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sphere import _transform
from massfingerprint.sphere.harmonics import labelled

Array = NDArray[np.float64]
_GEOCENTRE = ("geocentre_x", "geocentre_y", "geocentre_z")
_POLE = ("polar_motion_x", "polar_motion_y", "length_of_day_change")
EARTH_NUMBERS = (*_GEOCENTRE, *_POLE, "j2", "stokes")


def earth_numbers(
    prepared: Prepared,
    patterns: xr.Dataset,
    *,
    reference_frames: tuple[str, ...] = ("CM", "CF", "CE"),
    stokes_degree: int = 4,
) -> xr.Dataset:
    """Geocentre, Stokes coefficients, J2, pole and length of day that a load changes.

    Parameters
    ----------
    prepared : Prepared
        What the patterns were solved with.
    patterns : Dataset (source, ...)
        From ``solve_fingerprints`` with ``surface_load`` among its outputs and a load in kg m-2 Gt-1.
    reference_frames : tuple of str
        Frames of degree 1.
    stokes_degree : int
        Highest degree of the Stokes coefficients, 2 or more.

    Returns
    -------
    Dataset (source, ...)
        Per gigatonne added: ``geocentre_x``, ``geocentre_y``, ``geocentre_z`` (source, frame) in mm Gt-1, motion of the centre of
        mass of Earth and load seen in the frame, in CM 0; ``stokes`` (source, frame, part, coefficient) in Gt-1, fully normalised
        to the sphere's radius, without the direct centrifugal potential, only degree 1 depends on the frame; ``j2`` (source)
        in Gt-1, -sqrt(5) C20; ``polar_motion_x``, ``polar_motion_y`` in mas Gt-1 (y towards 90 W), where the axis goes if mass
        changes slowly against the Chandler period; ``length_of_day_change`` in ms Gt-1.

    Raises
    ------
    InputError, UnitsError
        If the patterns lack the whole load or are not per gigatonne, or a frame or degree cannot be used.

    Source
    ------
    Blewitt 2003 (from memory) for the frames; IERS Conventions (2010) for the normalisation.
    """
    load, frames = _low_degrees(patterns, stokes_degree), tuple(check_frame(frame) for frame in reference_frames)
    lead, love = load.dims[:-2], prepared.love
    coords = {key: value for key, value in load.coords.items() if set(value.dims) <= set(lead)}
    out = xr.Dataset(coords={**coords, "frame": ("frame", np.array(frames, dtype=object))})
    centre = np.stack([geocentre_motion(load.values, love, frame) for frame in frames], axis=-2) * 1e3
    for axis, name in enumerate(_GEOCENTRE):
        out[name] = ((*lead, "frame"), centre[..., axis] + 0.0, vocabulary.attributes(name, per_gigatonne=True))
    degree, order = load["degree"].values, load["order"].values
    stokes = np.stack(
        [
            gravity_coefficients(load, love, rotation=prepared.turning, reference_frame=frame)[..., degree, order]
            for frame in frames
        ],
        axis=-3,
    )
    pairs = labelled(stokes, (*lead, "frame"), {**coords, "frame": out["frame"]})
    out["stokes"] = pairs.assign_attrs(vocabulary.attributes("stokes", per_gigatonne=True))
    zonal = _transform.index_of(2, 0, stokes_degree)
    flattening = -np.sqrt(5.0) * stokes[..., 0, 0, zonal]
    out["j2"] = (lead, flattening, vocabulary.attributes("j2", per_gigatonne=True))
    for name in _POLE:
        out[name] = patterns[name]
    return out.assign_attrs({key: patterns.attrs[key] for key in ("love_numbers", "rotation") if key in patterns.attrs})


def _low_degrees(patterns: xr.Dataset, stokes_degree: int) -> xr.DataArray:
    """The whole load (..., part, coefficient) up to the degree of the Stokes coefficients, kg m-2 Gt-1."""
    degree = whole_number(stokes_degree, argument="stokes_degree", lowest=2)
    label = "surface_load_coefficients"
    if not isinstance(patterns, xr.Dataset) or label not in patterns:
        raise InputError(f"patterns: holds no {label}. Solve with outputs=('surface_load', ...).")
    held = patterns[label].transpose(..., "part", "coefficient")
    if held.attrs.get("units") != "kg m-2 Gt-1":
        raise UnitsError(
            f"patterns: {label} must be in kg m-2 Gt-1, got {held.attrs.get('units')!r}. Use a load in kg m-2 Gt-1."
        )
    highest = int(held["degree"].max())
    if degree > highest:
        raise InputError(
            f"stokes_degree: the patterns end at degree {highest}, got {degree}. Ask for {highest} at most."
        )
    lead = held.dims[:-2]
    coords = {key: value for key, value in held.coords.items() if set(value.dims) <= set(lead)}
    return labelled(_transform.resized(held.values, degree), lead, coords)


def pole_direction(x: Array, y: Array) -> Array:
    """Longitude (degrees east, -180 to 180) towards which the north pole goes, of polar motion x and y (y towards 90 W)."""
    return np.rad2deg(np.arctan2(-np.asarray(y), np.asarray(x)))
