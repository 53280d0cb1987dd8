"""Trend of the mean level at tide gauges, its uncertainty under correlated noise, and the weights that make it.

A trend is fitted by generalised least squares with the covariance of the noise (`_noise.py`), so it is a weighted sum of the
values used: whatever is set beside a gauge can be reduced with the same weights.

Which noise: every model is fitted by restricted likelihood. Models within 2 of the smallest criterion are as good as it by the
data (Burnham & Anderson 2002, section 2.6, say so of AIC; Raftery 1995 of BIC, both from memory); of them the one with the widest
interval of the rate is taken, because a short record of persistent noise often looks white and the best model alone is then too
sure. Intervals are of Student's t with the degrees of freedom of the rate's variance.

Shares of 90 % intervals that held the true rate, 400 drawn series of yearly means each (a standard deviation is 1.5 to 2 %):

    years   white   ar1 0.4   ar1 0.7   power law -0.5   -0.8   -1.2   arma 0.8, -0.5
    20       89.0      89.8      93.2             85.0   83.2   84.8             82.5
    40       88.8      93.8      97.5             83.5   87.2   92.8             84.0
    80       92.5      92.5      94.5             86.2   89.5   87.2             90.5

The price is width: under ar1, 20 or 40 yearly means have a median interval two to three times as wide as the rates scatter
(1.645 standard deviations to each side). A known noise can be named.
"""

from collections.abc import Mapping
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from scipy import stats

from massfingerprint.arguments import one_of
from massfingerprint.coast import _noise
from massfingerprint.coast.gauge_corrections import nodal_tide
from massfingerprint.coast.trend_model import NODAL, Series, TrendModel, design_of, kept_series, steps_of
from massfingerprint.errors import InputError
from massfingerprint.mass.rates import check_windows

Array = NDArray[np.float64]
Times = NDArray[np.datetime64]
NOISES = tuple(_noise.BOUNDS)
CRITERIA = ("AICc", "BIC")
AS_GOOD = 2.0  # of the criterion: models closer to the best one are not told apart
CONFIDENCE = 0.90
_NO_NOISE = 1e-9  # mm: rounding of levels of some metres is a thousandth of it
_PARAMETERS = ("ar", "ma", "spectral_index")


def gauge_trend(
    levels: xr.Dataset,
    *,
    window: Any = None,
    model: TrendModel | None = None,
    noise: str = "choose",
    criterion: str = "BIC",
) -> xr.Dataset:
    """Rate of the mean level at each gauge.

    Parameters
    ----------
    levels : Dataset (gauge, time)
        From ``read_gauges``: ``level`` in mm, NaN in gaps.
    window : (start, end), optional
        ISO dates, both ends included; the whole record by default.
    model : TrendModel, optional
        What is fitted beside level and rate.
    noise : str
        ``"white"``, ``"ar1"``, ``"arma11"``, ``"power_law"``, or ``"choose"``: the widest of those whose criterion is within 2 of
        the smallest. A model is left out (NaN) with fewer than 5 values beyond the regressors for each of its parameters.
    criterion : str
        ``"BIC"`` or ``"AICc"`` of the restricted likelihood; both are returned.

    Returns
    -------
    Dataset (gauge, ...)
        ``rate``, ``rate_sigma`` (1 sigma) [mm yr-1], positive = sea rises against the land; ``rate_low``, ``rate_high``, ends of
        its 90 % interval; where fitted ``acceleration``, ``acceleration_sigma`` [mm yr-2]; ``weights`` (gauge, time) [yr-1],
        0 where a value takes no part: rate = sum of weights x level - ``nodal_rate``; ``nodal_rate`` [mm yr-1], the same weights
        on the equilibrium nodal tide where that is taken off, else 0; ``noise``, the model used; ``degrees_of_freedom`` of
        the variance of the rate; ``residual_sigma`` [mm] (n - p); ``datum`` [mm], mean over the epochs used;
        ``step``, ``step_sigma`` (gauge, step_date) [mm] where fitted; ``nepoch``, ``first``, ``last``; of every noise model
        (gauge, noise_model): ``criterion`` (.., kind), ``log_likelihood``, ``model_rate``, ``model_rate_sigma``, ``noise_sigma``
        [mm] (power_law: of an innovation, else of a value), ``noise_parameter`` (.., parameter). A year is 365.25 days.

    Raises
    ------
    InputError, UnitsError, SiteError
        If a choice cannot be used, or a gauge has no value, too few years, or regressors that its epochs do not tell apart.
    """
    model = checked(levels, model or TrendModel(), noise, criterion)
    span = None if window is None else check_windows({"window": window})["window"]
    names = [str(name) for name in levels["gauge"].values]
    tide = np.zeros((len(names), levels.sizes["time"]))
    if model.nodal == "equilibrium":
        tide = nodal_tide(levels).values
    out = []
    for row, name in enumerate(names):
        series = kept_series(levels, row, span)
        steps = steps_of(model.steps, name, series)
        design = design_of(series, model, steps)
        corrected = series.values - tide[row, series.places]
        fits = fitted(series, design, corrected, noise)
        chosen = choose(fits, criterion)
        parts = {**_reduced(series, fits[chosen], (design, corrected), model), **_of_models(fits, corrected)}
        parts["nodal_rate"] = ((), fits[chosen].rows[1] @ tide[row, series.places])
        parts |= {"weights": ("time", _spread(fits[chosen].rows[1], series, levels.sizes["time"]))}
        out.append(xr.Dataset(parts | _step_sizes(steps, fits[chosen], corrected, model)))
    return _labelled(xr.concat(out, dim="gauge", join="outer"), levels, model, (noise, criterion))


def checked(levels: xr.Dataset, model: TrendModel, noise: str, criterion: str) -> TrendModel:
    """The model, once levels and choices can be used."""
    if not isinstance(levels, xr.Dataset) or "level" not in levels or set(levels["level"].dims) != {"gauge", "time"}:
        raise InputError("levels: must be a Dataset with level (gauge, time). Pass what read_gauges gave.")
    if levels["level"].attrs.get("units") != "mm":
        raise InputError(
            f"levels: level must be in 'mm', got {levels['level'].attrs.get('units')!r}. Convert it first."
        )
    one_of(noise, ("choose", *NOISES), argument="noise", kind="noise model")
    one_of(criterion, CRITERIA, argument="criterion", kind="criterion")
    one_of(model.nodal, NODAL, argument="nodal", kind="treatment of the nodal tide")
    if isinstance(model.steps, Mapping):
        known = [str(name) for name in levels["gauge"].values]
        strange = [name for name in model.steps if name not in known]
        if strange:
            raise InputError(f"steps: {strange[0]!r} is none of the gauges {', '.join(known)}.")
    elif isinstance(model.steps, str):
        raise InputError(f"steps: must be a sequence of dates, got {model.steps!r}. Put it in brackets.")
    return model


def fitted(series: Series, design: Array, values: Array, noise: str) -> dict[str, _noise.Fit]:
    """Every noise model that was asked for and can be fitted."""
    wanted = NOISES if noise == "choose" else (noise,)
    centred = values - values.mean()
    left = centred - design @ np.linalg.lstsq(design, centred, rcond=None)[0]
    if np.abs(left).max() < _NO_NOISE:
        raise InputError(
            f"levels: gauge {series.name!r} lies on what is fitted to {_NO_NOISE:g} mm, there is no noise to judge the rate by. "
            "Give levels as they were observed."
        )
    found = {name: _noise.fit(name, series.index, design, centred) for name in wanted}
    out = {name: held for name, held in found.items() if held is not None}
    if not out:
        raise InputError(
            f"noise: {noise!r} cannot be fitted to the {values.size} values of gauge {series.name!r}. Use 'white' or 'choose'."
        )
    return out


def _criterion(held: _noise.Fit, criterion: str) -> float:
    return held.aicc if criterion == "AICc" else held.bic


def _half_width(held: _noise.Fit) -> float:
    """Half the interval of the rate."""
    return float(stats.t.ppf(0.5 + 0.5 * CONFIDENCE, held.freedom) * np.sqrt(held.covariance[1, 1]))


def choose(fits: dict[str, _noise.Fit], criterion: str) -> str:
    """The widest of the models that are as good as the best; white where no criterion has a number."""
    if len(fits) == 1:
        return next(iter(fits))
    best = min(_criterion(held, criterion) for held in fits.values())
    as_good = [name for name, held in fits.items() if _criterion(held, criterion) <= best + AS_GOOD]
    return max(as_good, key=lambda name: _half_width(fits[name]))


def _reduced(series: Series, held: _noise.Fit, data: tuple[Array, Array], model: TrendModel) -> dict[str, Any]:
    """What the chosen model says of one gauge. ``data``: design, values."""
    design, values = data
    found = held.rows @ (values - values.mean())
    sigma = np.sqrt(np.diag(held.covariance))
    residual = values - values.mean() - design @ found
    half = _half_width(held)
    out: dict[str, Any] = {
        "rate": found[1],
        "rate_sigma": sigma[1],
        "rate_low": found[1] - half,
        "rate_high": found[1] + half,
        "degrees_of_freedom": held.freedom,
        "residual_sigma": np.sqrt(residual @ residual / (design.shape[0] - design.shape[1])),
        "datum": series.values.mean(),
        "nepoch": series.values.size,
        "first": series.time[0],
        "last": series.time[-1],
        "noise": held.model,
    }
    if model.acceleration:
        out |= {"acceleration": found[2], "acceleration_sigma": sigma[2]}
    return {name: ((), value) for name, value in out.items()}


def _of_models(fits: dict[str, _noise.Fit], values: Array) -> dict[str, Any]:
    """What every noise model says of one gauge, NaN where it was not fitted."""
    table = np.full((len(NOISES), 4), np.nan)
    criteria, theta = np.full((len(NOISES), 2), np.nan), np.full((len(NOISES), len(_PARAMETERS)), np.nan)
    for row, name in enumerate(NOISES):
        if name in fits:
            held = fits[name]
            rate = held.rows[1] @ (values - values.mean())
            table[row] = held.log_likelihood, rate, np.sqrt(held.covariance[1, 1]), held.scale
            criteria[row] = held.aicc, held.bic
            theta[row, [_PARAMETERS.index(word) for word in _noise.PARAMETERS[name]]] = held.theta
    words = ("log_likelihood", "model_rate", "model_rate_sigma", "noise_sigma")
    out: dict[str, Any] = {word: ("noise_model", table[:, column]) for column, word in enumerate(words)}
    return out | {
        "criterion": (("noise_model", "kind"), criteria),
        "noise_parameter": (("noise_model", "parameter"), theta),
    }


def _spread(row: Array, series: Series, count: int) -> Array:
    out = np.zeros(count)
    out[series.places] = row
    return out


def _step_sizes(steps: Times, held: _noise.Fit, values: Array, model: TrendModel) -> dict[str, Any]:
    """Fitted sizes of the steps of one gauge, on their dates."""
    where = slice(2 + model.acceleration, 2 + model.acceleration + steps.size)
    sizes = (held.rows @ (values - values.mean()))[where]
    sigma = np.sqrt(np.diag(held.covariance))[where]
    return {"step_date": ("step_date", steps), "step": ("step_date", sizes), "step_sigma": ("step_date", sigma)}


def _labelled(out: xr.Dataset, levels: xr.Dataset, model: TrendModel, choice: tuple[str, str]) -> xr.Dataset:
    """Coordinates, units, words and the choices made."""
    places = {name: levels[name] for name in ("lat", "lon") if name in levels.coords}
    names = {"noise_model": list(NOISES), "kind": list(CRITERIA), "parameter": list(_PARAMETERS)}
    labels = {name: np.array(values, dtype=object) for name, values in names.items()}
    axes = {"gauge": levels["gauge"].values, "time": levels["time"].values}
    out = out.assign_coords({**axes, **labels, **places})
    if not out.sizes["step_date"]:
        out = out.drop_dims("step_date")
    for name, (unit, words) in _WORDS.items():
        if name in out:
            out[name].attrs = {"units": unit, "long_name": words} if unit else {"long_name": words}
    return out.assign_attrs(
        sampling=levels.attrs.get("sampling", ""),
        acceleration=int(model.acceleration),
        seasonal=int(model.seasonal),
        nodal=model.nodal,
        noise=choice[0],
        criterion=choice[1],
        confidence=CONFIDENCE,
        year="365.25 days",
    )


_WORDS = {
    "rate": ("mm yr-1", "rate of relative sea level"),
    "rate_sigma": ("mm yr-1", "rate of relative sea level, 1 sigma"),
    "rate_low": ("mm yr-1", "lower end of the 90 % interval of the rate"),
    "rate_high": ("mm yr-1", "upper end of the 90 % interval of the rate"),
    "acceleration": ("mm yr-2", "acceleration of relative sea level"),
    "acceleration_sigma": ("mm yr-2", "acceleration of relative sea level, 1 sigma"),
    "weights": ("yr-1", "weights that take the level to the rate"),
    "nodal_rate": ("mm yr-1", "rate of the nodal tide in equilibrium, taken off"),
    "noise": ("", "noise model of the rate"),
    "degrees_of_freedom": ("1", "degrees of freedom of the variance of the rate"),
    "residual_sigma": ("mm", "standard deviation of the residuals"),
    "datum": ("mm", "mean level over the epochs used"),
    "step": ("mm", "size of the shift of the datum"),
    "step_sigma": ("mm", "size of the shift of the datum, 1 sigma"),
    "nepoch": ("1", "number of epochs used"),
    "first": ("", "first epoch used"),
    "last": ("", "last epoch used"),
    "criterion": ("1", "criterion of the noise model, small is good"),
    "log_likelihood": ("1", "logarithm of the restricted likelihood"),
    "model_rate": ("mm yr-1", "rate under the noise model"),
    "model_rate_sigma": ("mm yr-1", "rate under the noise model, 1 sigma"),
    "noise_sigma": ("mm", "size of the noise: of a value, of an innovation for power_law"),
    "noise_parameter": ("1", "parameters of the noise per step of the record"),
}
