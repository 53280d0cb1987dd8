"""Tables of correlation between sources."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint.errors import InputError, TableError
from massfingerprint.mass.barystatic import barystatic
from massfingerprint.mass.correlation import check_correlation, read_correlation, with_correlation
from tests.mass.ledgers import make_ledger


@pytest.fixture
def write(tmp_path):
    def make(text):
        path = tmp_path / "correlation.csv"
        path.write_text(text)
        return path

    return make


def test_read_and_used(write):
    """3 and 4 Gt with a correlation of 0.5: sqrt(9 + 16 + 12) Gt; names in another order, one more than needed."""
    table = read_correlation(write("source,b,c,a\nb,1,0,0.5\nc,0,1,0\na,0.5,0,1\n"))
    ledger = make_ledger([1.0], {"a": {"systematic": 3.0}, "b": {"systematic": 4.0}})
    tied = with_correlation(ledger, table)
    assert float(barystatic(tied)["sea_level_total_sigma"][0]) == pytest.approx(np.sqrt(37.0) / 361.8)
    assert float(barystatic(ledger)["sea_level_total_sigma"][0]) == pytest.approx(5.0 / 361.8)
    assert "source_correlation" not in ledger


@pytest.mark.parametrize(
    ("text", "error", "message"),
    [
        ("source,a,b\na,1,0\n", TableError, "must be square, rows and columns in one order; rows a, columns a, b"),
        ("source,a,b\na,1,2\nb,2,1\n", InputError, "must hold numbers between -1 and 1, got 1 to 2"),
        ("source,a,b\na,1,0.5\nb,0.4,1\n", InputError, "must be symmetric"),
        ("source,a,b\na,0.9,0\nb,0,1\n", InputError, "the diagonal must be 1"),
        (
            "source,a,b,c\na,1,0.9,-0.9\nb,0.9,1,0.9\nc,-0.9,0.9,1\n",
            InputError,
            "some sum of sources would have a negative variance",
        ),
        ("source,a,b\na,1,x\nb,0,1\n", TableError, "line 2: b is 'x', not a number"),
    ],
)
def test_other_tables_are_refused(write, text, error, message):
    with pytest.raises(error, match=message):
        read_correlation(write(text))


def test_missing_sources_and_other_layouts(write):
    ledger = make_ledger([1.0], {"a": {"systematic": 3.0}, "d": {"systematic": 4.0}})
    with pytest.raises(InputError, match="correlation: has no row for 'd'"):
        with_correlation(ledger, read_correlation(write("source,a\na,1\n")))
    with pytest.raises(InputError, match=r"must have dimensions \(source, source_other\)"):
        check_correlation(xr.DataArray(np.eye(2), dims=("x", "y")))
