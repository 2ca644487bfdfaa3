"""A problem of several arcs from end to end: its check, its page, its tables with both sides of a jump."""

import csv
import io

import pytest

from service import samples


@pytest.fixture(scope="module")
def staged(post):
    answer = post(samples.load("staged-rocket"), prefer="wait=60")
    assert answer.status_code == 201, answer.text
    return answer.json()


def test_the_result_has_the_arcs_in_order(client, staged):
    result = client.get(staged["links"]["result"]).json()
    assert result["verdict"] == "local maximum"
    arcs = result["curve"]["arcs"]
    assert [arc["name"] for arc in arcs] == ["booster", "glide", "second stage", "coast"]
    assert [arc["breaks"][-1] for arc in arcs[:-1]] == [arc["breaks"][0] for arc in arcs[1:]]
    assert [arc["name"] for arc in result["multipliers"]["costates"]["arcs"]] == [arc["name"] for arc in arcs]
    assert all(check["where"] is None or check["where"]["place"] is None or check["where"]["place"] <= 60
               for check in result["checks"])  # fmt: skip


def test_a_table_shows_both_sides_of_a_jump(client, staged):
    heading, *rows = csv.reader(io.StringIO(client.get(staged["links"]["table"]).text))
    assert heading == ["arc", "t [s]", "h [m]", "v [m/s]", "m [kg]"]
    (booster,) = [row for row in rows if row[0] == "booster" and row[1] == rows[_last(rows, "booster")][1]]
    glide = next(row for row in rows if row[0] == "glide")
    assert float(booster[1]) == float(glide[1])
    assert (float(booster[4]), float(glide[4])) == (pytest.approx(8, abs=1e-6), pytest.approx(6.8, abs=1e-6))
    assert float(booster[2]) == pytest.approx(float(glide[2]), rel=1e-9)


def _last(rows, arc):
    return max(index for index, row in enumerate(rows) if row[0] == arc)


def test_the_band_of_a_tolerance_is_told_by_arcs(client, staged):
    result = client.get(staged["links"]["result"]).json()
    (change,) = result["band"]["curve"]
    assert change["constant"] == "b"
    assert [arc["name"] for arc in change["arcs"]] == [arc["name"] for arc in result["curve"]["arcs"]]
    address = f"{staged['links']['table']}?rows=5&sigma=true"
    heading, *rows = csv.reader(io.StringIO(client.get(address).text))
    assert heading[2:4] == ["h [m]", "h sigma [m]"]
    assert float(rows[0][3]) == pytest.approx(0, abs=1e-9)
    assert float(rows[-1][3]) == pytest.approx(result["band"]["value"], rel=1e-4)  # the height at the top is the value
    assert "Shaded: one standard deviation" in client.get(staged["links"]["page"]).text


def test_the_page_says_what_the_arcs_are(client, staged):
    page = client.get(staged["links"]["page"]).text
    assert "second stage: t from t2 to t3. At t3 h, v and m are continuous." in page
    assert "At t1 h and v are continuous, and m may jump as the endpoints say." in page
    assert "corner" in page


def test_the_composer_shows_arcs_and_says_which_line_is_wrong(client, post):
    page = client.get("/compose?sample=staged-rocket").text
    assert 'name="arcs.3.where"' in page
    assert "ready to solve" in page
    document = samples.load("staged-rocket")
    document["arcs"][1]["dynamics"] = ["h' = 2*v"]
    answer = post(document)
    assert answer.status_code == 422
    (complaint,) = answer.json()["complaints"]
    assert (complaint["pointer"], complaint["code"]) == ("/arcs/1/dynamics/0", "given-twice")
