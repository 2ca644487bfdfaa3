"""The JSON Schema: it is one, it accepts what is read and refuses what is refused at stage schema."""

import jsonschema
import pytest

from service.spec.schema import EXAMPLES, problem_schema
from tests.corpus.refused.entries import BASES, entries

VALIDATOR = jsonschema.Draft202012Validator(problem_schema())


def test_it_is_a_schema_of_draft_2020_12():
    jsonschema.Draft202012Validator.check_schema(problem_schema())
    assert problem_schema()["$schema"] == "https://json-schema.org/draft/2020-12/schema"


@pytest.mark.parametrize("document", [*EXAMPLES, *BASES.values()])
def test_it_accepts_what_is_read(document):
    VALIDATOR.validate(document)


def test_it_refuses_what_the_stage_refuses():
    import json

    beyond_a_schema = {"no-functional", "no-sweep"}  # one of two members: said in words only
    for entry in entries():
        if entry.stage == "schema" and entry.code not in beyond_a_schema:
            assert not VALIDATOR.is_valid(json.loads(entry.body)), entry.name


@pytest.mark.parametrize("part", ["UnknownPart", "ParameterPart", "IndependentPart", "FunctionalPart", "SolvePart"])
def test_every_part_is_described(part):
    assert problem_schema()["$defs"][part]["description"]
