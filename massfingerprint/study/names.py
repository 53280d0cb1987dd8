"""Short names for files and numbers made from the user's own: plain letters, digits, hyphens, underscores; each one its own."""

import re
import unicodedata
from collections.abc import Iterable

_LONGEST = 40


def short_names(names: Iterable[str]) -> dict[str, str]:
    """Short name of each name, in order; two that would be the same are told apart by a number.

    ``Écluse d'été`` becomes ``ecluse-d-ete``; a name without any plain letter or digit becomes ``name``.
    """
    out: dict[str, str] = {}
    for name in names:
        plain = unicodedata.normalize("NFKD", name).encode("ascii", "ignore").decode().casefold()
        base = re.sub(r"[^a-z0-9_]+", "-", plain).strip("-_")[:_LONGEST].rstrip("-_") or "name"
        short, number = base, 2
        while short in out.values():
            short, number = f"{base}-{number}", number + 1
        out[name] = short
    return out
