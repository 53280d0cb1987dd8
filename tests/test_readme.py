"""README is true: its Python runs as printed, its two commands are where CI looks for them."""

import re
import shlex
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from massfingerprint.cli import main
from massfingerprint.study.recipe import read_structure

TOP = Path(__file__).parent.parent
README = (TOP / "README.md").read_text(encoding="utf-8")


def blocks(language):
    return re.findall(rf"^```{language}\n(.*?)^```", README, flags=re.MULTILINE | re.DOTALL)


def test_the_python_example_runs_and_means_what_it_says(monkeypatch, capsys):
    monkeypatch.chdir(TOP)
    names = {}
    for block in blocks("python"):
        exec(compile(block, "README.md", "exec"), names)  # noqa: S102  the text under test
    here = names["here"].sel(source="greenland") * -169.0
    assert "Hudson estuary pier" in capsys.readouterr().out
    # 169 Gt a year of Greenland: 0.2 mm a year at the Hudson, a fall in Iceland
    assert float(here.sel(site="Hudson estuary pier")) == pytest.approx(0.20, abs=0.02)
    assert float(here.sel(site="Reykjanes breakwater")) < -0.5


def test_two_commands_of_one_line_each():
    commands = blocks("bash")
    assert len(commands) == 2
    assert all(command.count("\n") == 1 and command.startswith("python3 -m venv .venv && ") for command in commands)
    assert "massfingerprint study data_small/demo_study.toml" in commands[0]
    assert commands[1].rstrip().endswith("pytest")


@pytest.mark.slow
def test_the_table_of_ratios_is_printed():
    done = subprocess.run(
        [sys.executable, "-m", "tests.timings.measure", "--repeats", "1"],
        capture_output=True,
        text=True,
        check=True,
        cwd=TOP,
    )
    rows = [line for line in done.stdout.splitlines() if " s " in line]
    assert len(rows) >= 12
    assert all(float(re.search(r"(\d+\.\d+) s", row).group(1)) > 0 for row in rows)
    print(done.stdout)


COMMANDS = [c for c in re.findall(r"`(massfingerprint [^`]+)`", README.replace("\n", " ")) if "FOLDER" not in c]


def test_the_commands_in_the_text_are_found():
    names = {command.split()[1] for command in COMMANDS}
    assert {"study", "explain", "ledger", "sites", "earth", "--help"} <= names


@pytest.mark.slow
def test_every_command_in_the_text_runs(tmp_path, monkeypatch, capsys):
    """In an empty folder with the demonstration beside it, and the names that README uses for a user's own files."""
    shutil.copytree(
        TOP / "data_small", tmp_path / "data_small", ignore=shutil.ignore_patterns("out", "massfingerprint-cache")
    )
    monkeypatch.chdir(tmp_path)
    own = {"mass.csv": "demo_mass.csv", "yours.csv": "coasts.csv", "demo_mass.csv": "demo_mass.csv"}
    for name, source in (own | {"demo_harbours.csv": "demo_harbours.csv", "STUDY.toml": "demo_study.toml"}).items():
        shutil.copy(tmp_path / "data_small" / source, tmp_path / name)
    first = shlex.split(blocks("bash")[0].split(".venv/bin/massfingerprint", maxsplit=1)[1])
    assert main(first) == 0
    assert (tmp_path / "data_small" / "out" / "summary.txt").is_file()
    for command in COMMANDS:
        assert main(shlex.split(command)[1:]) == 0, command
        said = capsys.readouterr()
        assert said.out or "written" in said.err, command


def test_the_study_file_in_the_text_is_one(tmp_path):
    """Every key that README shows is known; only the user's own files are missing."""
    (tmp_path / "study.toml").write_text(blocks("toml")[0], encoding="utf-8")
    reading, _ = read_structure(tmp_path / "study.toml")
    assert sorted(re.search(r"no file .*?([^/ ]+)\. Paths", words).group(1) for _, words in reading.problems) == [
        "mass.csv",
        "own.gpkg",
        "sites.csv",
    ]
