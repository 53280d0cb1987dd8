"""The Earth that a command or a study asks for by one word: a built-in name, or a file of the user's own."""

import xarray as xr

from massfingerprint.earth.love import love_numbers


def earth_love_numbers(earth: str, *, max_degree: int) -> xr.Dataset:
    """Love numbers of a built-in Earth.

    Parameters
    ----------
    earth : str
        Built-in name.
    max_degree : int
        Highest degree, 1 or more.

    Returns
    -------
    Dataset (degree)
        As ``love_numbers``.

    Raises
    ------
    InputError
        If there is no such Earth.
    """
    return love_numbers(earth, max_degree=max_degree)
