"""Which states lead: counted by hand on results of many cases."""

from tests.sheet_samples import many_cases, small_results
from workers.outputs.leading import (
    Extreme,
    all_states,
    governing_states,
    reaction_extremes,
    severity,
    worth_a_row,
)


def test_few_states_all_have_a_row_in_their_order() -> None:
    assert worth_a_row(small_results(), 5) == ["pull", "pull, factored"]


def test_of_many_those_that_govern_come_first_then_the_severest() -> None:
    """Case n has 100 + n, case 7 has 500; rope 3 governs all but the von Mises stress."""
    _, results = many_cases(40)
    assert worth_a_row(results, 4) == ["rope 7", "rope 3", "rope 39", "rope 38"]


def test_whatever_governs_has_a_row_even_beyond_the_limit() -> None:
    _, results = many_cases(40)
    assert set(worth_a_row(results, 1)) == {"rope 3", "rope 7"}


def test_states_know_what_they_govern() -> None:
    _, results = many_cases(10)
    assert governing_states(results)["rope 7"] == ["von_mises"]
    assert "displacement" in governing_states(results)["rope 3"]


def test_severity_is_the_share_of_strength_where_one_is_known() -> None:
    state = small_results()["cases"]["pull"]
    assert severity(state) == 100.0
    assert severity({**state, "utilisation": {"value": 0.3}}) == 0.3


def test_extremes_of_reactions_name_their_cases() -> None:
    """Reaction x of case n is -(100 + n), -500 in case 7."""
    _, results = many_cases(20)
    found = reaction_extremes(results)
    assert len(found) == 6
    assert found[:2] == [
        Extreme("left", "x", -100.0, "rope 0"),
        Extreme("left", "x", -500.0, "rope 7"),
    ]


def test_states_are_cases_then_combinations() -> None:
    assert list(all_states(small_results())) == ["pull", "pull, factored"]
