"""Every setting of a run is told in words, with an option that the command line knows."""

from commandline import call
from smallrun import small_run

from bnx.coding import MISSING
from bnx.independence import TESTS
from bnx.recipe import ADJUSTMENTS
from bnx.setting_words import setting_rows


def test_every_setting_has_an_option_of_bnx_learn() -> None:
    known = call("learn", "--help").out
    for row in setting_rows(small_run().comparison["settings"]):
        assert row.option in known, row
        assert row.words


def test_values_are_told_in_words() -> None:
    told = {
        row.option: row.value
        for row in setting_rows({"adjust": "bh", "keep": [], "ignore": ["a", "b"], "mix": True, "group": ""})
    }
    assert told == {
        "--adjust": "bh: Benjamini and Hochberg, false-discovery rate",
        "--keep": "none",
        "--ignore": "a, b",
        "--mix": "yes",
        "--group": "none",
    }


def test_every_choice_is_told_in_more_than_its_own_word() -> None:
    for key, choices in (("adjust", ADJUSTMENTS), ("missing", MISSING), ("test", TESTS)):
        for choice in choices:
            assert len(setting_rows({key: choice})[0].value) > len(choice) + 2, (key, choice)
