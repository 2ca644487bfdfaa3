"""Every document of the corpus is refused at the stage, with the code and at the place that the tables say."""

import json
import time

import pytest

from service.assemble import assemble
from service.complaints import Refused
from service.spec import read
from service.units import parse_unit
from tests.corpus.refused.entries import BASES, entries

ENTRIES = entries()


@pytest.fixture(scope="module", autouse=True)
def _units_loaded():
    """Looking up the first rare unit takes half a second, once per process: not what is measured here."""
    parse_unit("furlong")


def _at(document, pointer):
    for step in pointer.split("/")[1:]:
        step = step.replace("~1", "/").replace("~0", "~")
        document = document[int(step)] if isinstance(document, list) else document[step]
    return document


@pytest.mark.parametrize("entry", ENTRIES, ids=lambda entry: entry.id)
def test_refused_where_and_as_the_table_says(entry):
    started = time.process_time()
    with pytest.raises(Refused) as refusal:
        assemble(read(entry.body))
    assert time.process_time() - started < 1.0
    found = refusal.value
    assert found.stage.value == entry.stage, found.complaints
    matching = [one for one in found.complaints if (one.code, one.pointer) == (entry.code, entry.pointer)]
    assert matching, found.complaints
    if entry.marked is not None:
        text = _at(json.loads(entry.body), entry.pointer)
        marks = [text[slice(*one.span)] for one in matching if one.span]
        assert entry.marked in marks


@pytest.mark.parametrize("entry", ENTRIES, ids=lambda entry: entry.id)
def test_every_complaint_says_what_is_wrong_and_what_would_be_right(entry):
    with pytest.raises(Refused) as refusal:
        assemble(read(entry.body))
    for complaint in refusal.value.complaints:
        assert complaint.message[0].isupper() or not complaint.message[0].isalpha()
        assert complaint.message.endswith(".")
        assert complaint.hint.endswith((".", "?", "`", '"', "…}", ")"))
        assert len(complaint.message) < 600
        if complaint.span is not None:
            start, end = complaint.span
            assert 0 <= start <= end


@pytest.mark.parametrize("name", BASES)
def test_the_documents_that_are_spoilt_are_sound(name):
    assemble(read(json.dumps(BASES[name]).encode()))


def test_the_corpus_is_large_and_has_no_name_twice():
    ids = [entry.id for entry in ENTRIES]
    assert len(ids) >= 150
    assert len(set(ids)) == len(ids)
