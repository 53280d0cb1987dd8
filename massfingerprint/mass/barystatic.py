"""Gigatonnes to millimetres of global mean: barystatic sea level, with the factor and the ocean area named."""

import numpy as np
import xarray as xr

from massfingerprint.arguments import real_number
from massfingerprint.constants import FRESH_WATER_DENSITY, GIGATONNES_PER_MILLIMETRE, KILOGRAMS_PER_GIGATONNE
from massfingerprint.errors import InputError
from massfingerprint.mass.covariance import total_sigma

AR6_GIGATONNES_PER_MILLIMETRE = 362.5  # IPCC AR6 WGI ch. 9 footnote 3 (Fox-Kemper et al. 2021)


def ocean_area_of(gt_per_mm: float) -> float:
    """Ocean area in m2 that a factor in Gt per mm stands for, fresh water of 1000 kg m-3."""
    return gt_per_mm * KILOGRAMS_PER_GIGATONNE.value / (FRESH_WATER_DENSITY.value * 1e-3)


def check_factor(gt_per_mm: float) -> float:
    """Return a usable factor; one far from any ocean of the Earth (300 to 420 Gt per mm) is refused as a likely mix-up."""
    return real_number(
        gt_per_mm, argument="gt_per_mm", allowed="a number of Gt per mm between 300 and 420", low=300.0, high=420.0
    )


def ocean_reaching_fraction(ledger: xr.Dataset) -> xr.DataArray:
    """Share of each source's mass that reaches the sea (source); 1 where the ledger does not say.

    Raises
    ------
    InputError
        If a fraction is not between 0 and 1.
    """
    if "ocean_reaching_fraction" not in ledger:
        return xr.DataArray(np.ones(ledger.sizes["source"]), dims="source", coords={"source": ledger["source"]})
    share = ledger["ocean_reaching_fraction"].astype(np.float64)
    for name, value in zip(ledger["source"].values, share.values, strict=True):
        if not 0.0 <= value <= 1.0:
            raise InputError(f"ocean_reaching_fraction: of {str(name)!r} must lie between 0 and 1, got {value:g}.")
    return share


def barystatic(ledger: xr.Dataset, *, gt_per_mm: float = GIGATONNES_PER_MILLIMETRE.value) -> xr.Dataset:
    """Global-mean sea level that the mass of a ledger makes.

    Parameters
    ----------
    ledger : Dataset (source, time)
        Cumulative mass change in Gt, negative = loss; an ``ocean_reaching_fraction(source)`` in it is applied.
    gt_per_mm : float
        Gigatonnes that raise the ocean by one millimetre; AR6 uses 362.5.

    Returns
    -------
    Dataset (source, time)
        ``sea_level``, ``sea_level_sigma`` [mm], positive = rise; ``sea_level_total``, ``sea_level_total_sigma`` (time) where
        every source has a value, with the correlations between sources; attributes ``gigatonnes_per_millimetre``,
        ``ocean_area`` [m2], ``reference_epoch``.

    Raises
    ------
    InputError
        If the factor or a fraction cannot be used.
    """
    factor = check_factor(gt_per_mm)
    share = ocean_reaching_fraction(ledger)
    per_gt = share / factor
    level = (-ledger["mass_change"] * per_gt).transpose("source", "time")
    sigma = (ledger["mass_change_sigma"] * per_gt).transpose("source", "time")
    out = xr.Dataset({"sea_level": level + 0.0, "sea_level_sigma": sigma})
    total, total_sigma = _total(ledger, per_gt)
    out["sea_level_total"], out["sea_level_total_sigma"] = ("time", total), ("time", total_sigma)
    for name in out.data_vars:
        words = "total barystatic sea level" if "total" in str(name) else "barystatic sea level"
        out[name].attrs = {"units": "mm", "long_name": words + (", 1 sigma" if str(name).endswith("sigma") else "")}
    attrs = {"gigatonnes_per_millimetre": factor, "ocean_area": ocean_area_of(factor)}
    return out.assign_attrs(attrs, reference_epoch=ledger.attrs.get("reference_epoch", ""))


def _total(ledger: xr.Dataset, per_gt: xr.DataArray) -> tuple[np.ndarray, np.ndarray]:
    """Sum over sources (time,) in mm and its standard uncertainty, NaN where a source has no value."""
    mass, scale = ledger["mass_change"].transpose("source", "time").values, per_gt.values
    whole = np.isfinite(mass).all(axis=0)
    total = np.where(whole, -(np.nan_to_num(mass) * scale[:, None]).sum(axis=0), np.nan) + 0.0
    return total, total_sigma(ledger, scale)
