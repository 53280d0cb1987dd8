"""Geometry and transforms: grids, spherical harmonics, points."""
