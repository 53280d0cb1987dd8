"""Checksums of files."""

import hashlib
import os

from massfingerprint.errors import MissingFileError


def file_sha256(path: str | os.PathLike[str]) -> str:
    """SHA-256 (hexadecimal) of a file's bytes.

    Raises
    ------
    MissingFileError
        If there is no such file.
    """
    try:
        with open(path, "rb") as stream:
            return hashlib.file_digest(stream, "sha256").hexdigest()
    except FileNotFoundError as error:
        raise MissingFileError(f"{path}: there is no such file. Check the path.") from error
