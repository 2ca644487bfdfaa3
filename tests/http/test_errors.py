"""Every failure is a problem document (RFC 9457) for programs and a page for browsers."""

import json

import pytest

from service.errors import TYPES
from tests.http.serving import LINE

JSON_TYPE = "application/json"
JSON = {"content-type": JSON_TYPE}
BROWSER = {"accept": "text/html,application/xhtml+xml,application/xml;q=0.9,*/*;q=0.8"}

# How to fail: method, address, headers, body, problem type.
FAILURES = {
    "no such address": ("GET", "/api/v1/nothing", {}, b"", "not-found"),
    "no such page": ("GET", "/nothing", {}, b"", "not-found"),
    "no such run": ("GET", "/api/v1/runs/nothing", {}, b"", "not-found"),
    "no such run's page": ("GET", "/runs/nothing", {}, b"", "not-found"),
    "no such sample": ("GET", "/compose?sample=nothing", {}, b"", "not-found"),
    "no such problem type": ("GET", "/problems/nothing", {}, b"", "not-found"),
    "no such file": ("GET", "/static/nothing.css", {}, b"", "not-found"),
    "out of the folder": ("GET", "/static/%2e%2e/links.py", {}, b"", "not-found"),
    "wrong method": ("PUT", "/api/v1/runs", JSON, b"{}", "method"),
    "wrong method of a page": ("DELETE", "/compose", {}, b"", "method"),
    "unacceptable": ("GET", "/api/v1/runs", {"accept": "image/png"}, b"", "not-acceptable"),
    "no media type": ("POST", "/api/v1/runs", {}, b"{}", "media-type"),
    "a form": ("POST", "/api/v1/runs", {"content-type": "application/x-www-form-urlencoded"}, b"a=b", "media-type"),
    "JSON to a form": ("POST", "/compose", JSON, b"{}", "media-type"),
    "wrong charset": (
        "POST",
        "/api/v1/runs",
        {"content-type": "application/json; charset=latin-1"},
        b"{}",
        "media-type",
    ),
    "compressed": ("POST", "/api/v1/runs", {**JSON, "content-encoding": "gzip"}, b"{}", "media-type"),
    "empty": ("POST", "/api/v1/runs", JSON, b"", "json"),
    "not JSON": ("POST", "/api/v1/check", JSON, b"{'format': 1}", "json"),
    "NaN": ("POST", "/api/v1/check", JSON, b'{"format": NaN}', "json"),
    "beyond doubles": ("POST", "/api/v1/check", JSON, b'{"format": 1e999}', "json"),
    "not UTF-8": ("POST", "/api/v1/check", JSON, b'{"title": "\xff"}', "json"),
    "two members of a name": ("POST", "/api/v1/check", JSON, b'{"format": 1, "format": 1}', "json"),
    "nested deeply": ("POST", "/api/v1/check", JSON, b"[" * 100_000, "json"),
    "no object": ("POST", "/api/v1/check", JSON, b"[]", "schema"),
    "no problem": ("POST", "/api/v1/check", JSON, b"{}", "schema"),
    "too large": ("POST", "/api/v1/check", JSON, b" " * 300_000, "too-large"),
    "bad key": ("POST", "/api/v1/runs", {**JSON, "idempotency-key": '""'}, json.dumps(LINE).encode(), "parameters"),
}


def _send(client, failure, **headers):
    method, address, own, body, _ = FAILURES[failure]
    return client.request(method, address, headers={**own, **headers}, content=body)


@pytest.mark.parametrize("failure", FAILURES)
def test_a_program_gets_a_problem_document(client, failure):
    answer = _send(client, failure)
    kind = TYPES[FAILURES[failure][-1]]
    assert answer.status_code == kind.status
    assert answer.headers["content-type"] == "application/problem+json"
    problem = answer.json()
    assert problem["type"] == f"/problems/{kind.name}"
    assert problem["title"] == kind.title
    assert problem["status"] == kind.status
    assert problem["detail"]


@pytest.mark.parametrize("failure", set(FAILURES) - {"unacceptable"})
def test_a_browser_gets_a_page(client, failure):
    answer = _send(client, failure, **BROWSER)
    kind = TYPES[FAILURES[failure][-1]]
    assert answer.status_code == kind.status
    assert answer.headers["content-type"] == "text/html; charset=utf-8"
    assert kind.title in answer.text
    assert f'href="/problems/{kind.name}"' in answer.text


@pytest.mark.parametrize("name", TYPES)
def test_every_problem_type_is_explained_on_a_page(client, name):
    answer = client.get(f"/problems/{name}")
    assert answer.status_code == 200
    assert TYPES[name].title in answer.text
    assert f'href="/problems/{name}"' in client.get("/problems").text


# What is wrong with a document: the change, the stage, pointer and span of the first complaint.
REFUSALS = {
    "unknown member": ({"colour": "red"}, "schema", "/colour", None),
    "unreadable formula": ({"endpoints": ["y(0) = 0", "y(3) = 2 *"]}, "formulas", "/endpoints/1", [10, 10]),
    "unknown name": ({"constraints": ["y <= h"]}, "names", "/constraints/0", [5, 6]),
    "units": ({"constants": {"m": "1 kg"}, "constraints": ["y <= m"]}, "units", "/constraints/0", [5, 6]),
}


@pytest.mark.parametrize("refusal", REFUSALS)
def test_a_refused_document_is_located(post, refusal):
    change, stage, pointer, span = REFUSALS[refusal]
    problem = post({**LINE, **change}).json()
    assert problem["stage"] == stage
    complaint = problem["complaints"][0]
    assert complaint["pointer"] == pointer
    assert complaint["message"]
    assert complaint["hint"]
    if span is not None and refusal != "unreadable formula":
        assert complaint["span"] == span


def test_all_complaints_of_a_stage_come_at_once(post):
    problem = post({**LINE, "constraints": ["y <= h", "y <= k"]}).json()
    assert [complaint["pointer"] for complaint in problem["complaints"]] == ["/constraints/0", "/constraints/1"]


def test_both_doors_refuse_alike(post):
    document = {**LINE, "constraints": ["y <= h"]}
    assert post(document).json() == post(document, "/api/v1/check").json()


def test_the_limit_holds_while_a_body_of_unknown_length_streams_in(client):
    answer = client.post("/api/v1/check", content=iter([b" " * 4096] * 1000), headers=JSON)
    assert answer.status_code == 413
    assert answer.json()["limit"] == 256 * 1024


def test_a_bug_is_answered_as_a_problem_with_all_headers(tmp_path):
    from starlette.testclient import TestClient

    from service.app import create_app
    from service.security import HEADERS
    from service.settings import Settings

    app = create_app(Settings(data=tmp_path, workers=1))

    @app.get("/broken")
    def broken():
        raise ZeroDivisionError("secret")

    with TestClient(app, base_url="http://localhost", raise_server_exceptions=False) as client:
        answer = client.get("/broken")
    assert answer.status_code == 500
    assert answer.json()["type"] == "/problems/internal"
    assert "secret" not in answer.text
    assert HEADERS.items() <= dict(answer.headers).items()
