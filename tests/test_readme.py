"""README is true: its Python runs as printed, its two commands are where CI looks for them."""

import re
import subprocess
import sys
from pathlib import Path

import pytest

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
