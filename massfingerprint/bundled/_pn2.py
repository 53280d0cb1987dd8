"""Polygons from the .pn2 files of Debian's marble-qt-data."""

import struct

import numpy as np
from numpy.typing import NDArray

from massfingerprint.errors import DamagedFileError

UNITS_PER_DEGREE = 120
_OUTER, _INNER, _GROUP = 2, 3, 4


def decode_pn2(content: bytes) -> list[list[NDArray[np.float64]]]:
    """Decode the polygons of one .pn2 file.

    Parameters
    ----------
    content : bytes
        The whole file, big-endian.

    Returns
    -------
    list of list of numpy.ndarray
        One list of rings a polygon, the outer ring first; each ring is (vertex, 2): longitude and latitude, degrees.

    Raises
    ------
    DamagedFileError
        The bytes end early, do not add up to the announced number of rings, or hold anything but polygons.

    Source: layout read off the files: u8 version, u32 ring count, u8 colour flag; a ring is u8 flag, u32 id, u32 node
    count; a node is i16 latitude, i16 longitude, u16 count of i8 pairs, each relative to that node. A record of flag 4
    (u32 id, u8 ring count) only announces that the next outer ring has holes.
    """
    polygons: list[list[NDArray[np.float64]]] = []
    try:
        version, announced, colour = struct.unpack_from(">BIB", content, 0)
        if version != 2 or colour != 0:
            raise DamagedFileError(
                f"pn2: version {version}, colour flag {colour}; only version 2 without colour is known"
            )
        position = 6
        while position < len(content):
            flag = content[position]
            if flag == _GROUP:
                position += 6
                continue
            ring, position = _ring(content, position)
            if flag == _OUTER:
                polygons.append([ring])
            elif flag == _INNER and polygons:
                polygons[-1].append(ring)
            else:
                raise DamagedFileError(f"pn2: ring flag {flag} where an outer (2) or inner (3) ring was expected")
    except (struct.error, ValueError) as error:
        raise DamagedFileError(f"pn2: the bytes end inside a ring ({error})") from error
    found = sum(len(rings) for rings in polygons)
    if found != announced:
        raise DamagedFileError(f"pn2: {found} rings found, {announced} announced")
    return polygons


def _ring(content: bytes, position: int) -> tuple[NDArray[np.float64], int]:
    nodes = struct.unpack_from(">BII", content, position)[2]
    position += 9
    parts = []
    for _ in range(nodes):
        lat, lon, followers = struct.unpack_from(">hhH", content, position)
        position += 6
        offsets = np.frombuffer(content, ">i1", 2 * followers, position).reshape(-1, 2)
        position += 2 * followers
        parts += [np.array([[lat, lon]]), offsets + np.array([lat, lon])]
    return np.concatenate(parts)[:, ::-1] / UNITS_PER_DEGREE, position
