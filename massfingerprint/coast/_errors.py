"""How errors of series go together: in time, between sites, between terms. Arrays.

A weighted sum over time is all that is ever asked for. A family is one cause of errors with one or several names in it (the ledger
and its sources; a set of rebound models and its fields); a part of a term says which family it belongs to, under which name, and
how weights (site, time) of the term become weights on the family's own axis. Parts of two families are independent.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.mass.covariance import component_covariance, cross_covariance, source_correlation

Array = NDArray[np.float64]


class Family(Protocol):
    """One cause of errors."""

    def cross(self, first: str, second: str, weights: Array, others: Array) -> Array:
        """Covariance (site, site) of sums with weights (site, its axis) of two names."""
        ...


@dataclass(frozen=True, eq=False)
class Part:
    """One error in a term; ``carry`` takes weights (site, time) of the term to those of the family.

    ``rows``: for each site of the term its place among the ``count`` sites that ``carry`` knows, -1 for none; by default all in
    order.
    """

    family: Family
    name: str
    carry: Callable[[Array], Array]
    rows: NDArray[np.intp] | None = None
    count: int = 0

    def carried(self, weights: Array) -> Array:
        """Weights of the family for the sites that ``carry`` knows."""
        if self.rows is None:
            return self.carry(weights)
        held = self.rows >= 0
        known = np.zeros((self.count, weights.shape[1]))
        known[self.rows[held]] = weights[held]
        return self.carry(known)

    def picked(self, matrix: Array, axis: int) -> Array:
        """Rows or columns of a covariance in the order of the term's sites, 0 where it has none."""
        if self.rows is None:
            return matrix
        held = (self.rows >= 0).astype(np.float64)
        return np.take(matrix, np.maximum(self.rows, 0), axis=axis) * (held[:, None] if axis == 0 else held)


def same(weights: Array) -> Array:
    """Weights of a term whose family has its own times."""
    return weights


def covariance(first: Sequence[Part], second: Sequence[Part], weights: Array, others: Array) -> Array:
    """Covariance (site, site) of weighted sums (site, time) of two terms with these parts."""
    out = np.zeros((len(weights), len(others)))
    for one in first:
        for two in second:
            if one.family is two.family:
                matrix = one.family.cross(one.name, two.name, one.carried(weights), two.carried(others))
                out += two.picked(one.picked(matrix, 0), 1)
    return out


@dataclass(frozen=True, eq=False)
class OwnErrors:
    """Errors of one term: sigma (site, time) of one model, shared by all sites or each its own."""

    sigma: Array
    elapsed: Array
    model: str
    shared: bool

    def cross(self, first: str, second: str, weights: Array, others: Array) -> Array:
        """As the protocol says; there is one name only."""
        del first, second
        count = len(self.sigma)
        out = np.zeros((count, count))
        for i in range(count):
            for j in range(count) if self.shared else (i,):
                matrix = component_covariance(self.model, self.sigma[i], self.sigma[j], self.elapsed)
                out[i, j] = weights[i] @ matrix @ others[j]
        return out


@dataclass(frozen=True, eq=False)
class MassErrors:
    """Errors of the sources of a ledger in Gt; weights (site, its time) in mm Gt-1 times those of the term."""

    ledger: xr.Dataset
    kept: dict[tuple[str, str], Array] = field(default_factory=dict)

    def cross(self, first: str, second: str, weights: Array, others: Array) -> Array:
        """As the protocol says."""
        if first != second and source_correlation(self.ledger, first, second) == 0.0:
            return np.zeros((len(weights), len(others)))
        if (first, second) not in self.kept:
            self.kept[first, second] = np.nan_to_num(cross_covariance(self.ledger, first, second).values)
        return weights @ self.kept[first, second] @ others.T


@dataclass(frozen=True, eq=False)
class RateErrors:
    """Errors of constant rates under several names: covariance (name, site, name, site) in mm2 yr-2; weights (site, 1)."""

    names: tuple[str, ...]
    matrix: Array

    def cross(self, first: str, second: str, weights: Array, others: Array) -> Array:
        """As the protocol says."""
        held: Array = self.matrix[self.names.index(first), :, self.names.index(second), :]
        return weights[:, :1] * held * others[:, 0][None, :]
