"""Where mass is lost: named regions that come with the package, discs, and outlines of the user's own.

A named region is the bundled glaciated outlines within its ring, cut by our own divides, with discs at ranges they leave out.
Published drainage basins are not bundled, so most are approximate and say so; bring outlines of your own with `read_regions`
where the border matters.
"""

import geopandas as gpd

from massfingerprint.errors import RegionError, nearest_names
from massfingerprint.files.outlines import read_regions, region_table
from massfingerprint.load._catalogue import catalogue, outline
from massfingerprint.load.discs import disc

__all__ = ["disc", "read_regions", "region_names", "regions"]

_SHEETS = ("greenland", "east_antarctica", "west_antarctica", "antarctic_peninsula")


def region_names() -> list[str]:
    """Names of the mass sources that come with the package.

    Returns
    -------
    list of str
        Each sheet followed by its parts, then the glacier regions.
    """
    return list(catalogue())


def regions(*names: str) -> gpd.GeoDataFrame:
    """Outlines of named mass sources that come with the package.

    Parameters
    ----------
    *names : str
        ``greenland`` and its seven sectors (``greenland_northwest`` and so on); ``antarctica``, its ``east_antarctica``,
        ``west_antarctica``, ``antarctic_peninsula``, and their sectors; ``glaciers_01`` to ``glaciers_20`` by the numbers
        of the Randolph Glacier Inventory. `region_names` lists them. None: Greenland and Antarctica's three.

    Returns
    -------
    GeoDataFrame
        One row a name, in the order asked for: ``source``, ``geometry`` (EPSG:4326, degrees), ``parent`` (the larger
        region that holds it, or empty), ``approximate`` (True: ice cut by divides drawn by hand, discs, or an area
        more than 25 % off the published one), ``source_note``. Children of a parent do not overlap, except
        ``glaciers_05``, which is part of ``greenland`` beside its sectors; the sectors of a sheet together are the
        sheet, without ice shelves. ``glaciers_19`` shares islands with ``antarctica``. ``glaciers_20``, the Antarctic
        mainland, is an empty outline as in RGI 7.0; no mass can be spread over it.

    Raises
    ------
    RegionError
        If a name is unknown or asked for twice.

    Source
    ------
    Natural Earth glaciated areas 1:50m; borders of this package (entries in ``bundled/source.toml``).
    """
    wanted = list(names) or list(_SHEETS)
    known = catalogue()
    for name in wanted:
        if name not in known:
            raise RegionError(f"regions: no region is called {name!r}. {nearest_names(str(name), list(known))}")
    repeated = sorted({name for name in wanted if wanted.count(name) > 1})
    if repeated:
        raise RegionError(f"regions: {', '.join(map(repr, repeated))} is asked for more than once. Name each once.")
    rows = [known[name] for name in wanted]
    return region_table(
        wanted,
        [outline(name) for name in wanted],
        notes=[row.source_note for row in rows],
        parents=[row.parent for row in rows],
        approximate=[row.approximate for row in rows],
    )
