"""Ratios that matter to a user, measured in one run: ``python -m tests.timings.measure``.

Seconds on a shared machine mean little; the ratios are of things timed in turn in this run. Nothing here passes or fails.
"""

import argparse
import os
import platform
import statistics
import subprocess
import sys
import time

import numpy as np

import massfingerprint as mf
from massfingerprint.sphere import _transform


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


def love(repeats):
    recompute = seconds(lambda: mf.love_numbers(max_degree=2048, recompute=True), repeats)
    read = seconds(lambda: mf.love_numbers(max_degree=2048), repeats)
    return [
        ("read Love numbers, 0..2048", f"{read:.3f} s", ""),
        ("recompute Love numbers, 0..2048", f"{recompute:.2f} s", f"{recompute / read:.0f} x reading"),
    ]


def first_answer():
    command = ["sites", "--rates", "data_small/published_rates.csv", "--sites", "data_small/coasts.csv"]
    code = f"from massfingerprint.cli import main; raise SystemExit(main({command!r}))"
    return [("sites command, fresh process, degree 512", f"{seconds(process(code), 1):.1f} s", "")]


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--repeats", type=int, default=5)
    options = parser.parse_args()
    print(f"{platform.machine()}, {len(os.sched_getaffinity(0))} processors, Python {platform.python_version()}")
    rows = start_up(options.repeats)
    for degree, spacing in ((128, 1.0), (512, 0.25)):
        rows += solving(degree, spacing, options.repeats)
    rows += love(max(1, options.repeats // 2)) + first_answer()
    for row in rows:
        print("{:48} {:>10}  {}".format(*row))


if __name__ == "__main__":
    main()
