"""A small study that runs in a second, and the folder it leaves."""

import pytest

from massfingerprint.study.run import run_study

RATES = {
    "greenland": (-200.0, "random_walk"),
    "west_antarctica": (-100.0, "systematic"),
    "glaciers_01": (-60.0, "independent"),
}
STUDY = """title = "Small study"

[mass]
file = "mass.csv"

[regions]
builtin = ["greenland", "west_antarctica", "glaciers_01"]

[grid]
spacing = 3.0
max_degree = 16

[sites]
file = "sites.csv"

[[windows]]
name = "all years"
start = 2003-01-01
end = 2013-01-01

[[windows]]
name = "=later"
start = 2008-01-01
end = 2013-01-01

[output]
maps = false
interval = "90 %"
"""
SITES = "site,lat,lon\nÉcluse d'été,53.9,8.7\n=1+1,-33.9,151.2\n<script>alert(1)</script>,40.7,-74.0\n"


def mass_table():
    rows = ["time,source,mass_change [Gt],mass_change_sigma [Gt],error_model,citation"]
    for source, (rate, model) in RATES.items():
        for year in range(11):
            if (source, year) != ("glaciers_01", 4):
                sigma = {"random_walk": 5.0 * year**0.5, "systematic": 3.0 * year, "independent": 8.0 + year}[model]
                rows.append(f"{2003 + year}-01-01,{source},{rate * year - 0.5 * year**2!r},{sigma!r},{model},invented")
    return "\n".join(rows) + "\n"


def write_inputs(folder, study=STUDY):
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "mass.csv").write_text(mass_table(), encoding="utf-8")
    (folder / "sites.csv").write_text(SITES, encoding="utf-8")
    (folder / "study.toml").write_text(study, encoding="utf-8")
    return folder / "study.toml"


@pytest.fixture
def study_file(tmp_path):
    """Study file with its inputs, in a folder with blanks and letters beyond ASCII in its name."""
    return write_inputs(tmp_path / "méine Studie")


@pytest.fixture(scope="session")
def done(tmp_path_factory):
    """The small study, run once; nobody may change its folder."""
    return run_study(write_inputs(tmp_path_factory.mktemp("small study")))
