import geopandas as gpd
import numpy as np
import pytest
import xarray as xr

from massfingerprint.load.ocean import ocean_fraction


@pytest.fixture(scope="session")
def ocean():
    return ocean_fraction(1.0)


@pytest.fixture(scope="session")
def dry():
    """A globe without ocean on a 2-degree grid."""
    lat, lon = np.arange(-89.0, 90.0, 2.0), np.arange(1.0, 360.0, 2.0)
    return xr.DataArray(
        np.zeros((90, 180)), dims=("lat", "lon"), coords={"lat": lat, "lon": lon}, name="ocean_fraction"
    )


@pytest.fixture
def one_region():
    def build(shape, name="a", crs="EPSG:4326"):
        return gpd.GeoDataFrame({"source": [name]}, geometry=[shape], crs=crs)

    return build
