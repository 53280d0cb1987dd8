"""Figures of a study: which, where, in which formats; drawn by two processes or by one, the same bytes."""

import re

import pytest

from massfingerprint.errors import FolderError
from massfingerprint.study import drawing
from massfingerprint.study.drawing import Job, draw_all
from massfingerprint.study.folder import study_tables
from massfingerprint.study.pictures import pictures
from massfingerprint.study.run import run_study
from tests.study.conftest import STUDY, write_inputs


@pytest.fixture(scope="module")
def drawn(tmp_path_factory):
    """One source, one site: six figures, here enough for two processes."""
    text = STUDY.replace("maps = false", 'maps = true\nfigure_formats = ["svg"]').replace(
        ', "west_antarctica", "glaciers_01"]', "]"
    )
    path = write_inputs(tmp_path_factory.mktemp("drawn"), text)
    lines = (path.parent / "mass.csv").read_text(encoding="utf-8").splitlines()
    kept = [line for line in lines if "glaciers" not in line and "antarctica" not in line]
    (path.parent / "mass.csv").write_text("\n".join(kept), encoding="utf-8")
    (path.parent / "sites.csv").write_text("site,lat,lon\nÉcluse d'été,53.9,8.7\n", encoding="utf-8")
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(drawing, "_FEW", 2)
        return run_study(path)


def test_every_figure_in_the_format_asked_for(drawn):
    folder = drawn.folder / "figures"
    names = ["maps/all_sources", "maps/greenland", "mass_record",
             *(f"sites/ecluse-d-ete_{kind}" for kind in ("in_time", "overview", "per_gigatonne"))]  # fmt: skip
    assert sorted(str(p.relative_to(folder)) for p in folder.rglob("*.*")) == [f"{name}.svg" for name in names]


def test_every_figure_carries_the_caution_and_maps_what_is_not_in_them(drawn):
    for path in (drawn.folder / "figures").rglob("*.svg"):
        words = " ".join(re.sub(r"<[^>]*>", " ", path.read_text(encoding="utf-8")).split())
        assert "For screening only" in words, path.name
        if path.parent.name == "maps":
            assert "ocean dynamics" in words
            assert "PREM, degree 16, rotation on" in words


def test_one_process_draws_what_two_draw(drawn, tmp_path):
    """The figures of the second process are there bit for bit when this one draws them all."""
    jobs = [
        Job(draw, given, tmp_path / name, ("svg",))
        for name, draw, given in pictures(drawn, study_tables(drawn))
        if "overview" in name or "greenland" in name
    ]
    draw_all(jobs, progress=lambda *_: None)
    for path in tmp_path.rglob("*.svg"):
        assert path.read_bytes() == (drawn.folder / "figures" / path.relative_to(tmp_path)).read_bytes(), path.name
    assert len(list(tmp_path.rglob("*.svg"))) == 2


def test_no_figures_when_none_are_wanted(done):
    assert not (done.folder / "figures").exists()


def test_a_second_process_that_fails_is_told(tmp_path):
    jobs = [Job(int, {"x": "no number"}, tmp_path / "f" / f"{n}", ("png",)) for n in range(1)]
    with pytest.raises(FolderError, match="the process that draws them ended early"), drawing._second(jobs) as finished:
        list(finished)


def test_nothing_to_draw_is_no_error(tmp_path):
    draw_all([], progress=lambda *_: None)
