"""Tables that a spreadsheet cannot be made to run."""

import numpy as np
import pandas as pd
import pytest

from massfingerprint.errors import MissingFileError, TableError
from massfingerprint.files.tables import csv_text, read_plain_csv

NAMES = [
    "=1+1",
    "+cmd",
    "-2",
    "@SUM(A1)",
    "\tx",
    "<script>alert(1)</script>",
    "Écluse d'été",
    'a "b", c',
    "'quoted",
    "plain",
]


def test_formulas_are_disarmed_numbers_are_not_and_all_comes_back(tmp_path):
    table = pd.DataFrame(
        {"site": NAMES, "value": np.linspace(-1.0, 1.0, len(NAMES)) / 3.0, "=head": np.arange(len(NAMES)) + 0.5}
    )
    text = csv_text(table)
    for line in text.splitlines()[1:]:
        assert not line.lstrip('"').startswith(("=", "+", "-", "@", "\t"))
    assert text.splitlines()[0] == "site,value,'=head"
    assert ",-0.333" in text
    (tmp_path / "t.csv").write_text(text, encoding="utf-8")
    back = read_plain_csv(tmp_path / "t.csv", numeric=("value", "=head", "'=head"))
    pd.testing.assert_frame_equal(back, table, check_exact=True, check_dtype=False)
    assert table["site"].tolist() == NAMES


def test_what_is_no_table_is_refused(tmp_path):
    with pytest.raises(MissingFileError, match="no such file"):
        read_plain_csv(tmp_path / "t.csv", numeric=("a",))
    for content in (b"", b"\xff\xfe\xfa", b'a,b\n1,2,3,4\n"', b"a\nx\n"):
        (tmp_path / "t.csv").write_bytes(content)
        with pytest.raises(TableError, match="cannot be read as a table"):
            read_plain_csv(tmp_path / "t.csv", numeric=("a",))
