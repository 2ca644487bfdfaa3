"""The catalogue itself is in order."""

from __future__ import annotations

import json
import re

import pytest

from tests.acceptance import controls, hybrids, suites, variations
from tests.acceptance.catalogue import CATALOGUE, KNOWN_FAILURES
from tests.acceptance.promises import owed
from tests.acceptance.records import PROBLEMS, TAGS, Sort

EVERY_CASE = pytest.mark.parametrize("case", CATALOGUE.values(), ids=CATALOGUE)


def test_ids_are_unique():
    cases = (*variations.CASES, *controls.CASES, *hybrids.CASES, *suites.CASES)
    assert len(CATALOGUE) == len(cases)


def test_every_case_has_its_document_and_every_document_its_case():
    assert {path.name for path in PROBLEMS.iterdir()} == {case.document.name for case in CATALOGUE.values()}


def test_what_is_left_out_has_a_reason_and_no_document():
    assert all(unsaid.reason and unsaid.id not in CATALOGUE for unsaid in suites.UNSAID)


@EVERY_CASE
def test_the_source_is_named(case):
    assert "closed form" in case.source or re.search(r"\b(18|19|20)\d\d\b", case.source)


@EVERY_CASE
def test_tags_are_known(case):
    assert set(case.tags) <= TAGS


@EVERY_CASE
def test_the_tolerance_is_no_tighter_than_the_published_value(case):
    if case.value is not None:
        assert case.known_to < case.allowed


@EVERY_CASE
def test_the_document_seeks_what_the_case_is(case):
    seek = json.loads(case.document.read_text()).get("functional", {}).get("seek", "minimum")
    expected = {Sort.MAXIMUM: "maximum", Sort.SUPREMUM: "maximum", Sort.STATIONARY: "stationary"}
    assert seek == expected.get(case.sort, "minimum")


@EVERY_CASE
def test_a_guess_is_tagged(case):
    assert ("guess" in json.loads(case.document.read_text())) == ("guess given" in case.tags)


def test_no_expected_failure_is_stale():
    assert all(promise in owed(CATALOGUE[id]) for id, promise in KNOWN_FAILURES)
    assert all(KNOWN_FAILURES.values())


def test_at_least_so_many_keep_all_promises():
    exceptions = {id for id, _ in KNOWN_FAILURES}
    assert len(CATALOGUE) - len(exceptions) >= 85
