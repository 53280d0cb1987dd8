"""The same ice is never counted twice."""

import pytest

from massfingerprint.errors import InputError
from massfingerprint.mass.published import published_rates, published_sets
from massfingerprint.mass.scope import check_scope, corrections, ledger_scopes, pieces
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
        (["glaciers_05", "greenland"], {}, r"'glaciers_05' and 'greenland' both cover .*, or set the sheet's scope"),
        (
            ["west_antarctica", "antarctica"],
            {},
            r"'west_antarctica' and 'antarctica' both cover west_antarctica_amundsen, sheet",
        ),
        (["west_antarctica", "glaciers_19"], {}, r"'west_antarctica' and 'glaciers_19' both cover"),
        (["glaciers", "glaciers_07"], {}, r"'glaciers' and 'glaciers_07' both cover glaciers_07"),
        (["glaciers", "greenland"], {}, r"'glaciers' and 'greenland' both cover"),
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
