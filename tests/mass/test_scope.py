"""The same ice is never counted twice."""

import numpy as np
import pytest

from massfingerprint.errors import InputError
from massfingerprint.mass.published import published_rates, published_sets
from massfingerprint.mass.scope import check_scope, corrections, ledger_scopes, pieces, scope_choices
from tests.mass.ledgers import make_ledger

NUMBERED = [f"glaciers_{n:02d}" for n in range(1, 20)]
SECTORS = ["greenland_north", "greenland_northeast", "greenland_east", "greenland_southeast", "greenland_southwest"]
SECTORS += ["greenland_west", "greenland_northwest"]


def test_the_parts_of_a_sheet_are_the_sheet():
    assert frozenset().union(*(pieces(name) for name in SECTORS)) == pieces("greenland")
    parts = ("east_antarctica", "west_antarctica", "antarctic_peninsula")
    assert frozenset().union(*(pieces(name) for name in parts)) == pieces("antarctica")
    assert sum(len(pieces(name)) for name in parts) == len(pieces("antarctica"))


def test_periphery_is_the_glacier_region():
    assert pieces("greenland") - pieces("greenland", "without periphery") == pieces("glaciers_05")
    assert pieces("antarctica") - pieces("antarctica", "without periphery") == pieces("glaciers_19")
    assert pieces("glaciers") - pieces("glaciers", "without 05 and 19") == pieces("glaciers_05") | pieces("glaciers_19")


@pytest.mark.parametrize(
    ("sources", "scopes"),
    [
        (["greenland", "antarctica", *NUMBERED[:4], *NUMBERED[5:18]], {}),
        (["greenland", "antarctica", *NUMBERED], {"greenland": "without periphery", "antarctica": "without periphery"}),
        (["greenland", "antarctica", "glaciers"], {"glaciers": "without 05 and 19"}),
        ([*SECTORS, "west_antarctica_amundsen", "west_antarctica_siple", "my own basin"], {}),
        (["glaciers"], {}),
    ],
)
def test_sets_that_do_not_overlap(sources, scopes):
    assert check_scope(sources, scopes=scopes) == sources


@pytest.mark.parametrize(
    ("sources", "scopes", "message"),
    [
        (
            ["greenland", "greenland_west"],
            {},
            r"'greenland' and 'greenland_west' both cover greenland_west, sheet: it would count",
        ),
        (
            ["glaciers_05", "greenland"],
            {},
            r"'glaciers_05' and 'greenland' both cover .*, or set the scope of 'greenland' to 'without periphery' if",
        ),
        (
            ["west_antarctica", "antarctica"],
            {},
            r"'west_antarctica' and 'antarctica' both cover west_antarctica_amundsen, sheet",
        ),
        (["west_antarctica", "glaciers_19"], {}, r"'west_antarctica' and 'glaciers_19' both cover"),
        (["glaciers", "glaciers_07"], {}, r"'glaciers' and 'glaciers_07' both cover glaciers_07"),
        (["glaciers", "greenland"], {}, r"'glaciers' and 'greenland' both cover"),
        (["glaciers", "glaciers_05"], {}, r"or set the scope of 'glaciers' to 'without 05 and 19' if its record"),
        (["glaciers_global", "glaciers_01"], {}, r"'glaciers_global' and 'glaciers_01' both cover glaciers_01"),
        (["Greenland", "greenland"], {}, r"'Greenland' and 'greenland' both cover greenland_east, sheet"),
        (["glaciers 5", "glaciers_05"], {}, r"'glaciers 5' and 'glaciers_05' both cover greenland_east, periphery"),
        (["antarctica", "glaciers_20"], {}, r"'antarctica' and 'glaciers_20' both cover .*, sheet: it would"),
        (
            ["gravimetry", "glaciers_05"],
            {"gravimetry": "greenland"},
            r"'gravimetry' and 'glaciers_05' both cover .* scope of 'gravimetry' to 'greenland without periphery' if",
        ),
        (["mine", "greenland"], {"mine": "greenland_west"}, r"'mine' and 'greenland' both cover greenland_west, sheet"),
        (["mine"], {"mine": "greenlnd with periphery"}, r"'mine' names no known region: .* Did you mean greenland"),
        (["greenland"], {"greenland": "antarctica"}, r"scope: of 'greenland' must be with periphery, .*'antarctica'"),
        (["glaciers_07"], {"glaciers_07": "half"}, r"scope: of 'glaciers_07' must be empty, got 'half'"),
        (["greenland"], {"greenland": 5.0}, r"scope: of 'greenland' must be words such as 'without periphery', got 5"),
        (["greenland", "greenland"], {}, r"'greenland' stands there twice"),
        (["mine", "mine"], {}, r"'mine' stands there twice"),
        (["greenland"], {"greenland": "all of it"}, r"scope: of 'greenland' must be with periphery, without periphery"),
        (
            ["glaciers_01"],
            {"glaciers_01": "without periphery"},
            r"only for ice sheets and their parts, not for 'glaciers_01'",
        ),
        (["greenland"], {"greenland": "without 05 and 19"}, r"only for 'glaciers', not for 'greenland'"),
        (["greenland"], {"antarctica": "with periphery"}, r"'antarctica' is not among the sources greenland"),
    ],
)
def test_double_counting_is_refused_by_name(sources, scopes, message):
    with pytest.raises(InputError, match=message):
        check_scope(sources, scopes=scopes)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"sources": "greenland"}, r"sources: must be a list of names of mass sources, got 'greenland'"),
        ({"sources": 5}, r"sources: must be a list of names of mass sources, got 5"),
        ({"sources": ["greenland", ""]}, r"sources: must be a list of names"),
        ({"sources": ["greenland"], "drop": "greenland"}, r"drop: must be a list of names"),
        ({"sources": ["greenland"], "drop": ["greenland"]}, r"drop: leaves none of the sources greenland"),
        ({"sources": ["greenland"], "scopes": ["greenland"]}, r"scopes: must map a source to its scope"),
    ],
)
def test_odd_arguments(arguments, message):
    with pytest.raises(InputError, match=message):
        check_scope(**arguments)


def test_spelling_of_a_region_does_not_matter():
    assert pieces(" West Antarctica") == pieces("west_antarctica")
    assert pieces("Glaciers-7") == pieces("glaciers_07")
    assert pieces("altimetry", "west_antarctica without periphery") == pieces("west_antarctica", "without periphery")
    assert pieces("greenland", "greenland without periphery") == pieces("greenland", "without periphery")
    assert pieces("Mine") == {"Mine"}


def test_choices_in_words():
    sources = ["greenland", "glaciers_05", "antarctica", "west_antarctica", "altimetry"]
    scopes = {"greenland": "without periphery", "altimetry": "glaciers_19", "antarctica": "without periphery"}
    assert scope_choices(sources, scopes=scopes, drop=["west_antarctica"]) == [
        "west_antarctica is left out.",
        "greenland counts as greenland without periphery.",
        "antarctica counts as antarctica without periphery.",
        "altimetry counts as glaciers_19.",
    ]
    assert scope_choices(["greenland"]) == []
    with pytest.raises(InputError, match=r"both cover"):
        scope_choices(["greenland", "glaciers_05"])


def test_an_explicit_choice_resolves():
    assert check_scope(["greenland", "greenland_west"], drop=["greenland_west"]) == ["greenland"]
    with pytest.raises(InputError, match=r"'iceland' is not among the sources"):
        check_scope(["greenland"], drop=["iceland"])


def test_every_published_set_counts_its_ice_once():
    for name in published_sets()["set"]:
        rates = published_rates(name)
        scopes = {source: scope for source, scope in zip(rates["source"], rates["scope"], strict=True) if scope}
        assert check_scope(list(rates["source"]), scopes=scopes) == list(rates["source"])


def test_columns_that_later_steps_read():
    ledger = make_ledger([1.0], {"greenland": {}, "antarctica": {}})
    assert ledger_scopes(ledger) == {}
    assert corrections(ledger) == {"greenland": ("unknown", "unknown"), "antarctica": ("unknown", "unknown")}
    ledger = ledger.assign(
        scope=("source", ["without periphery", ""]),
        gia_removed=("source", ["model A", "none"]),
        grounding_netted=("source", [1, 0]),
    )
    assert ledger_scopes(ledger) == {"greenland": "without periphery"}
    assert corrections(ledger)["greenland"] == ("model A", "netted (gravimetry)")
    assert corrections(ledger)["antarctica"] == ("none", "not netted (altimetry, input-output)")
    with pytest.raises(InputError, match=r"grounding_netted: of 'greenland' must be 1"):
        corrections(ledger.assign(grounding_netted=("source", [2, 0])))


def _column(cells):
    return ("source", np.array(cells, dtype=object))


def test_cells_left_empty_by_joining_are_unknown():
    ledger = make_ledger([1.0], {"greenland": {}, "antarctica": {}})
    ledger = ledger.assign({name: _column([None, np.nan]) for name in ("scope", "gia_removed", "grounding_netted")})
    assert ledger_scopes(ledger) == {}
    assert set(corrections(ledger).values()) == {("unknown", "unknown")}


@pytest.mark.parametrize("cell", ["gravimetry", 0.5, 2, "yes"])
def test_netting_must_be_one_of_three(cell):
    ledger = make_ledger([1.0], {"greenland": {}, "antarctica": {}}).assign(grounding_netted=_column([1.0, cell]))
    with pytest.raises(InputError, match=rf"grounding_netted: of 'antarctica' must be 1 .*got '{cell}'"):
        corrections(ledger)
