"""Tables of a finished run in every format, with the rows, the columns and the derivatives asked for."""

import csv
import io
import json

import numpy as np
import openpyxl
import pytest

from tests.http.serving import LINE

# y(x) = 2 x / 3 of the straight line.
SLOPE = 2 / 3


def _rows(text):
    heading, *rows = csv.reader(io.StringIO(text))
    return heading, np.array(rows, dtype=float)


def test_rows_are_evenly_spaced_and_end_exactly_at_the_end(client, line):
    heading, rows = _rows(client.get(f"{line['links']['self']}/table.csv?rows=7").text)
    assert heading == ["x [m]", "y [m]"]
    assert rows[:, 0].tolist() == np.linspace(0, 3, 7).tolist()
    assert rows[:, 1] == pytest.approx(SLOPE * rows[:, 0], abs=1e-8)


def test_a_step_that_does_not_fit_still_ends_exactly_at_the_end(client, line):
    _, rows = _rows(client.get(f"{line['links']['self']}/table.csv?step=0.7").text)
    assert rows[:, 0].tolist() == pytest.approx([0, 0.7, 1.4, 2.1, 2.8, 3])
    assert rows[-1, 0] == 3


def test_nodes_are_the_default(client, line):
    result = client.get(line["links"]["result"]).json()
    _, rows = _rows(client.get(line["links"]["table"]).text)
    assert set(result["curve"]["arcs"][0]["breaks"]) <= set(rows[:, 0])


def test_derivatives_and_columns_are_chosen(client, line):
    heading, rows = _rows(client.get(f"{line['links']['self']}/table.csv?rows=3&derivatives=3").text)
    assert heading == ["x [m]", "y [m]", "y'", "y'' [1/m]", "y''' [1/m^2]"]
    assert rows[:, 2] == pytest.approx(SLOPE, abs=1e-7)
    heading, _ = _rows(client.get(f"{line['links']['self']}/table.csv", params={"rows": 3, "columns": "y',y"}).text)
    assert heading == ["x [m]", "y'", "y [m]"]


def _sheet(body):
    return list(openpyxl.load_workbook(io.BytesIO(body)).worksheets[0].iter_rows(min_row=2, values_only=True))


READERS = {
    "csv": lambda body: _rows(body.decode())[1],
    "json": lambda body: np.array(json.loads(body)["rows"]),
    "xlsx": lambda body: np.array(_sheet(body)),
    "npz": lambda body: np.load(io.BytesIO(body))["rows"],
}


@pytest.mark.parametrize("suffix", READERS)
def test_every_format_holds_the_same_numbers(client, line, suffix):
    answer = client.get(f"{line['links']['self']}/table.{suffix}?rows=5&derivatives=1")
    assert answer.status_code == 200
    assert f".{suffix}" in answer.headers["content-disposition"]
    _, expected = _rows(client.get(f"{line['links']['self']}/table.csv?rows=5&derivatives=1").text)
    found = READERS[suffix](answer.content)
    assert np.array_equal(found, expected)


@pytest.mark.parametrize(
    ("accept", "suffix"),
    [
        ("*/*", "csv"),
        ("text/csv", "csv"),
        ("application/json", "json"),
        ("application/json;q=0.5, application/x-npz", "npz"),
    ],
)
def test_the_format_is_negotiated_where_there_is_no_suffix(client, line, accept, suffix):
    answer = client.get(f"{line['links']['self']}/table?rows=3", headers={"accept": accept})
    same = client.get(f"{line['links']['self']}/table.{suffix}?rows=3")
    assert answer.headers["content-type"] == same.headers["content-type"]
    assert answer.headers["content-location"].endswith(f"table.{suffix}?rows=3")
    assert "Accept" in answer.headers["vary"]


def test_a_format_that_there_is_not_is_refused(client, line):
    assert client.get(f"{line['links']['self']}/table", headers={"accept": "image/png"}).status_code == 406
    assert client.get(f"{line['links']['self']}/table.pdf").status_code == 404


def test_the_csv_file_is_described_by_its_metadata(client, line):
    table = client.get(f"{line['links']['self']}/table.csv?rows=4&derivatives=1")
    described = client.get(table.links["describedby"]["url"])
    assert described.headers["content-type"] == "application/csvm+json"
    titles = [column["titles"] for column in described.json()["tableSchema"]["columns"]]
    assert titles == _rows(table.text)[0]
    assert described.json()["url"] == "table.csv?rows=4&derivatives=1"


def test_a_table_is_not_sent_twice(client, line):
    address = f"{line['links']['self']}/table.csv?rows=4"
    tag = client.get(address).headers["etag"]
    assert client.get(address, headers={"if-none-match": tag}).status_code == 304


@pytest.mark.parametrize(
    ("query", "code"),
    [
        ("rows=1", "too-few-rows"),
        ("rows=1000000000", "too-many-rows"),
        ("rows=10&step=0.1", "rows-and-step"),
        ("step=0", "bad-step"),
        ("step=nan", "bad-step"),
        ("step=1e-12", "too-many-rows"),
        ("derivatives=4", "bad-derivatives"),
        ("columns=z", "unknown-column"),
        ("rows=ten", "int-parsing"),
        ("row=10", "extra-forbidden"),
    ],
)
def test_a_table_that_cannot_be_made_says_why(client, line, query, code):
    answer = client.get(f"{line['links']['self']}/table.csv?{query}")
    assert answer.status_code == 422
    assert [complaint["code"] for complaint in answer.json()["complaints"]] == [code]


@pytest.mark.parametrize(
    ("address", "status", "says"),
    [
        ("table.csv?rows=1", 422, "1 row cannot hold both ends."),
        ("table.csv?columns=foo", 422, "The columns are x, y, and its derivatives, such as y'."),
        ("table.csv?rows=ten", 422, "rows has to be a whole number."),
        ("table.csv?sigma=perhaps", 422, "sigma has to be true or false."),
        ("table.csv?extremal=0", 422, "extremal has to be at least 1."),
        ("curve.csv", 404, "part is one of 'stretches', 'costates'"),
        ("table.pdf", 404, "suffix is one of 'csv', 'json', 'xlsx' or 'npz'."),
    ],
)
def test_what_is_wrong_with_an_address_is_said_in_our_own_words(client, line, address, status, says):
    answer = client.get(f"{line['links']['self']}/{address}")
    assert answer.status_code == status
    assert says in answer.json()["detail"]
    assert "Input should" not in answer.text


def test_a_sweep_is_solved_and_handed_over(client, post):
    document = {
        **LINE,
        "constants": {"h": "2 m"},
        "endpoints": ["y(0) = 0", "y(3) = h"],
        "sweep": {"h": {"from": 1, "to": 5, "count": 5}},
    }
    run = post(document, prefer="wait=60").json()
    sweep = client.get(run["links"]["result"]).json()["sweep"]
    # The straight line to (3, h): h^2/3.
    assert [point["value"] for point in sweep["points"]] == pytest.approx([h**2 / 3 for h in range(1, 6)])
    answer = client.get(f"{run['links']['self']}/sweep.csv")
    heading, *rows = csv.reader(io.StringIO(answer.text))
    assert heading[:3] == ["verdict", "h [m]", "value [m]"]
    assert [float(row[2]) for row in rows] == [point["value"] for point in sweep["points"]]
    assert "5 points" in client.get(run["links"]["page"], headers={"accept": "text/html"}).text


def test_tolerances_stand_beside_the_columns_and_folds_in_the_result(client, post):
    document = {
        **LINE,
        "constants": {"h": "2 m +/- 0.1 m"},
        "endpoints": ["y(0) = 0", "y(3) = h"],
        "continuation": {"constant": "h", "to": 3},
    }
    run = post(document, prefer="wait=60").json()
    heading, rows = _rows(client.get(f"{run['links']['self']}/table.csv?rows=4&sigma=true").text)
    assert heading == ["x [m]", "y [m]", "y sigma [m]"]
    assert rows[:, 2] == pytest.approx([0, 0.1 / 3, 0.2 / 3, 0.1], abs=1e-8)
    result = client.get(run["links"]["result"]).json()
    assert result["band"]["value"] == pytest.approx(2 * 2 / 3 * 0.1)
    assert result["continuation"]["folds"] == []
    assert result["continuation"]["end"] == "The branch reaches the value asked for."


def test_every_part_of_a_result_is_handed_over(client, line, post):
    page = client.get(line["links"]["page"], headers={"accept": "text/html"}).text
    for part in ("checks", "costates", "prices", "meshes"):
        address = f"{line['links']['self']}/{part}.csv"
        assert address in page
        heading, *rows = csv.reader(io.StringIO(client.get(address).text))
        assert rows and all(len(row) == len(heading) for row in rows)
    assert client.get(f"{line['links']['self']}/nothing.csv").status_code == 404


def test_what_controls_do_from_switch_to_switch_is_handed_over(client, post):
    document = {
        "format": 1,
        "independent": {"name": "t", "unit": "h", "from": 0, "to": 10},
        "constants": {"r": "1 1/h"},
        "unknowns": {"x": {}, "u": {"within": [0, 1], "unit": "1/h"}},
        "dynamics": ["x' = r*x*(1 - x) - u"],
        "functional": {"seek": "maximum", "integrand": "u"},
        "endpoints": ["x(0) = 0.1", "x(10) = 0.5"],
    }  # logistic growth reaches 1/2 at t = ln 9
    run = post(document, prefer="wait=60").json()
    told = client.get(run["links"]["result"]).json()["stretches"]
    assert [(one["of"], one["course"]) for one in told] == [("u", "at its lower limit"), ("u", "singular")]
    assert told[0]["to"] == told[1]["from"] == pytest.approx(np.log(9), rel=1e-7)
    assert told[0]["from_error"] is told[1]["to_error"] is None
    assert abs(told[0]["to"] - np.log(9)) <= told[0]["to_error"] == told[1]["from_error"] < 1e-6
    heading, *rows = csv.reader(io.StringIO(client.get(f"{run['links']['self']}/stretches.csv").text))
    assert heading == ["of", "arc", "course", "from [h]", "from_error [h]", "to [h]", "to_error [h]"]
    assert rows[1][2] == "singular" and float(rows[1][4]) == told[1]["from_error"]
    page = client.get(run["links"]["page"], headers={"accept": "text/html"}).text
    assert "From switch to switch" in page and "u runs singular from t = 2.1972 to 10 h." in page


def test_the_curve_of_an_extremal_is_handed_over(client, line, post):
    run = post({**LINE, "solve": {"starts": 2}}, prefer="wait=60").json()
    _, rows = _rows(client.get(f"{run['links']['self']}/table.csv?rows=4&extremal=1").text)
    assert rows[:, 1] == pytest.approx(SLOPE * rows[:, 0], abs=1e-8)
    refused = client.get(f"{line['links']['self']}/table.csv?extremal=1")
    assert refused.status_code == 422 and refused.json()["complaints"][0]["code"] == "bad-extremal"


def test_a_run_without_a_sweep_says_so(client, line):
    answer = client.get(f"{line['links']['self']}/sweep.csv")
    assert answer.status_code == 409
    assert answer.json()["type"] == "/problems/no-part"


def test_residuals_of_a_fit_come_as_a_table(client, post):
    """A mean: y' = 0 through 1, 2 and 6 cm is 3 cm; sigma of the mean sqrt(7/3) cm."""
    document = {
        "format": 1,
        "independent": {"name": "x", "unit": "m", "from": 0, "to": 1},
        "parameters": {"a": {"unit": "m"}},
        "unknowns": {"y": {"unit": "m"}},
        "dynamics": ["y' = 0"],
        "endpoints": ["y(0) = a"],
        "observations": [{"of": "y", "unit": "cm", "points": [[0, 1], [0.5, 2], [1, 6]]}],
    }
    run = post(document, prefer="wait=60").json()
    assert run["verdict"] == "global minimum" and run["value_unit"] == "cm^2"
    heading, rows = _rows(client.get(f"{run['links']['self']}/observations.csv").text)
    assert heading == ["x [m]", "observed [cm]", "fitted [cm]", "residual [cm]", "fitted sigma [cm]", "normalised"]
    assert rows[:, 2] == pytest.approx(3) and rows[:, 3] == pytest.approx([-2, -1, 3])
    fit = client.get(run["links"]["result"]).json()["observations"]
    assert fit["parameters"]["a"] == {
        "value": pytest.approx(0.03),
        "sigma": pytest.approx(0.01 * (7 / 3) ** 0.5),
        "unit": "m",
    }
    body = client.get(f"{run['links']['self']}/observations.npz").content
    assert READERS["npz"](body) == pytest.approx(rows)
    refused = client.get(f"{run['links']['self']}/observations.csv?list=2")
    assert refused.status_code == 422 and refused.json()["complaints"][0]["code"] == "bad-list"


def test_a_run_without_observations_has_no_table_of_them(client, line):
    refused = client.get(f"{line['links']['self']}/observations.csv")
    assert refused.status_code == 422 and refused.json()["complaints"][0]["code"] == "no-observations"
