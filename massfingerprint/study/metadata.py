"""What every file of a study says about itself: discovery attributes (ACDD-1.3), provenance, caution, and what is not in it."""

import hashlib
import platform
import sys
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from massfingerprint import constants
from massfingerprint.bundled import bundled_sources
from massfingerprint.files.digests import file_sha256
from massfingerprint.study.inputs import Inputs
from massfingerprint.study.recipe import Recipe

CAUTION = "For screening only: local datums, surveys and licensed practice decide."
LEFT_OUT = (
    "Not in it: ocean dynamics, thermal expansion and salinity, atmosphere, glacial isostatic adjustment, local land motion "
    "(subsidence, tectonics), ice that is not in the mass record."
)
UNCERTAINTY = (
    "The uncertainty is that of the mass record, with its error models in time. Not in it: Love numbers (about 1 %), truncation "
    "(given beside each value), and where within a source the mass was lost (given as lowest and highest)."
)
_KEYWORDS = "sea level, barystatic, sea-level fingerprint, mass change, glaciers, ice sheets, elastic deformation, Earth rotation"
_LIBRARIES = ("numpy", "scipy", "xarray", "ducc0", "pandas", "netCDF4", "shapely", "geopandas", "matplotlib", "cartopy")


def now() -> str:
    """Present time in ISO 8601, UTC, whole seconds."""
    return datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


def input_files(recipe: Recipe) -> dict[str, Path]:
    """Every file of the user's that a study reads, by what it is for."""
    named = {"study": recipe.source_file, "mass": recipe.mass.file, "sites": recipe.sites.file}
    named |= {"correlation": recipe.mass.correlation, "earth": recipe.earth.file}
    out = {key: path for key, path in named.items() if path is not None}
    return out | {f"outlines {number + 1}": path for number, path in enumerate(recipe.regions.outlines)}


def provenance(recipe: Recipe, inputs: Inputs, patterns: xr.Dataset, *, made: str) -> dict[str, Any]:
    """Command, versions, hashes of all inputs, factors and constants behind a study."""
    used = {
        name: {"value": c.value, "unit": c.unit, "uncertainty": c.uncertainty, "source": c.source}
        for name, c in vars(constants).items()
        if isinstance(c, constants.Constant)
    }
    return {
        "made": made,
        "command": [Path(sys.argv[0]).name, *sys.argv[1:]],
        "versions": {"massfingerprint": version("massfingerprint"), "python": platform.python_version()}
        | {name: version(name) for name in _LIBRARIES},
        "inputs": {key: {"file": path.name, "sha256": file_sha256(path)} for key, path in input_files(recipe).items()},
        "outlines": {
            str(row["source"]): {
                "note": str(row["source_note"]),
                "sha256": hashlib.sha256(row["geometry"].wkb).hexdigest(),
            }
            for _, row in inputs.outlines.iterrows()
        },
        "bundled": {name: entry["sha256"] for name, entry in bundled_sources().items() if "sha256" in entry},
        "choices": _choices(recipe, inputs, patterns),
        "factors": {
            "gigatonnes_per_millimetre": patterns.attrs["gigatonnes_per_millimetre"],
            "ocean_area_m2": patterns.attrs["ocean_area"],
            "water_density_kg_m-3": patterns.attrs["water_density"],
        },
        "constants": used,
        "caution": CAUTION,
        "left_out": LEFT_OUT,
        "uncertainty": UNCERTAINTY,
    }


def _choices(recipe: Recipe, inputs: Inputs, patterns: xr.Dataset) -> dict[str, Any]:
    return {
        "earth": recipe.earth.model if recipe.earth.file is None else recipe.earth.file.name,
        "period": recipe.earth.period,
        "redistributed_density": recipe.earth.redistributed_density,
        "love_numbers": patterns.attrs["love_numbers"],
        "rotation": recipe.earth.rotation,
        "spacing": recipe.grid.spacing,
        "max_degree": recipe.grid.max_degree,
        "reference_frame": recipe.output.reference_frame,
        "interval": recipe.output.interval,
        "seasonal": recipe.rates.seasonal,
        "windows": {name: list(span) for name, span in inputs.windows.items()},
        "drop": list(recipe.mass.drop),
        "since": recipe.output.since,
        "reference_epoch": inputs.ledger.attrs.get("reference_epoch", ""),
    }


def discovery(recipe: Recipe, inputs: Inputs, dataset: xr.Dataset, *, what: str, made: str) -> dict[str, Any]:
    """Global attributes of one file by ACDD-1.3; ``what`` says in a few words what it holds."""
    time = (dataset if "time" in dataset.coords else inputs.ledger)["time"].values
    credits_ = vars(recipe.credits)
    digest = hashlib.sha256(recipe.raw or repr(recipe).encode()).hexdigest()[:16]
    return {
        "title": f"{recipe.title}: {what}",
        "summary": f"{what[:1].upper()}{what[1:]}. {LEFT_OUT} {CAUTION}",
        "keywords": _KEYWORDS,
        "keywords_vocabulary": "free text",
        "id": f"massfingerprint-{digest}",
        "naming_authority": "not given",
        "history": f"{made} massfingerprint {version('massfingerprint')}",
        "source": "spherical-harmonic sea-level equation with gravity, elastic deformation and rotation, driven by a mass record",
        "processing_level": "derived",
        "comment": f"{UNCERTAINTY} Geodetic latitudes are used as spherical latitudes.",
        "references": "provenance.json beside this file",
        "reference_epoch": recipe.output.since or str(inputs.ledger.attrs.get("reference_epoch", "")),
        "standard_name_vocabulary": "CF Standard Name Table v93",
        "product_version": version("massfingerprint"),
        **dict.fromkeys(("date_created", "date_modified", "date_issued", "date_metadata_modified"), made),
        **credits_,
        "creator_type": "institution",
        "creator_institution": credits_["institution"],
        "publisher_name": credits_["creator_name"],
        "publisher_email": credits_["creator_email"],
        "publisher_url": credits_["creator_url"],
        "publisher_type": "institution",
        "publisher_institution": credits_["institution"],
        "time_coverage_start": f"{str(time[0])[:19]}Z",
        "time_coverage_end": f"{str(time[-1])[:19]}Z",
        "time_coverage_duration": f"P{int((time[-1] - time[0]) / np.timedelta64(1, 'D'))}D",
        "time_coverage_resolution": f"P{int(np.median(np.diff(time)) / np.timedelta64(1, 'D'))}D",
        **_extent(dataset),
    }


def _extent(dataset: xr.Dataset) -> dict[str, Any]:
    """Where on the Earth a file's values stand; the whole globe for a file without places."""
    ends = {"lat": (-90.0, 90.0), "lon": (-180.0, 180.0)}
    for axis in ends:
        if axis in dataset.coords:
            ends[axis] = (float(dataset[axis].min()), float(dataset[axis].max()))
    (south, north), (west, east) = ends["lat"], ends["lon"]
    corners = [(south, west), (north, west), (north, east), (south, east), (south, west)]
    out: dict[str, Any] = {
        "geospatial_lat_min": south,
        "geospatial_lat_max": north,
        "geospatial_lat_units": "degrees_north",
        "geospatial_lon_min": west,
        "geospatial_lon_max": east,
        "geospatial_lon_units": "degrees_east",
        "geospatial_bounds": f"POLYGON (({', '.join(f'{lat:g} {lon:g}' for lat, lon in corners)}))",
        "geospatial_bounds_crs": "EPSG:4326",
    }
    for axis in ends:
        if axis in dataset.dims:
            out[f"geospatial_{axis}_resolution"] = f"{abs(float(dataset[axis][1] - dataset[axis][0])):g} degrees"
    return out
