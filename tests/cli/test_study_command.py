"""``massfingerprint study`` and ``explain`` as a user types them."""

import json
import os
import subprocess
import sys

import pytest

from massfingerprint.cli import main
from tests.study.conftest import STUDY, write_inputs


@pytest.fixture
def study_file(tmp_path):
    return write_inputs(tmp_path / "my study")


def test_summary_on_stdout_talk_on_stderr(study_file, capsys):
    assert main(["study", str(study_file)]) == 0
    out, err = capsys.readouterr()
    assert out.startswith("Small study\n")
    assert out == (study_file.parent / "out" / "summary.txt").read_text(encoding="utf-8")
    assert "solving patterns: 3 of 3" in err
    assert f"Written to {study_file.parent / 'out'}" in err
    assert "For screening only" in out


def test_quiet_verbose_and_json(study_file, capsys):
    assert main(["study", str(study_file), "--quiet", "--json"]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert json.loads(out)["windows"][0]["sites"][0]["site"] == "Écluse d'été"
    assert main(["study", str(study_file), "--verbose", "--replace"]) == 0
    err = capsys.readouterr().err
    assert "patterns taken from kept ones: 3 of 3" in err
    assert all(stage in err for stage in ("reading", "preparation", "patterns", "sites", "files"))


def test_check_says_what_will_be_done_and_does_nothing(study_file, capsys):
    before = sorted(study_file.parent.iterdir())
    assert main(["study", str(study_file), "--check"]) == 0
    out = capsys.readouterr().out
    for words in (
        "3 sources, 11 times",
        "60 x 120 cells",
        "degree 16",
        "Memory: about",
        "Time: about",
        "nothing was run",
    ):
        assert words in out
    assert sorted(study_file.parent.iterdir()) == before


def test_problems_one_a_line_and_exit_1(tmp_path, capsys):
    path = write_inputs(tmp_path, STUDY.replace("spacing = 3.0", "spacin = 3.0").replace('"mass.csv"', '"nowhere.csv"'))
    for extra in ([], ["--check"]):
        assert main(["study", str(path), *extra]) == 1
        out, err = capsys.readouterr()
        assert out == ""
        lines = err.splitlines()
        assert lines[0].endswith("2 problems, nothing was run.")
        assert "line 4: [mass] file: there is no file" in lines[1]
        assert "line 10: [grid] spacin: unknown key. Did you mean spacing?" in lines[2]
        assert len(lines) == 3


def test_a_folder_that_is_there(study_file, capsys):
    assert main(["study", str(study_file), "--quiet"]) == 0
    assert main(["study", str(study_file), "--quiet"]) == 1
    assert "is there already. Use --replace" in capsys.readouterr().err


def test_a_damaged_kept_pattern_is_said(study_file, capsys):
    assert main(["study", str(study_file), "--quiet"]) == 0
    entry = next((study_file.parent / "massfingerprint-cache").iterdir())
    entry.write_bytes(entry.read_bytes()[:-1])
    assert main(["study", str(study_file), "--replace"]) == 0
    assert f"{entry.name}: is damaged" in capsys.readouterr().err


def test_explain(study_file, capsys):
    assert main(["study", str(study_file), "--quiet"]) == 0
    folder = str(study_file.parent / "out")
    capsys.readouterr()
    number = "site-rate:relative_sea_level:all-years:ecluse-d-ete:greenland"
    assert main(["explain", folder, number]) == 0
    out = capsys.readouterr().out
    wanted = ("mean rate of relative sea level at Écluse d'été from greenland", "= -per_gigatonne_lost * mass_rate", "mass.csv",
              "id per-gigatonne:relative_sea_level:ecluse-d-ete:greenland", "sha256", "random_walk", "screening")  # fmt: skip
    for words in (number, *wanted):
        assert words in out, words
    assert main(["explain", folder, "mass-rate:all-years:greenland", "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert len(found["inputs"][1]["value"]) == 11
    assert main(["explain", folder, "mass-rate:all-years:greenlan"]) == 1
    assert "Did you mean greenland" in capsys.readouterr().err
    assert main(["explain", str(study_file.parent), "x:y"]) == 1
    assert "is not the folder of a study, it lacks provenance.json" in capsys.readouterr().err


@pytest.mark.parametrize("name", ["study", "explain", "ledger", "sites", "earth"])
def test_every_help_has_a_unit_and_an_example(name, capsys):
    assert main([name, "--help"]) == 0
    out = capsys.readouterr().out
    assert "Example: massfingerprint" in out
    assert any(unit in out for unit in ("mm", "Gt", "degree", "units", "PREM"))


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_completion_for_a_shell(shell):
    """click's own protocol: the script for the shell, and the words it asks for."""
    run = [sys.executable, "-c", "from massfingerprint.cli import entry; entry()"]
    variable = "_MASSFINGERPRINT_COMPLETE"
    script = subprocess.run(
        run, env={**os.environ, variable: f"{shell}_source"}, capture_output=True, text=True, check=False
    )
    if shell == "bash" and script.returncode:  # click asks the shell for its version
        assert "bash" in script.stderr.casefold()
    else:
        assert variable in script.stdout
    asked = {
        **os.environ,
        variable: f"{shell}_complete",
        "COMP_WORDS": "massfingerprint st",
        "COMP_CWORD": "1" if shell != "fish" else "st",
    }
    words = subprocess.run(run, env=asked, capture_output=True, text=True, check=False).stdout
    assert "study" in words
