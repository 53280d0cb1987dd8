"""No ice counted twice: what each mass source covers, whatever its outline overlaps.

A source covers pieces: each sector of a sheet once as the sheet and once as its peripheral glaciers, and each glacier region.
Greenland with its periphery covers glacier region 05, Antarctica with its islands region 19 (IPCC AR6 counts both with the
sheets). A scope word says which: ``with periphery`` (the default, as the bundled outlines have it), ``without periphery``, or for
``glaciers`` (all regions) ``without 05 and 19``.
"""

from collections.abc import Mapping, Sequence
from functools import cache

import xarray as xr

from massfingerprint.bundled import open_bundled
from massfingerprint.errors import InputError

WITH, WITHOUT, GLACIERS_REST = "with periphery", "without periphery", "without 05 and 19"
SCOPES = (WITH, WITHOUT, GLACIERS_REST)
_SHEETS = {"greenland": "glaciers_05", "antarctica": "glaciers_19"}
_NUMBERED = tuple(f"glaciers_{number:02d}" for number in range(1, 20))
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


def pieces(source: str, scope: str = "") -> frozenset[str]:
    """Pieces of ice that a source covers; a name of the user's own is a piece by itself.

    Parameters
    ----------
    source : str
        Mass source.
    scope : str
        ``with periphery``, ``without periphery``, ``without 05 and 19`` or empty for the default.

    Raises
    ------
    InputError
        If the scope is not known or makes no sense for the source.
    """
    if scope and scope not in SCOPES:
        raise InputError(f"scope: of {source!r} must be {', '.join(SCOPES)} or empty, got {scope!r}.")
    sheet = next((s for s in _SHEETS if source in _family(s)), "")
    if scope == GLACIERS_REST and source != "glaciers":
        raise InputError(f"scope: {scope!r} is only for 'glaciers', not for {source!r}.")
    if scope in (WITH, WITHOUT) and not sheet:
        raise InputError(f"scope: {scope!r} is only for ice sheets and their parts, not for {source!r}.")
    if sheet:
        covered = {f"{leaf}, sheet" for leaf in _leaves(source)}
        return frozenset(covered if scope == WITHOUT else covered | {f"{leaf}, periphery" for leaf in _leaves(source)})
    if source == "glaciers":
        left_out = tuple(_SHEETS.values()) if scope == GLACIERS_REST else ()
        return frozenset(piece for name in _NUMBERED if name not in left_out for piece in pieces(name))
    for whole, region in _SHEETS.items():
        if source == region:
            return frozenset({f"{leaf}, periphery" for leaf in _leaves(whole)})
    return frozenset({source})


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
    chosen = dict(scopes or {})
    for name in (*chosen, *drop):
        if name not in sources:
            raise InputError(f"scope: {name!r} is not among the sources {', '.join(sources)}.")
    kept = [name for name in sources if name not in drop]
    taken: dict[str, str] = {}
    for name in kept:
        covered = pieces(name, chosen.get(name, ""))
        # ice of the sheet first: two sheets that share it share more than their periphery
        shared = sorted(covered & taken.keys(), key=lambda piece: (piece.endswith("periphery"), piece))
        if shared:
            raise InputError(_overlap(taken[shared[0]], name, shared[0]))
        taken |= dict.fromkeys(covered, name)
    return kept


def _overlap(first: str, second: str, piece: str) -> str:
    if first == second:
        return f"scope: {first!r} stands there twice. Keep one record."
    cure = f"Drop one of them (drop=[{second!r}])"
    if piece.endswith("periphery"):
        cure += ", or set the sheet's scope to 'without periphery' if its record leaves out the peripheral glaciers"
    return f"scope: {first!r} and {second!r} both cover {piece}: it would count twice. {cure}."


def ledger_scopes(ledger: xr.Dataset) -> dict[str, str]:
    """Scopes that a ledger's ``scope`` column gives, by source; sources without one are left out."""
    if "scope" not in ledger:
        return {}
    pairs = zip(ledger["source"].values, ledger["scope"].values, strict=True)
    return {str(name): str(scope) for name, scope in pairs if str(scope)}


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
        gia = str(ledger["gia_removed"].values[row]) if "gia_removed" in ledger else ""
        netted = float(ledger["grounding_netted"].values[row]) if "grounding_netted" in ledger else -1.0
        if netted not in GROUNDING:
            raise InputError(
                f"grounding_netted: of {str(source)!r} must be 1 (netted), 0 (not) or -1 (unknown), got {netted:g}."
            )
        out[str(source)] = (gia or "unknown", GROUNDING[int(netted)])
    return out
