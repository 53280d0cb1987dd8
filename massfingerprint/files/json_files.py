"""JSON files."""

import json
import os
from pathlib import Path
from typing import Any

from massfingerprint.errors import DamagedFileError, MissingFileError


def json_content(path: str | os.PathLike[str]) -> Any:
    """Content of a JSON file.

    Raises
    ------
    MissingFileError
        If there is no such file.
    DamagedFileError
        If it is not JSON.
    """
    source = Path(path)
    if not source.is_file():
        raise MissingFileError(f"{source}: there is no such file. Check the path.")
    try:
        return json.loads(source.read_bytes())
    except ValueError as error:
        raise DamagedFileError(f"{source}: cannot be read as JSON ({error}). Write it again.") from error
