"""The pages as a browser without script uses them: links, form posts, 303."""

import html
import re

import pytest

from service import samples
from tests.http.serving import LINE

FORM = {"content-type": "application/x-www-form-urlencoded", "accept": "text/html"}


def test_the_home_page_leads_to_every_sample(client):
    page = client.get("/").text
    for name in samples.names():
        assert f'href="/compose?sample={name}"' in page
        assert client.get(f"/compose?sample={name}").status_code == 200


@pytest.mark.parametrize("view", ["form", "json"])
def test_a_sample_fills_the_composer_and_is_read_back(client, view):
    page = client.get("/compose", params={"sample": "hose", "view": view}).text
    assert "Hanging shape of a hose of 4.2 m" in page
    assert "<math" in page
    assert "ready to solve" in page


def test_a_problem_is_composed_solved_and_found_again(client, until):
    page = client.get("/compose?sample=hose").text
    answer = client.post("/compose", data={**_fields(page), "do": "solve"}, headers={"accept": "text/html"})
    assert answer.status_code == 303
    run = answer.headers["location"]
    assert client.get(run).status_code == 200
    until(lambda: client.get(f"/api/v1{run}").json()["state"] == "finished")
    result = client.get(run).text
    assert "<svg" in result
    assert "Hanging shape of a hose of 4.2 m" in result
    assert f'href="{run}"' in client.get("/runs").text
    again = client.get("/compose", params={"run": run.rpartition("/")[2]}).text
    assert "Hanging shape of a hose of 4.2 m" in again


def test_a_table_is_pasted_solved_and_drawn(client, until):
    fields = _fields(client.get("/compose?sample=lens-rod").text)
    assert fields["tables.0.of"] == "r in mm"
    pasted = fields | {"tables.0.points": "-2\t1.57\r\n0\t1.62\r\n2\t1.57"}
    checked = client.post("/compose", data={**pasted, "do": "check"}).text
    assert "n(r): 3 points, r from -2 mm to 2 mm; smooth between" in checked
    assert checked.count("plot-dot line-2") == 3 + 1  # and one in the legend
    answer = client.post("/compose", data={**pasted, "do": "solve"}, headers={"accept": "text/html"})
    run = answer.headers["location"]
    until(lambda: client.get(f"/api/v1{run}").json()["state"] == "finished")
    result = client.get(run).text
    assert "Measured tables" in result
    assert "n is used for r from -0.5 to 0.8 mm; it was measured from -2 to 2 mm." in html.unescape(result)


def test_a_wrong_point_is_told_at_the_points(client):
    fields = _fields(client.get("/compose?sample=lens-rod").text) | {"tables.0.points": "0 1\n2 3\n1 2"}
    page = client.post("/compose", data={**fields, "do": "check"}).text
    assert 'href="#tables.0.points"' in page
    assert "“r” does not increase: 1 comes after 2." in page


def test_a_sample_is_solved_with_one_click(client):
    answer = client.post("/compose", data={"sample": "hose", "do": "solve"})
    assert answer.status_code == 303
    assert answer.headers["location"].startswith("/runs/")


def test_a_mistake_comes_back_beside_its_field_with_all_that_was_typed(client):
    fields = _fields(client.get("/compose?sample=hose").text) | {"title": "My <own> hose"}
    name = next(name for name, value in fields.items() if value == "y(0) = 2")
    answer = client.post("/compose", data={**fields, name: "y(0) = 2 *", "do": "solve"})
    assert answer.status_code == 422
    assert "y(0) = 2 *" in answer.text
    assert "My &lt;own&gt; hose" in answer.text
    assert f'href="#{name}"' in answer.text
    checked = client.post("/compose", data={**fields, name: "y(0) = 2 *", "do": "check"})
    assert checked.status_code == 200


def test_checking_shows_the_necessary_conditions(client):
    fields = _fields(client.get("/compose?sample=hose").text)
    page = client.post("/compose", data={**fields, "do": "check"}).text
    assert "Euler" in page


def test_a_running_run_has_a_page_with_a_button_that_stops_it(client, post, slow_document, until):
    run = post(slow_document).json()
    page = client.get(run["links"]["page"])
    assert page.status_code == 200
    stop = re.search(r'action="(/runs/[^"]+/stop)"', page.text)[1]
    answer = client.post(stop, data={})
    assert (answer.status_code, answer.headers["location"]) == (303, run["links"]["page"])
    until(lambda: client.get(run["links"]["self"]).json()["state"] not in ("waiting", "solving"))
    assert client.get(run["links"]["page"]).status_code == 200
    answer = client.post(f"{run['links']['page']}/delete", data={})
    assert (answer.status_code, answer.headers["location"]) == (303, "/runs")
    assert client.get(run["links"]["page"]).status_code == 404


def test_the_result_page_shows_the_table_that_was_asked_for(client, line):
    page = client.get(line["links"]["page"], params={"rows": "4"}).text
    assert f"{line['links']['self']}/table.csv?rows=4" in html.unescape(page)


def test_a_page_of_an_ended_run_is_cheap_to_ask_again(client, line):
    tag = client.get(line["links"]["page"]).headers["etag"]
    assert client.get(line["links"]["page"], headers={"if-none-match": tag}).status_code == 304


def test_the_list_is_paged_and_filtered(client, line):
    assert line["links"]["page"] in client.get("/runs?state=finished").text
    assert line["links"]["page"] not in client.get("/runs?state=failed").text
    assert client.get("/runs?state=lost").status_code == 422
    assert client.get("/runs?verdict=good").status_code == 422
    found = client.get("/runs", params={"q": line["title"].upper(), "verdict": line["verdict"]}).text
    assert line["links"]["page"] in found
    assert line["links"]["page"] in client.get("/runs?q=&verdict=").text  # as the form sends it when it is empty
    assert line["links"]["page"] not in client.get("/runs?q=no+such+title").text
    assert client.get("/runs?after=nonsense").status_code == 422


def test_a_form_with_too_many_fields_is_refused(client):
    body = "&".join(f"a{number}=1" for number in range(6000))
    assert client.post("/compose", content=body, headers=FORM).status_code == 400


def test_a_title_with_markup_stays_text(client, post):
    run = post({**LINE, "title": "<script>alert(1)</script>"}, prefer="wait=60").json()
    for address in ("/runs", "/", run["links"]["page"], f"/compose?run={run['id']}"):
        page = client.get(address).text
        assert "<script>alert" not in page
        assert "&lt;script&gt;alert(1)&lt;/script&gt;" in page


def _fields(page):
    """The fields of the composer as a browser would send them."""
    form = re.search(r'<form id="composer".*?</form>', page, re.DOTALL)[0]
    fields = {}
    for tag in re.findall(r"<input[^>]*>", form):
        name = re.search(r'name="([^"]*)"', tag)
        if name:
            value = re.search(r'value="([^"]*)"', tag)
            fields[name[1]] = html.unescape(value[1]) if value else ""
    for name, text in re.findall(r'<textarea[^>]*name="([^"]*)"[^>]*>(.*?)</textarea>', form, re.DOTALL):
        fields[name] = html.unescape(text).removeprefix("\n")
    for name, options in re.findall(r'<select[^>]*name="([^"]*)"[^>]*>(.*?)</select>', form, re.DOTALL):
        value = r'<option value="([^"]*)"'
        chosen = re.search(value + " selected", options) or re.search(value, options)
        fields[name] = html.unescape(chosen[1])
    return fields
