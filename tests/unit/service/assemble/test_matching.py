"""Matchings against an exhaustive search, and Hall's condition."""

from itertools import permutations

from hypothesis import given, settings
from hypothesis import strategies as st

from service.assemble.matching import Matching

WANTS = st.lists(st.lists(st.sampled_from("abcde"), max_size=4, unique=True), max_size=5)


def _largest(wants):
    """The size of a largest matching, by trying every order of the supplies."""
    return max(
        sum(supply in wanted for supply, wanted in zip(order, wants, strict=True))
        for order in permutations("abcde", len(wants))
    )


@settings(deadline=None)
@given(WANTS)
def test_the_matching_is_largest(wants):
    matching = Matching(wants)
    assert len(matching.serves) == _largest(wants) == len(wants) - len(matching.unmet)
    assert all(supply in wants[demand] for supply, demand in matching.serves.items())


@settings(deadline=None)
@given(WANTS)
def test_what_goes_without_belongs_to_a_set_that_wants_too_little(wants):
    matching = Matching(wants)
    for demand in matching.unmet:
        together = matching.too_much(demand)
        assert demand in together
        assert len({supply for index in together for supply in wants[index]}) < len(together)


@settings(deadline=None)
@given(WANTS)
def test_a_supply_is_spare_if_and_only_if_all_can_be_served_without_it(wants):
    spare = Matching(wants).spare("abcde")
    for supply in "abcde":
        without = [[other for other in wanted if other != supply] for wanted in wants]
        assert (_largest(without) == _largest(wants)) == (supply in spare)
