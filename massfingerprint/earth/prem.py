"""PREM, at any period and with a choice of crusts.

Dziewonski & Anderson (1981), Phys. Earth Planet. Inter. 25:297, Table 1 (polynomials and quality factors, from memory, held against
the tabulated model of a seismology package by the tests). Between 24.4 and 220 km depth the isotropic (Voigt) average of the
transversely isotropic moduli is taken. The default is the period of 1 s with the ocean replaced by the upper crust.

Periods: a wave speed at period T is v(T) = v(1 s) (1 - ln T / (pi Q)); for the moduli that is its square, Q_mu for the rigidity and
Q_kappa for the bulk modulus, which to first order is the E-rule of D & A for P waves. Their law holds in the seismic band, to some
thousand seconds; beyond it the same Q is an assumption.

Crusts: all but ``as published`` reach 6371 km. Where a crust is thinner than PREM's, the polynomials of the uppermost mantle
(6151 to 6346.6 km) are continued upwards, by 24.4 km without any crust: an extrapolation that D & A did not fit.
"""

from dataclasses import dataclass, replace

from massfingerprint.arguments import one_of
from massfingerprint.constants import SPHERE_RADIUS
from massfingerprint.earth.layers import EarthModel, Layer, at_period

_Q_BULK, _Q_BULK_INNER_CORE = 57823.0, 1327.7
_Q_LID = 6291.0  # km: the weak zone below, Q_mu 80, the lid above, 600
_TOP_OF_LOWER = 6151.0
_LOWER_MANTLE = (7.9565, -6.4761, 5.5283, -3.0807)
_UPPERMOST_MANTLE = {
    "pv": (0.8317, 7.2180),
    "ph": (3.5908, 4.6172),
    "sv": (5.8582, -1.4678),
    "sh": (-1.0839, 5.7176),
    "eta": (3.3687, -2.4778),
}


def _shell(inner: float, outer: float, density: tuple[float, ...], **speeds: tuple[float, ...]) -> Layer:
    """Shell from published units: km, g cm-3, km s-1 (``eta`` is dimensionless)."""
    metric = {name: tuple(v * (1.0 if name == "eta" else 1e3) for v in c) for name, c in speeds.items()}
    return Layer(inner * 1e3, outer * 1e3, tuple(1e3 * v for v in density), metric)


_BELOW = (
    _shell(0.0, 1221.5, (13.0885, 0.0, -8.8381), p=(11.2622, 0.0, -6.3640), s=(3.6678, 0.0, -4.4475)),
    _shell(1221.5, 3480.0, (12.5815, -1.2638, -3.6426, -5.5281), p=(11.0487, -4.0362, 4.8023, -13.5732), s=(0.0,)),
    _shell(3480.0, 3630.0, _LOWER_MANTLE, p=(15.3891, -5.3181, 5.5242, -2.5514), s=(6.9254, 1.4672, -2.0834, 0.9783)),
    _shell(
        3630.0, 5600.0, _LOWER_MANTLE, p=(24.9520, -40.4673, 51.4832, -26.6419), s=(11.1671, -13.7818, 17.4575, -9.2777)
    ),
    _shell(
        5600.0, 5701.0, _LOWER_MANTLE, p=(29.2766, -23.6027, 5.5242, -2.5514), s=(22.3459, -17.2473, -2.0834, 0.9783)
    ),
    _shell(5701.0, 5771.0, (5.3197, -1.4836), p=(19.0957, -9.8672), s=(9.9839, -4.9324)),
    _shell(5771.0, 5971.0, (11.2494, -8.0298), p=(39.7027, -32.6166), s=(22.3512, -18.5856)),
    _shell(5971.0, _TOP_OF_LOWER, (7.1089, -3.8045), p=(20.3926, -12.2569), s=(8.9496, -4.4597)),
)
_Q_SHEAR_BELOW = (84.6, None, 312.0, 312.0, 312.0, 143.0, 143.0, 143.0)
_Q_SHEAR_WEAK_ZONE, _Q_SHEAR_LID = 80.0, 600.0


@dataclass(frozen=True)
class _Crust:
    """Shells above the mantle (bottom and top in km, density, P and S speed), end of the model's name, words for its source."""

    shells: tuple[tuple[float, float, float, float, float], ...]
    suffix: str
    words: str


_LOWER_CRUST = (6346.6, 6356.0, 2.900, 6.800, 3.900)
_CRUSTS = {
    "upper crust": _Crust((_LOWER_CRUST, (6356.0, 6371.0, 2.600, 5.800, 3.200)), "", "ocean replaced by upper crust"),
    "oceanic": _Crust(
        (
            (6364.5, 6367.0, 3.050, 7.100, 3.900),
            (6367.0, 6369.3, 2.900, 6.600, 3.650),
            (6369.3, 6371.0, 2.600, 5.000, 2.500),
        ),
        "_oceanic",
        "normal oceanic crust of 6.5 km (CRUST 5.1 and its followers, Mooney et al. 1998, from memory), dry",
    ),
    "continental": _Crust(
        ((6336.0, 6351.0, 2.920, 6.500, 3.850), (6351.0, 6371.0, 2.720, 5.800, 3.460)),
        "_continental",
        "continental crust of 35 km of ak135 (Kennett et al. 1995)",
    ),
    "none": _Crust((), "_no_crust", "no crust, the uppermost mantle continued to 6371 km"),
    "as published": _Crust(
        (_LOWER_CRUST, (6356.0, 6368.0, 2.600, 5.800, 3.200)), "_as_published", "ocean left off, surface at 6368 km"
    ),
}
CRUSTS = tuple(_CRUSTS)


def prem(*, period: float = 1.0, crust: str = "upper crust") -> EarthModel:
    """PREM, isotropic (Voigt).

    Parameters
    ----------
    period : float
        Seconds, 0.1 to 100000, at which the moduli are taken. At 1 s they are as published and the shells carry no quality
        factors; at any other period each shell carries those used, and the uppermost mantle is cut at 6291 km where Q jumps.
    crust : str
        ``"upper crust"``: the ocean replaced by PREM's upper crust. ``"oceanic"``: 6.5 km of oceanic crust. ``"continental"``:
        35 km of ak135's continental crust. ``"none"``: mantle to the surface. ``"as published"``: nothing replaced, the ocean
        left off, so that the surface is the sea floor at 6368 km.

    Returns
    -------
    EarthModel
        Radius 6371 km (6368 km as published).

    Raises
    ------
    InputError
        If the period or the crust cannot be used.

    Source
    ------
    Dziewonski & Anderson 1981, Phys. Earth Planet. Inter. 25:297, Table 1 and section 6 (from memory).
    """
    one_of(crust, CRUSTS, argument="crust", kind="crust")
    cover = _CRUSTS[crust]
    moho = cover.shells[0][0] if cover.shells else SPHERE_RADIUS.value / 1e3
    mantle = _shell(_TOP_OF_LOWER, moho, (2.6910, 0.6924), **_UPPERMOST_MANTLE)
    crustal = tuple(_shell(low, high, (density,), p=(p,), s=(s,)) for low, high, density, p, s in cover.shells)
    at_one_second = EarthModel(
        f"prem{cover.suffix}",
        (*_BELOW, mantle, *crustal),
        f"PREM (Dziewonski & Anderson 1981), isotropic Voigt average, 1 s, {cover.words}",
        SPHERE_RADIUS.value,
    )
    if period == 1.0 and not isinstance(period, bool):
        return at_one_second
    return at_period(replace(at_one_second, layers=_with_quality(mantle, crustal)), period)


def _with_quality(mantle: Layer, crustal: tuple[Layer, ...]) -> tuple[Layer, ...]:
    """All shells with their quality factors, the uppermost mantle cut where Q jumps."""
    below = [replace(shell, q_shear=q, q_bulk=_Q_BULK) for shell, q in zip(_BELOW, _Q_SHEAR_BELOW, strict=True)]
    below[0] = replace(below[0], q_bulk=_Q_BULK_INNER_CORE)
    weak = replace(mantle, outer=_Q_LID * 1e3, q_shear=_Q_SHEAR_WEAK_ZONE, q_bulk=_Q_BULK)
    lid = replace(mantle, inner=_Q_LID * 1e3, q_shear=_Q_SHEAR_LID, q_bulk=_Q_BULK)
    return (*below, weak, lid, *(replace(shell, q_shear=_Q_SHEAR_LID, q_bulk=_Q_BULK) for shell in crustal))
