"""Geography and tables that come with the package, each checked against its recorded sha256 before use."""

import gzip
import hashlib
import io
import json
import tomllib
import zlib
from importlib import resources
from importlib.resources.abc import Traversable
from typing import TYPE_CHECKING, Any

import xarray as xr

from massfingerprint.errors import DamagedFileError, InputError, MissingFileError, nearest_names

if TYPE_CHECKING:
    from geopandas import GeoDataFrame
    from pandas import DataFrame

__all__ = ["bundled_sources", "open_bundled", "open_bundled_table"]

_SOURCES = "source.toml"
_REQUIRED = ("source", "licence", "sha256")
_OPENED = (".nc", ".geojson", ".geojson.gz")
_REMEDY = "Please reinstall massfingerprint."


def bundled_sources() -> dict[str, dict[str, Any]]:
    """Tell where each bundled file comes from.

    Returns
    -------
    dict of str to dict
        File name to its ``source``, ``licence``, ``sha256`` and further entries of ``source.toml``.

    Raises
    ------
    MissingFileError, DamagedFileError
        ``source.toml`` is gone or cannot be read.
    """
    content = _read(_SOURCES)
    try:
        sources = tomllib.loads(content.decode("utf-8"))
    except ValueError as error:
        raise DamagedFileError(f"bundled file '{_SOURCES}' is damaged: {error}. {_REMEDY}") from error
    for name, entry in sources.items():
        missing = [key for key in _REQUIRED if not isinstance(entry, dict) or key not in entry]
        if missing:
            raise DamagedFileError(
                f"bundled file '{_SOURCES}' is damaged: '{name}' lacks {', '.join(missing)}. {_REMEDY}"
            )
    return sources


def open_bundled(name: str) -> "xr.Dataset | GeoDataFrame":
    """Open one file that comes with the package, after checking its sha256.

    Parameters
    ----------
    name : str
        A key of `bundled_sources` that ends in ``.nc``, ``.geojson`` or ``.geojson.gz``.

    Returns
    -------
    xarray.Dataset or geopandas.GeoDataFrame
        A Dataset in memory for ``.nc``; polygons in EPSG:4326 (degrees) for ``.geojson`` and ``.geojson.gz``, as
        stored: a few ice outlines cross themselves and one has no area. Each call returns a fresh object.

    Raises
    ------
    InputError
        No bundled file has that name.
    MissingFileError, DamagedFileError
        The installed copy is gone or is not what was shipped.
    """
    content = _checked(name, _OPENED)
    try:
        return _dataset(name) if name.endswith(".nc") else _polygons(name, content)
    except (OSError, EOFError, zlib.error, ValueError, KeyError, TypeError) as error:
        raise DamagedFileError(f"bundled file '{name}' cannot be read: {error}. {_REMEDY}") from error


def open_bundled_table(name: str) -> "DataFrame":
    """Open one table that comes with the package as text cells, after checking its sha256.

    Parameters
    ----------
    name : str
        A key of `bundled_sources` that ends in ``.csv``.

    Returns
    -------
    pandas.DataFrame
        Cells as strings, columns named as in the header, units and all.

    Raises
    ------
    InputError, MissingFileError, DamagedFileError
        As `open_bundled`.
    """
    from pandas import read_csv  # noqa: PLC0415  half a second that readers of grids need not wait

    content = _checked(name, (".csv",))
    try:
        return read_csv(io.BytesIO(content), dtype=str, keep_default_na=False)
    except ValueError as error:
        raise DamagedFileError(f"bundled file '{name}' cannot be read: {error}. {_REMEDY}") from error


def _checked(name: str, endings: tuple[str, ...]) -> bytes:
    """Content of a bundled file of the right kind whose sha256 is the recorded one."""
    sources = bundled_sources()
    if not isinstance(name, str) or name not in sources:
        raise InputError(f"name: no bundled file is called {name!r}. {nearest_names(str(name), list(sources))}")
    if not name.endswith(endings):
        raise InputError(f"name: {name!r} ends in none of {', '.join(endings)}. Its own function or module reads it.")
    content = _read(name)
    found, expected = hashlib.sha256(content).hexdigest(), sources[name]["sha256"]
    if found != expected:
        raise DamagedFileError(
            f"bundled file '{name}' is damaged: sha256 {found[:12]}... instead of {str(expected)[:12]}.... {_REMEDY}"
        )
    return content


def _folder() -> Traversable:
    return resources.files(__name__)


def _read(name: str) -> bytes:
    try:
        return _folder().joinpath(name).read_bytes()
    except FileNotFoundError as error:
        raise MissingFileError(f"bundled file '{name}' is missing from {_folder()}. {_REMEDY}") from error
    except OSError as error:
        raise DamagedFileError(f"bundled file '{name}' cannot be read: {error}. {_REMEDY}") from error


def _dataset(name: str) -> xr.Dataset:
    with (
        resources.as_file(_folder().joinpath(name)) as path,
        xr.open_dataset(path, engine="netcdf4", cache=False) as stored,
    ):
        # Packing into 16 bits suits these files, not what is computed from them and written again.
        return stored.load().drop_encoding()


def _polygons(name: str, content: bytes) -> "GeoDataFrame":
    from geopandas import GeoDataFrame  # noqa: PLC0415  half a second that readers of grids need not wait

    text = gzip.decompress(content) if name.endswith(".gz") else content
    return GeoDataFrame.from_features(json.loads(text)["features"], crs="EPSG:4326")
