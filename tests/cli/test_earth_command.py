"""``massfingerprint earth``."""

import pytest

from massfingerprint.cli import main


def test_prints_love_numbers(capsys, love):
    assert main(["earth", "--degrees", "1,2,10"]) == 0
    captured = capsys.readouterr()
    rows = [line.split() for line in captured.out.splitlines()]
    assert rows[0] == ["degree", "h_load", "l_load", "k_load", "h_tide", "l_tide", "k_tide"]
    assert [row[0] for row in rows[1:]] == ["1", "2", "10"]
    assert float(rows[2][3]) == pytest.approx(float(love["k_load"][2]), abs=5e-9)
    assert "Degree 1 in CE" in captured.err


def test_frame(capsys, love):
    assert main(["earth", "--degrees", "1", "--frame", "CM"]) == 0
    assert float(capsys.readouterr().out.split()[-4]) == -1.0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--degrees", "1,two"], "--degrees: must be whole numbers of 0 or more separated by commas, got 'two'"),
        (["--degrees", "-1"], "got '-1'"),
        (["--degrees", ""], "got ''"),
        (["--model", "moon"], "model: no Earth named 'moon'"),
        (["--frame", "XX"], "frame: no frame 'XX'"),
    ],
)
def test_wrong_input(arguments, message, capsys):
    assert main(["earth", *arguments]) == 1
    captured = capsys.readouterr()
    assert message in captured.err
    assert captured.err.count("\n") == 1


@pytest.mark.parametrize("command", [[], ["earth"], ["sites"]])
def test_help(command, capsys):
    assert main([*command, "--help"]) == 0
    text = capsys.readouterr().out
    assert "Usage: massfingerprint" in text
    if command:
        assert "Example: massfingerprint" in text
