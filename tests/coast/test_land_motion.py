"""The rule against counting land motion twice, and both paths to the same sum."""

import numpy as np
import pytest

from massfingerprint.coast.land_motion import (
    Tie,
    Uplift,
    check_together,
    residual_land_motion,
    whole_land_motion,
)
from massfingerprint.errors import InputError


def test_both_paths_give_the_same_sum_where_the_elastic_windows_agree():
    """Sea surface 1.2, elastic uplift 0.7, rebound: sea surface -0.1, uplift 0.9; 0.4 of subsidence nobody explains."""
    elastic, rebound, rest = 0.7, 0.9, -0.4
    gnss = Uplift(rate=elastic + rebound + rest, sigma=0.3)
    residual = residual_land_motion(gnss, Uplift(rate=elastic, sigma=0.1), Uplift(rate=rebound, sigma=0.2))
    path_a = (1.2 - elastic) + (-0.1 - rebound) - residual.rate
    path_b = 1.2 + -0.1 - whole_land_motion(gnss).rate
    assert residual.rate == pytest.approx(rest)
    assert path_a == pytest.approx(path_b)
    assert residual.sigma == pytest.approx(np.sqrt(0.3**2 + 0.1**2 + 0.2**2))


def test_another_window_of_the_receiver_takes_off_its_own_elastic_part():
    """The receiver measured in years of more loss: its elastic part, 0.9, is taken off, the pattern keeps the gauge's 0.5."""
    gnss = Uplift(rate=0.9 - 0.4, sigma=0.1)
    residual = residual_land_motion(gnss, Uplift(rate=0.9, sigma=0.0), Uplift(rate=0.0, sigma=0.0))
    assert residual.rate == pytest.approx(-0.4)


def test_the_way_to_the_gauge_adds_to_the_error():
    tie = Tie(distance=25.0, levelling_sigma=0.3, sigma_per_100_km=0.8)
    assert tie.sigma == pytest.approx(np.hypot(0.3, 0.4))
    still = Uplift(rate=0.0, sigma=0.0)
    assert residual_land_motion(still, still, still, tie=tie).sigma == pytest.approx(tie.sigma)
    assert whole_land_motion(Uplift(rate=1.0, sigma=1.2), tie=tie).sigma == pytest.approx(1.3)


def test_a_mix_is_refused():
    good = {
        "Greenland": "mass, relative sea level",
        "rebound": "GIA, relative sea level",
        "land": "residual land motion",
    }
    assert check_together({**good, "heat": "steric and dynamic"}) == "A"
    assert check_together({"Greenland": "mass, sea surface", "land": "whole land motion"}) == "B"
    assert check_together({"heat": "steric and dynamic"}) is None
    with pytest.raises(
        InputError, match=r"'Greenland' \(mass, relative sea level\) belongs to path A, 'land' \(whole land motion\)"
    ):
        check_together({**good, "land": "whole land motion"})
    with pytest.raises(InputError, match="together land motion counts twice or not at all"):
        check_together({**good, "deep": "mass, sea surface"})
    with pytest.raises(InputError, match="kind of 'x': no kind of term 'tilt'"):
        check_together({"x": "tilt"})


def test_faults_have_their_line():
    fine = Uplift(rate=1.0, sigma=0.1)
    with pytest.raises(InputError, match="rebound: is in CE, the receiver in CM"):
        residual_land_motion(fine, fine, Uplift(rate=1.0, sigma=0.1, reference_frame="CE"))
    with pytest.raises(InputError, match=r"sigma: must be 0 to 500 mm/yr, got -0.1"):
        Uplift(rate=1.0, sigma=-0.1)
    with pytest.raises(InputError, match="rate: must be a number of mm/yr"):
        Uplift(rate=np.nan, sigma=0.1)
    with pytest.raises(InputError, match="distance: must be 0 to 1000 km"):
        Tie(distance=-1.0)
