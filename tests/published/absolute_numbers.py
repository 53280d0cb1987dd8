"""Absolute numbers that linearity, reciprocity and mass closure cannot catch: normalisation, factors applied twice, lost signs.

Each was computed from the formulas in the docstrings with the default Earth, on paper or by a second program; tolerance 2 %.
"""

POLAR_MOTION_45N = 0.0162  # mas, m1 for 1 Gt lost at 45 N 0 E, no ocean response
LENGTH_OF_DAY_EQUATOR = -1.0e-5  # ms, 1 Gt taken from the equator and spread uniformly
LENGTH_OF_DAY_POLE = 2.0e-5  # ms, the same from the pole
C20_POLE = 5.20e-14  # fully normalised, +1 Gt at the pole, a = 6371 km, M = 5.9722e24 kg
C21_45N = 4.50e-14  # +1 Gt at 45 N 0 E; S21 the same at 45 N 90 E
GEOCENTRE_CE = 1.067e-3  # mm towards +1 Gt at the pole
GEOCENTRE_CF = 1.094e-3
ORDER_ONE_FEEDBACK = 8.15e-5  # m per (kg m-2)
ORDER_ZERO_FEEDBACK = -2.43e-7
DEGREE_TWO_RESPONSE = 1.834e-4
