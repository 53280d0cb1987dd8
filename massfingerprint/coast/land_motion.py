"""Land motion at a gauge, counted once.

A GNSS receiver beside a gauge sees everything the land does. Part of it is in a budget already: the elastic answer to
present-day mass is in the patterns of relative sea level, and glacial isostatic adjustment in its own term. So there are two
ways to a sum, and a mix of both counts something twice or not at all:

    path A   RSL of the mass (sea surface minus land) + GIA as RSL + residual land motion
             residual = GNSS (CM) - elastic uplift over the GNSS window - GIA uplift;   its part of RSL is minus that
    path B   sea-surface terms alone + minus the whole GNSS rate

The elastic part is that of the years the receiver measured, not of the gauge's window: ice loss has grown, and so has the uplift.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from massfingerprint.arguments import one_of, real_number
from massfingerprint.errors import InputError

# kind of a term -> the path it belongs to; None: either
KINDS = {
    "mass, relative sea level": "A",
    "GIA, relative sea level": "A",
    "residual land motion": "A",
    "mass, sea surface": "B",
    "GIA, sea surface": "B",
    "whole land motion": "B",
    "steric and dynamic": None,
}


@dataclass(frozen=True, kw_only=True)
class Uplift:
    """A rate of the land, positive = up.

    Parameters
    ----------
    rate, sigma : float
        mm yr-1, 1 sigma.
    reference_frame : str
        ``CM`` for receivers in the ITRF.
    """

    rate: float
    sigma: float
    reference_frame: str = "CM"

    def __post_init__(self) -> None:
        real_number(self.rate, argument="rate", allowed="a number of mm/yr from -500 to 500", low=-500.0, high=500.0)
        real_number(self.sigma, argument="sigma", allowed="0 to 500 mm/yr", low=0.0, high=500.0)


@dataclass(frozen=True, kw_only=True)
class Tie:
    """How a receiver is tied to its gauge.

    Parameters
    ----------
    distance : float
        km between them.
    levelling_sigma : float
        mm yr-1, 1 sigma of the rate between them from repeated levelling; 0 where they share a structure.
    sigma_per_100_km : float
        mm yr-1 by which land a hundred kilometres apart moves differently; grows with the root of the distance.
    """

    distance: float = 0.0
    levelling_sigma: float = 0.0
    sigma_per_100_km: float = 0.0

    def __post_init__(self) -> None:
        real_number(self.distance, argument="distance", allowed="0 to 1000 km", low=0.0, high=1000.0)
        for name in ("levelling_sigma", "sigma_per_100_km"):
            real_number(getattr(self, name), argument=name, allowed="0 to 100 mm/yr", low=0.0, high=100.0)

    @property
    def sigma(self) -> float:
        """What the way between receiver and gauge adds, mm yr-1, 1 sigma."""
        return float(np.hypot(self.levelling_sigma, self.sigma_per_100_km * np.sqrt(self.distance / 100.0)))


def residual_land_motion(gnss: Uplift, elastic: Uplift, rebound: Uplift, *, tie: Tie | None = None) -> Uplift:
    """What the land does besides the elastic answer and glacial isostatic adjustment; path A.

    Parameters
    ----------
    gnss : Uplift
        Receiver, in CM.
    elastic : Uplift
        Elastic uplift by present-day mass over the receiver's own years, in CM, as ``station_rates`` gives it.
    rebound : Uplift
        Glacial isostatic adjustment, in the frame of the receiver.
    tie : Tie, optional
        Between receiver and gauge.

    Returns
    -------
    Uplift
        gnss - elastic - rebound; its part of relative sea level is minus its rate. Errors are taken as independent.

    Raises
    ------
    InputError
        If the frames differ.
    """
    frames = {"gnss": gnss, "elastic": elastic, "rebound": rebound}
    for name, part in frames.items():
        if part.reference_frame != gnss.reference_frame:
            raise InputError(
                f"{name}: is in {part.reference_frame}, the receiver in {gnss.reference_frame}. Bring them into one frame first."
            )
    extra = 0.0 if tie is None else tie.sigma
    sigma = float(np.sqrt(gnss.sigma**2 + elastic.sigma**2 + rebound.sigma**2 + extra**2))
    return Uplift(rate=gnss.rate - elastic.rate - rebound.rate, sigma=sigma, reference_frame=gnss.reference_frame)


def whole_land_motion(gnss: Uplift, *, tie: Tie | None = None) -> Uplift:
    """What the land at the gauge does in all; path B.

    Parameters
    ----------
    gnss : Uplift
        Receiver, in CM.
    tie : Tie, optional
        Between receiver and gauge.

    Returns
    -------
    Uplift
        The receiver's rate; its part of relative sea level is minus that.
    """
    extra = 0.0 if tie is None else tie.sigma
    return Uplift(rate=gnss.rate, sigma=float(np.hypot(gnss.sigma, extra)), reference_frame=gnss.reference_frame)


def check_together(kinds: Mapping[str, str]) -> str | None:
    """Refuse a sum that counts land motion twice or not at all.

    Parameters
    ----------
    kinds : mapping of term to kind
        Kinds are those of ``KINDS``.

    Returns
    -------
    str or None
        The path of the terms, ``"A"`` or ``"B"``; None where none of them belongs to one.

    Raises
    ------
    InputError
        If a kind is not known, or terms of both paths are in the sum.
    """
    first: dict[str, str] = {}
    for term, kind in kinds.items():
        one_of(kind, tuple(KINDS), argument=f"kind of {term!r}", kind="kind of term")
        path = KINDS[kind]
        if path is not None:
            first.setdefault(path, term)
    if len(first) > 1:
        a, b = first["A"], first["B"]
        raise InputError(
            f"components: {a!r} ({kinds[a]}) belongs to path A, {b!r} ({kinds[b]}) to path B; together land motion counts twice or "
            f"not at all. Path A takes {_of('A')}; path B {_of('B')}."
        )
    return next(iter(first), None)


def _of(path: str) -> str:
    return ", ".join(kind for kind, home in KINDS.items() if home in (None, path))
