"""Ratios that matter to a user, measured in one run: ``python -m tests.timings.measure``.

Seconds on a shared machine mean little; the ratios are of things timed in turn in this run. Nothing here passes or fails.
"""

import argparse
import os
import platform
import re
import shutil
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr

import massfingerprint as mf
from massfingerprint.earth.models import MODELS
from massfingerprint.sphere import _transform
from massfingerprint.sphere.harmonics import analyse, to_gravity
from tests.timings.textbook import Textbook

SITE = pd.DataFrame({"site": ["Hudson"], "lat": [40.7], "lon": [-74.0]})


def seconds(action, repeats):
    """Median wall time of an action called in turn."""
    times = []
    for _ in range(repeats):
        begin = time.perf_counter()
        action()
        times.append(time.perf_counter() - begin)
    return statistics.median(times)


def process(code):
    return lambda: subprocess.run([sys.executable, "-c", code], check=True, capture_output=True)


def start_up(repeats):
    """Fresh processes, taken in turn so that drift of the machine cancels."""
    codes = {
        "import numpy": "import numpy",
        "import massfingerprint": "import massfingerprint",
        "massfingerprint --help": "from massfingerprint.cli import main; main(['--help'])",
    }
    times = {name: [] for name in codes}
    for _ in range(repeats):
        for name, code in codes.items():
            times[name].append(seconds(process(code), 1))
    medians = {name: statistics.median(values) for name, values in times.items()}
    base = medians["import numpy"]
    return [(name, f"{value:.3f} s", f"{value / base:.2f} x import numpy") for name, value in medians.items()]


def solving(max_degree, spacing, repeats):
    """One source on the user's grid, against a pair: one synthesis and one analysis at the same degree and grid."""
    ocean = mf.ocean_fraction(spacing)
    love = mf.love_numbers(max_degree=max_degree)
    prepared = mf.prepare_solver(ocean, love, max_degree=max_degree)
    load = mf.spread_mass(mf.regions("greenland"), ocean)
    coefficients = _transform.complex_from_real(
        np.random.default_rng(0).normal(size=(2, _transform.coefficient_count(max_degree)))
    )
    grid = prepared.grid
    shape = grid.nlat, grid.nlon

    def pair():
        _transform.analyse(
            _transform.synthesise(coefficients, shape, grid.first_azimuth), max_degree, grid.first_azimuth
        )

    state = coefficients.copy()
    one_pair = seconds(pair, 3 * repeats)
    rounds = seconds(lambda: prepared.operator.ocean_load(state), 3 * repeats)
    solve = seconds(lambda: mf.solve_fingerprints(prepared, load), repeats)
    prepare = seconds(lambda: mf.prepare_solver(ocean, love, max_degree=max_degree), repeats)
    where = f"degree {max_degree}, {spacing:g} degree"
    return [
        (f"pair on the user's grid, {where}", f"{one_pair:.4f} s", "1 pair"),
        (f"round of the solver, {where}", f"{rounds:.4f} s", f"{rounds / one_pair:.2f} pairs"),
        (f"solve one source, {where}", f"{solve:.3f} s", f"{solve / one_pair:.1f} pairs"),
        (f"prepare, {where}", f"{prepare:.3f} s", f"{prepare / one_pair:.1f} pairs"),
    ]


def against_the_textbook(max_degree, spacing):
    """One whole solve of each at a relative residual of 1e-8, grids prepared."""
    ocean, love = mf.ocean_fraction(spacing), mf.love_numbers(max_degree=max_degree)
    prepared = mf.prepare_solver(ocean, love, max_degree=max_degree)
    load = mf.spread_mass(mf.regions("greenland"), ocean)[0]
    ice = to_gravity(analyse(load, max_degree=min(max_degree, prepared.grid.band_limit)))
    mf.solve_fingerprints(prepared, load)
    own = seconds(lambda: mf.solve_fingerprints(prepared, load), 3)
    rows = []
    for backend in ("shtools", "ducc"):
        problem = Textbook(ocean, love, max_degree, backend, len(os.sched_getaffinity(0)))
        taken = seconds(lambda problem=problem: problem.solve(ice, tolerance=1e-8), 1)
        name = f"textbook iteration, pyshtools with {backend}, degree {max_degree}"
        rows.append((name, f"{taken:.3f} s", f"{taken / own:.1f} x solve_fingerprints"))
    return rows


def many(count):
    """Sources at degree 512 one after the other in one call, per source, in pairs."""
    ocean = mf.ocean_fraction(0.25)
    prepared = mf.prepare_solver(ocean, mf.love_numbers(max_degree=512), max_degree=512)
    one = mf.spread_mass(mf.regions("greenland"), ocean)
    load = xr.concat([one] * count, dim="source").assign_attrs(one.attrs)
    mf.solve_fingerprints(prepared, one)
    rings, grid = prepared.grid.to_rings(one.values[0]), prepared.grid
    alm = _transform.analyse(rings, 512, grid.first_azimuth)
    pair = seconds(
        lambda: (
            _transform.synthesise(alm, (grid.nlat, grid.nlon), grid.first_azimuth),
            _transform.analyse(rings, 512, grid.first_azimuth),
        ),
        9,
    )
    each = seconds(lambda: mf.solve_fingerprints(prepared, load), 1) / count
    kernel = seconds(lambda: mf.site_kernels(prepared, SITE), 3)
    return [
        (f"{count} sources in one call, degree 512, each", f"{each:.3f} s", f"{each / pair:.1f} pairs"),
        ("kernel of one site, degree 512", f"{kernel:.3f} s", f"{kernel / pair:.1f} pairs"),
    ]


def months():
    """264 months of mass at half a degree at 100 sites, kernels at hand."""
    ocean = mf.ocean_fraction(0.5)
    prepared = mf.prepare_solver(ocean, mf.love_numbers(max_degree=256), max_degree=256)
    one = mf.site_kernels(prepared, SITE)
    sites = [f"site {n}" for n in range(100)]
    kernels = xr.concat([one] * 100, dim="site", data_vars="minimal", combine_attrs="override").assign_coords(
        site=sites
    )
    values = np.random.default_rng(1).normal(size=(264, 360, 720))
    coords = {"lat": ocean["lat"], "lon": ocean["lon"]}
    load = xr.DataArray(values, dims=("time", "lat", "lon"), coords=coords, attrs={"units": "kg m-2"})
    taken = seconds(lambda: mf.apply_kernels(kernels, load), 1)
    return [("264 months at 0.5 degree, 100 sites, by kernels", f"{taken:.2f} s", ""), *_by_modes(prepared, ocean)]


def _by_modes(prepared, ocean):
    """Full fields of 264 months made by twenty sources: month by month (from eight of them), and by modes, recombined."""
    names = [f"glaciers_{n:02d}" for n in (1, 2, 3, 4, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15, 16, 17)]
    spread = mf.spread_mass(
        mf.regions("greenland", "west_antarctica", "east_antarctica", "antarctic_peninsula", *names), ocean
    )
    history = xr.DataArray(np.random.default_rng(2).normal(size=(264, 20)).cumsum(axis=0), dims=("time", "source"))
    load = xr.dot(history, spread.drop_vars("source"), dim="source").assign_coords(lat=ocean["lat"], lon=ocean["lon"])
    load = load.assign_attrs(units="kg m-2")
    each = seconds(lambda: mf.solve_fingerprints(prepared, load.isel(time=slice(8))), 1) / 8

    def by_modes():
        modes = mf.load_modes(load)
        answer = mf.solve_fingerprints(prepared, modes["load"])["relative_sea_level"]
        return xr.dot(modes["amplitude"], answer, dim="mode")

    taken = seconds(by_modes, 1)
    return [
        (
            "fields of 264 months of 20 sources by modes",
            f"{taken:.1f} s",
            f"{264 * each / taken:.1f} x faster than months",
        )
    ]


def demo():
    """Stages of the demonstration study in a fresh process, nothing kept."""
    with tempfile.TemporaryDirectory() as place:
        for path in Path("data_small").glob("demo_*"):
            shutil.copy(path, place)
        command = ["study", f"{place}/demo_study.toml", "--verbose"]
        code = f"from massfingerprint.cli import main; raise SystemExit(main({command!r}))"
        begin = time.perf_counter()
        done = subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True)
        whole = time.perf_counter() - begin
    stages = re.findall(r"^([a-z ]+?) +(\d+\.\d+) s$", done.stderr, flags=re.MULTILINE)
    rows = [(f"demo study: {name}", f"{float(taken):.2f} s", f"{float(taken) / whole:.0%}") for name, taken in stages]
    return [*rows, ("demo study: whole process", f"{whole:.1f} s", "")]


GROWTH = """
import resource, sys, time
import massfingerprint as mf
from massfingerprint.earth.models import MODELS
degree = int(sys.argv[1])
spacing = 180.0 / max(180, {64: 180, 128: 180, 256: 360, 512: 720, 1024: 1440, 2048: 2880}[degree])
ocean = mf.ocean_fraction(spacing)
love = mf.love_numbers(max_degree=degree)
begin = time.perf_counter(); prepared = mf.prepare_solver(ocean, love, max_degree=degree); prepare = time.perf_counter() - begin
load = mf.spread_mass(mf.regions("greenland"), ocean)
mf.solve_fingerprints(prepared, load)
begin = time.perf_counter(); answer = mf.solve_fingerprints(prepared, load); solve = time.perf_counter() - begin
from massfingerprint.sphere import _transform
grid, rings = prepared.grid, prepared.grid.to_rings(load.values[0])
begin = time.perf_counter()
alm = _transform.analyse(rings, min(degree, grid.band_limit), grid.first_azimuth)
_transform.synthesise(alm, (grid.nlat, grid.nlon), grid.first_azimuth)
pair = time.perf_counter() - begin
peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
print(f"{degree:6d} {spacing:9.4f} {prepare:10.2f} {solve:10.3f} {solve / pair:8.1f} {int(answer.rounds[0]):7d} {peak:10.2f}")
"""


def growth():
    """Time and peak memory against degree, each in a fresh process."""
    print("degree   spacing  prepare s    solve s    pairs  rounds    peak GB")
    for degree in (64, 128, 256, 512, 1024, 2048):
        done = subprocess.run([sys.executable, "-c", GROWTH, str(degree)], check=True, capture_output=True, text=True)
        print(done.stdout, end="")


def love(repeats):
    """Every built-in Earth to degree 4096; PREM at every degree by itself, and out to 40000."""
    rows = []
    for name, entry in MODELS.items():
        taken = seconds(lambda entry=entry: mf.compute_love_numbers(entry.make(), 4096), repeats)
        rows.append((f"Love numbers to 4096: {name}", f"{taken:.2f} s", ""))
    plain = seconds(lambda: mf.love_numbers(max_degree=2048, recompute=True), 1)
    quick = seconds(lambda: mf.compute_love_numbers(MODELS["prem"].make(), 2048), repeats)
    rows.append(
        ("Love numbers to 2048: every degree", f"{plain:.2f} s", f"{plain / quick:.1f} x the interpolated ones")
    )
    far = seconds(lambda: mf.compute_love_numbers(MODELS["prem"].make(), 40000), repeats)
    rows.append(("Love numbers to 40000", f"{far:.2f} s", ""))
    read = seconds(lambda: mf.love_numbers(max_degree=2048), repeats)
    rows.append(("Love numbers to 2048: shipped", f"{read:.3f} s", ""))
    return rows


def first_answer():
    command = ["sites", "--rates", "data_small/published_rates.csv", "--sites", "data_small/coasts.csv"]
    code = f"from massfingerprint.cli import main; raise SystemExit(main({command!r}))"
    return [("sites command, fresh process, degree 512", f"{seconds(process(code), 1):.1f} s", "")]


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--repeats", type=int, default=5)
    parser.add_argument("--growth", action="store_true", help="only the table of time and memory against degree")
    options = parser.parse_args()
    print(f"{platform.machine()}, {len(os.sched_getaffinity(0))} processors, Python {platform.python_version()}")
    if options.growth:
        growth()
        return
    rows = start_up(options.repeats)
    for degree, spacing in ((128, 1.0), (512, 0.25)):
        rows += solving(degree, spacing, options.repeats)
    rows += against_the_textbook(128, 1.0) + against_the_textbook(512, 0.25)
    rows += many(60 if options.repeats > 1 else 4) + months()
    rows += love(max(1, options.repeats // 2)) + first_answer() + demo()
    for row in rows:
        print("{:58} {:>10}  {}".format(*row))


if __name__ == "__main__":
    main()
