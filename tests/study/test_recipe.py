"""The study file: what it may say, and every problem at once with its line."""

import re

import pytest

from massfingerprint.errors import MissingFileError, StudyError, TableError
from massfingerprint.study.inputs import read_study
from massfingerprint.study.recipe import GridChoice, MassChoice, OutputChoice, Recipe, SiteChoice
from tests.study.conftest import STUDY, write_inputs


def problems(path):
    with pytest.raises(StudyError) as caught:
        read_study(path)
    assert str(caught.value).splitlines()[1:] == list(caught.value.problems)
    return [re.sub(r"^.*study\.toml: ", "", line) for line in caught.value.problems]


def changed(tmp_path, old, new):
    assert old in STUDY
    return write_inputs(tmp_path, STUDY.replace(old, new, 1))


def test_a_sound_file(study_file):
    recipe, inputs = read_study(study_file)
    assert recipe.title == "Small study"
    assert recipe.mass.file == study_file.parent / "mass.csv"
    assert recipe.output.folder == study_file.parent / "out"
    assert recipe.windows["=later"] == ("2008-01-01", "2013-01-01")
    assert inputs.ledger["source"].values.tolist() == inputs.outlines["source"].tolist()
    assert inputs.sites["site"].tolist()[1] == "=1+1"


def test_defaults(tmp_path):
    path = write_inputs(tmp_path, 'title = "t"\n[mass]\nfile = "mass.csv"\n[sites]\nfile = "sites.csv"\n')
    recipe, inputs = read_study(path)
    assert (recipe.grid.spacing, recipe.grid.max_degree, recipe.earth.rotation) == (0.25, 512, True)
    assert inputs.windows == {"whole record": ("2003-01-01", "2013-01-01")}
    assert len(inputs.outlines) == 3


def test_all_problems_of_a_file_are_listed_at_once_in_order_of_lines(tmp_path):
    text = """titel = "t"
[mass]
file = "mas.csv"
quantity = "cum"
colour = 3
[sites]
[grid]
spacing = 0.7
max_degree = "a"
[earth]
rotation = 1
model = "perm"
[[windows]]
name = "a"
start = 2003-01-01
end = 2002-01-01
[[windows]]
nam = "b"
[output]
fields = ["sea"]
interval = "80 %"
figure_formats = []
[gird]
"""
    found = problems(write_inputs(tmp_path, text))
    lines = [int(re.match(r"line (\d+)", one).group(1)) for one in found]
    assert lines == sorted(lines) == [1, 1, 3, 4, 5, 6, 8, 9, 11, 12, 13, 17, 20, 21, 22, 23]
    assert [one for one in found if not re.search(r"[.?]$", one)] == []
    assert "[gird]: unknown table or key. Did you mean grid?" in found[-1]
    assert "no Earth 'perm'. Did you mean prem?" in found[9]


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('title = "Small study"', "title = 3", "line 1: title: must be text in quotes, got 3"),
        ('title = "Small study"', 'title = ""', "line 1: title: must be text in quotes, got ''"),
        ('file = "mass.csv"', 'file = "sites.csv"', "line 4: .*sites.csv: lacks the column"),
        ('"glaciers_01"]', '"glaciers_02"]', "line 6: .regions. no outline for 'glaciers_01'. Did you mean glaciers_02"),
        ('"glaciers_01"]', '"glaciers_1"]', "line 7: .regions. builtin: no region 'glaciers_1'. Did you mean glaciers_1"),
        ('"greenland", ', '"greenland", "greenland", ', "line 7: .regions. builtin: names one entry more than once"),
        ('"greenland", ', '"greenland", "greenland_west", ', "line 6: .regions. no mass for outline 'greenland_west'"),
        ('builtin = ["greenland", ', 'builtin = "greenland" # ["', "line 7: .regions. builtin: must be a list"),
        ("spacing = 3.0", "spacing = 0.01", "line 10: .grid. spacing: must be a number of degrees from 0.05 to 10"),
        ("max_degree = 16", "max_degree = 5000", "line 11: .grid. max_degree: must be 4096 or less, got 5000"),
        ("max_degree = 16", "max_degree = true", "line 11: .grid. max_degree: must be a whole number of 2 or more"),
        ('file = "sites.csv"', 'file = "mass.csv"', "line 14: .*lacks the columns site, lat, lon"),
        ("start = 2003-01-01", 'start = "soon"', "line 16: .*windows.. start: must be a date such as 2003-01-01, got 'soon'"),
        ("end = 2013-01-01", "end = 2003-06-01", "line 16: .*3 of 3 sources have too few values for a rate from 2003-01-01 to"),
        ('name = "=later"', 'name = "all years"', "line 21: .*'all years' stands there twice"),
        ('interval = "90 %"', "since = 2007-01-01", "line 28: .output. since: 'glaciers_01' has no value at 2007-01-01; its near"),
        ("maps = false", 'folder = ""', "line 27: .output. folder: must be text in quotes"),
        ("[output]", '[regions2]', "line 26: .regions2.: unknown table or key. Did you mean regions"),
        ('file = "mass.csv"', 'file = "mass.csv"\ndrop = ["greenlan"]', "line 4: scope: 'greenlan' is not among the sources"),
        ("[output]", "[rates]\nseasonal = true\n[output]", "too few values for a rate and a yearly cycle"),
    ],
)  # fmt: skip
def test_one_problem_names_its_line_and_its_cure(tmp_path, old, new, words):
    found = problems(changed(tmp_path, old, new))
    assert any(re.search(words, one) for one in found), found


def test_a_table_written_as_a_value(tmp_path):
    path = write_inputs(tmp_path, 'title = "t"\nmass = 1\nsites = {file = "sites.csv"}\nwindows = 3\n')
    found = problems(path)
    assert "line 2: mass: must be a table" in found[0]
    assert "line 4: windows: write each as [[windows]]" in found[1]


def test_ice_that_would_count_twice_is_refused(tmp_path):
    path = write_inputs(tmp_path)
    mass = (tmp_path / "mass.csv").read_text().replace("glaciers_01", "glaciers_05")
    (tmp_path / "mass.csv").write_text(mass)
    assert any("'greenland' and 'glaciers_05' both cover" in one for one in problems(path))


def test_mass_that_stays_on_land_is_refused(tmp_path):
    path = write_inputs(tmp_path)
    lines = (tmp_path / "mass.csv").read_text().splitlines()
    share = [f"{line},{0.5 if 'glaciers_01' in line else ''}" for line in lines[1:]]
    (tmp_path / "mass.csv").write_text("\n".join([f"{lines[0]},ocean_reaching_fraction", *share]))
    assert any("ocean_reaching_fraction: of 'glaciers_01' is below 1" in one for one in problems(path))


def test_own_outlines_stand_beside_the_built_in_ones(tmp_path):
    shape = {"type": "Polygon", "coordinates": [[[-150, 60], [-140, 60], [-140, 63], [-150, 63], [-150, 60]]]}
    path = changed(tmp_path, ', "glaciers_01"]', ']\noutlines = ["own.geojson"]\nname_field = "label"')
    import json  # noqa: PLC0415

    feature = {"type": "Feature", "properties": {"label": "glaciers_01"}, "geometry": shape}
    (tmp_path / "own.geojson").write_text(json.dumps({"type": "FeatureCollection", "features": [feature]}))
    _, inputs = read_study(path)
    assert inputs.outlines["source"].tolist() == ["greenland", "west_antarctica", "glaciers_01"]
    assert inputs.outlines.geometry.iloc[2].bounds == (-150.0, 60.0, -140.0, 63.0)


def test_files_that_cannot_be_read_at_all(tmp_path):
    with pytest.raises(MissingFileError, match="no such file"):
        read_study(tmp_path / "study.toml")
    (tmp_path / "study.toml").write_text("title = ")
    with pytest.raises(TableError, match="not valid TOML"):
        read_study(tmp_path / "study.toml")


def test_a_recipe_made_in_python_is_held_to_the_same(study_file):
    base = study_file.parent
    recipe = Recipe(
        title="In Python",
        mass=MassChoice(file=base / "mass.csv"),
        sites=SiteChoice(file=base / "sites.csv"),
        grid=GridChoice(spacing=2.0, max_degree=16),
        windows={"early": ("1990-01-01", "1991-01-01")},
        output=OutputChoice(maps=False, since="2007-01-01"),
    )
    with pytest.raises(StudyError, match="recipe: 2 problems") as caught:
        read_study(recipe)
    assert "since" in caught.value.problems[0]
    assert "'early'" in caught.value.problems[1]
