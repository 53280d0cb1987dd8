"""How much of each cell is ocean, at any spacing that divides 180 degrees."""

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from scipy import sparse

from massfingerprint.arguments import one_of
from massfingerprint.bundled import bundled_sources, open_bundled
from massfingerprint.errors import GridError
from massfingerprint.sphere.grids import regular_grid

_FILE = "ocean_fraction_0.25deg.nc"
_STORED_SPACING = 0.25
_MOST_RINGS = 180 * 60  # one arc minute: 2 GB already, and nothing new below 0.25


COASTLINES = ("grounding line", "ice front")


def ocean_fraction(spacing: float = 0.25, *, coastline: str = "grounding line") -> xr.DataArray:
    """Fraction of each cell's area that is ocean.

    Ice shelves are ocean unless the coast is their front; the Caspian is land.

    Parameters
    ----------
    spacing : float
        Degrees; 180 must be a whole multiple of it. Coarser than 0.25 are exact area means on the sphere; finer repeat
        the stored cells and say so in ``attrs["comment"]``.
    coastline : str
        Where the ocean ends in Antarctica: ``"grounding line"`` (floating ice lets sea level through) or ``"ice front"``.

    Returns
    -------
    DataArray (lat, lon)
        0 to 1, latitude ascending, longitude 0 to 360.

    Raises
    ------
    GridError
        If the spacing is not a number, does not divide 180 or is finer than one arc minute.
    InputError
        If the coastline is neither.

    Source
    ------
    Natural Earth 1:10m land with the Antarctic grounding line (entry in ``bundled/source.toml``).
    """
    one_of(coastline, COASTLINES, argument="coastline", kind="coastline")
    grid = regular_grid(spacing)
    if grid.nlat > _MOST_RINGS:
        raise GridError(f"spacing: finer than one arc minute ({1 / 60:.5f} degree) is not offered, got {spacing!r}.")
    file = open_bundled(_FILE)
    stored = file["ocean_fraction"]
    if coastline == "ice front":
        # shelves reach a little beyond the ocean of the finer coast
        stored = (stored - file["ice_shelf_fraction"]).clip(min=0.0)
    stored = stored.assign_coords(lon=stored["lon"] % 360.0).sortby(["lat", "lon"])
    rows = overlap_shares(
        np.sin(np.deg2rad(cell_edges(-90.0, stored.sizes["lat"]))), np.sin(np.deg2rad(cell_edges(-90.0, grid.nlat)))
    )
    columns = overlap_shares(cell_edges(0.0, stored.sizes["lon"]), cell_edges(0.0, grid.nlon))
    values = np.clip(columns @ (rows @ stored.values).T, 0.0, 1.0).T
    return xr.DataArray(
        np.ascontiguousarray(values),
        dims=("lat", "lon"),
        coords={
            "lat": ("lat", grid.latitudes, {"units": "degrees_north", "standard_name": "latitude"}),
            "lon": ("lon", grid.longitudes, {"units": "degrees_east", "standard_name": "longitude"}),
        },
        name="ocean_fraction",
        attrs=_attributes(180.0 / grid.nlat, coastline),
    )


def _attributes(spacing: float, coastline: str) -> dict[str, str]:
    shelves = "ocean" if coastline == "grounding line" else "land"
    attributes = {
        "units": "1",
        "long_name": f"fraction of the cell area that is ocean (ice shelves are {shelves}, the Caspian is land)",
        "source": bundled_sources()[_FILE]["source"],
    }
    if spacing < _STORED_SPACING * (1 - 1e-9):
        attributes["comment"] = (
            f"finer than the stored {_STORED_SPACING} degree: its cells are repeated, no coast is added"
        )
    return attributes


def cell_edges(start: float, count: int) -> NDArray[np.float64]:
    """Cell edges over 180 degrees from -90, or over 360 from 0."""
    return np.linspace(start, start + (180.0 if start < 0 else 360.0), count + 1)


def overlap_shares(stored: NDArray[np.float64], wanted: NDArray[np.float64]) -> sparse.csr_array:
    """Matrix (wanted cells, stored cells) of overlap shares; every row sums to 1."""
    breaks = np.union1d(stored, wanted)
    middle = 0.5 * (breaks[:-1] + breaks[1:])
    row = np.searchsorted(wanted, middle) - 1
    column = np.searchsorted(stored, middle) - 1
    shape = (wanted.size - 1, stored.size - 1)
    overlap = sparse.coo_array((np.diff(breaks), (row, column)), shape=shape).tocsr()
    return sparse.csr_array(sparse.diags_array(1.0 / overlap.sum(axis=1)) @ overlap)
