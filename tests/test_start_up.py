"""Importing the package or asking for help costs next to nothing."""

import json
import subprocess
import sys

import pytest

import massfingerprint

HEAVY = ["xarray", "pandas", "pint", "scipy", "matplotlib", "pyshtools", "dask", "geopandas", "shapely"]
PROBE = "import json, sys; print(json.dumps([m for m in {heavy!r} if m in sys.modules]))"


def loaded_after(statement: str) -> list[str]:
    code = f"{statement}\n{PROBE.format(heavy=HEAVY)}"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return json.loads(done.stdout.strip().splitlines()[-1])


@pytest.mark.parametrize(
    "statement",
    [
        "import massfingerprint",
        "from massfingerprint.cli import main; main(['--help'])",
        "from massfingerprint.cli import main; main(['--version'])",
    ],
)
def test_light_start(statement):
    assert loaded_after(statement) == []


def test_the_probe_notices_a_heavy_import():
    assert loaded_after("import xarray")[0] == "xarray"


def test_every_public_name_resolves_and_is_documented():
    for name in massfingerprint.__all__:
        thing = getattr(massfingerprint, name)
        assert len(thing.__doc__.splitlines()) > 2, name
    assert set(massfingerprint.__all__) <= set(dir(massfingerprint))
    with pytest.raises(AttributeError, match="no_such_name"):
        massfingerprint.no_such_name  # noqa: B018
