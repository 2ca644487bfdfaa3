"""The samples are what a newcomer sees first: each is accepted, solved, and comes out with a good verdict."""

from __future__ import annotations

from pathlib import Path

import pytest

from service import samples
from tests.acceptance.records import Sort
from tests.acceptance.solving import solve_document

PLACE = Path(samples.__file__).parent


def test_every_file_is_named_and_every_name_has_its_file():
    assert {path.stem for path in PLACE.glob("*.json")} == set(samples.names())


@pytest.mark.parametrize("name", samples.names())
def test_a_sample_explains_itself(name):
    document = samples.load(name)
    assert document["title"]
    assert document["notes"]
    assert samples.ABOUT[name].endswith(".")
    assert all(unknown.get("about") for unknown in document["unknowns"].values())


@pytest.mark.parametrize("name", samples.names())
def test_a_sample_comes_out_with_a_good_verdict(name):
    outcome = solve_document(PLACE / f"{name}.json")
    sort = Sort.MAXIMUM if samples.load(name).get("functional", {}).get("seek") == "maximum" else Sort.MINIMUM
    assert outcome.verdict in sort.value, outcome
    assert outcome.value_error <= 1e-4 * abs(outcome.value)


def test_an_unknown_sample_is_a_key_error():
    with pytest.raises(KeyError, match="nobody"):
        samples.load("nobody")
