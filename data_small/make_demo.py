"""Write the invented demonstration scenario: demo_mass.csv and demo_harbours.csv.

Run as ``python data_small/make_demo.py [FOLDER]``; FOLDER is this one by default. Every run writes the same bytes. Every mass
number is invented: a rate, an acceleration, a seasonal cycle and noise, drawn from nothing but the table below and a seed.
"""

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

Array = NDArray[np.float64]

SEED = 20260
FIRST_MONTH, LAST_MONTH = "2003-01", "2025-12"
CITATION = "invented for demonstration"
# Months in which no source has a value, as when one instrument ends before the next is in place; and of one source alone.
COMMON_GAP = ("2017-07", "2018-05")
MISSING_EVERYWHERE = ("2011-06", "2012-10")
MISSING_ALONE = {"glaciers_06": ("2021-02",)}
LATE_START = {"glaciers_13": "2005-01"}


class Source(NamedTuple):
    """Invented numbers of one mass source; negative = loss.

    ``rate`` [Gt yr-1] is the mean over the whole record, ``acceleration`` in Gt yr-2. The seasonal cycle of amplitude
    ``season`` [Gt] is highest in month ``peak``: spring, May or June in the north, September or October in the south.
    ``spread`` is the standard uncertainty of one value [Gt] for independent errors, after one year [Gt] for a random walk and
    for a systematic error, which grow with the square root of time and with time.
    """

    name: str
    rate: float
    acceleration: float
    season: float
    peak: int
    error_model: str
    spread: float


SOURCES = (
    Source("greenland_north", -18.0, -0.5, 4.0, 5, "random_walk", 3.0),
    Source("greenland_northeast", -21.0, -0.9, 6.0, 5, "random_walk", 3.5),
    Source("greenland_east", -26.0, -0.3, 9.0, 5, "random_walk", 4.0),
    Source("greenland_southeast", -73.0, 0.6, 26.0, 5, "random_walk", 7.0),
    Source("greenland_southwest", -34.0, -0.6, 28.0, 5, "random_walk", 6.0),
    Source("greenland_west", -41.0, -0.4, 24.0, 5, "random_walk", 6.0),
    Source("greenland_northwest", -52.0, -0.8, 15.0, 5, "random_walk", 6.0),
    Source("west_antarctica_amundsen", -142.0, -2.4, 18.0, 10, "random_walk", 12.0),
    Source("antarctic_peninsula", -19.0, -0.5, 12.0, 10, "random_walk", 9.0),
    Source("east_antarctica", 14.0, 0.8, 55.0, 9, "systematic", 16.0),
    Source("glaciers_01", -61.0, -0.7, 48.0, 5, "random_walk", 9.0),
    Source("glaciers_03", -37.0, -0.9, 10.0, 6, "random_walk", 5.0),
    Source("glaciers_04", -24.0, -0.4, 11.0, 6, "random_walk", 4.0),
    Source("glaciers_06", -9.0, 0.1, 8.0, 5, "independent", 12.0),
    Source("glaciers_13", -17.0, -0.4, 20.0, 6, "systematic", 5.0),
    Source("glaciers_17", -23.0, 0.2, 16.0, 10, "independent", 12.0),
)
# Invented names on real coasts: North Sea, north-east Iceland, Virginia, Gulf of Guinea, Bay of Bengal, southern Japan, South
# Island of New Zealand, Patagonia.
HARBOURS = (
    ("Möwenfleth Lock", 53.70, 7.80),
    ("Hrafnskot Pier", 66.20, -15.30),
    ("Cedar Shoal Landing", 36.85, -75.97),
    ("Palm Bight Quay", 5.10, -1.25),
    ("Mangrove Reach Jetty", 21.80, 90.10),
    ("Shiokaze Mole", 33.50, 133.60),
    ("Kelp Sound Wharf", -45.85, 170.65),
    ("Guanaco Roads", -43.33, -65.05),
)


def month_range() -> pd.PeriodIndex:
    """Every month of the record, those without values included."""
    return pd.period_range(FIRST_MONTH, LAST_MONTH, freq="M")


def has_value(source: Source) -> NDArray[np.bool_]:
    """Whether a source has a value, for every month of the record."""
    months = month_range()
    gap = (months >= pd.Period(COMMON_GAP[0], "M")) & (months <= pd.Period(COMMON_GAP[1], "M"))
    single = months.isin(pd.PeriodIndex([*MISSING_EVERYWHERE, *MISSING_ALONE.get(source.name, ())], freq="M"))
    started = months >= pd.Period(LATE_START.get(source.name, FIRST_MONTH), "M")
    return np.asarray(started & ~gap & ~single)


def true_change(source: Source) -> Array:
    """Mass change in Gt of every month, without errors, on an arbitrary level."""
    months = np.arange(len(month_range()))
    years = months / 12.0
    season = source.season * np.cos(2.0 * np.pi * (months + 1 - source.peak) / 12.0)
    # The acceleration turns about the middle of the record, so that the rate stays the mean over all of it.
    return source.rate * years + 0.5 * source.acceleration * years * (years - years[-1]) + season


def errors(source: Source, years: Array, random: np.random.Generator) -> tuple[Array, Array]:
    """Errors drawn as the error model says, and their standard uncertainty, both in Gt; years since the source's first month."""
    if source.error_model == "independent":
        sigma = np.full(years.size, source.spread)
        return sigma * random.standard_normal(years.size), sigma
    if source.error_model == "systematic":
        sigma = source.spread * years
        return sigma * random.standard_normal(), sigma
    sigma = source.spread * np.sqrt(years)
    steps = np.sqrt(np.diff(sigma**2, prepend=0.0)) * random.standard_normal(years.size)
    return np.cumsum(steps), sigma


def record(source: Source, number: int) -> pd.DataFrame:
    """Rows of one source: change since its first month, with an error of its own unless the error model has none there."""
    months, held = month_range(), has_value(source)
    first = int(np.flatnonzero(held)[0])
    change = true_change(source)
    years = (np.arange(len(months)) - first) / 12.0
    # A stream of random numbers for each source: a change of one leaves the others as they are.
    error, sigma = errors(source, years[first:], np.random.default_rng([SEED, number]))
    mass = change[first:] - change[first] + error
    starts = months.to_timestamp()
    middles = starts + (((months + 1).to_timestamp() - starts) / 2).floor("D")
    rows = pd.DataFrame(
        {
            "time": middles[first:].strftime("%Y-%m-%d"),
            "source": source.name,
            "mass_change [Gt]": np.round(mass, 1) + 0.0,  # no negative zero
            "mass_change_sigma [Gt]": np.round(sigma, 1),
            "error_model": source.error_model,
            "citation": CITATION,
        }
    )
    return rows[held[first:]]


def main(arguments: Sequence[str] | None = None) -> None:
    """Write both tables into the folder named on the command line."""
    parser = argparse.ArgumentParser(description="Write the invented demo_mass.csv and demo_harbours.csv.")
    parser.add_argument("folder", nargs="?", type=Path, default=Path(__file__).parent, metavar="FOLDER")
    folder = parser.parse_args(arguments).folder
    if not folder.is_dir():
        parser.error(f"FOLDER: there is no folder {folder}. Make it first, or leave FOLDER out.")
    mass = pd.concat([record(source, number) for number, source in enumerate(SOURCES)])
    harbours = pd.DataFrame(HARBOURS, columns=["site", "lat", "lon"])
    for name, table, decimals in (("demo_mass.csv", mass, 1), ("demo_harbours.csv", harbours, 2)):
        text = table.to_csv(index=False, lineterminator="\n", float_format=f"%.{decimals}f")
        (folder / name).write_bytes(text.encode("utf-8"))  # bytes: the same line ends everywhere
        sys.stdout.write(f"{folder / name}\n")


if __name__ == "__main__":
    main()
