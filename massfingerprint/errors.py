"""Every exception the package raises; each one inherits the builtin that a caller would expect.

A message names the argument, what came, what is allowed and what to do, in one line:
``surface_load: units must be 'kg m-2', got 'Gt'. Set attrs['units'] or convert first.``
"""


class MassFingerprintError(Exception):
    """Anything this package refuses or cannot finish."""


class InputError(MassFingerprintError, ValueError):
    """A value, shape or name that cannot be used."""


class UnitsError(InputError):
    """A unit that is missing, unknown or of the wrong dimension."""


class GridError(InputError):
    """A field that is not on a regular global cell-centred grid, or holds values that cannot be used."""


class RegionError(InputError):
    """An outline that cannot carry mass: empty, self-crossing, unknown, in the open ocean."""


class SiteError(InputError):
    """A site list with missing columns, impossible coordinates or repeated names."""


class TableError(InputError):
    """A text table whose columns, numbers or dates cannot be read."""


class StudyError(InputError):
    """A study file that cannot be run; ``problems`` holds every one found, one line each."""

    def __init__(self, message: str, problems: tuple[str, ...] = ()) -> None:
        super().__init__(message)
        self.problems = problems


class FolderError(MassFingerprintError, OSError):
    """An output folder that is there already, in use by another run, or cannot be written."""


class MissingFileError(MassFingerprintError, FileNotFoundError):
    """A file that is not where it was said to be."""


class DamagedFileError(MassFingerprintError, OSError):
    """A file whose content is not what it should be."""


class NotConvergedError(MassFingerprintError, RuntimeError):
    """An iteration that did not reach its tolerance."""


def nearest_names(name: str, known: list[str] | tuple[str, ...], count: int = 3) -> str:
    """Words that offer the known names most like the given one, for the end of a message."""
    import difflib  # noqa: PLC0415  only when something went wrong

    close = difflib.get_close_matches(name, known, n=count, cutoff=0.5)
    return f"Did you mean {' or '.join(close)}?" if close else f"Known: {', '.join(known)}."
