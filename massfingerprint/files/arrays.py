"""A folder of arrays kept by content: each entry's name is the fingerprint of what it was made from, damage is noticed."""

import hashlib
import io
import os
import zipfile
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfingerprint.errors import DamagedFileError
from massfingerprint.files.atomic import write_binary

_DIGEST_BYTES = 32


def fingerprint_of(*parts: str | bytes | NDArray) -> str:
    """SHA-256 (hexadecimal) of texts, bytes and arrays in order; lengths, types and shapes count."""
    digest = hashlib.sha256()
    for part in parts:
        if isinstance(part, np.ndarray):
            head, body = f"{part.dtype.str}{part.shape}", np.ascontiguousarray(part).tobytes()
        else:
            head, body = type(part).__name__, part.encode() if isinstance(part, str) else part
        digest.update(f"{head}:{len(body)}:".encode())
        digest.update(body)
    return digest.hexdigest()


def store(folder: str | os.PathLike[str], key: str, arrays: Mapping[str, NDArray]) -> None:
    """Keep arrays under a key, whole or not at all; the folder is made if need be.

    Raises
    ------
    OSError
        If the folder cannot be made or written.
    """
    buffer = io.BytesIO()
    named: dict[str, Any] = dict(arrays)
    np.savez(buffer, **named)
    content = buffer.getvalue()
    Path(folder).mkdir(parents=True, exist_ok=True)
    write_binary(hashlib.sha256(content).digest() + content, _entry(folder, key))


def fetch(folder: str | os.PathLike[str], key: str) -> dict[str, NDArray] | None:
    """Arrays kept under a key; None if there are none.

    Raises
    ------
    DamagedFileError
        If the entry is not what was stored.
    """
    entry = _entry(folder, key)
    if not entry.is_file():
        return None
    content = entry.read_bytes()
    digest, body = content[:_DIGEST_BYTES], content[_DIGEST_BYTES:]
    if hashlib.sha256(body).digest() != digest:
        raise DamagedFileError(f"{entry}: is damaged (its checksum differs). It will be computed again.")
    try:
        with np.load(io.BytesIO(body), allow_pickle=False) as held:
            return {name: held[name] for name in held.files}
    except (zipfile.BadZipFile, ValueError, KeyError) as error:
        raise DamagedFileError(f"{entry}: cannot be read ({error}). It will be computed again.") from error


def _entry(folder: str | os.PathLike[str], key: str) -> Path:
    return Path(folder) / f"{key}.arrays"
