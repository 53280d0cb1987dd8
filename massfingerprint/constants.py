"""Physical constants with value, unit, standard uncertainty and source.

Use ``constants.SPHERE_RADIUS.value`` in formulas, and print the object itself to cite it.
"""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Constant:
    """One number of the physics.

    Parameters
    ----------
    value : float
        In ``unit``.
    unit : str
        CF unit string.
    uncertainty : float
        Standard uncertainty, same unit; 0 for a definition or a convention.
    source : str
        Where the value is published or agreed.
    """

    value: float
    unit: str
    uncertainty: float
    source: str


GRAVITATIONAL_CONSTANT = Constant(6.6743e-11, "m3 kg-1 s-2", 0.00015e-11, "CODATA 2018")
SPHERE_RADIUS = Constant(6.371e6, "m", 0.0, "PREM surface radius, Dziewonski & Anderson 1981")
FRESH_WATER_DENSITY = Constant(1000.0, "kg m-3", 0.0, "convention of barystatic sea level, Gregory et al. 2019")
ROTATION_RATE = Constant(7.292115e-5, "rad s-1", 0.0, "IERS Conventions (2010), Table 1.1")
SECULAR_LOVE_NUMBER = Constant(0.9382, "1", 0.0, "from the observed flattening (k_s)")
POLAR_MOMENT_OF_INERTIA = Constant(8.0365e37, "kg m2", 0.0, "Gross 2007, Treatise on Geophysics (from memory)")
EARTH_MASS = Constant(5.9722e24, "kg", 0.0006e24, "Astronomical Almanac: GM over G (from memory)")
MEAN_MOMENT_OF_INERTIA = Constant(
    (8.0101 + 8.0103 + 8.0365) / 3.0 * 1e37, "kg m2", 0.0, "(A+B+C)/3, Gross 2007, Treatise on Geophysics (from memory)"
)
MOMENT_OF_INERTIA_EXCESS = Constant(2.630e35, "kg m2", 0.0, "C - (A+B)/2, from Gross 2007 (from memory)")
SECONDS_PER_DAY = Constant(86400.0, "s", 0.0, "definition of the nominal day")
KILOGRAMS_PER_GIGATONNE = Constant(1.0e12, "kg Gt-1", 0.0, "definition")
GIGATONNES_PER_MILLIMETRE = Constant(
    361.8, "Gt mm-1", 0.0, "ocean area 3.618e14 m2, rounded from Charette & Smith 2010; IPCC AR6 uses 362.5"
)
ELLIPSOID_FLATTENING = Constant(1.0 / 298.257223563, "1", 0.0, "WGS84")
MILLIARCSECONDS_PER_RADIAN = Constant(206264806.24709636, "mas rad-1", 0.0, "180*3600*1000/pi")
