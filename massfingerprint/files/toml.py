"""TOML files with the line on which each key stands, for messages that point at it."""

import os
import re
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from massfingerprint.errors import MissingFileError, TableError

_HEADER = re.compile(r"^\s*\[(\[)?\s*(?P<name>[^\[\]]+?)\s*\](\])?\s*(#.*)?$")
_KEY = re.compile(r"""^\s*(?P<key>[A-Za-z0-9_-]+|"[^"]*"|'[^']*')\s*=""")


@dataclass(frozen=True)
class TomlFile:
    """What a TOML file holds.

    Parameters
    ----------
    path : Path
        Where it was read.
    content : dict
        Its tables and keys.
    lines : dict of tuple to int
        Line of each key: ``("mass", "file")``, of a table: ``("mass",)``; tables of an array carry their number,
        ``("windows", 0, "name")``.
    raw : bytes
        The file as read.
    """

    path: Path
    content: dict[str, Any]
    lines: dict[tuple[str | int, ...], int]
    raw: bytes

    def line(self, *place: str | int) -> int:
        """Line of a key, or of what holds it; 1 if neither is found."""
        while place:
            if place in self.lines:
                return self.lines[place]
            place = place[:-1]
        return 1


def read_toml(path: str | os.PathLike[str]) -> TomlFile:
    """Read a TOML 1.0 file.

    Raises
    ------
    MissingFileError
        If there is no such file.
    TableError
        If it is not UTF-8 text or not TOML; the line is named.
    """
    source = Path(path)
    if not source.is_file():
        raise MissingFileError(f"{source}: there is no such file. Check the path; it is taken from the current folder.")
    raw = source.read_bytes()
    try:
        text = raw.decode("utf-8-sig")
        content = tomllib.loads(text)
    except UnicodeDecodeError as error:
        raise TableError(f"{source}: is not UTF-8 text (byte {error.start}). Save it as UTF-8.") from error
    except tomllib.TOMLDecodeError as error:
        raise TableError(f"{source}: is not valid TOML: {str(error).strip()}. Correct it there.") from error
    return TomlFile(source, content, _lines(text), raw)


def _lines(text: str) -> dict[tuple[str | int, ...], int]:
    """Line of every key that starts a line; keys inside multi-line values are not told apart, they only misplace a message."""
    out: dict[tuple[str | int, ...], int] = {}
    table: tuple[str | int, ...] = ()
    counts: dict[str, int] = {}
    for number, line in enumerate(text.splitlines(), start=1):
        header, key = _HEADER.match(line), _KEY.match(line)
        if header and "=" not in header["name"]:
            name = header["name"].strip("\"'")
            table = (name,)
            if header[1]:
                counts[name] = counts.get(name, -1) + 1
                out.setdefault(table, number)
                table = (name, counts[name])
            out.setdefault(table, number)
        elif key:
            out.setdefault((*table, key["key"].strip("\"'")), number)
    return out
