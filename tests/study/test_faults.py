"""Whole processes that are killed, interrupted, or meet each other: the old folder or a complete new one, nothing between."""

import signal
import subprocess
import sys
import time

import numpy as np
import pytest

from massfingerprint.cli import main
from massfingerprint.study.folder import SUMMARY_TEXT, read_folder
from tests.study.conftest import STUDY, write_inputs

RUN = [sys.executable, "-m", "massfingerprint", "study"]


def state(folder):
    """Title of a study folder that is complete; None if it is not there."""
    if not folder.exists():
        return None
    read_folder(folder).patterns()
    return (folder / SUMMARY_TEXT).read_text(encoding="utf-8").splitlines()[0]


def wait_for(condition, process, seconds=30.0):
    end = time.monotonic() + seconds
    while not condition() and process.poll() is None and time.monotonic() < end:
        time.sleep(0.01)


@pytest.mark.slow
def test_killed_at_thirty_random_moments(tmp_path):
    path = write_inputs(tmp_path / "s")
    folder = path.parent / "out"
    start = time.monotonic()
    assert subprocess.run([*RUN, str(path)], capture_output=True, check=False).returncode == 0
    whole = time.monotonic() - start
    rng, seen = np.random.default_rng(7), {"killed": 0, "done": 0}
    title = "Small study"
    for number in range(30):
        path.write_text(STUDY.replace("Small study", f"Study {number}"), encoding="utf-8")
        process = subprocess.Popen([*RUN, str(path), "--replace"], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        time.sleep(rng.uniform(0.3, 1.05) * whole)
        process.kill()
        done = process.wait() == 0
        seen["done" if done else "killed"] += 1
        now = state(folder)
        # killed after the swap, before the end of the process: already the new one
        assert now in ((f"Study {number}",) if done else (title, f"Study {number}"))
        title = now
    assert seen["killed"] >= 10, seen
    assert main(["study", str(path), "--replace", "--quiet"]) == 0
    assert state(folder) == "Study 29"
    assert sorted(p.name for p in path.parent.iterdir() if p.name.startswith(".out") and p.name != ".out.lock") == []


@pytest.mark.slow
def test_an_interrupt_says_what_is_kept(tmp_path):
    path = write_inputs(
        tmp_path / "s", STUDY.replace("spacing = 3.0", "spacing = 0.5").replace("max_degree = 16", "max_degree = 256")
    )
    kept = path.parent / "massfingerprint-cache"
    process = subprocess.Popen([*RUN, str(path)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    wait_for(lambda: kept.exists() and any(kept.iterdir()), process)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=60)
    assert process.returncode == 130, err
    assert out == ""
    assert "stopped; the folder is as it was. Solved patterns are kept in massfingerprint-cache" in err
    assert "Traceback" not in err
    assert not (path.parent / "out").exists()


@pytest.mark.slow
def test_the_second_of_two_runs_into_one_folder_is_refused(tmp_path, capsys):
    path = write_inputs(
        tmp_path / "s", STUDY.replace("spacing = 3.0", "spacing = 0.5").replace("max_degree = 16", "max_degree = 256")
    )
    process = subprocess.Popen([*RUN, str(path)], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    wait_for(lambda: list(path.parent.glob(".out.new-*")), process)
    assert main(["study", str(path), "--replace"]) == 1
    assert "another run is writing it" in capsys.readouterr().err
    assert process.wait(timeout=120) == 0
    assert state(path.parent / "out") == "Small study"
