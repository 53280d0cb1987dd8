"""No ice counted twice: what each mass source covers, whatever its outline overlaps.

A source covers pieces: each sector of a sheet once as the sheet and once as its peripheral glaciers, and each glacier region.
Greenland with its periphery covers glacier region 05, Antarctica with its islands region 19 (IPCC AR6 counts both with the
sheets). A scope word says which: ``with periphery`` (the default, as the bundled outlines have it), ``without periphery``, or for
``glaciers`` (all regions) ``without 05 and 19``. A source of another name says which region it is a record of:
``greenland without periphery``.
"""

import re
from collections.abc import Iterable, Mapping, Sequence
from functools import cache
from typing import Any

import pandas as pd
import xarray as xr

from massfingerprint.bundled import open_bundled
from massfingerprint.errors import InputError, nearest_names

WITH, WITHOUT, GLACIERS_REST = "with periphery", "without periphery", "without 05 and 19"
SCOPES = (WITH, WITHOUT, GLACIERS_REST)
_SHEETS = {"greenland": "glaciers_05", "antarctica": "glaciers_19"}
_NUMBERED = tuple(f"glaciers_{number:02d}" for number in range(1, 20))
_MAINLAND = "glaciers_20"
_ALL_GLACIERS = ("glaciers", "glaciers_global", "global_glaciers", "all_glaciers")
GROUNDING = {1: "netted (gravimetry)", 0: "not netted (altimetry, input-output)", -1: "unknown"}


@cache
def _children() -> dict[str, tuple[str, ...]]:
    """Parts of each region of a sheet, from the bundled boundaries; glacier regions are no parts here."""
    table = open_bundled("region_boundaries.geojson")
    rows = table[(table["kind"] != "divide") & ~table["name"].str.startswith("glaciers_")]
    out: dict[str, tuple[str, ...]] = {str(name): () for name in rows["name"]}
    for name, parent in zip(rows["name"], rows["parent"], strict=True):
        if parent:
            out[str(parent)] += (str(name),)
    return out


def _leaves(name: str) -> tuple[str, ...]:
    parts = _children().get(name, ())
    return tuple(leaf for part in parts for leaf in _leaves(part)) if parts else (name,)


def _region(source: str) -> str:
    """Name of the known region that a source's name spells, however written; empty for a name of the user's own."""
    name = re.sub(r"[\s-]+", "_", source.strip().casefold())
    name = re.sub(r"^glaciers_(\d)$", r"glaciers_0\1", name)
    if name in _ALL_GLACIERS:
        return "glaciers"
    return name if name in (*_children(), *_NUMBERED, _MAINLAND) else ""


def _sheet(region: str) -> str:
    """Sheet that a region is, or is part of; empty for other regions."""
    return next((sheet for sheet in _SHEETS if region in _family(sheet)), "")


def _declared(source: str, scope: str) -> tuple[str, str]:
    """Region (empty for a piece of its own) and scope word that a source's name and scope declare."""
    scope = scope.strip()
    word = next((word for word in SCOPES if scope == word or scope.endswith(f" {word}")), "")
    named, region = scope.removesuffix(word).strip(), _region(source)
    if not named:
        return region, word
    other = _region(named)
    if region and other != region:
        allowed = (WITH, WITHOUT) if _sheet(region) else (GLACIERS_REST,) if region == "glaciers" else ()
        words = ", ".join((*allowed, "or empty")) if allowed else "empty"
        raise InputError(f"scope: of {source!r} must be {words}, got {scope!r}. Rename the source if it is another.")
    if not other:
        hint = nearest_names(named, [*_children(), *_NUMBERED, "glaciers"])
        raise InputError(f"scope: of {source!r} names no known region: {scope!r}. {hint}")
    return other, word


def pieces(source: str, scope: str = "") -> frozenset[str]:
    """Pieces of ice that a source covers; a name of the user's own without a scope is a piece by itself.

    Parameters
    ----------
    source : str
        Mass source; case, blanks and hyphens do not matter in names of regions.
    scope : str
        ``with periphery``, ``without periphery``, ``without 05 and 19`` or empty for the default; for a source whose name is
        no region, the region first, as in ``greenland without periphery``.

    Raises
    ------
    InputError
        If the scope is not known or makes no sense for the source.
    """
    region, word = _declared(source, scope)
    sheet = _sheet(region)
    if word == GLACIERS_REST and region != "glaciers":
        raise InputError(f"scope: {word!r} is only for 'glaciers', not for {source!r}.")
    if word in (WITH, WITHOUT) and not sheet:
        raise InputError(f"scope: {word!r} is only for ice sheets and their parts, not for {source!r}.")
    if sheet:
        covered = {f"{leaf}, sheet" for leaf in _leaves(region)}
        return frozenset(covered if word == WITHOUT else covered | {f"{leaf}, periphery" for leaf in _leaves(region)})
    if region == "glaciers":
        left_out = tuple(_SHEETS.values()) if word == GLACIERS_REST else ()
        return frozenset(piece for name in _NUMBERED if name not in left_out for piece in pieces(name))
    if region == _MAINLAND:  # no record of the sheet can tell these glaciers from it
        return frozenset({f"{leaf}, sheet" for leaf in _leaves("antarctica")})
    for whole, numbered in _SHEETS.items():
        if region == numbered:
            return frozenset({f"{leaf}, periphery" for leaf in _leaves(whole)})
    return frozenset({region or source})


@cache
def _family(sheet: str) -> frozenset[str]:
    """A sheet and all regions below it."""
    out, waiting = {sheet}, [sheet]
    while waiting:
        parts = _children().get(waiting.pop(), ())
        out.update(parts)
        waiting.extend(parts)
    return frozenset(out)


def check_scope(
    sources: Sequence[str], *, scopes: Mapping[str, str] | None = None, drop: Sequence[str] = ()
) -> list[str]:
    """Refuse mass sources that cover the same ice.

    Parameters
    ----------
    sources : sequence of str
        Mass sources that are to be added up.
    scopes : mapping of source to str, optional
        What a source covers where it differs from the default, e.g. ``{"greenland": "without periphery"}``.
    drop : sequence of str
        Sources to leave out: the explicit choice where two cover the same ice.

    Returns
    -------
    list of str
        The sources that remain, in order; none covers ice of another.

    Raises
    ------
    InputError
        If a source stands there twice, a scope is not known, or two sources cover the same ice: both are named.
    """
    names, left_out = _names(sources, "sources"), _names(drop, "drop")
    if scopes is not None and not isinstance(scopes, Mapping):
        raise InputError(f"scopes: must map a source to its scope, as {{'greenland': {WITHOUT!r}}}, got {scopes!r}.")
    chosen = {name: scope or "" for name, scope in (scopes or {}).items()}
    for name in (*chosen, *left_out):
        if name not in names:
            raise InputError(f"scope: {name!r} is not among the sources {', '.join(names)}.")
    kept = [name for name in names if name not in left_out]
    if names and not kept:
        raise InputError(f"drop: leaves none of the sources {', '.join(names)}. Keep at least one.")
    taken: dict[str, str] = {}
    for name in kept:
        scope = chosen.get(name, "")
        if not isinstance(scope, str):
            raise InputError(f"scope: of {name!r} must be words such as {WITHOUT!r}, got {scope!r}.")
        covered = pieces(name, scope)
        # ice of the sheet first: two sheets that share it share more than their periphery
        shared = sorted(covered & taken.keys(), key=lambda piece: (piece.endswith("periphery"), piece))
        if shared:
            raise InputError(_overlap(taken[shared[0]], name, shared[0], chosen))
        taken |= dict.fromkeys(covered, name)
    return kept


def scope_choices(
    sources: Sequence[str], *, scopes: Mapping[str, str] | None = None, drop: Sequence[str] = ()
) -> list[str]:
    """Say in words which choices keep ice from counting twice; arguments and errors as `check_scope`.

    Returns
    -------
    list of str
        One sentence for each source left out, and for each that covers something else than its default.
    """
    kept = check_scope(sources, scopes=scopes, drop=drop)
    out = [f"{name} is left out." for name in drop]
    declared = {name: (scopes or {}).get(name) or "" for name in kept}
    return out + [f"{name} counts as {_in_words(name, scope)}." for name, scope in declared.items() if scope]


def _in_words(source: str, scope: str) -> str:
    region, word = _declared(source, scope)
    return f"{region} {word}".strip()


def _names(given: Any, argument: str) -> list[str]:
    """Names as a list, or InputError: a single text would otherwise be taken letter by letter."""
    names = list(given) if isinstance(given, Iterable) and not isinstance(given, str) else None
    if names is None or not all(isinstance(name, str) and name.strip() for name in names):
        raise InputError(f"{argument}: must be a list of names of mass sources, got {given!r}.")
    return [str(name) for name in names]


def _overlap(first: str, second: str, piece: str, scopes: Mapping[str, str]) -> str:
    if first == second:
        return f"scope: {first!r} stands there twice. Keep one record."
    cures = [f"Drop one of them (drop=[{second!r}])"]
    if piece.endswith("periphery"):
        for name in (first, second):
            region, _ = _declared(name, scopes.get(name, ""))
            word = WITHOUT if _sheet(region) else GLACIERS_REST if region == "glaciers" else ""
            scope = word if region == _region(name) else f"{region} {word}"
            if word:
                cures.append(f"set the scope of {name!r} to {scope!r} if its record leaves those glaciers out")
    return f"scope: {first!r} and {second!r} both cover {piece}: it would count twice. {', or '.join(cures)}."


def ledger_scopes(ledger: xr.Dataset) -> dict[str, str]:
    """Scopes that a ledger's ``scope`` column gives, by source; sources without one are left out."""
    if "scope" not in ledger:
        return {}
    pairs = zip(ledger["source"].values, ledger["scope"].values, strict=True)
    return {str(name): _text(scope) for name, scope in pairs if _text(scope)}


def _text(cell: Any) -> str:
    """Text of a cell; None and NaN, which tables without the column leave when joined, are empty."""
    return "" if pd.isna(cell) else str(cell).strip()


def corrections(ledger: xr.Dataset) -> dict[str, tuple[str, str]]:
    """What each record has had removed: rebound (GIA) model, and whether sea water replacing ungrounded ice is netted.

    Parameters
    ----------
    ledger : Dataset (source, time)
        With the optional columns ``gia_removed`` (a model's name, ``none``, or empty) and ``grounding_netted`` (1, 0 or -1).

    Returns
    -------
    dict of source to (str, str)
        Words; ``unknown`` where the ledger does not say.

    Raises
    ------
    InputError
        If ``grounding_netted`` is not 1, 0 or -1.
    """
    out = {}
    for row, source in enumerate(ledger["source"].values):
        gia = _text(ledger["gia_removed"].values[row]) if "gia_removed" in ledger else ""
        cell = _text(ledger["grounding_netted"].values[row]) if "grounding_netted" in ledger else ""
        netted = next((key for key in GROUNDING if cell in (str(key), f"{key}.0")), None) if cell else -1
        if netted is None:
            raise InputError(
                f"grounding_netted: of {str(source)!r} must be 1 (netted), 0 (not) or -1 (unknown), got {cell!r}."
            )
        out[str(source)] = (gia or "unknown", GROUNDING[netted])
    return out
