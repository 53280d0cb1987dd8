"""Tables of the command line as plain text, Markdown, LaTeX, CSV or JSON."""

import json
from typing import Any

import numpy as np
import pandas as pd
from tabulate import tabulate

FORMATS = {"plain": "simple", "markdown": "github", "latex": "latex_booktabs"}


def rendered(table: pd.DataFrame, style: str) -> str:
    """Table as text: cells as given, numbers already rounded to text; numbers to the right, words to the left."""
    align = ["right" if _numeric(table[name]) else "left" for name in table.columns]
    # cells are finished text: the library must not parse them as numbers again
    return tabulate(
        table.to_numpy().tolist(),
        headers=[str(name) for name in table.columns],
        tablefmt=FORMATS[style],
        colalign=align,
        disable_numparse=True,
    )


def _numeric(column: pd.Series) -> bool:
    return all(str(cell) in ("", "-") or str(cell).lstrip("+-")[:1].isdigit() for cell in column)


def as_json(table: pd.DataFrame, about: dict[str, Any]) -> str:
    """JSON object with what the table is about and its rows; values that are not there are null."""
    rows = [{name: _plain(value) for name, value in row.items()} for row in table.to_dict("records")]
    return json.dumps({**about, "rows": rows}, indent=2, allow_nan=False)


def _plain(value: Any) -> Any:
    if isinstance(value, float | np.floating):
        return float(value) if np.isfinite(value) else None
    return int(value) if isinstance(value, np.integer) else value
