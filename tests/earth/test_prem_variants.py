"""PREM at other periods and with other crusts: quality factors, dispersion, shells and totals."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest

from massfingerprint.earth._radial import surface_numbers
from massfingerprint.earth.layers import EarthModel, Layer, at_period
from massfingerprint.earth.prem import CRUSTS, prem
from massfingerprint.errors import InputError


def seismology_table(name: str) -> list[list[str]]:
    """Rows of numbers of a file of obspy's taup/data, read without importing obspy."""
    package = Path(importlib.util.find_spec("obspy").submodule_search_locations[0])
    lines = (package / "taup" / "data" / name).read_text().splitlines()
    return [cells for line in lines if len(cells := line.split()) >= 4 and cells[0][0].isdigit()]


def shell_at(model: EarthModel, depth_km: float, above: bool) -> int:
    """Number of the shell that holds the depth just above, or just below."""
    radius = 6.371e6 - depth_km * 1e3 + (1.0 if above else -1.0)
    return next(i for i, shell in enumerate(model.layers) if shell.inner < radius <= shell.outer)


def quality_rows():
    rows = np.array([[float(cell) for cell in row] for row in seismology_table("prem.nd")])
    for i, (depth, p, s, _, q_p, q_s) in enumerate(rows):
        if 0.0 < depth < 6371.0:
            below = bool(i and rows[i - 1, 0] == depth)
            # the file has no double row at 80 and 220 km of the weak zone's top: 80 km stands for what lies below
            yield pytest.param(depth, p, s, q_p, q_s, below or depth == 80.0, id=f"{i}-{depth:g}")


@pytest.mark.parametrize(("depth", "p", "s", "q_p", "q_s", "below"), list(quality_rows()))
def test_quality_factors_against_a_seismology_package(depth, p, s, q_p, q_s, below):
    """obspy 1.5 taup/data/prem.nd, columns Q_p and Q_mu, whole numbers.

    1/Q_p = E/Q_mu + (1 - E)/Q_kappa, E = 4/3 (v_s/v_p)^2, from the file's own speeds. Q_p of the file is good to 1 in its last
    digit; in the inner core the file's Q_mu is 84.6 rounded to 85.
    """
    shell = prem(period=200.0).layers[shell_at(prem(period=200.0), depth, above=not below)]
    share = 4.0 / 3.0 * (s / p) ** 2
    loss = (share / shell.q_shear if shell.q_shear else 0.0) + (1.0 - share) / shell.q_bulk
    assert (shell.q_shear or 0.0) == pytest.approx(q_s, abs=0.5)
    assert 1.0 / loss == pytest.approx(q_p, abs=1.01, rel=2e-3)


@pytest.mark.parametrize("period", [0.5, 200.0, 4.4e4])
def test_speeds_follow_the_law_of_dispersion(period):
    """v_s(T) = v_s (1 - ln T / (pi Q_mu)), v_p with E (Dziewonski & Anderson 1981).

    S exactly. P to first order in 1/Q: its second order is at most (ln T / (pi 80))^2 = 1.8e-3 at half a day, 4.4e-4 at 200 s.
    """
    model, plain = prem(period=period), prem()
    turns = np.log(period) / np.pi
    for number, shell in enumerate(model.layers):
        radius = np.array([0.5 * (shell.inner + shell.outer)])
        inside = next(i for i, other in enumerate(plain.layers) if other.inner < radius[0] < other.outer)
        p, s = plain.wave_speeds(inside, radius)
        p_then, s_then = model.wave_speeds(number, radius)
        share = 4.0 / 3.0 * (s / p) ** 2
        loss = (share / shell.q_shear if shell.q_shear else 0.0) + (1.0 - share) / shell.q_bulk
        if shell.q_shear:
            assert s_then / s == pytest.approx(1.0 - turns / shell.q_shear, rel=1e-13)
        assert p_then / p == pytest.approx(1.0 - turns * loss, abs=(turns / 80.0) ** 2)


def test_one_second_is_the_reference():
    """At 1 s nothing changes; close to it the cut at 6291 km alone must not change the answer (rounding: 1e-12)."""
    near = prem(period=1.0 + 1e-15)
    assert prem(period=1.0) == prem()
    assert len(near.layers) == len(prem().layers) + 1
    assert 6.291e6 in [shell.outer for shell in near.layers]
    one, other = surface_numbers(prem(), 5), surface_numbers(near, 5)
    np.testing.assert_allclose(other.h_load, one.h_load, rtol=1e-12, atol=1e-14)
    np.testing.assert_allclose(other.l_load, one.l_load, rtol=1e-11, atol=1e-14)


def test_the_shipped_model_is_untouched(love):
    """Eleven shells, and mean density, gravity and source that the shipped Love numbers carry, to the last bit."""
    model = prem()
    assert [shell.outer for shell in model.layers[-3:]] == [6346.6e3, 6356e3, 6371e3]
    assert len(model.layers) == 11
    assert model.mean_density == love.attrs["mean_density"]
    assert model.surface_gravity == love.attrs["surface_gravity"]
    assert love.attrs["source"].startswith(model.source)


def test_longer_periods_are_softer():
    """k_2 and the load's h'_2 grow in size with the period; at 200 s by 0.7 % and 0.3 % for Q_mu of 80 to 312."""
    k, h = zip(
        *((n.k_tide[2], n.h_load[2]) for n in (surface_numbers(prem(period=T), 2) for T in (0.1, 1.0, 200.0, 1e5))),
        strict=True,
    )
    assert list(k) == sorted(k)
    assert list(h) == sorted(h, reverse=True)
    assert k[2] / k[1] == pytest.approx(1.007, abs=1e-3)


@pytest.mark.parametrize(
    ("crust", "moho", "surface", "shells"),
    [("upper crust", 6346.6, 6371.0, 11), ("oceanic", 6364.5, 6371.0, 12), ("continental", 6336.0, 6371.0, 11),
     ("none", 6371.0, 6371.0, 9), ("as published", 6346.6, 6368.0, 11)],
)  # fmt: skip
def test_shells_of_each_crust(crust, moho, surface, shells):
    model = prem(crust=crust)
    assert (model.radius, len(model.layers)) == (surface * 1e3, shells)
    mantle = next(i for i, shell in enumerate(model.layers) if shell.inner == 6151e3)
    assert model.layers[mantle].outer == moho * 1e3
    # the uppermost mantle's polynomials are the same wherever they end: 2.6910 + 0.6924 r / 6371 km
    radius = np.array([6.3e6, moho * 1e3])
    assert model.density(mantle, radius) == pytest.approx(1e3 * (2.6910 + 0.6924 * radius / 6.371e6), rel=1e-14)


def test_continental_crust_is_that_of_a_seismology_package():
    """obspy 1.5 taup/data/ak135.tvel, uppermost 35 km: depth, P, S, density."""
    model = prem(crust="continental")
    rows = [[float(cell) for cell in row] for row in seismology_table("ak135.tvel")][:4]
    assert [row[0] for row in rows] == [0.0, 20.0, 20.0, 35.0]
    for (depth, p, s, density), above in zip(rows, (False, True, False, True), strict=True):
        shell = shell_at(model, depth, above)
        radius = np.array(model.radius - depth * 1e3)
        speeds = [float(v) for v in model.wave_speeds(shell, radius)]
        assert speeds == pytest.approx([p * 1e3, s * 1e3], rel=1e-12)
        assert float(model.density(shell, radius)) == pytest.approx(density * 1e3, rel=1e-12)


def test_as_published_has_the_published_mass_without_its_ocean():
    """5.974e24 kg (Dziewonski & Anderson 1981, from memory: four digits) less 3 km of sea water of 1020 kg m-3."""
    water = 4.0 / 3.0 * np.pi * (6.371e6**3 - 6.368e6**3) * 1020.0
    assert prem(crust="as published").mass + water == pytest.approx(5.974e24, rel=3e-4)


def test_a_model_without_quality_has_no_other_period():
    model = EarthModel("plain", (Layer(0.0, 6.371e6, (5500.0,), {"p": (9e3,), "s": (5e3,)}),), "made up")
    assert at_period(model, 1.0) is model
    with pytest.raises(InputError, match="period: plain has no quality factors, so it is the same at 200 s"):
        at_period(model, 200.0)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"period": 0.05}, "period: must be 0.1 to 100000 s, got 0.05"),
        ({"period": 2e5}, "period: must be 0.1 to 100000 s, got 200000"),
        ({"period": float("nan")}, "got nan"),
        ({"period": True}, "period: must be 0.1 to 100000 s, got True"),
        ({"crust": "ocean"}, "crust: no crust 'ocean'. Did you mean oceanic"),
    ],
)
def test_what_is_refused(arguments, words):
    with pytest.raises(InputError, match=words):
        prem(**arguments)


def test_every_crust_has_its_own_name_and_words():
    models = [prem(crust=crust) for crust in CRUSTS]
    assert len({model.name for model in models}) == len({model.source for model in models}) == 5
    assert prem(period=200.0).name == "prem_200s"
