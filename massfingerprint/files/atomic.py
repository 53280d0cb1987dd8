"""Whole files or none: write beside the target, then rename."""

import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from massfingerprint.errors import MissingFileError


@contextmanager
def replacing(path: str | os.PathLike[str]) -> Iterator[Path]:
    """Give a temporary path in the target's folder; rename it onto the target at the end, remove it on any failure.

    Raises
    ------
    MissingFileError
        If the folder of the target does not exist.
    """
    target = Path(path)
    if not target.parent.is_dir():
        raise MissingFileError(f"{target}: there is no folder {target.parent} to write to. Create it first.")
    handle, name = tempfile.mkstemp(dir=target.parent, prefix=f".{target.name}.", suffix=".part")
    os.close(handle)
    temporary = Path(name)
    try:
        yield temporary
        mask = os.umask(0)
        os.umask(mask)
        temporary.chmod(0o666 & ~mask)
        temporary.replace(target)
    finally:
        temporary.unlink(missing_ok=True)


def write_text(text: str, path: str | os.PathLike[str]) -> None:
    """Write UTF-8 text, whole or not at all."""
    with replacing(path) as temporary:
        temporary.write_text(text, encoding="utf-8")


def write_binary(content: bytes, path: str | os.PathLike[str]) -> None:
    """Write bytes, whole or not at all."""
    with replacing(path) as temporary:
        temporary.write_bytes(content)
