"""What a figure's file name asks for."""

from pathlib import Path

from massfingerprint.errors import InputError

KINDS = ("png", "pdf", "svg")


def figure_kind(path: Path) -> str:
    """Format by the ending of a file name, or InputError."""
    kind = path.suffix.lower().removeprefix(".")
    if kind not in KINDS:
        raise InputError(f"figure: must end in .png, .pdf or .svg, got {path.name!r}.")
    return kind
