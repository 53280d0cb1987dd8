"""Earths side by side, by structure: every Earth in the legend, every coast a row, nothing over another."""

import numpy as np
import pandas as pd
import pytest

from massfingerprint.errors import InputError
from massfingerprint.figures import earths, look
from tests.figures.structure import all_words, outside, overlaps

NAMES = [f"earth_{n}_with_a_name" for n in range(8)]


@pytest.fixture
def tables():
    degree = np.arange(4097)
    rng = np.random.default_rng(4)
    return {
        name: pd.DataFrame(
            {c: -rng.random() * degree / (degree + 50.0) for c in ("h_load", "l_load", "k_load")}, index=degree
        )
        for name in NAMES
    }


@pytest.mark.parametrize("count", [8])
def test_love_curves(tables, count):
    some = dict(list(tables.items())[:count])
    with look.style():
        figure = earths.love_curves(some, title="A title", caption="Small print. " * 30)
        assert overlaps(figure) == []
        assert outside(figure) == []
    words = all_words(figure)
    assert all(name in words for name in some)
    drawn = figure.axes[1].lines[0]
    first = some[NAMES[0]]
    np.testing.assert_allclose(drawn.get_ydata(), first["l_load"].to_numpy()[1:] * np.arange(1, 4097))


@pytest.mark.parametrize("coasts", [0, 13])
def test_sensitivity(tables, coasts):
    responses = {name: pd.Series(1.0 / (np.arange(1025) + 1.0 + n)) for n, name in enumerate(NAMES[:6])}
    names = [f"a harbour number {n}" for n in range(coasts)]
    changes = pd.DataFrame(np.random.default_rng(1).normal(size=(coasts, 5)) * 0.01, index=names, columns=NAMES[1:6])
    with look.style():
        figure = earths.sensitivity(responses, changes if coasts else None, title="A title", caption="Small. " * 40)
        assert overlaps(figure) == []
        assert outside(figure) == []
    line = figure.axes[0].lines[1]
    expected = 100.0 * (responses[NAMES[1]] / responses[NAMES[0]] - 1.0)
    np.testing.assert_allclose(line.get_ydata(), expected.to_numpy()[1:])
    if coasts:
        np.testing.assert_allclose(figure.axes[1].lines[1].get_xdata(), changes[NAMES[1]])


def test_refusals(tables):
    with look.style():
        with pytest.raises(InputError, match="there is no Earth to draw"):
            earths.love_curves({}, title="t", caption="c")
        with pytest.raises(InputError, match="lacks l_load"):
            earths.love_curves({"a": tables[NAMES[0]].drop(columns="l_load")}, title="t", caption="c")
        with pytest.raises(InputError, match="at least two Earths are needed, got a"):
            earths.sensitivity({"a": pd.Series([1.0, 2.0])}, None, title="t", caption="c")
        two = {"a": pd.Series([1.0, 2.0]), "b": pd.Series([1.0, 2.0])}
        with pytest.raises(InputError, match="columns must be b, got c"):
            earths.sensitivity(two, pd.DataFrame({"c": [1.0]}), title="t", caption="c")
