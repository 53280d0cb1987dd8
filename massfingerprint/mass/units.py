"""Units of mass records: what one unit of a record is in gigatonnes.

Gt, kg and other mass units convert as they are. km3 needs to know of what: ice (with its density) or water. Metres and millimetres
of water equivalent need an area. Millimetres of sea-level equivalent, positive = rise, need the factor of the ocean; they turn
the sign, because a rise is a loss. An uncertain density is one error shared by all epochs: a systematic error.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import real_number
from massfingerprint.constants import GIGATONNES_PER_MILLIMETRE
from massfingerprint.errors import InputError, UnitsError
from massfingerprint.mass.barystatic import check_factor

Array = NDArray[np.float64]
ICE_DENSITY = 917.0  # kg m-3, pure glacier ice; common practice
VOLUME = ("km3",)
WATER_EQUIVALENT = {"m w.e.": 1.0, "mm w.e.": 1e-3}
SEA_LEVEL_EQUIVALENT = ("mm sle",)
ACCEPTED = ("Gt", *VOLUME, *WATER_EQUIVALENT, *SEA_LEVEL_EQUIVALENT)


@dataclass(frozen=True)
class Conversion:
    """How values of a record become gigatonnes.

    Parameters
    ----------
    factor : array or float
        Gt per unit; negative for sea-level equivalent.
    density_sigma : float
        Relative standard uncertainty of a density behind the factor, shared by all epochs; 0 without.
    per_area : bool
        Whether the values are per area, so that changes have to be summed over the changing area.
    words : str
        What was assumed, for the output.
    """

    factor: Array | float
    density_sigma: float
    per_area: bool
    words: str


def conversion(
    unit: str,
    *,
    argument: str,
    material: str = "",
    density: tuple[float, float] | None = None,
    area: Array | float | None = None,
    gt_per_mm: float = GIGATONNES_PER_MILLIMETRE.value,
) -> Conversion:
    """Find how a unit of a mass record becomes gigatonnes.

    Parameters
    ----------
    unit : str
        ``Gt``, ``kg`` or another mass unit, ``km3``, ``m w.e.``, ``mm w.e.`` or ``mm sle``.
    argument : str
        What to call the record in an error.
    material : str
        ``ice`` or ``water`` for km3.
    density : (float, float), optional
        Density of the ice volume and its standard uncertainty, kg m-3; 917 exactly if not given.
    area : float or array, optional
        Area in km2 that water equivalent is spread over, one value or one per epoch.
    gt_per_mm : float
        For mm of sea-level equivalent.

    Raises
    ------
    UnitsError
        If the unit is not one of these.
    InputError
        If a material, density or area is missing or impossible.
    """
    if unit in VOLUME:
        return _volume(argument, material, density)
    if unit in WATER_EQUIVALENT:
        if area is None or not (np.asarray(area, dtype=np.float64) > 0.0).all():
            raise InputError(f"{argument}: {unit} needs a positive area. Add a column 'area [km2]'.")
        # 1 m of water on 1 km2 is 1e9 kg
        factor = np.asarray(area, dtype=np.float64) * 1e-3 * WATER_EQUIVALENT[unit]
        return Conversion(factor, 0.0, True, f"{unit} over the area given with the record")
    if unit in SEA_LEVEL_EQUIVALENT:
        value = check_factor(gt_per_mm)
        return Conversion(-value, 0.0, False, f"mm of sea-level equivalent, positive = rise, at {value:g} Gt per mm")
    try:
        _, scale = vocabulary.require({"units": unit}, ("Gt",), argument=argument)
    except UnitsError as error:
        raise UnitsError(
            f"{argument}: unit {unit!r} is not one of a mass record. Use {', '.join(ACCEPTED)} or a mass unit."
        ) from error
    return Conversion(scale, 0.0, False, unit)


def _volume(argument: str, material: str, density: tuple[float, float] | None) -> Conversion:
    if material == "water":
        return Conversion(1.0, 0.0, False, "km3 of water of 1000 kg m-3")
    if material != "ice":
        found = f"got {material!r}" if material else "which is not said"
        raise InputError(f"{argument}: km3 of ice or of water, {found}. Add a column 'material' with ice or water.")
    value, sigma = density or (ICE_DENSITY, 0.0)
    value = real_number(
        value, argument=f"{argument}: density", allowed="a density between 300 and 1000 kg m-3", low=300.0, high=1000.0
    )
    sigma = real_number(sigma, argument=f"{argument}: density_sigma", allowed="0 to 500 kg m-3", low=0.0, high=500.0)
    # 1 km3 of density rho is rho * 1e9 kg
    return Conversion(
        value * 1e-3,
        sigma / value,
        False,
        f"km3 of ice of {value:g} +- {sigma:g} kg m-3, one error shared by all epochs",
    )


def to_gigatonnes(values: Array, how: Conversion) -> Array:
    """Cumulative values (ntime,) in gigatonnes.

    Values per area are summed as changes over the mean of the two areas they lie between, so that an area that changes does not
    change what was lost before.
    """
    factor = np.broadcast_to(np.asarray(how.factor, dtype=np.float64), values.shape)
    if not how.per_area:
        return values * factor
    steps = np.diff(values) * 0.5 * (factor[1:] + factor[:-1])
    return values[0] * factor[0] + np.concatenate([[0.0], np.cumsum(steps)])
