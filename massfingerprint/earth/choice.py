"""The Earth that a command or a study asks for by one word: a built-in name, or a file of the user's own."""

from dataclasses import dataclass

import xarray as xr

from massfingerprint.arguments import one_of
from massfingerprint.earth.frames import FRAMES
from massfingerprint.earth.layers import EarthModel, at_period
from massfingerprint.earth.love import compute_love_numbers, extend_love_numbers, love_numbers
from massfingerprint.earth.models import MODELS, earth_model
from massfingerprint.earth.own_love import read_love_numbers
from massfingerprint.earth.table import read_earth_model
from massfingerprint.errors import InputError
from massfingerprint.files.tables import read_columns


@dataclass(frozen=True)
class ChosenEarth:
    """What was asked for.

    Parameters
    ----------
    word : str
        Built-in name, or the path of a CSV table: of layers, or of Love numbers (it has a column ``degree``). Whatever holds a dot
        or a slash is a path.
    period : float, optional
        s, of an Earth with quality factors.
    love_frame : str, optional
        Frame of degree 1 in a table of Love numbers.
    """

    word: str = "prem"
    period: float | None = None
    love_frame: str | None = None

    def __str__(self) -> str:
        return self.word if self.period is None else f"{self.word} at {self.period:g} s"

    @property
    def _is_file(self) -> bool:
        return "." in self.word or "/" in self.word or "\\" in self.word

    def _is_love_table(self) -> bool:
        return self._is_file and "degree" in read_columns(self.word, required=())[0].columns

    def model(self) -> EarthModel | None:
        """Its layers; None if only Love numbers are known.

        Raises
        ------
        InputError, MissingFileError, TableError
            If there is no such Earth, the file cannot be used, or a choice does not go with it.
        """
        if not self._is_file:
            self._refuse_frame()
            one_of(self.word, tuple(MODELS), argument="earth", kind="Earth named")
            return earth_model(self.word, period=self.period)
        if self._is_love_table():
            return None
        self._refuse_frame()
        found = read_earth_model(self.word)
        return found if self.period is None else at_period(found, self.period)

    def love_numbers(self, *, max_degree: int, every_degree: bool = False) -> xr.Dataset:
        """Its Love numbers to a degree, as ``love_numbers`` of a built-in Earth.

        Parameters
        ----------
        max_degree : int
            Highest degree; a table that ends earlier is continued with its last h', n l' and n k', which its attributes say.
        every_degree : bool
            Integrate each degree by itself.

        Raises
        ------
        InputError, MissingFileError, TableError
            As :meth:`model`.
        """
        if self._is_love_table():
            if self.period is not None:
                raise InputError(f"period: Love numbers of {self.word} are what they are. Leave it out.")
            if self.love_frame is None:
                known = ", ".join(FRAMES)
                raise InputError(
                    f"love-frame: {self.word} does not say in which frame its degree 1 stands. Name one of {known}."
                )
            table = _continuable(read_love_numbers(self.word, reference_frame=self.love_frame), max_degree)
            return extend_love_numbers(table, max_degree).isel(degree=slice(0, max_degree + 1))
        if not self._is_file and self.period is None:
            self._refuse_frame()
            return love_numbers(self.word, max_degree=max_degree, recompute=every_degree)
        found = self.model()
        assert found is not None  # noqa: S101  a table of Love numbers was dealt with above
        return compute_love_numbers(found, max_degree, every_degree=every_degree)

    def _refuse_frame(self) -> None:
        if self.love_frame is not None:
            raise InputError(f"love-frame: only a table of Love numbers has one, {self.word!r} is none. Leave it out.")


def _continuable(table: xr.Dataset, max_degree: int) -> xr.Dataset:
    """A user's table that, where it ends before a degree, stays what it is at its end."""
    last = int(table["degree"][-1])
    if max_degree <= last:
        return table
    ends = {"h_load_limit": 1.0, "l_load_limit": float(last), "k_load_limit": float(last)}
    limits = {name: factor * float(table[name.removesuffix("_limit")][-1]) for name, factor in ends.items()}
    words = f"{table.attrs['source']}; beyond degree {last} h', n l' and n k' stay as they are there"
    return table.assign_attrs(**limits, source=words)
