"""What the service says of itself is true: schemas, OpenAPI, the reference page."""

import json

import pytest
from jsonschema import Draft202012Validator

from service import samples
from service.schemas import reading, runs
from tests.http.serving import LINE


@pytest.fixture(scope="module")
def description(client):
    answer = client.get("/api/v1/openapi.json")
    assert answer.headers["content-type"].startswith("application/vnd.oai.openapi+json")
    return answer.json()


@pytest.mark.parametrize("name", ["problem", "result"])
def test_the_schemas_are_json_schema_2020_12(client, name):
    schema = client.get(f"/api/v1/schema/{name}.json").json()
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    Draft202012Validator.check_schema(schema)


def test_samples_and_examples_are_problems(client):
    validator = Draft202012Validator(client.get("/api/v1/schema/problem.json").json())
    for document in [LINE, *map(samples.load, samples.names()), *validator.schema["examples"]]:
        validator.validate(document)
    assert not validator.is_valid({**LINE, "colour": "red"})


def test_results_are_results(client, line, post):
    validator = Draft202012Validator(client.get("/api/v1/schema/result.json").json())
    validator.validate(client.get(line["links"]["result"]).json())
    broken = post({**LINE, "constraints": ["integral(sqrt(1 + y'^2)) <= 3.2"]}, prefer="wait=60").json()
    validator.validate(client.get(broken["links"]["result"]).json())


@pytest.mark.parametrize(
    ("model", "ask"),
    [
        (runs.Run, lambda client, line, post: client.get(line["links"]["self"])),
        (runs.RunPage, lambda client, line, post: client.get("/api/v1/runs?limit=1")),
        (reading.ReadingDocument, lambda client, line, post: post(LINE, "/api/v1/check?necessary=true")),
        (runs.ProblemDetails, lambda client, line, post: post({})),
        (runs.ProblemDetails, lambda client, line, post: client.get("/api/v1/runs?limit=0")),
        (runs.Readiness, lambda client, line, post: client.get("/readyz")),
    ],
)
def test_answers_have_the_shape_that_is_described(client, line, post, model, ask):
    answer = ask(client, line, post).json()
    model.model_validate(answer, strict=True)
    assert set(answer) <= set(model.model_fields)


def test_the_description_is_openapi_3_2(description):
    assert description["openapi"] == "3.2.0"
    text = json.dumps(description)
    for reference in {part.split('"')[0] for part in text.split('"$ref": "')[1:]}:
        at = description
        for step in reference.removeprefix("#/").split("/"):
            at = at[step]


def test_every_operation_is_explained(description):
    operations = [operation for path in description["paths"].values() for operation in path.values()]
    assert len({operation["operationId"] for operation in operations}) == len(operations)
    for operation in operations:
        assert operation["summary"]
        assert operation["description"]
        assert operation["tags"]


def test_documents_are_described_with_their_failures(description):
    for path in ("/api/v1/runs", "/api/v1/check"):
        operation = description["paths"][path]["post"]
        assert operation["requestBody"]["content"]["application/json"]["schema"] == {
            "$ref": "#/components/schemas/Document"
        }
        assert {"400", "413", "415", "422", "403", "406"} <= set(operation["responses"])
    assert "text/event-stream" in description["paths"]["/api/v1/runs/{id}/events"]["get"]["responses"]["200"]["content"]


def test_the_reference_page_shows_every_operation_and_needs_nothing_from_outside(client, description):
    page = client.get("/reference").text
    for path, methods in description["paths"].items():
        assert path in page
        for operation in methods.values():
            assert f'id="{operation["operationId"]}"' in page
    assert "http://" not in page.replace("http://www.w3.org", "")
    assert "https://" not in page
