"""Results beyond the memory limit lie in a temporary file and are the same numbers; memory grows by results and load alone."""

import subprocess
import sys

import numpy as np
import pytest

import massfingerprint as mf
from massfingerprint.errors import InputError

SCRIPT = """
import resource, sys
import numpy as np, xarray as xr
import massfingerprint as mf
count, limit = int(sys.argv[1]), sys.argv[2]
ocean = mf.ocean_fraction(0.5)
prepared = mf.prepare_solver(ocean, mf.love_numbers(max_degree=256), max_degree=256)
one = mf.spread_mass(mf.regions("greenland"), ocean)
load = xr.concat([one] * count, dim="source").assign_attrs(one.attrs)
if limit != "none":
    mf.set_options(memory_limit=int(limit))
mf.solve_fingerprints(prepared, one)
before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
answer = mf.solve_fingerprints(prepared, load)
own = sum(v.nbytes for v in answer.data_vars.values())
print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024, load.nbytes, own)
"""


def peak(count, limit="none"):
    done = subprocess.run([sys.executable, "-c", SCRIPT, str(count), limit], capture_output=True, text=True, check=True)
    return [int(word) for word in done.stdout.split()]


def test_peak_memory_grows_by_load_and_results_alone():
    """10 and 60 sources in fresh processes: less than 5 % of the peak is unexplained by load and results."""
    (few, load_few, own_few), (many, load_many, own_many) = peak(10), peak(60)
    unexplained = (many - few) - (load_many - load_few) - (own_many - own_few)
    assert unexplained < 0.05 * many


def test_results_in_a_file_are_the_same(love):
    ocean = mf.ocean_fraction(2.0)
    prepared = mf.prepare_solver(ocean, love, max_degree=40)
    load = mf.spread_mass(mf.regions("greenland", "west_antarctica"), ocean)
    plain = mf.solve_fingerprints(prepared, load)
    with mf.set_options(memory_limit=0):
        filed = mf.solve_fingerprints(prepared, load)
    assert isinstance(filed["relative_sea_level"].values.base, np.memmap) or isinstance(
        filed["relative_sea_level"].values, np.memmap
    )
    for name in plain.data_vars:
        np.testing.assert_array_equal(filed[name].values, plain[name].values)
    assert float(filed["relative_sea_level"].sel(source="greenland").mean()) < 0.0


@pytest.mark.parametrize("value", [-1, 0.5, "1 GB", True])
def test_a_limit_that_is_none_is_refused(value):
    with pytest.raises(InputError, match="memory_limit: must be a whole number of 0 or more"):
        mf.set_options(memory_limit=value)
