"""The Earth asked for by one word: built in, a table of layers, a table of Love numbers."""

import numpy as np
import pytest

from massfingerprint.earth.choice import ChosenEarth
from massfingerprint.earth.love import love_numbers
from massfingerprint.earth.models import MODELS
from massfingerprint.earth.table import earth_model_table
from massfingerprint.errors import InputError
from massfingerprint.files.tables import csv_text


@pytest.fixture
def love_file(tmp_path):
    table = love_numbers(max_degree=30).to_dataframe().reset_index()
    (tmp_path / "love.csv").write_text(csv_text(table), encoding="utf-8")
    return str(tmp_path / "love.csv")


@pytest.fixture
def layer_file(tmp_path):
    (tmp_path / "layers.csv").write_text(csv_text(earth_model_table(MODELS["five_layer"].make())), encoding="utf-8")
    return str(tmp_path / "layers.csv")


def test_a_name(love):
    assert ChosenEarth().love_numbers(max_degree=20).identical(love_numbers(max_degree=20))
    assert str(ChosenEarth("prem", 200.0)) == "prem at 200 s"
    soft = ChosenEarth("prem", 200.0).love_numbers(max_degree=5)
    assert float(soft["k_load"][2]) < float(love["k_load"][2])


def test_a_table_of_layers(layer_file):
    found = ChosenEarth(layer_file).love_numbers(max_degree=10)
    direct = love_numbers("five_layer", max_degree=10)
    np.testing.assert_allclose(found["h_load"], direct["h_load"], rtol=1e-6, atol=1e-9)


def test_a_table_of_love_numbers_and_how_it_goes_on(love_file, love):
    chosen = ChosenEarth(love_file, love_frame="CE")
    assert chosen.model() is None
    within = chosen.love_numbers(max_degree=20)
    np.testing.assert_allclose(within["k_load"], love["k_load"][:21], rtol=0, atol=1e-12)
    beyond = chosen.love_numbers(max_degree=60)
    last = {name: float(beyond[name][30]) for name in ("h_load", "l_load", "k_load")}
    assert float(beyond["h_load"][60]) == pytest.approx(last["h_load"], rel=1e-12)
    assert float(beyond["l_load"][60]) == pytest.approx(last["l_load"] / 2.0, rel=1e-12)
    assert float(beyond["k_load"][60]) == pytest.approx(last["k_load"] / 2.0, rel=1e-12)
    assert "beyond degree 30 h', n l' and n k' stay" in beyond.attrs["source"]


def test_choices_that_do_not_go_together(love_file, layer_file):
    cases = [
        (ChosenEarth("moon"), "earth: no Earth named 'moon'"),
        (ChosenEarth("prem", love_frame="CF"), "only a table of Love numbers has one"),
        (ChosenEarth(layer_file, love_frame="CF"), "only a table of Love numbers has one"),
        (ChosenEarth(love_file), "Name one of CE, CM, CF"),
        (ChosenEarth(love_file, 20.0, "CE"), "are what they are"),
        (ChosenEarth(layer_file, 20.0), "has no quality factors"),
        (ChosenEarth("five_layer", 20.0), "has no quality factors"),
        (ChosenEarth("nowhere.csv"), "nowhere.csv"),
    ]
    for chosen, words in cases:
        with pytest.raises((InputError, OSError), match=words):
            chosen.love_numbers(max_degree=10)
