"""Arrays too large for memory: on disk, in a file that vanishes with them."""

import tempfile
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray


def scratch_array(shape: Sequence[int], dtype: str = "float64") -> NDArray:
    """Array of a shape, kept in a temporary file that has no name and ends with the array.

    Raises
    ------
    OSError
        If the folder for temporary files is full or cannot be written.
    """
    with tempfile.TemporaryFile(prefix="massfingerprint-") as stream:
        return np.memmap(stream, dtype=dtype, mode="w+", shape=tuple(shape))
