"""Runs through a real server with real workers: start, wait, read, list, stop, delete."""

import json
import uuid

import pytest

from tests.http.serving import LINE, LINE_VALUE

RUNS = "/api/v1/runs"


def test_waiting_gives_the_finished_run(line):
    assert line["state"] == "finished"
    assert line["verdict"] in ("global minimum", "local minimum")
    assert line["value"] == pytest.approx(LINE_VALUE, abs=max(line["value_error"], 1e-12))
    assert line["value_unit"] == "m"
    assert line["title"] == LINE["title"]
    assert line["finished"] >= line["created"]


def test_every_link_of_a_finished_run_leads_somewhere(client, line):
    for name, address in line["links"].items():
        assert client.get(address).status_code == 200, name


def test_without_preference_the_answer_comes_at_once(client, post, until):
    answer = post(LINE)
    assert answer.status_code == 202
    assert answer.headers["retry-after"].isdigit()
    assert "preference-applied" not in answer.headers
    run = answer.headers["location"]
    assert client.get(run).json()["id"] == answer.json()["id"]
    until(lambda: client.get(run).json()["state"] == "finished")


@pytest.mark.parametrize(
    ("prefer", "status", "applied"),
    [
        ("wait=60", 201, "wait=60"),
        ("respond-async, wait=60", 201, "wait=60"),  # at hand only if it took longer (RFC 7240, section 4.3)
        ("respond-async", 202, "respond-async"),
        ("wait=0", 202, "wait=0"),
        ("WAIT = 60; foo=1 , bar", 201, "wait=60"),  # names in any case, unknown ones ignored
        ("wait=100000", 201, "wait=60"),  # cut at the longest wait granted
        ("wait=soon", 202, None),  # cannot be read: ignored
    ],
)
def test_preferences(post, prefer, status, applied):
    answer = post(LINE, prefer=prefer)
    assert answer.status_code == status
    assert answer.headers.get("preference-applied") == applied


def test_return_representation_gives_the_result_document(client, post):
    answer = post(LINE, prefer="wait=60, return=representation")
    assert answer.status_code == 201
    assert answer.headers["preference-applied"] == "wait=60, return=representation"
    assert answer.headers["location"] == f"{RUNS}/{answer.json()['id']}"
    assert answer.json() == client.get(answer.headers["content-location"]).json()


def test_a_repeated_key_starts_nothing_twice(client, post):
    key = f'"{uuid.uuid4()}"'
    first = post(LINE, prefer="wait=60", idempotency_key=key)
    again = post(LINE, prefer="wait=60", idempotency_key=key)
    assert (first.status_code, again.status_code) == (201, 200)
    assert again.json() == first.json()
    assert again.headers["location"] == first.headers["location"]


def test_a_key_with_and_without_quotes_is_the_same(post):
    key = str(uuid.uuid4())
    assert post(LINE, idempotency_key=key).json()["id"] == post(LINE, idempotency_key=f'"{key}"').json()["id"]


def test_a_key_for_another_document_is_refused(post):
    key = str(uuid.uuid4())
    post(LINE, idempotency_key=key)
    answer = post({**LINE, "title": "Another"}, idempotency_key=key)
    assert answer.status_code == 422
    assert answer.json()["type"] == "/problems/idempotency-key"


def test_equal_documents_have_equal_hashes_and_runs_of_their_own(post, line):
    shuffled = json.dumps(dict(reversed(LINE.items())), indent=3).encode()
    run = post(shuffled, prefer="wait=60").json()
    assert run["problem_hash"] == line["problem_hash"]
    assert run["id"] != line["id"]


def test_the_result_holds_the_exact_curve_in_the_users_units(client, line):
    result = client.get(line["links"]["result"]).json()
    assert result["id"] == line["id"]
    assert result["problem"] == LINE
    assert result["curve"]["units"]["y"] == "m"
    arc = result["curve"]["arcs"][0]
    assert arc["breaks"][0] == 0
    assert arc["breaks"][-1] == 3
    first = arc["functions"]["y"][0]
    assert sum(c * (-1) ** k for k, c in enumerate(first)) == pytest.approx(0, abs=1e-9)


def test_a_result_is_kept_for_ever_and_not_sent_twice(client, line):
    answer = client.get(line["links"]["result"])
    assert "immutable" in answer.headers["cache-control"]
    again = client.get(line["links"]["result"], headers={"if-none-match": answer.headers["etag"]})
    assert again.status_code == 304
    assert again.content == b""
    assert again.headers["etag"] == answer.headers["etag"]


def test_a_run_is_cheap_to_ask_again(client, line):
    address = line["links"]["self"]
    tag = client.get(address).headers["etag"]
    assert client.get(address, headers={"if-none-match": f'"x", W/{tag}'}).status_code == 304
    assert client.get(address, headers={"if-none-match": '"x"'}).status_code == 200


def test_the_problem_comes_back_as_it_was_sent(client, post):
    sent = json.dumps(LINE, indent=5).encode()
    run = post(sent).json()
    assert client.get(run["links"]["problem"]).content == sent


def test_the_list_is_walked_by_its_links_without_gap_or_repeat(client, post):
    posted = [post(LINE, prefer="wait=60").json()["id"] for _ in range(5)]
    seen, address = [], f"{RUNS}?limit=2"
    while address:
        answer = client.get(address)
        seen += [run["id"] for run in answer.json()["runs"]]
        if len(seen) == 2:
            post(LINE)  # comes in meanwhile, and must not shift anything
        address = answer.json()["next"]
        link = answer.links.get("next", {}).get("url")
        assert link == address
    assert len(seen) == len(set(seen))
    assert [id for id in seen if id in posted] == posted[::-1]


def test_the_list_can_be_limited_to_a_state(client, line):
    runs = client.get(RUNS, params={"state": "finished", "limit": 200}).json()["runs"]
    assert line["id"] in [run["id"] for run in runs]
    assert {run["state"] for run in runs} == {"finished"}
    assert client.get(RUNS, params={"state": "stopped", "limit": 1}).json()["next"] is None


def test_the_list_can_be_limited_to_a_verdict_and_a_title(client, line, post):
    other = post({**LINE, "title": "A Very Different Title"}, prefer="wait=60").json()
    found = client.get(RUNS, params={"title": "very different", "verdict": other["verdict"], "limit": 1}).json()
    assert [run["id"] for run in found["runs"]] == [other["id"]]
    assert client.get(RUNS, params={"title": "very different", "verdict": "infeasible"}).json()["runs"] == []
    post({**LINE, "title": "a very different one"}, prefer="wait=60")
    first = client.get(RUNS, params={"title": "very different", "limit": 1}).json()
    assert "title=very+different" in first["next"]
    assert [run["id"] for run in client.get(first["next"]).json()["runs"]] == [other["id"]]


@pytest.mark.parametrize(
    "query",
    [
        "limit=0",
        "limit=1000",
        "limit=many",
        "state=lost",
        "verdict=good",
        f"title={'x' * 201}",
        "after=nonsense",
        "filter=x",
    ],
)
def test_a_list_that_cannot_be_had_says_why(client, query):
    answer = client.get(f"{RUNS}?{query}")
    assert answer.status_code == 422
    assert answer.json()["type"] == "/problems/parameters"
    assert query.partition("=")[0] in answer.json()["detail"]


def test_a_run_is_stopped_in_the_middle(client, post, slow_document, until):
    run = post(slow_document).json()
    until(lambda: client.get(run["links"]["self"]).json()["state"] == "solving")
    assert client.get(f"{run['links']['self']}/result").json()["type"] == "/problems/unfinished"
    answer = client.post(run["links"]["cancel"])
    assert answer.status_code in (200, 202)
    stopped = until(lambda: (now := client.get(run["links"]["self"]).json())["state"] == "stopped" and now)
    assert "cancel" not in stopped["links"]
    again = client.post(run["links"]["cancel"])
    assert (again.status_code, again.json()["state"]) == (200, "stopped")


def test_a_deleted_run_is_gone(client, post):
    run = post(LINE, prefer="wait=60").json()
    assert client.delete(run["links"]["self"]).status_code == 204
    for address in run["links"].values():
        assert client.get(address).status_code == 404, address
    assert client.delete(run["links"]["self"]).status_code == 404


def test_a_deleted_run_is_not_solved_any_longer(client, post, slow_document, until):
    run = post(slow_document).json()
    until(lambda: client.get(run["links"]["self"]).json()["state"] == "solving")
    client.delete(run["links"]["self"])
    until(lambda: _free(client) == 2)


def test_an_infeasible_problem_is_a_finished_run(client, post):
    document = {**LINE, "constraints": ["integral(sqrt(1 + y'^2)) <= 3.2"]}  # the chord alone is 3.6 m
    answer = post(document, prefer="wait=60")
    assert answer.status_code == 201
    assert answer.json()["state"] == "finished"
    assert answer.json()["verdict"] == "infeasible"
    result = client.get(answer.json()["links"]["result"]).json()
    found = {finding["pointer"]: finding for finding in result["diagnosis"]["findings"]}
    assert found.keys() == {"/constraints/0", "/endpoints/0", "/endpoints/1"}  # without any one of them it would do
    assert found["/constraints/0"]["amount"] == pytest.approx(13**0.5 - 3.2, rel=1e-4)
    assert found["/constraints/0"]["unit"] == "m"


def test_what_nothing_determines_is_part_of_the_result(client, post):
    document = {**LINE, "unknowns": {"y": {"unit": "m"}, "z": {"unit": "m^2"}}, "dynamics": ["z' = y"]}
    answer = post(document, prefer="wait=60").json()
    result = client.get(answer["links"]["result"]).json()
    assert result["verdict"] == "global minimum"
    (found,) = result["undetermined"]
    assert (found["name"], found["pointer"], found["where"]) == ("z", "/unknowns/z", None)
    assert found["sentence"] in result["reading"]["notes"]
    page = client.get(answer["links"]["page"]).text
    assert "Nothing determines <code>z</code>" in page


def test_check_reads_back_and_keeps_nothing(client, post):
    before = len(client.get(f"{RUNS}?limit=200").json()["runs"])
    answer = post(LINE, "/api/v1/check")
    assert answer.status_code == 200
    assert answer.json()["unknowns"][0]["name"] == "y"
    assert "necessary" not in answer.json()
    assert len(client.get(f"{RUNS}?limit=200").json()["runs"]) == before


def test_check_derives_the_necessary_conditions_on_request(post):
    reading = post(LINE, "/api/v1/check?necessary=true").json()
    assert reading["necessary"][0]["for"] == "y"
    assert reading["necessary"][0]["mathml"].startswith("<math")


def _free(client):
    found = [
        row for row in client.get("/metrics").text.splitlines() if row.startswith('curvewright_slots{kind="free"}')
    ]
    return float(found[0].split()[-1])
